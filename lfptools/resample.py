"""Weights over trials in, intervals and p-values out: the one resampling module of the tool.

Every estimate is a function of a mean over trials of something computed once per trial. A
resample is then a vector of weights over trials, a whole scheme is a matrix
(n_resamples, n_trials), and `weights @ statistics` yields all resampled means in one product.

    bootstrap    counts of trials drawn with replacement, / n
    jackknife    (1 - e_i) / (n - 1)
    sign flip    +-1 / n, the first row all +1
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr, ndtri, stdtrit
from scipy.stats import false_discovery_control

from lfptools.errors import InputError


@dataclass(frozen=True, slots=True, eq=False)
class Interval:
    """Lower and upper bound and the share of resamples in which the value was defined."""

    lo: np.ndarray
    hi: np.ndarray
    defined: np.ndarray


def bootstrap_weights(n_trials: int, n_draws: int, rng: np.random.Generator) -> np.ndarray:
    """Return bootstrap weights, shape (n_draws, n_trials); each row sums to 1.

    Raises
    ------
    InputError
        If there is no trial.

    References
    ----------
    Efron and Tibshirani (1993), An Introduction to the Bootstrap.
    """
    _needs_trials(n_trials, 1)
    drawn = rng.integers(n_trials, size=(n_draws, n_trials))
    drawn += n_trials * np.arange(n_draws)[:, None]
    counts = np.bincount(drawn.ravel(), minlength=n_draws * n_trials)
    return counts.reshape(n_draws, n_trials) / n_trials


def jackknife_weights(n_trials: int) -> np.ndarray:
    """Return leave-one-out weights, shape (n_trials, n_trials); row i leaves trial i out.

    Raises
    ------
    InputError
        If there are fewer than 2 trials.
    """
    _needs_trials(n_trials, 2)
    return (1.0 - np.eye(n_trials)) / (n_trials - 1)


def sign_flips(n_trials: int, n_draws: int, rng: np.random.Generator) -> np.ndarray:
    """Return signs of +-1, shape (n_draws + 1, n_trials); the first row is the data's own.

    Raises
    ------
    InputError
        If there is no trial.
    """
    _needs_trials(n_trials, 1)
    signs = 1.0 - 2.0 * rng.integers(2, size=(n_draws + 1, n_trials))
    signs[0] = 1.0
    return signs


def percentile_interval(draws: np.ndarray, *, level: float, n_trials: int) -> Interval:
    """Return the expanded percentile interval over the first axis of `draws`.

    The tail is alpha'/2 = Phi(-sqrt(N/(N-1)) t_{N-1}), which widens the plain percentile
    interval by the factor that makes it right for the mean of few trials.

    Parameters
    ----------
    draws : ndarray, shape (n_draws, ...)
        Resampled estimates; NaN where the estimate was not defined.
    level : float
        Coverage, for instance .95.
    n_trials : int
        Trials behind each estimate.

    Raises
    ------
    InputError
        If there are fewer than 2 trials.

    References
    ----------
    Hesterberg (2015), What teachers should know about the bootstrap, Am. Stat. 69:371-386
    (the expansion; value from memory).
    """
    _needs_trials(n_trials, 2)
    t = stdtrit(n_trials - 1, (1 + level) / 2)
    tail = ndtr(-np.sqrt(n_trials / (n_trials - 1)) * t)
    known = np.isfinite(draws)
    defined = known.mean(axis=0)
    filled = np.where(known | (defined > 0), draws, 0.0)
    quantile = np.quantile if known.all() else np.nanquantile
    lo, hi = quantile(filled, [tail, 1 - tail], axis=0)
    none = defined == 0
    return Interval(np.where(none, np.nan, lo), np.where(none, np.nan, hi), defined)


def jackknife_interval(
    estimate: np.ndarray, left_out: np.ndarray, *, level: float
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the jackknife t interval (lo, hi) and the standard error of `estimate`.

    Parameters
    ----------
    estimate : ndarray, shape (...)
        Value from all trials.
    left_out : ndarray, shape (n_trials, ...)
        Value without each trial.
    level : float
        Coverage.

    Raises
    ------
    InputError
        If there are fewer than 2 trials.
    """
    n_trials = len(left_out)
    _needs_trials(n_trials, 2)
    spread = left_out - left_out.mean(axis=0)
    error = np.sqrt((n_trials - 1) / n_trials * (spread**2).sum(axis=0))
    half = stdtrit(n_trials - 1, (1 + level) / 2) * error
    return estimate - half, estimate + half, error


def exceedance_p(observed: np.ndarray, null: np.ndarray) -> np.ndarray:
    """Return p = (1 + #{null >= observed}) / (n + 1) over the first axis of `null`; never 0."""
    reached = null >= np.asarray(observed) - 1e-12 * np.abs(observed)
    return (1 + reached.sum(axis=0)) / (len(null) + 1)


def zero_p(estimate: float, draws: np.ndarray) -> float:
    """Return a p-value for "the difference is 0" from its bootstrap draws, or NaN.

    The larger of the percentile p and that of the difference over its robust SD: either alone
    is too small where the draws are skewed or few trials are far out.
    """
    draws = draws[np.isfinite(draws)]
    if not np.isfinite(estimate) or draws.size < 2:
        return float("nan")
    beyond = min(np.count_nonzero(draws <= 0), np.count_nonzero(draws >= 0))
    percentile = min(1.0, 2 * (1 + beyond) / (draws.size + 1))
    robust_sd = np.subtract(*np.quantile(draws, [0.75, 0.25])) / (2 * ndtri(0.75))
    if robust_sd == 0:
        return percentile
    return float(max(percentile, 2 * ndtr(-abs(estimate) / robust_sd)))


def false_discovery_rate(p: np.ndarray) -> np.ndarray:
    """Return Benjamini-Hochberg q-values of `p`; NaN stays NaN and does not count.

    References
    ----------
    Benjamini and Hochberg (1995), J. R. Stat. Soc. B 57:289-300.
    """
    p = np.asarray(p, dtype=float)
    q = np.full(p.shape, np.nan)
    known = np.isfinite(p)
    if known.any():
        q[known] = false_discovery_control(p[known], method="bh")
    return q


def _needs_trials(n_trials: int, needed: int) -> None:
    if n_trials < needed:
        raise InputError(f"{n_trials} trials; resampling needs at least {needed}")
