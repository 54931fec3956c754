"""Spike times and stimulus times in, the spikes and counts around each stimulus out.

Relative times are rounded to 1 us before they are compared with an edge: recorded times carry
fewer digits than that, and the difference of two of them more, so that an unrounded spike at
25 ms could fall on either side of the edge at 25 ms.
"""

from dataclasses import dataclass

import numpy as np

from lfptools.checks import positive, read_only, span
from lfptools.choices import Span
from lfptools.errors import InputError

US_PER_S = 1e6


@dataclass(frozen=True, slots=True, eq=False)
class SpikesAround:
    """The spikes of one unit inside one span around each stimulus."""

    trial: np.ndarray  # (n_spikes,) int, rising
    time_us: np.ndarray  # (n_spikes,) int, 0 at the stimulus, rising within each trial
    n_trials: int

    def __post_init__(self) -> None:
        object.__setattr__(self, "trial", read_only(self.trial))
        object.__setattr__(self, "time_us", read_only(self.time_us))

    def __len__(self) -> int:
        return len(self.trial)

    @property
    def time_s(self) -> np.ndarray:
        """Time of each spike in s, 0 at its stimulus, shape (n_spikes,)."""
        return self.time_us / US_PER_S


def microseconds(time_s: np.ndarray) -> np.ndarray:
    """Return times in whole us, as integers."""
    return np.rint(np.asarray(time_s, dtype=float) * US_PER_S).astype(np.int64)


def spikes_around(time_s: np.ndarray, stimulus_s: np.ndarray, *, span_s: Span) -> SpikesAround:
    """Return the spikes in the half-open span around each stimulus.

    A spike that lies in the spans of two stimuli counts for both.

    Parameters
    ----------
    time_s : ndarray, shape (n_spikes,)
        Spike times of one unit in s, rising.
    stimulus_s : ndarray, shape (n_trials,)
        Stimulus times on the same clock, in s.
    span_s : (float, float)
        First and last time in s, 0 at the stimulus.

    Raises
    ------
    InputError
        If the spike times do not rise, or the span does not.
    """
    _needs_rising(time_s)
    first_s, last_s = span("the span around the stimulus", span_s, "s")
    slack_s = 1 / US_PER_S
    start = np.searchsorted(time_s, stimulus_s + (first_s - slack_s))
    stop = np.searchsorted(time_s, stimulus_s + (last_s + slack_s))
    n_found = stop - start
    trial = np.repeat(np.arange(len(stimulus_s)), n_found)
    place = np.arange(n_found.sum()) + np.repeat(stop - np.cumsum(n_found), n_found)
    relative_us = microseconds(time_s[place] - stimulus_s[trial])
    first_us, last_us = microseconds(np.array([first_s, last_s]))
    inside = (relative_us >= first_us) & (relative_us < last_us)
    return SpikesAround(trial[inside], relative_us[inside], len(stimulus_s))


def bin_edges(window_ms: Span, bin_ms: float) -> np.ndarray:
    """Return the edges in s of all whole bins inside a window, one edge at 0.

    Raises
    ------
    InputError
        If the window holds no whole bin.
    """
    positive("bin_ms", bin_ms, "ms")
    first = int(np.ceil(window_ms[0] / bin_ms - 1e-9))
    last = int(np.floor(window_ms[1] / bin_ms + 1e-9))
    if last <= first:
        raise InputError(f"bin_ms is {bin_ms:g} ms; the window {list(window_ms)} ms holds no bin")
    return np.arange(first, last + 1) * bin_ms / 1000


def binned_counts(time_s: np.ndarray, stimulus_s: np.ndarray, *, edges_s: np.ndarray) -> np.ndarray:
    """Count the spikes around each stimulus in half-open bins.

    Parameters
    ----------
    time_s : ndarray, shape (n_spikes,)
        Spike times of one unit in s, rising.
    stimulus_s : ndarray, shape (n_trials,)
        Stimulus times in s on the same clock.
    edges_s : ndarray, shape (n_bins + 1,)
        Edges of the bins in s, 0 at the stimulus, rising.

    Returns
    -------
    ndarray of int, shape (n_trials, n_bins)

    Raises
    ------
    InputError
        If spike times or edges do not rise.
    """
    edges_us = microseconds(edges_s)
    if len(edges_us) < 2 or np.any(np.diff(edges_us) <= 0):
        raise InputError("edges_s must hold at least 2 times that rise by 1 us or more")
    found = spikes_around(time_s, stimulus_s, span_s=(edges_s[0], edges_s[-1]))
    n_bins = len(edges_us) - 1
    which = np.searchsorted(edges_us, found.time_us, side="right") - 1
    flat = np.bincount(found.trial * n_bins + which, minlength=found.n_trials * n_bins)
    return flat.reshape(found.n_trials, n_bins)


def _needs_rising(time_s: np.ndarray) -> None:
    falls = np.flatnonzero(~(np.diff(time_s) >= 0))
    if falls.size:
        at = int(falls[0])
        raise InputError(
            f"spike {at + 1} at {time_s[at + 1]:.6f} s follows one at {time_s[at]:.6f} s; "
            "spike times must be numbers that rise"
        )


def said(n_spikes: int) -> str:
    """Return a count in words: "1 spike", "12 spikes"."""
    return f"{n_spikes} spike" if n_spikes == 1 else f"{n_spikes} spikes"
