"""Prepared currents in, the rows of sinks.csv out."""

from dataclasses import replace

import numpy as np

from lfptools.analysis.prepared import Prepared, chosen_note
from lfptools.analysis.results import Row, ms, note
from lfptools.choices import WindowChoice
from lfptools.csd import MIN_CONTACTS
from lfptools.evoked import smooth
from lfptools.layers import SinkEstimate, layer_at, measure_sinks, usable_contacts
from lfptools.model import Trials
from lfptools.trials import FEW_TRIALS
from lfptools.waves import ALPHA, Search

_EXTREMUM = {"sink": "trough", "source": "peak"}
NO_EXTREMUM = "not found: no local extremum inside the window"
NO_DENSITY = f"fewer than {MIN_CONTACTS} good contacts: no current source density"


def sink_rows(prepared: Prepared) -> list[Row]:
    """Return the strongest sink and the strongest source of each area, window and condition."""
    return [
        row
        for area in prepared.signals
        for window in prepared.windows_of(area)
        for condition in prepared.conditions
        for row in window_sinks(prepared, area, condition, window)
    ]


def window_sinks(prepared: Prepared, area: str, condition: str, window: WindowChoice) -> list[Row]:
    """Return the rows of one area, window and condition: its sink, then its source."""
    trials = prepared.cut.trials_of(area)
    assert trials is not None
    rows = [_base(prepared, trials, condition, window, kind) for kind in _EXTREMUM]
    if area not in prepared.csd:
        return [row | {"note": note(NO_DENSITY, chosen_note(window))} for row in rows]
    if condition not in prepared.estimated:
        return [row | {"note": FEW_TRIALS} for row in rows]
    searches = tuple(prepared.search(window, area, each) for each in _EXTREMUM.values())
    sd_s = prepared.smooth_s[window.name]
    estimates = prepared.basis.estimates.get(
        ("sinks", area, condition, searches, sd_s),
        lambda: _measured(prepared, trials, condition, searches, sd_s),
    )
    return [
        row | _values(estimate, trials, window)
        for row, estimate in zip(rows, estimates, strict=True)
    ]


def _why_not_found(estimate: SinkEstimate) -> str:
    """Return why a sink or source counts as not found; empty where it was found."""
    if estimate.p > ALPHA:
        return f"not found (p = {estimate.p:.2g})"
    return "" if np.isfinite(estimate.peak_s) else NO_EXTREMUM


def _measured(
    prepared: Prepared,
    trials: Trials,
    condition: str,
    searches: tuple[Search, ...],
    sd_s: float,
) -> tuple[SinkEstimate, ...]:
    csd, rows = prepared.csd[trials.area], prepared.rows(condition)
    own = replace(csd, data=csd.data[rows])
    return measure_sinks(
        smooth(own, sd_s, searches[0].reading_span_s),
        usable_contacts(trials),
        np.ones(len(own.data), dtype=bool),
        searches,
        weights=prepared.weights[condition],
        signs=prepared.signs[condition],
        level=prepared.choices.resample.level,
    )


def _base(
    prepared: Prepared, trials: Trials, condition: str, window: WindowChoice, kind: str
) -> Row:
    operator = prepared.operators.get(trials.area)
    return {
        "session": prepared.cut.name,
        "area": trials.area,
        "condition": condition,
        "window": window.name,
        "kind": kind,
        "method": operator.method if operator is not None else "",
        "n_trials": int(np.count_nonzero(prepared.rows(condition))),
    }


def _values(estimate: SinkEstimate, trials: Trials, window: WindowChoice) -> Row:
    said = _why_not_found(estimate)
    if said:
        return {"p": estimate.p, "note": note(said, chosen_note(window))}
    share = float(estimate.peak.defined)
    doubt = f"not reliable: found in {share:.0%} of resamples" if share < 0.95 else ""
    return {
        "depth_um": estimate.depth_um,
        "depth_lo_um": float(estimate.depth.lo),
        "depth_hi_um": float(estimate.depth.hi),
        "extent_um": estimate.extent_um,
        "onset_ms": ms(estimate.onset_s),
        "onset_lo_ms": ms(estimate.onset.lo),
        "onset_hi_ms": ms(estimate.onset.hi),
        "peak_ms": ms(estimate.peak_s),
        "peak_lo_ms": ms(estimate.peak.lo),
        "peak_hi_ms": ms(estimate.peak.hi),
        "density_ua_mm3": estimate.density_ua_mm3,
        "p": estimate.p,
        "layer": layer_at(estimate.depth_um, trials.layers),
        "note": note(doubt, chosen_note(window)),
    }
