"""A session or its cut trials in, all results out."""

import numpy as np

from lfptools.analysis.arrival import lag_rows, latency_rows, measure_areas
from lfptools.analysis.depth import sink_rows
from lfptools.analysis.firing import firing_rows, named
from lfptools.analysis.lead import direction_rows, estimate_pairs, verdict_rows
from lfptools.analysis.prepared import Prepared, prepare
from lfptools.analysis.results import Results, Row, add_q
from lfptools.columns import COLUMNS
from lfptools.coupling import coupling_rows
from lfptools.evoked import Average, average, smooth
from lfptools.layers import lfp_signals
from lfptools.model import CutSession, Session, Signals
from lfptools.rates import rate_curves
from lfptools.trials import Progress, cut_trials, no_progress

_NO_LFP = "no LFP was recorded"
_ONE_AREA = "fewer than two areas have LFP"
_NO_SPIKES = "no spikes were recorded"


def analyse(session: Session | CutSession, *, progress: Progress = no_progress) -> Results:
    """Run every analysis of a session.

    Parameters
    ----------
    session : Session or CutSession
        Opened recordings, or trials already cut.
    progress : callable
        Called with a stage in words and the share done of it, 0 to 1.

    Raises
    ------
    InputError
        If no condition keeps 8 accepted trials, or a recording cannot be read.
    """
    trials = session if isinstance(session, CutSession) else cut_trials(session, progress=progress)
    progress("choosing signals and smoothing", 0.0)
    prepared = prepare(trials)
    rows: dict[str, list[Row]] = {name: [] for name in COLUMNS}
    rows["trials"] = _trial_rows(prepared)
    areas = measure_areas(prepared, progress)
    rows["latencies"] = latency_rows(prepared, areas)
    rows["lags"] = lag_rows(prepared, areas)
    progress("mapping the depth", 0.0)
    rows["sinks"] = sink_rows(prepared)
    if trials.spikes is not None:
        rows["firing"] = firing_rows(prepared, progress)
        progress("relating spikes to the field", 0.0)
        rng = np.random.default_rng([trials.choices.resample.seed, 4])
        rows["coupling"] = named(prepared, coupling_rows(prepared.cut, rng=rng))
        add_q(rows["coupling"], "measure")
    pairs = estimate_pairs(prepared, progress)
    rows["direction"] = direction_rows(prepared, pairs)
    rows["verdicts"] = verdict_rows(prepared, pairs)
    add_q(rows["lags"], "feature")
    add_q(rows["direction"], "measure")
    progress("done", 1.0)
    level = trials.choices.resample.level
    return Results(
        session=trials.name,
        cut=prepared.cut,
        choices=prepared.choices,
        rows={name: tuple(each) for name, each in rows.items()},
        averages=_averages(prepared, [lfp_signals(each) for each in trials.areas]),
        maps=_averages(prepared, _smoothed(prepared, prepared.csd)),
        signal_averages=_averages(prepared, _smoothed(prepared, prepared.signals)),
        rates=() if trials.spikes is None else rate_curves(trials, level=level),
        smooth_s=prepared.smooth_s,
        not_recorded=_not_recorded(prepared),
    )


def _smoothed(prepared: Prepared, signals: dict[str, Signals]) -> list[Signals]:
    return [smooth(each, prepared.finest_s) for each in signals.values()]


def _averages(prepared: Prepared, signals: list[Signals]) -> tuple[Average, ...]:
    return tuple(
        average(each, prepared.cut.condition, name, level=prepared.choices.resample.level)
        for each in signals
        for name in prepared.estimated
    )


def _trial_rows(prepared: Prepared) -> list[Row]:
    table = prepared.cut.table
    empty = {
        f"{area}.{window.name}.{column}": None
        for area in prepared.signals
        for window in prepared.windows_of(area)
        for column in ("amplitude", "time_ms", "gain", "shift_ms")
    }
    return [
        {
            "session": prepared.cut.name,
            "trial": index,
            "event_time_s": float(table.time_s[index]),
            "condition": str(table.condition[index]),
            "accepted": bool(table.accepted[index]),
            "reason": str(table.reason[index]),
            **{f"factor.{name}": values[index] for name, values in table.factors.items()},
            **empty,
        }
        for index in range(len(table.time_s))
    ]


def _not_recorded(prepared: Prepared) -> dict[str, str]:
    said: dict[str, str] = {}
    if not prepared.cut.areas:
        said |= dict.fromkeys(("latencies", "sinks"), _NO_LFP)
    if len(prepared.cut.areas) < 2:
        said |= dict.fromkeys(("lags", "direction", "verdicts"), _ONE_AREA)
    if prepared.cut.spikes is None:
        said |= dict.fromkeys(("firing", "coupling"), _NO_SPIKES)
    elif not prepared.cut.areas:
        said["coupling"] = _NO_LFP
    return said
