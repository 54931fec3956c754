"""Stretches in, multitaper Fourier coefficients and cross-spectra of each trial out.

The cross-spectrum of channels i and j is <X_i conj(X_j)>: its phase rises with frequency
where i leads j.
"""

from dataclasses import dataclass

import numpy as np

from lfptools.bands import slepian_tapers


@dataclass(frozen=True, slots=True, eq=False)
class Coefficients:
    """Fourier coefficients, (n_trials, n_channels, n_tapers, n_frequencies)."""

    values: np.ndarray
    frequency_hz: np.ndarray


def coefficients(x: np.ndarray, rate_hz: float) -> Coefficients:
    """Return multitaper Fourier coefficients of zero-padded stretches.

    Zero-padding to twice the length halves the step in frequency, so that a phase slope rests
    on more than a few differences.

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
    n_fft = 2 * x.shape[-1]
    values = np.fft.rfft(x[:, :, None, :] * slepian_tapers(x.shape[-1]), n_fft, axis=-1)
    return Coefficients(values=values, frequency_hz=np.fft.rfftfreq(n_fft, 1 / rate_hz))


def trial_spectra(found: Coefficients) -> np.ndarray:
    """Return each trial's cross-spectra (mean over tapers), (n_trials, 3, n_frequencies).

    In the order S_aa, S_bb, S_ab, for channels 0 (a) and 1 (b).
    """
    a, b = found.values[:, 0], found.values[:, 1]
    return np.stack([each.mean(axis=1) for each in (a * a.conj(), b * b.conj(), a * b.conj())], 1)
