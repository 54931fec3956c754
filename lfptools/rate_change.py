"""A cut session and one window in; each unit's change in rate, counted and tested, out.

The change of a unit is the mean over trials of (rate in the window - rate in the baseline). Its
interval is a bootstrap over trials, its p-value a sign flip of the trials' differences.
"""

from dataclasses import dataclass

import numpy as np

from lfptools import resample
from lfptools.choices import Span, WindowChoice
from lfptools.model import CutSession, Frozen
from lfptools.spikes import microseconds, spikes_around

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


@dataclass(frozen=True, slots=True, eq=False)
class SpikeTable(Frozen):
    """The spikes of all units around the stimuli of one condition, in one list."""

    unit: np.ndarray  # (n_spikes,) number in the session
    trial: np.ndarray  # (n_spikes,) number in the condition
    time_us: np.ndarray  # (n_spikes,) int, 0 at the stimulus
    area: tuple[str, ...]  # (n_units,)
    baseline_s: Span
    n_trials: int

    def count(self, first_us: np.ndarray, last_us: np.ndarray) -> np.ndarray:
        """Return the spikes in [first, last) of each unit, (n_trials, n_units)."""
        inside = (self.time_us >= first_us[self.unit]) & (self.time_us < last_us[self.unit])
        n_units = len(self.area)
        flat = self.trial[inside] * n_units + self.unit[inside]
        counts = np.bincount(flat, minlength=self.n_trials * n_units)
        return counts.reshape(self.n_trials, n_units)


def spike_table(cut: CutSession, condition: str) -> SpikeTable:
    """Return the spikes around the stimuli of a condition, over the window of a trial.

    Raises
    ------
    InputError
        If the spike times of a unit do not rise.
    """
    stimulus_s = stimuli_of(cut, condition)
    trials = cut.choices.trials
    span_s = (
        min(trials.span_s[0], trials.baseline_s[0]),
        max(trials.span_s[1], trials.baseline_s[1]),
    )
    times = () if cut.spikes is None else cut.spikes.time_s
    found = [spikes_around(each, stimulus_s, span_s=span_s) for each in times]
    none = np.empty(0, dtype=int)
    return SpikeTable(
        unit=np.repeat(np.arange(len(found)), [len(each) for each in found]),
        trial=np.concatenate([none, *(each.trial for each in found)]),
        time_us=np.concatenate([none, *(each.time_us for each in found)]),
        area=() if cut.spikes is None else cut.spikes.area,
        baseline_s=trials.baseline_s,
        n_trials=len(stimulus_s),
    )


def count_spikes(table: SpikeTable, window: WindowChoice) -> Counts:
    """Count the spikes of every unit whose area the window applies to, before and after."""
    held = np.array([window.holds(area) for area in table.area], dtype=bool)
    spans = tuple(window.span_s(area) for area in table.area)
    edges_us = microseconds(np.array([table.baseline_s, *spans]))
    before = np.broadcast_to(edges_us[:1], (len(spans), 2))
    return Counts(
        unit=np.flatnonzero(held),
        span_s=tuple(span for span, each in zip(spans, held, strict=True) if each),
        baseline_s=table.baseline_s,
        in_baseline=table.count(before[:, 0], before[:, 1])[:, held],
        in_window=table.count(edges_us[1:, 0], edges_us[1:, 1])[:, held],
    )


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
