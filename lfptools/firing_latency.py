"""Pooled counts around the stimulus in, the time at which firing departs from its baseline out."""

from math import log

import numpy as np
from scipy.stats import poisson

from lfptools.choices import Span
from lfptools.errors import InputError
from lfptools.trials import window_mask

#: Levels of the Poisson criterion: of the first two bins, and of the third.
STRONG_P, WEAK_P = 0.01, 0.05


def critical_counts(baseline: np.ndarray, *, p: float, rise: bool) -> np.ndarray:
    """Return the count whose Poisson tail falls below `p`.

    Parameters
    ----------
    baseline : ndarray, shape (...)
        Expected count, above 0.
    p : float
        Level; the tail is below it.
    rise : bool
        True: the least count with P(X >= count) < p. False: the greatest with
        P(X <= count) < p, or -1 where even a count of 0 is not that rare.

    Returns
    -------
    ndarray, shape (...)
    """
    # A few dozen baselines recur over thousands of resamples.
    known, where = np.unique(baseline, return_inverse=True)
    critical = poisson.isf(p, known) + 1 if rise else poisson.ppf(p, known) - 1
    return critical[where].reshape(np.shape(baseline))


def poisson_latency(
    counts: np.ndarray,
    baseline: np.ndarray,
    left_edge_s: np.ndarray,
    *,
    span_s: Span,
    rise: bool,
) -> np.ndarray:
    """Return the left edge of the first bin that is beyond a Poisson baseline, in s.

    The first bin has p < .01, the next p < .01 and the one after p < .05: the upper tail for a
    rise, the lower for a fall. It is looked for inside the span; the two bins that confirm it
    may lie beyond its end.

    Parameters
    ----------
    counts : ndarray, shape (..., n_bins)
        Spikes in each bin, all trials together; the first axes hold resamples.
    baseline : ndarray, shape (...)
        Mean count of a bin before the stimulus, all trials together.
    left_edge_s : ndarray, shape (n_bins,)
        Left edges of the bins in s.
    span_s : (float, float)
        Where the first bin's left edge must lie, in s, half-open.
    rise : bool
        Look for more (True) or fewer spikes than before.

    Returns
    -------
    ndarray, shape (...)
        In s; NaN where no bin fulfils the criterion or the baseline is 0.

    Raises
    ------
    InputError
        If the number of bins and of edges differ.

    References
    ----------
    Maunsell and Gibson (1992), J. Neurophysiol. 68:1332-1344.
    """
    if counts.shape[-1] != len(left_edge_s):
        raise InputError(
            f"{counts.shape[-1]} bins and {len(left_edge_s)} left edges; needed: equal"
        )
    baseline = np.asarray(baseline, dtype=float)
    expected = np.where(baseline > 0, baseline, 1.0)

    def beyond(p: float) -> np.ndarray:
        critical = critical_counts(expected, p=p, rise=rise)[..., None]
        return counts >= critical if rise else counts <= critical

    strong, weak = beyond(STRONG_P), beyond(WEAK_P)
    hit = strong[..., :-2] & strong[..., 1:-1] & weak[..., 2:]
    hit &= window_mask(left_edge_s[:-2], span_s) & (baseline > 0)[..., None]
    if not hit.shape[-1]:
        return np.full(baseline.shape, np.nan)
    return np.where(hit.any(axis=-1), left_edge_s[hit.argmax(axis=-1)], np.nan)


def why_no_latency(baseline: float, bin_ms: float, *, rise: bool) -> str:
    """Say why the Poisson criterion cannot be computed, or nothing.

    Parameters
    ----------
    baseline : float
        Mean count of a bin before the stimulus, all trials together.
    bin_ms : float
        Width of a bin.
    rise : bool
        Whether more (True) or fewer spikes than before are looked for.
    """
    if baseline == 0:
        return "latency not computed: no spike in the baseline"
    if not rise and baseline <= -log(STRONG_P):  # even an empty bin has p >= .01
        return (
            f"latency not computed: the baseline holds {baseline:.3g} spikes in a bin of "
            f"{bin_ms:g} ms over all trials; a fall needs {-log(STRONG_P):.3g}"
        )
    return ""
