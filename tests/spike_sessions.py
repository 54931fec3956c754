"""Cut sessions in memory for the tests of spikes: stimuli ten seconds apart, no file behind."""

import numpy as np

from lfptools.choices import (
    AnalysisChoices,
    CouplingChoice,
    RatesChoice,
    ResampleChoice,
    TrialsChoice,
    WindowChoice,
)
from lfptools.model import Contacts, CutSession, SpikeTrains, Trials, TrialTable
from lfptools.rate_change import spike_table
from lfptools.rates import in_order, window_rows


def choices(
    *,
    windows: dict[str, tuple[float, float]],
    window_ms: tuple[float, float] = (-200.0, 300.0),
    baseline_ms: tuple[float, float] = (-100.0, 0.0),
    bin_ms: float = 1.0,
    coupling: CouplingChoice | None = None,
    n: int = 499,
) -> AnalysisChoices:
    return AnalysisChoices(
        trials=TrialsChoice(window_ms=window_ms, baseline_ms=baseline_ms),
        window=[WindowChoice(name=name, span_ms=span) for name, span in windows.items()],
        rates=RatesChoice(bin_ms=bin_ms),
        coupling=coupling or CouplingChoice(),
        resample=ResampleChoice(n=n),
    )


def stimuli_s(n_trials: int) -> np.ndarray:
    return 10.0 + 10.0 * np.arange(n_trials)


def trains(relative_s: list[list[np.ndarray]], **of_units) -> SpikeTrains:
    """Spike trains from the spikes of each unit and trial, in s after that trial's stimulus."""
    times = []
    for unit in relative_s:
        shifted = [np.asarray(s) + t for s, t in zip(unit, stimuli_s(len(unit)), strict=True)]
        times.append(np.sort(np.concatenate(shifted)))
    n_units = len(relative_s)
    return SpikeTrains(
        unit=of_units.get("unit", tuple(f"u{each}" for each in range(n_units))),
        area=of_units.get("area", ("S1",) * n_units),
        depth_um=np.asarray(of_units.get("depth_um", np.full(n_units, 500.0))),
        time_s=tuple(times),
    )


def lfp(data_uv: np.ndarray, *, rate_hz: float, first_s: float, area: str = "S1") -> Trials:
    """Trials of one area with contacts 100 um apart on channels 10, 11, ..."""
    n_contacts, n_times = data_uv.shape[1:]
    return Trials(
        area=area,
        data_uv=data_uv.astype(np.float32),
        time_s=first_s + np.arange(n_times) / rate_hz,
        rate_hz=rate_hz,
        contacts=Contacts(
            channel=10 + np.arange(n_contacts),
            depth_um=100.0 * np.arange(n_contacts),
            bad=np.zeros(n_contacts, dtype=bool),
            why=("",) * n_contacts,
        ),
    )


def session(
    chosen: AnalysisChoices,
    *,
    condition: list[str],
    spikes: SpikeTrains | None = None,
    areas: tuple[Trials, ...] = (),
    area_names: tuple[str, ...] = ("S1",),
) -> CutSession:
    n_trials = len(condition)
    table = TrialTable(
        time_s=stimuli_s(n_trials),
        condition=np.array(condition),
        reason=np.full(n_trials, ""),
    )
    return CutSession(
        name="whisk",
        table=table,
        areas=areas,
        area_names=area_names,
        choices=chosen,
        spikes=spikes,
    )


def unfinished_rows(cut, *, weights, signs):
    """Rows of firing.csv before q and calls: every condition and window, in order."""
    parts = [
        (number, place, window_rows(cut, table, name, window, weights=weights, signs=signs))
        for number, name in enumerate(cut.table.conditions)
        for table in [spike_table(cut, name)]
        for place, window in enumerate(cut.choices.window)
    ]
    return in_order(parts)
