"""Stretches of a pair in, p-values for a lead and for a lagged interaction out.

Under instantaneous mixing, references, common sources and unequal noise the lagged
cross-covariance is symmetric in the lag, so reversing a whole trial in time changes nothing in
distribution. Trials are reversed at random: the lead score of a trial then flips its sign.
"""

from dataclasses import dataclass

import numpy as np
from scipy.fft import irfft, next_fast_len, rfft
from scipy.ndimage import uniform_filter1d

from lfptools.direction.autoregression import (
    mean_products,
    residual_filters,
    residual_products,
    reversed_products,
    with_ridge,
)
from lfptools.direction.granger import pair_granger
from lfptools.direction.prepare import MEMORY_S, Stretch

RIDGE = 1e-3
#: Bins over which the spectra that scale the lagged interaction are smoothed.
_SMOOTH_BINS = 5


@dataclass(frozen=True, slots=True, eq=False)
class LeadTest:
    """Result of the time-reversal randomisation for one pair."""

    score: float  # positive where a leads
    p_lead: float
    p_lag: float
    sign_changes: bool  # net changes sign when time is reversed, and agrees with the score


def lead_scores(x: np.ndarray, order: int) -> np.ndarray:
    """Return the lead score of each trial, shape (n_trials,); positive where a leads.

    Its mean over trials equals, to first order, net Granger causality minus that of the
    time-reversed signals. The score tr[K (G_n - J G_n J)], K a sum of c w w' over residual
    filters w, is computed as energies of residuals: w' G_n w is that of the trial passed
    through w, and w' J G_n J w that of the trial passed through w with its lags reversed.

    Parameters
    ----------
    x : ndarray, shape (n_trials, 2, n_samples)
        Channels 0 (a) and 1 (b), zero-mean.
    order : int
        Autoregressive order.
    """
    mean = mean_products(x, order)
    backward = reversed_products(mean, 2)
    pooled = with_ridge((mean + backward) / 2, RIDGE)
    return _reversal_scores(x, pooled, pooled)


def lead_influence(x: np.ndarray, order: int) -> np.ndarray:
    """Return what each trial adds to net minus reversed net, shape (n_trials,).

    The derivative of the value with respect to the weight of a trial, up to a constant: like
    `lead_scores`, the filters taken from the products themselves and from the reversed ones,
    so that it also holds where the lead is strong. The SD over trials, over the root of their
    number, is the standard error (infinitesimal jackknife; the ridge, which is kept, is left
    out of the derivative). Not for the randomisation: reversing a trial changes its size.

    Parameters
    ----------
    x, order
        As in `lead_scores`.

    References
    ----------
    Efron and Tibshirani (1993), An Introduction to the Bootstrap, chapter 21 (from memory).
    """
    mean = mean_products(x, order)
    return _reversal_scores(
        x, with_ridge(mean, RIDGE), with_ridge(reversed_products(mean, 2), RIDGE)
    )


def _reversal_scores(x: np.ndarray, forward: np.ndarray, backward: np.ndarray) -> np.ndarray:
    """Return tr[K G_n - K' J G_n J] of each trial, K and K' from two matrices of products."""
    filters, factors = _net_kernel(forward)
    turned, turned_factors = _net_kernel(backward)
    energies = _energies(x, np.concatenate([filters, turned[..., ::-1]]))
    return energies @ np.concatenate([factors, -turned_factors])


def _net_kernel(products: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return filters w (4, 2, p + 1) and factors c (4,): K, the sum of c w w', is d net / d G."""
    filters, factors = [], []
    for target, sign in ((1, 1.0), (0, -1.0)):
        for given, part in (((target,), sign), ((0, 1), -sign)):
            w = residual_filters(products, 2, (target,), given)
            filters.append(w.reshape(2, -1))
            factors.append(part / residual_products(products, w)[0, 0])
    return np.array(filters), np.array(factors)


def _energies(x: np.ndarray, filters: np.ndarray) -> np.ndarray:
    """Return the energy of each trial behind each filter, (n_trials, n_filters).

    `filters` is (n_filters, n_channels, p + 1), lag 0 first; samples without a past of p others
    do not count.
    """
    n_samples, order = x.shape[-1], filters.shape[-1] - 1
    # Wrapped samples of the circular convolution fall on those without a past.
    n_fft = next_fast_len(n_samples, real=True)
    passed = np.einsum("nct,kct->nkt", rfft(x, n_fft), rfft(filters, n_fft), optimize=False)
    return np.square(irfft(passed, n_fft)[..., order:n_samples]).sum(axis=-1)


def lag_scores(stretch: Stretch) -> np.ndarray:
    """Return each trial's antisymmetric cross-covariance by lag, (n_trials, n_lags).

    c_n(f) = Im(X_n conj(Y_n)) / sqrt(S_xx S_yy - (Re S_xy)^2), one Hann taper, turned into lags
    up to 32 ms by a sine transform.
    """
    n_samples = stretch.x.shape[-1]
    n_fft = 2 * n_samples
    spectrum = np.fft.rfft(stretch.x * np.hanning(n_samples + 2)[1:-1], n_fft, axis=-1)
    x, y = spectrum[:, 0], spectrum[:, 1]
    cross = x * y.conj()
    s_xx, s_yy, s_xy = (
        uniform_filter1d(part, _SMOOTH_BINS, mode="nearest")
        for part in (
            (np.abs(x) ** 2).mean(axis=0),
            (np.abs(y) ** 2).mean(axis=0),
            cross.real.mean(axis=0),
        )
    )
    scale = np.sqrt(np.maximum(s_xx * s_yy - s_xy**2, 1e-12 * s_xx * s_yy))
    frequency = np.fft.rfftfreq(n_fft, 1 / stretch.rate_hz)
    lags = np.arange(1, max(2, round(MEMORY_S * stretch.rate_hz)) + 1)
    sines = np.sin(2 * np.pi * np.outer(frequency, lags) / stretch.rate_hz)
    return (cross.imag / scale) @ sines


def lead_test(stretch: Stretch, orders: tuple[int, ...], signs: np.ndarray) -> LeadTest:
    """Test a pair for a lead and for a lagged interaction of either direction.

    Parameters
    ----------
    stretch : Stretch
        Evoked response removed.
    orders : tuple of int
        Autoregressive orders whose scores are combined, rising.
    signs : ndarray, shape (n_flips + 1, n_trials)
        Random signs, the first row all +1.
    """
    score = np.zeros(len(stretch.x))
    for order in orders:
        part = lead_scores(stretch.x, order)
        score += part / np.linalg.norm(part)
    n_trials = len(score)
    rows = np.abs(signs @ score)
    # Random rows have a slightly smaller spread than the data's own: exact at few trials.
    rows[1:] *= np.sqrt(n_trials / (n_trials - 1))
    p_lead = _ranks(rows)[0]
    by_lag = lag_scores(stretch)
    lag_rows = (signs @ by_lag) / np.sqrt((by_lag**2).sum(axis=0))
    fisher = -np.log(
        [_ranks((lag_rows**2).sum(axis=1)), _ranks(np.abs(lag_rows).max(axis=1)), _ranks(rows)]
    ).sum(axis=0)
    mean = with_ridge(mean_products(stretch.x, orders[-1]), RIDGE)
    net = pair_granger(mean).net
    net_reversed = pair_granger(reversed_products(mean, 2)).net
    total = float(score.sum())
    changes = bool(net * net_reversed < 0 and net * total > 0)
    return LeadTest(
        score=total, p_lead=float(p_lead), p_lag=float(_ranks(fisher)[0]), sign_changes=changes
    )


def _ranks(rows: np.ndarray) -> np.ndarray:
    """Return for each row the share of rows that reach it, itself included: an exact p."""
    order = np.sort(rows)
    reached = len(rows) - np.searchsorted(order, rows * (1 - 1e-12), side="left")
    return reached / len(rows)
