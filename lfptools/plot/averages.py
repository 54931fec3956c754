"""Averages of one area and their latencies in; curves with bands and marked waves drawn."""

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes

from lfptools.evoked import Average
from lfptools.plot.marks import Row, Spans, draw_interval, number, shade_windows, zero_line
from lfptools.plot.style import Look, short


def draw_averages(
    ax: Axes,
    averages: Sequence[Average],
    latencies: Sequence[Row],
    *,
    looks: Mapping[str, Look],
    spans_ms: Spans,
    name_windows: bool = False,
) -> Axes:
    """Draw the signal that stands for one area, one curve and band a condition.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    averages : sequence of Average
        Those of one area, one signal each.
    latencies : sequence of rows
        Of latencies.csv, of the area's signal: troughs are marked filled on the curve, onsets
        open, each with its interval along time.
    looks : mapping of condition to Look
    spans_ms : mapping of window to (first, last)
        Shaded, in ms.
    name_windows : bool
        Whether the windows' names stand above.

    Returns
    -------
    Axes
        Time in ms to the right, the signal's unit upwards; sinks are negative.
    """
    shade_windows(ax, spans_ms, names=name_windows)
    zero_line(ax)
    for each in averages:
        look = looks[each.condition]
        time_ms = each.time_s * 1000
        ax.fill_between(time_ms, each.lo[0], each.hi[0], color=look.colour, alpha=0.25, lw=0)
        ax.plot(
            time_ms,
            each.mean[0],
            color=look.colour,
            ls=look.line,
            label=f"{short(each.condition)} ({each.n_trials} trials)",
        )
        for row in latencies:
            if row["condition"] == each.condition:
                _mark(ax, each, row, look)
    first = averages[0]
    ax.set_ylabel(f"{first.kind.upper()} ({first.unit})")
    ax.set_title(
        f"{short(first.area)}, at {first.depth_um[0]:g} um",
        loc="left",
        pad=14.0 if name_windows else None,  # above the windows' names
    )
    return ax


def _mark(ax: Axes, average: Average, row: Row, look: Look) -> None:
    """Mark the extremum at its amplitude and the onset on the curve."""
    bounds = number(row, "time_lo_ms"), number(row, "time_hi_ms")
    draw_interval(ax, number(row, "time_ms"), number(row, "amplitude"), bounds, look)
    onset_ms = number(row, "onset_ms")
    height = float(np.interp(onset_ms / 1000, average.time_s, average.mean[0]))
    bounds = number(row, "onset_lo_ms"), number(row, "onset_hi_ms")
    draw_interval(ax, onset_ms, height, bounds, look, filled=False)
