"""Lagged products in, Granger causality in time and by frequency out.

Geweke's measure: F(Y -> X) = ln of the residual variance of X given its own past over that
given the past of both. Natural logarithm, 0 where Y does not help.
"""

from dataclasses import dataclass

import numpy as np

from lfptools.direction.autoregression import (
    Model,
    residual_filters,
    residual_products,
    reversed_products,
)


@dataclass(frozen=True, slots=True, eq=False)
class OneWay:
    """Granger causality of a pair in both directions; net is positive where a leads."""

    a_to_b: np.ndarray
    b_to_a: np.ndarray

    @property
    def net(self) -> np.ndarray:
        """a_to_b minus b_to_a."""
        return self.a_to_b - self.b_to_a


def block_granger(
    products: np.ndarray,
    n_channels: int,
    *,
    source: tuple[int, ...],
    target: tuple[int, ...],
    given: tuple[int, ...] = (),
) -> np.ndarray:
    """Return F(source -> target | given) from lagged products (..., d, d), shape (...).

    References
    ----------
    Geweke (1982), J. Am. Stat. Assoc. 77:304-313.
    """
    own = target + given
    logs = []
    for past in (own, own + source):
        filters = residual_filters(products, n_channels, target, past)
        logs.append(np.linalg.slogdet(residual_products(products, filters))[1])
    return logs[0] - logs[1]


def pair_granger(products: np.ndarray) -> OneWay:
    """Return Granger causality between channels 0 (a) and 1 (b), products (..., d, d).

    One Cholesky factor of (past of both, now of both) holds both full models: its last two
    rows are what the past leaves unexplained. That of (own past, own now) holds the restricted
    one.

    Raises
    ------
    LinAlgError
        If the products are singular.
    """
    width = products.shape[-1] // 2
    past, now = np.arange(1, width), 0
    both = _factor(products, np.concatenate([past, width + past, [now, width + now]]))[
        ..., -2:, -2:
    ]
    own = [
        _factor(products, start + np.append(past, now))[..., -1, -1] ** 2 for start in (0, width)
    ]
    full = (both**2).sum(axis=-1)
    return OneWay(
        a_to_b=np.log(own[1] / full[..., 1]),
        b_to_a=np.log(own[0] / full[..., 0]),
    )


def _factor(products: np.ndarray, index: np.ndarray) -> np.ndarray:
    return np.linalg.cholesky(products[..., index[:, None], index[None, :]])


def over_reversed(forward: OneWay, backward: OneWay) -> OneWay:
    """Return each one-way value minus its value in reversed time.

    Instantaneous mixing, a common reference and unequal noise leave both alike and drop out.

    References
    ----------
    Haufe, Nikulin, Mueller and Nolte (2013), NeuroImage 64:120-133; Winkler et al. (2016),
    IEEE Trans. Signal Process. 64:2746-2760.
    """
    return OneWay(forward.a_to_b - backward.a_to_b, forward.b_to_a - backward.b_to_a)


def pair_contrast(products: np.ndarray) -> OneWay:
    """Return `over_reversed` of a pair from its products (..., d, d)."""
    return over_reversed(pair_granger(products), pair_granger(reversed_products(products, 2)))


def transfer(model: Model, frequency_hz: np.ndarray, rate_hz: float) -> np.ndarray:
    """Return the transfer function H(f), shape (..., n_frequencies, n_channels, n_channels)."""
    *stack, order, n_channels, _ = model.coefficients.shape
    phase = np.exp(-2j * np.pi * np.outer(frequency_hz, np.arange(1, order + 1)) / rate_hz)
    lag_sum = phase @ model.coefficients.reshape(*stack, order, n_channels**2)
    shape = (*stack, len(frequency_hz), n_channels, n_channels)
    return np.linalg.inv(np.eye(n_channels) - lag_sum.reshape(shape))


def granger_spectrum(model: Model, frequency_hz: np.ndarray, rate_hz: float) -> OneWay:
    """Return Geweke's Granger causality of a two-channel model by frequency.

    Parameters
    ----------
    model : Model
        Two channels: 0 is a, 1 is b.
    frequency_hz : ndarray, shape (n_frequencies,)
        Frequencies from 0 to rate_hz / 2.
    rate_hz : float
        Sampling rate.

    References
    ----------
    Geweke (1982), J. Am. Stat. Assoc. 77:304-313.
    """
    h = transfer(model, frequency_hz, rate_hz)
    noise = model.noise[..., None, :, :]
    spectrum = h @ noise @ np.conj(np.swapaxes(h, -1, -2))

    def into(target: int, source: int) -> np.ndarray:
        shared = noise[..., source, target] ** 2 / noise[..., target, target]
        partial = noise[..., source, source] - shared
        power = spectrum[..., target, target].real
        return np.log(power / (power - partial * np.abs(h[..., target, source]) ** 2))

    return OneWay(a_to_b=into(1, 0), b_to_a=into(0, 1))


def band_granger(model: Model, band_hz: tuple[float, float], rate_hz: float) -> OneWay:
    """Return the mean of a two-channel model's Granger spectrum over a band."""
    n_bins = max(8, int(np.ceil(band_hz[1] - band_hz[0])))
    spectrum = granger_spectrum(model, np.linspace(*band_hz, n_bins), rate_hz)
    return OneWay(a_to_b=spectrum.a_to_b.mean(-1), b_to_a=spectrum.b_to_a.mean(-1))
