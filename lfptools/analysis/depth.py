"""Prepared currents in, the rows of sinks.csv out."""

import numpy as np

from lfptools.analysis.arrival import chosen_note
from lfptools.analysis.prepared import Prepared
from lfptools.analysis.results import Row, ms, note
from lfptools.choices import WindowChoice
from lfptools.evoked import smooth
from lfptools.layers import SinkEstimate, layer_at, measure_sink, usable_contacts
from lfptools.model import Trials
from lfptools.trials import FEW_TRIALS
from lfptools.waves import ALPHA

_EXTREMUM = {"sink": "trough", "source": "peak"}


def sink_rows(prepared: Prepared) -> list[Row]:
    """Return the strongest sink and the strongest source of each area, window and condition."""
    rows: list[Row] = []
    for trials in prepared.cut.areas:
        if trials.area not in prepared.csd:
            continue
        usable = usable_contacts(trials)
        for window in prepared.windows_of(trials.area):
            smoothed = smooth(prepared.csd[trials.area], prepared.smooth_s[window.name])
            for condition in prepared.conditions:
                for kind, extremum in _EXTREMUM.items():
                    row = _base(prepared, trials, condition, window, kind)
                    if condition not in prepared.estimated:
                        rows.append(row | {"note": FEW_TRIALS})
                        continue
                    estimate = measure_sink(
                        smoothed,
                        usable,
                        prepared.rows(condition),
                        prepared.search(window, trials.area, extremum),
                        weights=prepared.weights[condition],
                        signs=prepared.signs[condition],
                        level=prepared.choices.resample.level,
                    )
                    rows.append(row | _values(estimate, trials, window))
    return rows


def _base(
    prepared: Prepared, trials: Trials, condition: str, window: WindowChoice, kind: str
) -> Row:
    return {
        "session": prepared.cut.name,
        "area": trials.area,
        "condition": condition,
        "window": window.name,
        "kind": kind,
        "method": prepared.operators[trials.area].method,
        "n_trials": int(np.count_nonzero(prepared.rows(condition))),
    }


def _values(estimate: SinkEstimate, trials: Trials, window: WindowChoice) -> Row:
    if estimate.p > ALPHA or not np.isfinite(estimate.peak_s):
        said = f"not found (p = {estimate.p:.2g})"
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
