"""Prepared trials and the window in hand in, the rows that `lfptools run` writes of it out.

The functions are those of `lfptools.analysis`. A q-value is over a whole table, so every window
and condition is needed for it; what was computed before, its definition unchanged, is recalled.
"""

from collections.abc import Callable
from dataclasses import dataclass

from lfptools.analysis.arrival import area_rows, lag_rows, measure_areas
from lfptools.analysis.depth import window_sinks
from lfptools.analysis.firing import firing_rows
from lfptools.analysis.lead import estimate_pairs, verdict_rows
from lfptools.analysis.prepared import Prepared
from lfptools.analysis.results import Row, add_q
from lfptools.choices import WindowChoice
from lfptools.trials import Progress


class Stopped(Exception):
    """The answer was given up between two steps because it is no longer wanted."""


@dataclass(frozen=True, slots=True, eq=False)
class FullAnswer:
    """Rows of one window and condition, column by column as in the tables of a run."""

    window: str
    condition: str
    latencies: tuple[Row, ...]  # of the signals that stand for the areas
    lags: tuple[Row, ...]
    firing: tuple[Row, ...]
    sinks: tuple[Row, ...]
    verdicts: tuple[Row, ...]


def full_answer(
    prepared: Prepared, window: WindowChoice, condition: str, *, stop: Callable[[], bool]
) -> FullAnswer:
    """Answer for one window and condition with the numbers of a run.

    Parameters
    ----------
    prepared : Prepared
        All windows, in their order.
    window : WindowChoice
        One of them.
    condition : str
        Whose rows are wanted.
    stop : callable
        Asked between the steps; True gives the answer up.

    Raises
    ------
    Stopped
        If `stop` said so; what was computed until then is kept.
    InputError
        If a window holds fewer than 3 samples of the trials.
    """
    progress = _asking(stop)
    waves = measure_areas(prepared, progress)
    lags = lag_rows(prepared, waves)
    add_q(lags, "feature")
    firing = firing_rows(prepared, progress) if prepared.cut.spikes is not None else []
    latencies = [
        row
        for area in prepared.signals
        if window.holds(area)
        for row in area_rows(
            prepared, area, condition, window, waves.get((area, condition, window.name))
        )
    ]
    sinks: list[Row] = []
    for area in prepared.signals:
        if window.holds(area):
            progress("mapping the depth", 0.0)
            sinks += window_sinks(prepared, area, condition, window)
    verdicts = verdict_rows(prepared, estimate_pairs(prepared, progress))
    return FullAnswer(
        window=window.name,
        condition=condition,
        latencies=tuple(latencies),
        lags=_of(lags, window, condition),
        firing=_of(firing, window, condition),
        sinks=tuple(sinks),
        verdicts=_of(verdicts, window, condition),
    )


def _asking(stop: Callable[[], bool]) -> Progress:
    """Return a progress report that gives up where `stop` says so."""

    def report(stage: str, _share: float) -> None:
        if stop():
            raise Stopped(f"given up while {stage}")

    return report


def _of(rows: list[Row], window: WindowChoice, condition: str) -> tuple[Row, ...]:
    return tuple(
        row for row in rows if row["window"] == window.name and row["condition"] == condition
    )
