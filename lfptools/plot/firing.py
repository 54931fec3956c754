"""Firing curves or spikes in; rates with bands and rasters drawn."""

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes

from lfptools.plot.marks import Spans, shade_windows
from lfptools.plot.style import FAINT, Look, short
from lfptools.rates import RateCurve

#: More trials of one condition than this are not drawn: rows would run into one another.
MOST_TRIALS = 40


def draw_rates(
    ax: Axes, curves: Sequence[RateCurve], *, looks: Mapping[str, Look], spans_ms: Spans
) -> Axes:
    """Draw the firing rate of one area, mean over its units, one curve and band a condition.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    curves : sequence of RateCurve
        Those of one area, Hz.
    looks : mapping of condition to Look
    spans_ms : mapping of window to (first, last)
        Shaded, in ms.

    Returns
    -------
    Axes
        Time in ms to the right, rate in Hz upwards.
    """
    shade_windows(ax, spans_ms)
    for each in curves:
        look = looks[each.condition]
        time_ms = each.time_s * 1000
        ax.fill_between(time_ms, each.lo_hz, each.hi_hz, color=look.colour, alpha=0.25, lw=0)
        label = f"{short(each.condition)} ({each.n_trials} trials)"
        ax.plot(time_ms, each.rate_hz, color=look.colour, ls=look.line, label=label)
    ax.set_ylabel("rate (Hz)")
    n_units = len(curves[0].unit)
    ax.set_title(f"{short(curves[0].area)}: {n_units} unit{'s' if n_units > 1 else ''}", loc="left")
    ax.set_ylim(bottom=0)
    return ax


def draw_raster(
    ax: Axes,
    spikes: Mapping[str, tuple[np.ndarray, np.ndarray]],
    *,
    unit: str,
    looks: Mapping[str, Look],
    n_trials: Mapping[str, int],
    spans_ms: Spans,
) -> Axes:
    """Draw the spikes of one unit, a line a trial, the conditions one below the other.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    spikes : mapping of condition to (trial, time_s)
        Both of shape (n_spikes,); trials count from 0 within the condition.
    unit : str
        Its name, for the title.
    looks : mapping of condition to Look
    n_trials : mapping of condition to int
        Trials of each; the first 40 are drawn, and the title says so.
    spans_ms : mapping of window to (first, last)
        Shaded, in ms.

    Returns
    -------
    Axes
        Time in ms to the right, trials downwards.
    """
    shade_windows(ax, spans_ms)
    top, edges, most = 0, [0], 0
    for condition, (trial, time_s) in spikes.items():
        shown = trial < MOST_TRIALS
        ax.scatter(
            time_s[shown] * 1000,
            top + trial[shown] + 0.5,
            marker="|",
            s=7,
            lw=0.7,
            color=looks[condition].colour,
        )
        most = max(most, min(n_trials[condition], MOST_TRIALS))
        top += min(n_trials[condition], MOST_TRIALS)
        ax.axhline(top, color=FAINT, lw=0.6)
        edges.append(top)
    ax.set_yticks(edges)
    ax.set_ylim(max(top, 1), 0)
    ax.set_ylabel("trial")
    ax.set_xlabel("time after the stimulus (ms)")
    cut = max(n_trials.values(), default=0) > most
    # Either is short enough for one of three panels side by side.
    title = f"{short(unit, 11)}, trials 1-{most}" if cut else f"unit {short(unit, 16)}"
    ax.set_title(title, loc="left")
    return ax
