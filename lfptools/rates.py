"""A cut session in; firing before and after the stimulus, its change and its latency out.

A unit's change in a window is the mean over trials of (rate in the window - rate in the
baseline). Its interval is a bootstrap over trials, its p-value a sign flip of the trials'
differences, its latency the first bin that the Poisson criterion calls beyond the baseline.
"""

from collections.abc import Mapping
from dataclasses import dataclass, fields

import numpy as np

from lfptools import resample
from lfptools.checks import array, read_only
from lfptools.choices import Span, WindowChoice
from lfptools.errors import InputError
from lfptools.firing_latency import poisson_latency, why_no_latency
from lfptools.model import CutSession
from lfptools.rate_change import (
    MIN_SPIKES,
    Counts,
    SpikeTable,
    count_spikes,
    stimuli_of,
    tested_changes,
)
from lfptools.spikes import bin_edges, binned_counts, said, spikes_around
from lfptools.trials import FEW_TRIALS, MIN_TRIALS, window_mask

#: A change is called where its q is at most this.
MAX_Q = 0.05
#: Resamples without a latency are named in the note above this share.
ENOUGH_DEFINED = 0.95
#: Bins of a curve to look at are at least this wide.
CURVE_BIN_MS = 5.0


def in_order(parts: list[tuple[int, int, dict[int, dict]]]) -> list[dict]:
    """Return rows by unit, condition and window.

    Parameters
    ----------
    parts : list of (condition, window, rows)
        Places of condition and window in their order, and what `window_rows` gave.
    """
    placed = {
        (unit, condition, window): row
        for condition, window, rows in parts
        for unit, row in rows.items()
    }
    return [placed[place] for place in sorted(placed)]


def window_rows(
    cut: CutSession,
    table: SpikeTable,
    condition: str,
    window: WindowChoice,
    *,
    weights: Mapping[str, np.ndarray],
    signs: Mapping[str, np.ndarray],
) -> dict[int, dict]:
    """Return the rows of firing.csv of one window and condition, by number of the unit.

    `session` and `q` are the caller's; `call` stays empty until `finish_calls`, which also
    folds `latency_note` into `note`.

    Parameters
    ----------
    cut : CutSession
        The session, cut into trials. Its depths are in um, its spike times in s.
    table : SpikeTable
        `spike_table` of the condition.
    condition : str
        Its name.
    window : WindowChoice
        The window.
    weights, signs : mapping of str to ndarray
        Bootstrap weights (n_draws, n_trials of the condition), each row sums to 1, and random
        signs (n_flips + 1, n_trials), the first row all +1, of each condition.

    Raises
    ------
    InputError
        If the weights or signs of the condition are missing or do not fit its trials.
    """
    counts = count_spikes(table, window)
    rows = [_empty_row(cut, counts, place, condition, window) for place in range(len(counts.unit))]
    if len(counts.in_window) < MIN_TRIALS:
        rows = [row | {"note": FEW_TRIALS} for row in rows]
    elif rows:
        _estimate(cut, counts, rows, condition, weights, signs)
    return dict(zip(counts.unit.tolist(), rows, strict=True))


def call(change_hz: float, q: float) -> str:
    """Return "rise", "fall" or "none" for a change in Hz; empty where q was not estimated."""
    if not np.isfinite(q):
        return ""
    if q > MAX_Q or change_hz == 0:
        return "none"
    return "rise" if change_hz > 0 else "fall"


def finish_calls(rows: list[dict]) -> list[dict]:
    """Return the rows with `call` set from `q`; without a change there is no latency.

    Raises
    ------
    InputError
        If a row has no `q` yet.
    """
    if any("q" not in row for row in rows):
        raise InputError("a row of firing has no q; set it before the calls are made")
    return [_finished(row) for row in rows]


def _finished(row: dict) -> dict:
    found = call(row["change_hz"], row["q"])
    row = row | {"call": found}
    latency_note = row.pop("latency_note")
    if found == "none":
        row |= {"latency_ms": np.nan, "latency_lo_ms": np.nan, "latency_hi_ms": np.nan}
        latency_note = "no change, so no latency"
    row["note"] = "; ".join(part for part in (row["note"], latency_note) if part)
    return row


def _units(cut: CutSession) -> list[tuple[np.ndarray, str]]:
    if cut.spikes is None:
        return []
    return list(zip(cut.spikes.time_s, cut.spikes.area, strict=True))


def _fitting(
    given: Mapping[str, np.ndarray], what: str, condition: str, n_trials: int
) -> np.ndarray:
    if condition not in given:
        raise InputError(f"no {what} for condition {condition!r}; each needs its own")
    return array(f"{what} of {condition!r}", given[condition], (None, n_trials))


def _empty_row(
    cut: CutSession, counts: Counts, place: int, condition: str, window: WindowChoice
) -> dict:
    assert cut.spikes is not None
    unit = int(counts.unit[place])
    missing = dict.fromkeys(
        ("baseline_hz", "window_hz", "change_hz", "lo_hz", "hi_hz", "p"), np.nan
    )
    return {
        "area": cut.spikes.area[unit],
        "unit": cut.spikes.unit[unit],
        "depth_um": float(cut.spikes.depth_um[unit]),
        "condition": condition,
        "window": window.name,
        "n_trials": len(counts.in_window),
        "n_spikes": int(counts.in_window[:, place].sum()),
        **missing,
        "call": "",
        "latency_ms": np.nan,
        "latency_lo_ms": np.nan,
        "latency_hi_ms": np.nan,
        "latency_method": cut.choices.rates.latency,
        "note": "",
        "latency_note": "",
    }


def _estimate(
    cut: CutSession,
    counts: Counts,
    rows: list[dict],
    condition: str,
    weights: Mapping[str, np.ndarray],
    signs: Mapping[str, np.ndarray],
) -> None:
    """Fill the rows of one window: all units share one matrix product a scheme."""
    drawn = _fitting(weights, "bootstrap weights", condition, len(counts.in_window))
    tested = tested_changes(
        counts.change_hz,
        weights=drawn,
        signs=_fitting(signs, "random signs", condition, len(drawn[0])),
        level=cut.choices.resample.level,
    )
    baseline_hz, window_hz = counts.baseline_hz, counts.window_hz
    for place, row in enumerate(rows):
        if not counts.enough[place]:
            row["note"] = (
                f"{said(counts.n_spikes[place])} in baseline and window; "
                f"not estimated below {MIN_SPIKES}"
            )
            continue
        row["baseline_hz"] = float(baseline_hz[place])
        row["window_hz"] = float(window_hz[place])
        row["change_hz"] = row["window_hz"] - row["baseline_hz"]
        row["lo_hz"] = float(tested.lo_hz[place])
        row["hi_hz"] = float(tested.hi_hz[place])
        row["p"] = float(tested.p[place])
        row |= _latency(cut, counts, place, condition, drawn, rise=row["change_hz"] > 0)


def _latency(
    cut: CutSession,
    counts: Counts,
    place: int,
    condition: str,
    weights: np.ndarray,
    *,
    rise: bool,
) -> dict:
    """Return the latency columns of one unit and what is to be said about them."""
    assert cut.spikes is not None
    bin_ms, span_s = cut.choices.rates.bin_ms, counts.span_s[place]
    first_ms, last_ms = cut.choices.trials.baseline_ms
    per_bin = counts.in_baseline[:, place] * bin_ms / (last_ms - first_ms)
    refused = why_no_latency(per_bin.sum(), bin_ms, rise=rise)
    if refused:
        return {"latency_note": refused}
    stimulus_s = stimuli_of(cut, condition)
    edges_s = _bins_of(cut.choices.trials.window_ms, bin_ms, span_s)
    binned = binned_counts(cut.spikes.time_s[counts.unit[place]], stimulus_s, edges_s=edges_s)
    n_trials = len(stimulus_s)
    scheme = np.vstack([np.ones(n_trials), n_trials * weights])  # the data's own row first
    latency_s = poisson_latency(
        np.rint(scheme @ binned), scheme @ per_bin, edges_s[:-1], span_s=span_s, rise=rise
    )
    if np.isnan(latency_s[0]):
        return {"latency_note": "latency not found by the Poisson criterion"}
    interval = resample.percentile_interval(
        latency_s[1:] * 1000, level=cut.choices.resample.level, n_trials=n_trials
    )
    share = float(interval.defined)
    few = f"latency found in {100 * share:.0f} % of resamples" if share < ENOUGH_DEFINED else ""
    return {
        "latency_ms": float(latency_s[0] * 1000),
        "latency_lo_ms": float(interval.lo),
        "latency_hi_ms": float(interval.hi),
        "latency_note": few,
    }


def _bins_of(window_ms: Span, bin_ms: float, span_s: Span) -> np.ndarray:
    """Return the edges of the bins that start in the span, and of the two that confirm."""
    edges_s = bin_edges(window_ms, bin_ms)
    inside = np.flatnonzero(window_mask(edges_s[:-1], span_s))
    if not inside.size:
        raise InputError(
            f"bin_ms is {bin_ms:g} ms; no bin starts inside the window "
            f"[{span_s[0] * 1000:g}, {span_s[1] * 1000:g}] ms"
        )
    return edges_s[inside[0] : inside[-1] + 4]


@dataclass(frozen=True, slots=True, eq=False)
class RateCurve:
    """Firing rate around the stimulus in one area and condition."""

    area: str
    condition: str
    unit: tuple[str, ...]
    time_s: np.ndarray  # (n_bins,) centres of the bins
    bin_s: float
    rate_hz: np.ndarray  # (n_bins,) mean over the units
    lo_hz: np.ndarray  # (n_bins,) t interval over trials
    hi_hz: np.ndarray  # (n_bins,)
    unit_rate_hz: np.ndarray  # (n_units, n_bins)
    unit_lo_hz: np.ndarray  # (n_units, n_bins)
    unit_hi_hz: np.ndarray  # (n_units, n_bins)
    n_trials: int

    def __post_init__(self) -> None:
        for each in fields(self):
            value = getattr(self, each.name)
            if isinstance(value, np.ndarray):
                object.__setattr__(self, each.name, read_only(value))


def rate_curves(cut: CutSession, *, level: float) -> tuple[RateCurve, ...]:
    """Return the firing rate around the stimulus, one curve an area and condition.

    Bins are those of `[rates] bin_ms`, at least 5 ms wide: narrower ones show the grain of the
    spikes and not the rate. Areas without units and conditions with fewer than 8 accepted
    trials have none.

    Parameters
    ----------
    cut : CutSession
        The session, cut into trials.
    level : float
        Coverage of the t interval over trials, for instance .95.

    Raises
    ------
    InputError
        If the trial window holds no whole bin.
    """
    choices = cut.choices
    edges_s = bin_edges(choices.trials.window_ms, max(choices.rates.bin_ms, CURVE_BIN_MS))
    curves = []
    for area in cut.area_names:
        units = [unit for unit, (_, where) in enumerate(_units(cut)) if where == area]
        for condition in cut.table.conditions:
            stimulus_s = cut.table.accepted_time_s()[cut.condition == condition]
            if units and len(stimulus_s) >= MIN_TRIALS:
                curves.append(_curve(cut, area, units, condition, stimulus_s, edges_s, level))
    return tuple(curves)


def _curve(
    cut: CutSession,
    area: str,
    units: list[int],
    condition: str,
    stimulus_s: np.ndarray,
    edges_s: np.ndarray,
    level: float,
) -> RateCurve:
    assert cut.spikes is not None
    bin_s = float(edges_s[1] - edges_s[0])
    time_s = cut.spikes.time_s
    rate = np.stack(
        [binned_counts(time_s[unit], stimulus_s, edges_s=edges_s) / bin_s for unit in units], axis=1
    )
    both = np.concatenate([rate.mean(axis=1, keepdims=True), rate], axis=1)  # pooled, then units
    # The jackknife of a mean is its t interval.
    left_out = np.tensordot(resample.jackknife_weights(len(both)), both, axes=1)
    mean = both.mean(axis=0)
    lo, hi, _ = resample.jackknife_interval(mean, left_out, level=level)
    return RateCurve(
        area=area,
        condition=condition,
        unit=tuple(cut.spikes.unit[unit] for unit in units),
        time_s=(edges_s[:-1] + edges_s[1:]) / 2,
        bin_s=bin_s,
        rate_hz=mean[0],
        lo_hz=lo[0],
        hi_hz=hi[0],
        unit_rate_hz=mean[1:],
        unit_lo_hz=lo[1:],
        unit_hi_hz=hi[1:],
        n_trials=len(stimulus_s),
    )


def spike_raster(cut: CutSession, unit: int, condition: str) -> tuple[np.ndarray, np.ndarray]:
    """Return the spikes of one unit over the trial window as (trial, time_s).

    `trial` counts the accepted trials of the condition from 0; `time_s` is 0 at the stimulus.
    Both have shape (n_spikes,).

    Raises
    ------
    InputError
        If the session has no such unit or condition.
    """
    units = _units(cut)
    if not 0 <= unit < len(units):
        raise InputError(f"unit {unit} of {len(units)}; it must count from 0")
    if condition not in cut.table.conditions:
        raise InputError(f"condition {condition!r}; known are {', '.join(cut.table.conditions)}")
    first_ms, last_ms = cut.choices.trials.window_ms
    stimulus_s = cut.table.accepted_time_s()[cut.condition == condition]
    found = spikes_around(units[unit][0], stimulus_s, span_s=(first_ms / 1000, last_ms / 1000))
    return found.trial, found.time_s
