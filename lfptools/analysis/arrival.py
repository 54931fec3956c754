"""Prepared signals in, the rows of latencies.csv and lags.csv out."""

from collections.abc import Iterator
from itertools import combinations

import numpy as np

from lfptools.analysis.basis import identity
from lfptools.analysis.elsewhere import elsewhere
from lfptools.analysis.prepared import Prepared, chosen_note
from lfptools.analysis.results import Row, ms, note
from lfptools.choices import WindowChoice
from lfptools.evoked import smooth
from lfptools.layers import lfp_signals
from lfptools.model import Signals
from lfptools.resample import percentile_interval, zero_p
from lfptools.trials import FEW_TRIALS, Progress, no_progress
from lfptools.waves import WaveEstimate, measure

Key = tuple[str, str, str]  # area, condition, window


def measure_areas(prepared: Prepared, progress: Progress = no_progress) -> dict[Key, WaveEstimate]:
    """Measure each window's wave in the signal that stands for each area."""
    jobs = [
        (area, condition, window)
        for area in prepared.signals
        for window in prepared.windows_of(area)
        for condition in prepared.estimated
    ]
    found = {}
    for number, (area, condition, window) in enumerate(jobs):
        progress("finding the waves", number / len(jobs))
        found[area, condition, window.name] = measure_area(prepared, area, condition, window)
    return found


def measure_area(
    prepared: Prepared, area: str, condition: str, window: WindowChoice
) -> WaveEstimate:
    """Measure one window's wave in the signal that stands for an area, or recall it."""
    signal, search = prepared.signals[area], prepared.search(window, area)
    sd_s = prepared.smooth_s[window.name]
    return prepared.basis.estimates.get(
        ("wave", *identity(signal), condition, search, sd_s),
        lambda: measure(
            prepared.basis.smoothed(signal, sd_s),
            prepared.rows(condition),
            search,
            weights=prepared.weights[condition],
            signs=prepared.signs[condition],
            level=prepared.choices.resample.level,
        ),
    )


def _measured_contacts(
    prepared: Prepared, contacts: Signals
) -> Iterator[tuple[str, WindowChoice, WaveEstimate]]:
    for window in prepared.windows_of(contacts.area):
        search = prepared.search(window, contacts.area)
        smoothed = smooth(contacts, prepared.smooth_s[window.name], search.reading_span_s)
        for condition in prepared.estimated:
            estimate = measure(
                smoothed,
                prepared.rows(condition),
                search,
                weights=prepared.weights[condition],
                signs=prepared.signs[condition],
                level=prepared.choices.resample.level,
            )
            yield condition, window, estimate


def latency_rows(prepared: Prepared, areas: dict[Key, WaveEstimate]) -> list[Row]:
    """Return latencies of each area's signal, then of every good contact."""
    rows: list[Row] = []
    for trials in prepared.cut.areas:
        for condition in prepared.conditions:
            for window in prepared.windows_of(trials.area):
                estimate = areas.get((trials.area, condition, window.name))
                rows += area_rows(prepared, trials.area, condition, window, estimate)
        contacts = lfp_signals(trials)
        for condition, window, estimate in _measured_contacts(prepared, contacts):
            rows += _rows(prepared, contacts, "contact", condition, window, estimate)
    return rows


def area_rows(
    prepared: Prepared,
    area: str,
    condition: str,
    window: WindowChoice,
    estimate: WaveEstimate | None,
) -> list[Row]:
    """Return the row of the signal that stands for an area; None: too few trials."""
    signal = prepared.signals[area]
    said = "" if estimate is None else elsewhere(prepared, area, window)
    return list(_rows(prepared, signal, "area", condition, window, estimate, said))


def _rows(
    prepared: Prepared,
    signals: Signals,
    role: str,
    condition: str,
    window: WindowChoice,
    estimate: WaveEstimate | None,
    said: str = "",
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
            "note": note(estimate.note[index], signals.note, said, chosen_note(window)),
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
            | difference(a, b, feature, prepared.choices.resample.level)
            | {
                "note": note(
                    *_said(first, a),
                    *_said(second, b),
                    _signs_differ(window, first, second),
                    chosen_note(window),
                )
            }
        )


def difference(a: WaveEstimate, b: WaveEstimate, feature: str, level: float) -> Row:
    """Return b minus a with its interval and p; empty where either was not found.

    `feature` is "time" or "onset"; both estimates rest on the same resamples.
    """
    at_a, at_b = getattr(a, f"{feature}_s")[0], getattr(b, f"{feature}_s")[0]
    lag_s = float(at_b - at_a)
    if not np.isfinite(lag_s):
        return {}
    draws = getattr(b, f"{feature}_draws_s")[:, 0] - getattr(a, f"{feature}_draws_s")[:, 0]
    interval = percentile_interval(draws, level=level, n_trials=a.n_trials)
    return {
        "difference_ms": ms(lag_s),
        "lo_ms": ms(interval.lo),
        "hi_ms": ms(interval.hi),
        "p": zero_p(lag_s, draws),
    }


def _said(area: str, estimate: WaveEstimate) -> list[str]:
    return [f"{area} {estimate.note[0]}"] if estimate.note[0] else []


def _signs_differ(window: WindowChoice, first: str, second: str) -> str:
    signs = window.extremum_in(first), window.extremum_in(second)
    return "" if signs[0] == signs[1] else f"{signs[0]} of {first} against {signs[1]} of {second}"
