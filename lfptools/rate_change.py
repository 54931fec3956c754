"""A cut session and one window in; each unit's change in rate, trial by trial and tested, out.

The change of a unit is the mean over trials of (rate in the window - rate in the baseline). Its
interval is a bootstrap over trials, its p-value a sign flip of the trials' differences.
"""

from dataclasses import dataclass

import numpy as np

from lfptools import resample
from lfptools.choices import Span, WindowChoice
from lfptools.model import CutSession, Frozen
from lfptools.spikes import binned_counts

#: A unit with fewer spikes in baseline and window together is not estimated.
MIN_SPIKES = 5


@dataclass(frozen=True, slots=True, eq=False)
class Counts(Frozen):
    """Spikes of each unit before and after the stimulus, for one window and condition."""

    unit: np.ndarray  # (n_units,) number in the session, of those the window applies to
    span_s: tuple[Span, ...]  # (n_units,) the window in the unit's area
    baseline_s: Span
    in_baseline: np.ndarray  # (n_trials, n_units)
    in_window: np.ndarray  # (n_trials, n_units)

    @property
    def length_s(self) -> np.ndarray:
        """Length of the window of each unit in s, shape (n_units,)."""
        return np.array([np.ptp(span) for span in self.span_s])

    @property
    def baseline_length_s(self) -> float:
        """Length of the baseline in s."""
        return float(np.ptp(self.baseline_s))

    @property
    def baseline_hz(self) -> np.ndarray:
        """Mean rate in the baseline, shape (n_units,)."""
        return self.in_baseline.mean(axis=0) / self.baseline_length_s

    @property
    def window_hz(self) -> np.ndarray:
        """Mean rate in the window, shape (n_units,)."""
        return self.in_window.mean(axis=0) / self.length_s

    @property
    def change_hz(self) -> np.ndarray:
        """Rate in the window minus rate in the baseline, shape (n_trials, n_units)."""
        return self.in_window / self.length_s - self.in_baseline / self.baseline_length_s

    @property
    def n_spikes(self) -> np.ndarray:
        """Spikes of baseline and window together, shape (n_units,)."""
        return self.in_baseline.sum(axis=0) + self.in_window.sum(axis=0)

    @property
    def enough(self) -> np.ndarray:
        """Whether a unit has spikes enough to be estimated, shape (n_units,)."""
        return self.n_spikes >= MIN_SPIKES


@dataclass(frozen=True, slots=True, eq=False)
class ChangeTest(Frozen):
    """Interval and p of mean changes, one a column of the changes of the trials."""

    lo_hz: np.ndarray
    hi_hz: np.ndarray
    p: np.ndarray


def stimuli_of(cut: CutSession, condition: str) -> np.ndarray:
    """Return the stimulus times of the accepted trials of a condition in s, (n_trials,)."""
    return cut.table.accepted_time_s()[cut.condition == condition]


def count_spikes(cut: CutSession, condition: str, window: WindowChoice) -> Counts:
    """Count the spikes of every unit whose area the window applies to.

    Raises
    ------
    InputError
        If the spike times of a unit do not rise.
    """
    units, areas, times = _units_in(cut, window)
    stimulus_s = stimuli_of(cut, condition)
    baseline_s = cut.choices.trials.baseline_s
    spans = tuple(window.span_s(area) for area in areas)
    before = [_count_in(time_s, stimulus_s, baseline_s) for time_s in times]
    after = [_count_in(time_s, stimulus_s, span) for time_s, span in zip(times, spans, strict=True)]
    shape = (len(units), len(stimulus_s))
    return Counts(
        unit=np.array(units, dtype=int),
        span_s=spans,
        baseline_s=baseline_s,
        in_baseline=np.reshape(before, shape).astype(int).T,
        in_window=np.reshape(after, shape).astype(int).T,
    )


def _units_in(
    cut: CutSession, window: WindowChoice
) -> tuple[list[int], list[str], list[np.ndarray]]:
    if cut.spikes is None:
        return [], [], []
    units = [unit for unit, area in enumerate(cut.spikes.area) if window.holds(area)]
    areas = [cut.spikes.area[unit] for unit in units]
    return units, areas, [cut.spikes.time_s[unit] for unit in units]


def _count_in(time_s: np.ndarray, stimulus_s: np.ndarray, span_s: Span) -> np.ndarray:
    return binned_counts(time_s, stimulus_s, edges_s=np.array(span_s))[:, 0]


def tested_changes(
    change_hz: np.ndarray, *, weights: np.ndarray, signs: np.ndarray, level: float
) -> ChangeTest:
    """Return interval and p of mean changes.

    The sign flip supposes that, without a response, the difference of the rates of a trial is
    as likely to be positive as negative; with many trials the mean may take its place.

    Parameters
    ----------
    change_hz : ndarray, shape (n_trials, n_columns)
        One column a unit, or a mean of units.
    weights : ndarray, shape (n_draws, n_trials)
        Bootstrap weights; each row sums to 1.
    signs : ndarray, shape (n_flips + 1, n_trials)
        Random signs, the first row all +1.
    level : float
        Coverage of the interval.
    """
    flipped = np.abs(signs @ change_hz)
    interval = resample.percentile_interval(
        weights @ change_hz, level=level, n_trials=len(change_hz)
    )
    return ChangeTest(interval.lo, interval.hi, resample.exceedance_p(flipped[0], flipped[1:]))
