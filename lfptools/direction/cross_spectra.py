"""Stretches in, multitaper Fourier coefficients and cross-spectra of each trial out.

The cross-spectrum of channels i and j is <X_i conj(X_j)>: its phase rises with frequency
where i leads j.
"""

from dataclasses import dataclass

import numpy as np
from scipy.signal.windows import dpss

#: Time-bandwidth product and number of tapers: the least that keeps low frequencies right.
TIME_BANDWIDTH = 2.0
N_TAPERS = 3


@dataclass(frozen=True, slots=True, eq=False)
class Coefficients:
    """Fourier coefficients, (n_trials, n_channels, n_tapers, n_frequencies)."""

    values: np.ndarray
    frequency_hz: np.ndarray


def half_bandwidth_hz(span_s: tuple[float, float]) -> float:
    """Half-bandwidth of the tapers over a span, Hz."""
    return TIME_BANDWIDTH / (span_s[1] - span_s[0])


def band_refusal(span_s: tuple[float, float], band_hz: tuple[float, float]) -> str:
    """Say why a band cannot be estimated over a span; an empty text where it can.

    The span must hold 3 cycles of the band's low edge, and the tapers' half-bandwidth must be
    at most half the band's width.
    """
    length = span_s[1] - span_s[0]
    cycles = length * band_hz[0]
    if cycles < 3 - 1e-9:
        return (
            f"the span of {length * 1000:.0f} ms holds {cycles:.2g} cycles of {band_hz[0]:g} Hz; "
            "3 are needed"
        )
    half_width = (band_hz[1] - band_hz[0]) / 2
    if half_bandwidth_hz(span_s) > half_width + 1e-9:
        return (
            f"the tapers' half-bandwidth of {half_bandwidth_hz(span_s):.3g} Hz exceeds half the "
            f"band's width, {half_width:.3g} Hz"
        )
    return ""


def coefficients(x: np.ndarray, rate_hz: float) -> Coefficients:
    """Return multitaper Fourier coefficients of zero-padded stretches.

    Parameters
    ----------
    x : ndarray, shape (n_trials, n_channels, n_samples)
        Zero-mean stretches.
    rate_hz : float
        Sampling rate.

    References
    ----------
    Thomson (1982), Proc. IEEE 70:1055-1096.
    """
    n_samples = x.shape[-1]
    tapers = dpss(n_samples, TIME_BANDWIDTH, N_TAPERS)
    n_fft = 2 * n_samples
    values = np.fft.rfft(x[:, :, None, :] * tapers, n_fft, axis=-1)
    return Coefficients(values=values, frequency_hz=np.fft.rfftfreq(n_fft, 1 / rate_hz))


def trial_spectra(found: Coefficients) -> np.ndarray:
    """Return each trial's cross-spectra (mean over tapers), (n_trials, 3, n_frequencies).

    In the order S_aa, S_bb, S_ab, for channels 0 (a) and 1 (b).
    """
    a, b = found.values[:, 0], found.values[:, 1]
    return np.stack([each.mean(axis=1) for each in (a * a.conj(), b * b.conj(), a * b.conj())], 1)
