"""A cut session in; what no window changes out: resamples, currents, and a memory for the rest.

Resamples and random signs are drawn once per condition and used by every analysis, so that
differences between areas are paired. A basis serves any windows: what depends on them is kept
by its definition, so that moving one window computes anew only what rests on it.
"""

from dataclasses import dataclass, field

import msgspec
import numpy as np

from lfptools.analysis.memo import Memo
from lfptools.choices import AnalysisChoices
from lfptools.csd import MIN_CONTACTS, CsdOperator, csd_operator, csd_signals
from lfptools.direction.prepare import to_rate
from lfptools.evoked import SmoothingRisk, smooth, smoothing_risk
from lfptools.layers import Candidates, candidates, chosen, grand_mean, strongest
from lfptools.model import CutSession, Signals
from lfptools.rate_change import SpikeTable, spike_table
from lfptools.resample import bootstrap_weights, sign_flips
from lfptools.trials import MIN_TRIALS

#: Courses (one signal, all trials) and estimates kept in memory.
_MOST_COURSES, _MOST_ESTIMATES = 96, 2048


@dataclass(frozen=True, slots=True, eq=False)
class Basis:
    """What every analysis of a session starts from, whatever its windows."""

    cut: CutSession
    conditions: tuple[str, ...]  # all, in order of appearance
    estimated: tuple[str, ...]  # those with enough trials
    weights: dict[str, np.ndarray]  # bootstrap, by estimated condition
    signs: dict[str, np.ndarray]  # random signs, by estimated condition
    firing_signs: dict[str, np.ndarray]  # those of the units' changes
    operators: dict[str, CsdOperator]  # by area, where there are enough contacts
    csd: dict[str, Signals]  # by area, every depth
    courses: Memo = field(default_factory=lambda: Memo(_MOST_COURSES))
    estimates: Memo = field(default_factory=lambda: Memo(_MOST_ESTIMATES))

    def serves(self, choices: AnalysisChoices) -> bool:
        """Say whether `choices` differ from the basis's own in windows and signal alone."""
        return _without_windows(choices) == _without_windows(self.cut.choices)

    def rows(self, condition: str) -> np.ndarray:
        """Bool per accepted trial."""
        return self.cut.condition == condition

    def signal(self, area: str, kind: str, spans_s: list[tuple[float, float]]) -> Signals:
        """Return the one signal that stands for an area with windows at `spans_s`."""
        found, mean = self.candidates(area, kind)
        index = strongest(found, mean, spans_s)
        return self.courses.get(("signal", area, kind, index), lambda: chosen(found, index))

    def candidates(self, area: str, kind: str) -> tuple[Candidates, np.ndarray]:
        """Return the signals of which one stands for an area, and their grand mean."""
        return self.courses.get(("candidates", area, kind), lambda: self._known(area, kind))

    def _known(self, area: str, kind: str) -> tuple[Candidates, np.ndarray]:
        trials = self.cut.trials_of(area)
        assert trials is not None
        found = candidates(trials, self.csd.get(area), kind)
        return found, grand_mean(found.signals, [self.rows(name) for name in self.estimated])

    def smoothed(self, signal: Signals, sd_s: float) -> Signals:
        """Return the signal of an area smoothed."""
        return self.courses.get(("smoothed", *identity(signal), sd_s), lambda: smooth(signal, sd_s))

    def smoothed_mean(self, signal: Signals, sd_s: float, condition: str) -> np.ndarray:
        """Return the average of the smoothed signal of an area, shape (1, n_times)."""
        return self.courses.get(
            ("mean", *identity(signal), sd_s, condition),
            lambda: self.smoothed(signal, sd_s).data[self.rows(condition)].mean(0, dtype=float),
        )

    def spikes(self, condition: str) -> SpikeTable:
        """Return the spikes of all units around the stimuli of a condition."""
        return self.courses.get(("spikes", condition), lambda: spike_table(self.cut, condition))

    def at_rate(self, signal: Signals, rate_hz: float) -> Signals:
        """Return the signal of an area at a common rate."""
        return self.courses.get(
            ("rate", *identity(signal), rate_hz), lambda: to_rate(signal, rate_hz)
        )

    def risk(self, signal: Signals, condition: str) -> SmoothingRisk:
        """Return what smoothing the average of an area's signal costs."""
        return self.estimates.get(
            ("risk", *identity(signal), condition),
            lambda: smoothing_risk(signal, self.rows(condition)),
        )


def identity(signal: Signals) -> tuple[str, str, int]:
    """Return what tells the signal of an area from any other of the session."""
    return signal.area, signal.kind, int(signal.channel[0])


def _without_windows(choices: AnalysisChoices) -> AnalysisChoices:
    plain = msgspec.structs.replace(choices.direction, signal="csd")
    # A whole session file holds more than the choices of its analysis.
    own = {name: getattr(choices, name) for name in AnalysisChoices.__struct_fields__}
    return AnalysisChoices(**own | {"window": [], "direction": plain})


def make_basis(cut: CutSession) -> Basis:
    """Compute the currents and draw the resamples of a session."""
    choices = cut.choices
    conditions = cut.table.conditions
    counts = {name: int(np.count_nonzero(cut.condition == name)) for name in conditions}
    estimated = tuple(name for name in conditions if counts[name] >= MIN_TRIALS)
    operators, csd = {}, {}
    for trials in cut.areas:
        if np.count_nonzero(~trials.contacts.bad) >= MIN_CONTACTS:
            operators[trials.area] = csd_operator(
                trials.contacts,
                conductivity_s_m=choices.csd.conductivity_s_m,
                method=choices.csd.method,
            )
            csd[trials.area] = csd_signals(trials, operators[trials.area])
    seed, n = choices.resample.seed, choices.resample.n
    firing = _rng(seed, 3)
    return Basis(
        cut=cut,
        conditions=conditions,
        estimated=estimated,
        weights={
            name: bootstrap_weights(counts[name], n, _rng(seed, 1, number))
            for number, name in enumerate(estimated)
        },
        signs={
            name: sign_flips(counts[name], n, _rng(seed, 2, number))
            for number, name in enumerate(estimated)
        },
        firing_signs={name: sign_flips(counts[name], n, firing) for name in estimated},
        operators=operators,
        csd=csd,
    )


def _rng(*seed: int) -> np.random.Generator:
    return np.random.default_rng(list(seed))
