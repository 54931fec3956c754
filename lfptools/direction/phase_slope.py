"""Cross-spectra of trials in, the phase slope of a band with its jackknife interval out."""

from dataclasses import dataclass

import numpy as np
from scipy.special import stdtr

from lfptools.resample import jackknife_interval


@dataclass(frozen=True, slots=True, eq=False)
class PhaseSlope:
    """Phase slope of one pair and band; positive where a leads."""

    value: float
    lo: float
    hi: float
    p: float


def slope_of(spectra: np.ndarray) -> np.ndarray:
    """Return Im sum_f conj(C(f)) C(f + df) from mean spectra (..., 3, n_frequencies).

    References
    ----------
    Nolte et al. (2008), Phys. Rev. Lett. 100:234101.
    """
    power = np.sqrt(spectra[..., 0, :].real * spectra[..., 1, :].real)
    coherency = spectra[..., 2, :] / power
    return (np.conj(coherency[..., :-1]) * coherency[..., 1:]).imag.sum(axis=-1)


def phase_slope(
    spectra: np.ndarray, frequency_hz: np.ndarray, band_hz: tuple[float, float], *, level: float
) -> PhaseSlope:
    """Return the phase slope over a band.

    Parameters
    ----------
    spectra : ndarray, shape (n_trials, 3, n_frequencies)
        S_aa, S_bb, S_ab of each trial.
    frequency_hz : ndarray, shape (n_frequencies,)
        Their frequencies.
    band_hz : (float, float)
        Band, both edges included.
    level : float
        Coverage of the jackknife interval over trials.
    """
    inside = (frequency_hz >= band_hz[0] - 1e-9) & (frequency_hz <= band_hz[1] + 1e-9)
    part = spectra[..., inside]
    n_trials = len(part)
    total = part.sum(axis=0)
    value = slope_of(total / n_trials)
    left_out = slope_of((total - part) / (n_trials - 1))
    lo, hi, error = jackknife_interval(value, left_out, level=level)
    p = 2 * stdtr(n_trials - 1, -abs(value) / error) if error > 0 else float("nan")
    return PhaseSlope(value=float(value), lo=float(lo), hi=float(hi), p=float(p))
