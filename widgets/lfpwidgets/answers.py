"""Cut trials in; what the bench shows out: quick answers, full ones, averages, maps and rates.

What no window changes is computed once; what depends on windows is kept by its definition. The
answers may be asked for from several threads.
"""

from collections.abc import Callable
from dataclasses import replace

import msgspec
import numpy as np
from threadpoolctl import ThreadpoolController

from lfptools.analysis.basis import make_basis
from lfptools.analysis.memo import Memo
from lfptools.analysis.prepared import Prepared, with_choices
from lfptools.choices import AnalysisChoices, WindowChoice
from lfptools.errors import InputError
from lfptools.evoked import Average, average, smooth
from lfptools.layers import lfp_signals
from lfptools.model import CutSession, Signals, Trials
from lfptools.rates import RateCurve, rate_curves, spike_raster
from lfptools.trials import MIN_TRIALS
from lfpwidgets.full import FullAnswer, full_answer
from lfpwidgets.quick import N_DRAWS, QuickAnswer, quick_answer

#: The products behind an answer are small: more BLAS threads get into one another's way.
_BLAS = ThreadpoolController()
#: Averages and maps kept in memory.
_MOST_PICTURES = 64

Windows = tuple[WindowChoice, ...]


class Answers:
    """Everything the bench can be asked of one cut session.

    Parameters
    ----------
    cut : CutSession
        The session; all its choices but windows and signal hold for every answer.
    n_draws : int
        Resamples and random signs behind quick intervals.

    Raises
    ------
    InputError
        If no condition has 8 accepted trials.
    """

    def __init__(self, cut: CutSession, *, n_draws: int = N_DRAWS) -> None:
        self._n_draws = n_draws
        self._basis = make_basis(cut)
        self._pictures = Memo(_MOST_PICTURES)
        if not self._basis.estimated:
            raise InputError(f"no condition has {MIN_TRIALS} accepted trials; one needs as many")

    @property
    def cut(self) -> CutSession:
        """The session that is asked."""
        return self._basis.cut

    @property
    def estimated(self) -> tuple[str, ...]:
        """Conditions with enough trials, in order of appearance."""
        return self._basis.estimated

    @property
    def mapped_areas(self) -> tuple[str, ...]:
        """Areas with contacts enough for current source density."""
        return tuple(self._basis.csd)

    def quick(self, windows: Windows, hand: str, condition: str, signal: str) -> QuickAnswer:
        """Answer at once for the window in hand.

        Parameters
        ----------
        windows : tuple of WindowChoice
            All windows: the signal that stands for an area is chosen over them together.
        hand : str
            Name of the window in hand.
        condition : str
            Condition that is looked at.
        signal : str
            "csd" or "lfp": what stands for an area.

        Raises
        ------
        InputError
            If there is no such window or condition, or the window holds fewer than 3 samples.
        """
        self._known(condition)
        window = _in_hand(windows, hand)
        with _BLAS.limit(limits=1):
            prepared = self._prepared(self._choices(windows, signal))
            return quick_answer(prepared, window, condition, n_draws=self._n_draws)

    def full(
        self,
        choices: AnalysisChoices,
        hand: str,
        condition: str,
        *,
        stop: Callable[[], bool] = lambda: False,
    ) -> FullAnswer:
        """Answer for the window in hand with the rows that `analyse` gives for `choices`.

        Parameters
        ----------
        choices : AnalysisChoices
            All windows and settings.
        hand : str
            Name of the window in hand.
        condition : str
            Condition that is looked at.
        stop : callable
            Asked between the steps; True gives the answer up.

        Raises
        ------
        Stopped
            If `stop` said so.
        InputError
            If there is no such window or condition, or a window holds fewer than 3 samples.
        """
        self._known(condition)
        window = _in_hand(tuple(choices.window), hand)
        with _BLAS.limit(limits=1):
            return full_answer(self._prepared(choices), window, condition, stop=stop)

    def map(self, area: str, condition: str, signal: str, windows: Windows = ()) -> Average:
        """Return the average by depth and time, smoothed as in the figures of a run.

        Parameters
        ----------
        area, condition : str
            What is looked at.
        signal : str
            "csd": every depth, or "lfp": the good contacts.
        windows : tuple of WindowChoice
            The finest smoothing of any of them is used; by default the session's own.

        Raises
        ------
        InputError
            If the area has no such signal, or the condition too few trials.
        """
        sd_s = self._windowed(windows, self.cut.choices.direction.signal).finest_s
        return self._pictures.get(
            ("map", area, condition, signal, sd_s),
            lambda: self._average(self._depths(area, signal), condition, sd_s),
        )

    def average(
        self, area: str, condition: str, signal: str | None = None, windows: Windows = ()
    ) -> Average:
        """Return the average of the signal that stands for an area, with its band.

        `signal` and `windows` are by default the session's own; smoothed like `map`.

        Raises
        ------
        InputError
            If the area has no LFP, or the condition too few trials.
        """
        self._trials(area)
        kind = signal or self.cut.choices.direction.signal
        prepared = self._windowed(windows, kind)
        found, sd_s = prepared.signals[area], prepared.finest_s
        return self._pictures.get(
            ("average", area, condition, found.label, sd_s),
            lambda: self._average(found, condition, sd_s),
        )

    def rates(self, area: str, condition: str) -> RateCurve | None:
        """Return the firing around the stimulus; None without units or with too few trials."""
        curves = self._pictures.get("rates", self._curves)
        return curves.get((area, condition))

    def raster(self, unit: str, condition: str) -> tuple[np.ndarray, np.ndarray]:
        """Return the spikes of a unit as (trial, time_s), trials counted within the condition.

        Raises
        ------
        InputError
            If the session has no such unit or condition.
        """
        units = self.cut.spikes.unit if self.cut.spikes is not None else ()
        if unit not in units:
            raise InputError(f"there is no unit {unit!r}; known are {', '.join(units) or 'none'}")
        return spike_raster(self.cut, units.index(unit), condition)

    def _choices(self, windows: Windows, signal: str) -> AnalysisChoices:
        own = self.cut.choices
        direction = msgspec.structs.replace(own.direction, signal=signal)
        return msgspec.structs.replace(own, window=list(windows), direction=direction)

    def _windowed(self, windows: Windows, signal: str) -> Prepared:
        return self._prepared(self._choices(windows or tuple(self.cut.choices.window), signal))

    def _prepared(self, choices: AnalysisChoices) -> Prepared:
        if not self._basis.serves(choices):
            self._basis = make_basis(replace(self.cut, choices=choices))
            self._pictures = Memo(_MOST_PICTURES)
        return with_choices(self._basis, choices)

    def _average(self, signals: Signals, condition: str, sd_s: float) -> Average:
        self._known(condition)
        rows = self._basis.rows(condition)
        own = replace(signals, data=signals.data[rows])
        level = self.cut.choices.resample.level
        return average(smooth(own, sd_s), self.cut.condition[rows], condition, level=level)

    def _depths(self, area: str, signal: str) -> Signals:
        trials = self._trials(area)
        if signal == "lfp":
            return lfp_signals(trials)
        if area not in self._basis.csd:
            raise InputError(f"{area} has too few good contacts for current source density")
        return self._basis.csd[area]

    def _trials(self, area: str) -> Trials:
        trials = self.cut.trials_of(area)
        if trials is None:
            raise InputError(f"no LFP was recorded in {area!r}")
        return trials

    def _curves(self) -> dict[tuple[str, str], RateCurve]:
        curves = rate_curves(self.cut, level=self.cut.choices.resample.level)
        return {(each.area, each.condition): each for each in curves}

    def _known(self, condition: str) -> None:
        names = self.cut.table.conditions
        if condition not in names:
            raise InputError(f"there is no condition {condition!r}; known are {', '.join(names)}")


def _in_hand(windows: Windows, hand: str) -> WindowChoice:
    for window in windows:
        if window.name == hand:
            return window
    names = ", ".join(repr(window.name) for window in windows) or "none is there"
    raise InputError(f"there is no window {hand!r}; needed is the name of a window: {names}")
