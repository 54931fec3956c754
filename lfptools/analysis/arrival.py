"""Prepared signals in, the rows of latencies.csv and lags.csv out."""

from collections.abc import Iterator
from itertools import combinations

import numpy as np

from lfptools.analysis.prepared import CHOSEN_HERE, Prepared
from lfptools.analysis.results import Row, ms, note
from lfptools.choices import WindowChoice
from lfptools.evoked import smooth
from lfptools.layers import lfp_signals
from lfptools.model import Signals
from lfptools.resample import percentile_interval, zero_p
from lfptools.trials import FEW_TRIALS
from lfptools.waves import WaveEstimate, measure

Key = tuple[str, str, str]  # area, condition, window


def chosen_note(window: WindowChoice) -> str:
    """Say so where a window was chosen by looking at the same trials."""
    return CHOSEN_HERE if window.chosen != "before" else ""


def measure_areas(prepared: Prepared) -> dict[Key, WaveEstimate]:
    """Measure each window's wave in the signal that stands for each area."""
    found: dict[Key, WaveEstimate] = {}
    for area, signal in prepared.signals.items():
        for condition, window, estimate in _measured(prepared, signal):
            found[area, condition, window.name] = estimate
    return found


def _measured(
    prepared: Prepared, signals: Signals
) -> Iterator[tuple[str, WindowChoice, WaveEstimate]]:
    for window in prepared.windows_of(signals.area):
        smoothed = smooth(signals, prepared.smooth_s[window.name])
        for condition in prepared.estimated:
            estimate = measure(
                smoothed,
                prepared.rows(condition),
                prepared.search(window, smoothed.area),
                weights=prepared.weights[condition],
                signs=prepared.signs[condition],
                level=prepared.choices.resample.level,
            )
            yield condition, window, estimate


def latency_rows(prepared: Prepared, areas: dict[Key, WaveEstimate]) -> list[Row]:
    """Return latencies of each area's signal, then of every good contact."""
    rows: list[Row] = []
    for trials in prepared.cut.areas:
        signal = prepared.signals[trials.area]
        windows = {window.name: window for window in prepared.windows_of(trials.area)}
        for condition in prepared.conditions:
            for name, window in windows.items():
                estimate = areas.get((trials.area, condition, name))
                rows += _rows(prepared, signal, "area", condition, window, estimate)
        contacts = lfp_signals(trials)
        for condition, window, estimate in _measured(prepared, contacts):
            rows += _rows(prepared, contacts, "contact", condition, window, estimate)
    return rows


def _rows(
    prepared: Prepared,
    signals: Signals,
    role: str,
    condition: str,
    window: WindowChoice,
    estimate: WaveEstimate | None,
) -> Iterator[Row]:
    n_trials = int(np.count_nonzero(prepared.rows(condition)))
    for index in range(len(signals.channel)):
        row: Row = {
            "session": prepared.cut.name,
            "area": signals.area,
            "role": role,
            "signal": signals.kind,
            "condition": condition,
            "window": window.name,
            "extremum": window.extremum_in(signals.area),
            "channel": int(signals.channel[index]),
            "depth_um": float(signals.depth_um[index]),
            "n_trials": n_trials,
            "unit": signals.unit,
        }
        if estimate is None:
            yield row | {"note": FEW_TRIALS}
            continue
        for column, value in (("time", estimate.time_s), ("onset", estimate.onset_s)):
            row[f"{column}_ms"] = ms(value[index])
        row |= {
            "time_lo_ms": ms(estimate.time_lo_s[index]),
            "time_hi_ms": ms(estimate.time_hi_s[index]),
            "onset_lo_ms": ms(estimate.onset_lo_s[index]),
            "onset_hi_ms": ms(estimate.onset_hi_s[index]),
            "amplitude": float(estimate.amplitude[index]),
            "amplitude_lo": float(estimate.amplitude_lo[index]),
            "amplitude_hi": float(estimate.amplitude_hi[index]),
            "found": float(estimate.found[index]),
            "p": float(estimate.p[index]),
            "note": note(estimate.note[index], signals.note, chosen_note(window)),
        }
        yield row


def lag_rows(prepared: Prepared, areas: dict[Key, WaveEstimate]) -> list[Row]:
    """Return the lag of each later area behind each earlier one, paired on the same resamples."""
    rows: list[Row] = []
    for first, second in combinations(prepared.signals, 2):
        for condition in prepared.conditions:
            for window in prepared.choices.window:
                if window.holds(first) and window.holds(second):
                    rows += _lags(prepared, areas, first, second, condition, window)
    return rows


def _lags(
    prepared: Prepared,
    areas: dict[Key, WaveEstimate],
    first: str,
    second: str,
    condition: str,
    window: WindowChoice,
) -> Iterator[Row]:
    a = areas.get((first, condition, window.name))
    b = areas.get((second, condition, window.name))
    for feature in ("time", "onset"):
        row: Row = {
            "session": prepared.cut.name,
            "area_a": first,
            "signal_a": prepared.signals[first].kind,
            "area_b": second,
            "signal_b": prepared.signals[second].kind,
            "condition": condition,
            "window": window.name,
            "feature": feature,
            "n_trials": int(np.count_nonzero(prepared.rows(condition))),
        }
        if a is None or b is None:
            yield row | {"note": FEW_TRIALS}
            continue
        yield (
            row
            | _difference(a, b, feature, prepared.choices.resample.level)
            | {
                "note": note(
                    *_said(first, a),
                    *_said(second, b),
                    _signs_differ(window, first, second),
                    chosen_note(window),
                )
            }
        )


def _difference(a: WaveEstimate, b: WaveEstimate, feature: str, level: float) -> Row:
    """Return b minus a with its interval and p; empty where either was not found."""
    at_a, at_b = getattr(a, f"{feature}_s")[0], getattr(b, f"{feature}_s")[0]
    difference = float(at_b - at_a)
    if not np.isfinite(difference):
        return {}
    draws = getattr(b, f"{feature}_draws_s")[:, 0] - getattr(a, f"{feature}_draws_s")[:, 0]
    interval = percentile_interval(draws, level=level, n_trials=a.n_trials)
    return {
        "difference_ms": ms(difference),
        "lo_ms": ms(interval.lo),
        "hi_ms": ms(interval.hi),
        "p": zero_p(difference, draws),
    }


def _said(area: str, estimate: WaveEstimate) -> list[str]:
    return [f"{area} {estimate.note[0]}"] if estimate.note[0] else []


def _signs_differ(window: WindowChoice, first: str, second: str) -> str:
    signs = window.extremum_in(first), window.extremum_in(second)
    return "" if signs[0] == signs[1] else f"{signs[0]} of {first} against {signs[1]} of {second}"
