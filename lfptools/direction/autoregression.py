"""Stretches of two or more signals in, lagged products and prediction errors out.

The per-trial statistic is the matrix of lagged products G_n = sum_t z z' with
z = (x_t, x_{t-1} .. x_{t-p}, y_t .. y_{t-p}, ...), channel after channel. Its mean over trials,
whatever the weights, holds every autoregressive fit of order p; time reversal is a permutation
of its rows and columns.
"""

from dataclasses import dataclass

import numpy as np


def lagged_products(x: np.ndarray, order: int, *, intercept: bool = False) -> np.ndarray:
    """Return the lagged products of each trial.

    Parameters
    ----------
    x : ndarray, shape (n_trials, n_channels, n_samples)
        Zero-mean stretches.
    order : int
        Largest lag p, in samples.
    intercept : bool
        Take each lagged column's mean off within a trial, as an intercept would.

    Returns
    -------
    ndarray, shape (n_trials, d, d), d = n_channels (p + 1)
    """
    windows = np.lib.stride_tricks.sliding_window_view(x, order + 1, axis=-1)[..., ::-1]
    n_trials, n_channels, n_rows, _ = windows.shape
    z = windows.transpose(0, 2, 1, 3).reshape(n_trials, n_rows, n_channels * (order + 1))
    if intercept:
        z = z - z.mean(axis=1, keepdims=True)
    return z.transpose(0, 2, 1) @ z


def mean_products(x: np.ndarray, order: int) -> np.ndarray:
    """Return the mean over trials of the lagged products, (d, d), without those of each trial.

    The products of lags i + 1 and j + 1 are those of i and j, with one product more at the
    start of the stretch and one less at its end: only those of lag 0 are summed over samples.

    Parameters
    ----------
    x, order
        As in `lagged_products`.
    """
    n_trials, n_channels, n_samples = x.shape
    width = order + 1
    by_channel = np.ascontiguousarray(x.transpose(1, 0, 2))
    now = by_channel[..., order:].reshape(n_channels, -1)
    products = np.empty((n_channels, n_channels, width, width))  # [a, b, lag of a, lag of b]
    for lag in range(width):
        past = by_channel[..., order - lag : n_samples - lag].reshape(n_channels, -1)
        products[:, :, 0, lag] = now @ past.T
    products[:, :, :, 0] = products[:, :, 0].transpose(1, 0, 2)
    start = x[..., :order][..., ::-1].reshape(n_trials, -1)
    end = x[..., n_samples - order :][..., ::-1].reshape(n_trials, -1)
    step = (start.T @ start - end.T @ end).reshape(n_channels, order, n_channels, order)
    for lag in range(order):
        products[:, :, lag + 1, 1:] = products[:, :, lag, :-1] + step[:, lag]
    return products.transpose(0, 2, 1, 3).reshape(n_channels * width, -1) / n_trials


def reversal(n_channels: int, order: int) -> np.ndarray:
    """Return the index that turns lagged products into those of the time-reversed signals."""
    lags = np.arange(order + 1)[::-1]
    return np.concatenate([channel * (order + 1) + lags for channel in range(n_channels)])


def reversed_products(products: np.ndarray, n_channels: int) -> np.ndarray:
    """Return the lagged products of the signals reversed in time, shape as `products`."""
    index = reversal(n_channels, products.shape[-1] // n_channels - 1)
    return products[..., index[:, None], index[None, :]]


def with_ridge(products: np.ndarray, share: float) -> np.ndarray:
    """Add `share` of the diagonal to the diagonal: keeps low-passed data well conditioned."""
    diagonal = np.einsum("...ii->...i", products)
    return products + share * diagonal[..., None] * np.eye(products.shape[-1])


def residual_filters(
    products: np.ndarray, n_channels: int, targets: tuple[int, ...], given: tuple[int, ...]
) -> np.ndarray:
    """Return the filters that leave each target's residual after prediction.

    Parameters
    ----------
    products : ndarray, shape (..., d, d)
        Lagged products, d = n_channels (order + 1).
    n_channels : int
        Number of channels.
    targets : tuple of int
        Channels predicted.
    given : tuple of int
        Channels whose past predicts them.

    Returns
    -------
    ndarray, shape (..., n_targets, d)
        w = (1, -beta), laid out as z; the residual's products are w G w'.
    """
    width = products.shape[-1] // n_channels
    past = np.concatenate([channel * width + np.arange(1, width) for channel in given])
    now = np.array(targets) * width
    beta = np.linalg.solve(
        products[..., past[:, None], past[None, :]], products[..., past[:, None], now[None, :]]
    )
    filters = np.zeros((*products.shape[:-2], len(targets), products.shape[-1]))
    filters[..., np.arange(len(targets)), now] = 1.0
    filters[..., :, past] = -np.swapaxes(beta, -1, -2)
    return filters


def residual_products(products: np.ndarray, filters: np.ndarray) -> np.ndarray:
    """Return the products of the residuals, shape (..., n_targets, n_targets)."""
    return filters @ products @ np.swapaxes(filters, -1, -2)


@dataclass(frozen=True, slots=True, eq=False)
class Model:
    """A vector autoregression x_t = sum_k A_k x_{t-k} + e_t."""

    coefficients: np.ndarray  # (..., order, n_channels, n_channels)
    noise: np.ndarray  # (..., n_channels, n_channels) covariance of e


def fit_model(products: np.ndarray, n_channels: int, n_rows: float) -> Model:
    """Fit all channels on the past of all.

    Parameters
    ----------
    products : ndarray, shape (..., d, d)
        Lagged products summed over `n_rows` rows (or divided by the degrees of freedom wanted).
    n_channels : int
        Number of channels.
    n_rows : float
        Divisor of the residual products.
    """
    everything = tuple(range(n_channels))
    filters = residual_filters(products, n_channels, everything, everything)
    width = products.shape[-1] // n_channels
    by_lag = filters.reshape(*filters.shape[:-1], n_channels, width)[..., 1:]
    return Model(
        coefficients=-np.moveaxis(by_lag, -1, -3),
        noise=residual_products(products, filters) / n_rows,
    )
