"""A cut session and its windows in, what all analyses share out: signals and smoothing.

One signal stands for each area, and one smoothing a window serves all areas and conditions,
which are compared within it.
"""

from dataclasses import dataclass, replace

import msgspec
import numpy as np

from lfptools.analysis.basis import Basis, identity, make_basis
from lfptools.analysis.windows import propose_windows
from lfptools.choices import AnalysisChoices, WindowChoice
from lfptools.csd import CsdOperator
from lfptools.evoked import SMOOTHING_GRID_MS, least_risk
from lfptools.model import CutSession, Signals
from lfptools.waves import Search, landmarks

CHOSEN_HERE = "window chosen on these trials"


def chosen_note(window: WindowChoice) -> str:
    """Say so where a window was chosen by looking at the same trials."""
    return CHOSEN_HERE if window.chosen != "before" else ""


@dataclass(frozen=True, slots=True, eq=False)
class Prepared:
    """What every analysis of a session starts from, its windows known."""

    basis: Basis
    cut: CutSession  # its choices are those below
    choices: AnalysisChoices
    signals: dict[str, Signals]  # by area, the one that stands for it
    smooth_s: dict[str, float]  # SD of the Gaussian, by window

    @property
    def conditions(self) -> tuple[str, ...]:
        """All conditions, in order of appearance."""
        return self.basis.conditions

    @property
    def estimated(self) -> tuple[str, ...]:
        """Conditions with enough trials."""
        return self.basis.estimated

    @property
    def weights(self) -> dict[str, np.ndarray]:
        """Bootstrap weights by estimated condition."""
        return self.basis.weights

    @property
    def signs(self) -> dict[str, np.ndarray]:
        """Random signs by estimated condition."""
        return self.basis.signs

    @property
    def operators(self) -> dict[str, CsdOperator]:
        """Operators by area, where there are enough contacts."""
        return self.basis.operators

    @property
    def csd(self) -> dict[str, Signals]:
        """Current source density of every depth, by area."""
        return self.basis.csd

    def rows(self, condition: str) -> np.ndarray:
        """Bool per accepted trial."""
        return self.basis.rows(condition)

    @property
    def finest_s(self) -> float:
        """Least smoothing of any window, for curves that show all of them."""
        return min(self.smooth_s.values(), default=0.0)

    def search(self, window: WindowChoice, area: str, extremum: str = "") -> Search:
        """Return where a wave is looked for in one area."""
        return Search(
            span_s=window.span_s(area),
            extremum=extremum or window.extremum_in(area),
            onset=self.choices.latency.onset,
        )

    def windows_of(self, area: str) -> list[WindowChoice]:
        """Return the windows that apply to `area`."""
        return [window for window in self.choices.window if window.holds(area)]


def prepare(cut: CutSession) -> Prepared:
    """Choose signals, windows and smoothing, and draw the resamples."""
    return with_choices(make_basis(cut), cut.choices)


def with_choices(basis: Basis, choices: AnalysisChoices) -> Prepared:
    """Choose signals and smoothing for other windows or another kind of signal.

    Parameters
    ----------
    basis : Basis
        What no window changes; it must serve `choices`.
    choices : AnalysisChoices
        Where they name no window, windows are proposed from the averages.
    """
    assert basis.serves(choices)
    if not choices.window:
        choices = msgspec.structs.replace(choices, window=_proposed(basis, choices))
    signals = _area_signals(basis, choices)
    return Prepared(
        basis=basis,
        cut=replace(basis.cut, choices=choices),
        choices=choices,
        signals=signals,
        smooth_s={
            window.name: _smoothing(basis, signals, choices, window) for window in choices.window
        },
    )


def _proposed(basis: Basis, choices: AnalysisChoices) -> list[WindowChoice]:
    signals = list(_area_signals(basis, choices).values())
    whole = (0.0, choices.trials.span_s[1])
    return propose_windows(signals, basis.cut.condition, list(basis.estimated), whole)


def _area_signals(basis: Basis, choices: AnalysisChoices) -> dict[str, Signals]:
    whole = (0.0, choices.trials.span_s[1])
    return {
        area.area: basis.signal(
            area.area,
            choices.direction.signal,
            [each.span_s(area.area) for each in choices.window if each.holds(area.area)] or [whole],
        )
        for area in basis.cut.areas
    }


def _smoothing(
    basis: Basis, signals: dict[str, Signals], choices: AnalysisChoices, window: WindowChoice
) -> float:
    """Return a window's frozen SD in s: as given, or of least risk and at most half its waves."""
    given = choices.latency.smooth_ms
    if given != "auto":
        return float(given) / 1000
    held = [signal for area, signal in signals.items() if window.holds(area)]
    if not held:
        return 0.0
    searches = tuple(
        (each.area, Search(window.span_s(each.area), window.extremum_in(each.area), "half"))
        for each in held
    )
    key = ("smoothing", *(identity(each) for each in held), searches)
    return basis.estimates.get(key, lambda: _least_smoothing(basis, held, dict(searches)))


def _least_smoothing(basis: Basis, held: list[Signals], searches: dict[str, Search]) -> float:
    span_s = (
        min(search.flank_span_s[0] for search in searches.values()),
        max(search.prominence_span_s[1] for search in searches.values()),
    )
    risks = [basis.risk(each, name) for each in held for name in basis.estimated]
    sd_s = least_risk(risks, span_s)
    widths = []
    for signal in held:
        time_s = basis.smoothed(signal, sd_s).time_s
        for name in basis.estimated:
            mean = basis.smoothed_mean(signal, sd_s, name)
            widths.append(_half_width(mean, time_s, searches[signal.area]))
    narrowest = np.nanmin([*widths, np.inf])
    allowed = [ms / 1000 for ms in SMOOTHING_GRID_MS if ms / 1000 <= min(sd_s, narrowest / 2)]
    return allowed[-1]


def _half_width(mean: np.ndarray, time_s: np.ndarray, search: Search) -> float:
    """Full width at half height of an average wave, as twice its rise from half height, s."""
    found = landmarks(mean, time_s, search)
    return float(2 * (found.time_s - found.onset_s)[0])
