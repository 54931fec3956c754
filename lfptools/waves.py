"""Smoothed single-trial signals in, troughs and onsets with intervals out.

A minimum always exists; a wave is called found only where the prominence of the average's
extremum is larger than random signs of the trials make it. Times and onsets are followed
through the resamples; all areas of a condition share the same resamples, so that lags are
paired on the same trials.
"""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from lfptools.checks import one_of
from lfptools.errors import InputError
from lfptools.model import Signals
from lfptools.resample import exceedance_p, percentile_interval
from lfptools.trials import window_mask

ALPHA = 0.05
#: Fraction of the extremum that marks the onset. "auto" is half height.
ONSET_FRACTION = {"auto": 0.5, "half": 0.5, "quarter": 0.25}
#: Signal-to-noise ratio of the average below which a landmark is not reliable.
MIN_SNR = {0.5: 5.0, 0.25: 10.0}
_WIDEST_INTERVAL_S = 0.030
_MIN_DEFINED = 0.95
#: What is emptied where the wave was not found.
_EMPTIED = tuple(
    f"{column}{end}"
    for column, ends in (
        ("time", ("_s", "_lo_s", "_hi_s")),
        ("onset", ("_s", "_lo_s", "_hi_s")),
        ("amplitude", ("", "_lo", "_hi")),
    )
    for end in ends
)
#: Resampled curves held at a time, in values.
_BLOCK_VALUES = 500_000


@dataclass(frozen=True, slots=True, eq=False)
class WaveEstimate:
    """One wave in each signal of a stack: times in s, amplitudes in the signal's unit."""

    time_s: np.ndarray  # (n_signals,)
    time_lo_s: np.ndarray
    time_hi_s: np.ndarray
    onset_s: np.ndarray
    onset_lo_s: np.ndarray
    onset_hi_s: np.ndarray
    amplitude: np.ndarray
    amplitude_lo: np.ndarray
    amplitude_hi: np.ndarray
    found: np.ndarray  # share of resamples in which the extremum was found
    p: np.ndarray
    snr: np.ndarray  # amplitude / noise of a trial x sqrt(trials)
    note: tuple[str, ...]
    n_trials: int
    time_draws_s: np.ndarray  # (n_draws, n_signals), NaN where not found
    onset_draws_s: np.ndarray


@dataclass(frozen=True, slots=True, eq=False)
class Landmarks:
    """Extremum and onset of each curve; NaN where there is none."""

    time_s: np.ndarray
    amplitude: np.ndarray
    onset_s: np.ndarray


@dataclass(frozen=True, slots=True)
class Search:
    """Where and how a wave is looked for.

    `reach_s` is how far its flanks are followed beyond the window, by default half of it.
    """

    span_s: tuple[float, float]
    extremum: str  # "trough" or "peak"
    onset: str  # a key of ONSET_FRACTION

    def __post_init__(self) -> None:
        one_of("extremum", self.extremum, ("trough", "peak"))
        one_of("onset", self.onset, tuple(ONSET_FRACTION))

    @property
    def reach_s(self) -> float:
        """How far a flank is followed."""
        return (self.span_s[1] - self.span_s[0]) / 2

    @property
    def sign(self) -> float:
        """Factor that turns the wave upwards."""
        return -1.0 if self.extremum == "trough" else 1.0

    @property
    def flank_span_s(self) -> tuple[float, float]:
        """Span read for onsets: from after the stimulus, where the window lies there."""
        first = self.span_s[0] - self.reach_s
        return max(0.0, first) if self.span_s[0] >= 0 else first, self.span_s[1] + 0.002

    @property
    def prominence_span_s(self) -> tuple[float, float]:
        """Span read for prominence: the window and a flank on either side."""
        return self.span_s[0] - self.reach_s, self.span_s[1] + self.reach_s

    @property
    def reading_span_s(self) -> tuple[float, float]:
        """All that is read: both spans together."""
        flank, wide = self.flank_span_s, self.prominence_span_s
        return min(flank[0], wide[0]), max(flank[1], wide[1])


def landmarks(curves: np.ndarray, time_s: np.ndarray, search: Search) -> Landmarks:
    """Find the extremum inside the window and the onset on its rising flank.

    The extremum is the largest local one in the window, refined by a parabola (clamped to half
    a sample). The onset is where the flank last crosses the stated fraction of the extremum,
    measured from 0, the baseline.

    Parameters
    ----------
    curves : ndarray, shape (..., n_times)
        Smoothed averages, baseline taken off.
    time_s : ndarray, shape (n_times,)
        Their time axis, evenly spaced.
    search : Search
        Window, sign and kind of onset.

    Returns
    -------
    Landmarks
        Arrays of shape (...).
    """
    up = search.sign * curves
    step = time_s[1] - time_s[0]
    at, value, offset = _largest_peak(up, window_mask(time_s, search.span_s))
    onset = _last_crossing(up, at, ONSET_FRACTION[search.onset] * value)
    return Landmarks(
        time_s=time_s[at] + offset * step,
        amplitude=search.sign * value,
        onset_s=time_s[0] + onset * step,
    )


def _largest_peak(up: np.ndarray, inside: np.ndarray) -> tuple[np.ndarray, ...]:
    """Return index, height and sub-sample offset of the largest local maximum inside."""
    before, middle, after = up[..., :-2], up[..., 1:-1], up[..., 2:]
    is_peak = (middle >= before) & (middle > after) & inside[1:-1]
    at = np.argmax(np.where(is_peak, middle, -np.inf), axis=-1)
    pick = at[..., None]
    a, b, c = (np.take_along_axis(part, pick, -1)[..., 0] for part in (before, middle, after))
    bend = a - 2 * b + c
    safe = np.where(bend < 0, bend, -1.0)
    offset = np.clip(0.5 * (a - c) / safe, -0.5, 0.5)
    height = b - 0.25 * (a - c) * offset
    none = ~is_peak.any(axis=-1)
    nan = np.where(none, np.nan, 0.0)
    return at + 1, height + nan, offset + nan


def _last_crossing(up: np.ndarray, at: np.ndarray, threshold: np.ndarray) -> np.ndarray:
    """Return where (in samples) `up` last rises through `threshold` before `at`, or NaN."""
    n_times = up.shape[-1]
    samples = np.arange(n_times)
    below = (up < threshold[..., None]) & (samples < at[..., None])
    last = n_times - 1 - np.argmax(below[..., ::-1], axis=-1)
    last = np.minimum(last, n_times - 2)
    low = np.take_along_axis(up, last[..., None], -1)[..., 0]
    high = np.take_along_axis(up, last[..., None] + 1, -1)[..., 0]
    rise = np.where(high > low, high - low, 1.0)
    crossed = last + np.clip((threshold - low) / rise, 0, 1)
    return np.where(below.any(axis=-1) & (threshold > 0), crossed, np.nan)


def prominence(curves: np.ndarray, time_s: np.ndarray, search: Search) -> np.ndarray:
    """Return the largest prominence of a local extremum inside the window, shape (...).

    Prominence is the smaller of the rises to the left and to the right within half a window.
    0 where the window holds no local extremum.
    """
    up = search.sign * curves
    reach = max(2, round(search.reach_s / (time_s[1] - time_s[0])))
    inside = np.flatnonzero(window_mask(time_s, search.span_s)[1:-1]) + 1
    if not inside.size:
        return np.zeros(up.shape[:-1])
    first, last = inside[0], inside[-1] + 1
    middle = up[..., first:last]
    rise = middle - _higher_floor(up, reach, first, last)
    is_peak = (middle >= up[..., first - 1 : last - 1]) & (middle > up[..., first + 1 : last + 1])
    return np.where(is_peak, rise, 0.0).max(axis=-1)


def _higher_floor(up: np.ndarray, reach: int, first: int, last: int) -> np.ndarray:
    """Return the higher of the two lowest values within `reach` of each sample in [first, last).

    One lies to the left, one to the right. Minima over doubling lengths take a few passes,
    where a moving minimum takes many; beyond the ends nothing is lower.
    """
    before, after = max(0, reach - first), max(0, last + reach - up.shape[-1])
    edges = [(0, 0)] * (up.ndim - 1) + [(before, after)]
    part = np.pad(up[..., max(0, first - reach) : last + reach], edges, constant_values=np.inf)
    length = 1
    while 2 * length <= reach + 1:
        part = np.minimum(part[..., :-length], part[..., length:])
        length *= 2
    rest = reach + 1 - length
    lowest = np.minimum(part[..., : part.shape[-1] - rest], part[..., rest:])
    n = last - first
    return np.maximum(lowest[..., :n], lowest[..., reach : reach + n])


def measure(
    signals: Signals,
    rows: np.ndarray,
    search: Search,
    *,
    weights: np.ndarray,
    signs: np.ndarray,
    level: float,
) -> WaveEstimate:
    """Measure one wave in each signal of one condition.

    Parameters
    ----------
    signals : Signals
        Smoothed, baseline taken off.
    rows : ndarray of bool, shape (n_trials_in_all,)
        Trials of the condition.
    search : Search
        Window, sign and kind of onset.
    weights : ndarray, shape (n_draws, n_trials)
        Bootstrap weights over the condition's trials, the same for all areas.
    signs : ndarray, shape (n_flips + 1, n_trials)
        Random signs, the first row all +1, the same for all areas.
    level : float
        Coverage of the intervals.

    Raises
    ------
    InputError
        If the window holds fewer than 3 samples of the trials.
    """
    if np.count_nonzero(window_mask(signals.time_s, search.span_s)) < 3:
        raise InputError(f"the window {search.span_s} s holds fewer than 3 samples")
    flank = window_mask(signals.time_s, search.flank_span_s)
    data = signals.data[rows]
    n_trials = len(data)
    mean = landmarks(data.mean(axis=0, dtype=float)[:, flank], signals.time_s[flank], search)
    draws = _resampled_landmarks(data[..., flank], signals.time_s[flank], search, weights)
    times = percentile_interval(draws.time_s, level=level, n_trials=n_trials)
    onsets = percentile_interval(draws.onset_s, level=level, n_trials=n_trials)
    heights = percentile_interval(draws.amplitude, level=level, n_trials=n_trials)
    p = _found_p(data, signals.time_s, search, signs)
    snr = np.abs(mean.amplitude) / trial_noise(data, signals.time_s, search) * np.sqrt(n_trials)
    estimate = WaveEstimate(
        time_s=mean.time_s,
        time_lo_s=times.lo,
        time_hi_s=times.hi,
        onset_s=mean.onset_s,
        onset_lo_s=onsets.lo,
        onset_hi_s=onsets.hi,
        amplitude=mean.amplitude,
        amplitude_lo=heights.lo,
        amplitude_hi=heights.hi,
        found=times.defined,
        p=np.where(np.isfinite(mean.time_s), p, 1.0),
        snr=snr,
        note=("",) * len(p),
        n_trials=n_trials,
        time_draws_s=draws.time_s,
        onset_draws_s=draws.onset_s,
    )
    return _judged(estimate, onsets.defined, search)


def _resampled_landmarks(
    data: np.ndarray, time_s: np.ndarray, search: Search, weights: np.ndarray
) -> Landmarks:
    n_signals, n_times = data.shape[1:]
    block = max(1, _BLOCK_VALUES // (n_signals * n_times))
    flat = data.reshape(len(data), -1).astype(float)
    parts = [
        landmarks((weights[i : i + block] @ flat).reshape(-1, n_signals, n_times), time_s, search)
        for i in range(0, len(weights), block)
    ]
    return Landmarks(
        time_s=np.concatenate([part.time_s for part in parts]),
        amplitude=np.concatenate([part.amplitude for part in parts]),
        onset_s=np.concatenate([part.onset_s for part in parts]),
    )


def _found_p(data: np.ndarray, time_s: np.ndarray, search: Search, signs: np.ndarray) -> np.ndarray:
    wide = window_mask(time_s, search.prominence_span_s)
    n_trials, n_signals = data.shape[:2]
    n_times = int(np.count_nonzero(wide))
    flat = data[..., wide].reshape(n_trials, -1).astype(float)
    block = max(1, _BLOCK_VALUES // (n_signals * n_times))
    rises = np.concatenate(
        [
            prominence(
                (signs[i : i + block] @ flat).reshape(-1, n_signals, n_times), time_s[wide], search
            )
            for i in range(0, len(signs), block)
        ]
    )
    return exceedance_p(rises[0], rises[1:])


def trial_noise(data: np.ndarray, time_s: np.ndarray, search: Search) -> np.ndarray:
    """SD over trials inside the window, root mean square over its samples, (n_signals,)."""
    inside = window_mask(time_s, search.span_s)
    variance = data[..., inside].var(axis=0, ddof=1, dtype=float).mean(axis=-1)
    return np.sqrt(np.maximum(variance, np.finfo(float).tiny))


def _judged(estimate: WaveEstimate, onset_defined: np.ndarray, search: Search) -> WaveEstimate:
    """Add the notes, and empty what was not found."""
    notes = [
        _note(estimate, index, onset_defined[index], search) for index in range(len(estimate.p))
    ]
    lost = np.array([note.startswith("not found") for note in notes])
    no_onset = lost | (onset_defined < 0.5)
    emptied: dict[str, Any] = {
        name: np.where(no_onset if name.startswith("onset") else lost, np.nan, value)
        for name, value in ((name, getattr(estimate, name)) for name in _EMPTIED)
    }
    return replace(estimate, note=tuple(notes), **emptied)


def _note(estimate: WaveEstimate, index: int, onset_defined: float, search: Search) -> str:
    if not estimate.p[index] <= ALPHA:
        return f"not found (p = {estimate.p[index]:.2g})"
    reasons = []
    needed = MIN_SNR[ONSET_FRACTION[search.onset]]
    if estimate.snr[index] < needed:
        reasons.append(f"signal-to-noise ratio {estimate.snr[index]:.1f} below {needed:g}")
    width = estimate.time_hi_s[index] - estimate.time_lo_s[index]
    widest = min(_WIDEST_INTERVAL_S, (search.span_s[1] - search.span_s[0]) / 4)
    if width > widest:
        reasons.append(f"interval {width * 1000:.1f} ms wider than {widest * 1000:.1f} ms")
    if estimate.found[index] < _MIN_DEFINED:
        reasons.append(f"found in {estimate.found[index]:.0%} of resamples")
    note = "not reliable: " + "; ".join(reasons) if reasons else ""
    if onset_defined < 0.5:
        text = "no onset: the flank does not start below the fraction of the extremum"
        note = f"{note}; {text}" if note else text
    elif onset_defined < _MIN_DEFINED:
        text = f"onset found in {onset_defined:.0%} of resamples"
        note = f"{note}; {text}" if note else text
    return note
