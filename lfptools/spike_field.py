"""Phase vectors or Fourier coefficients of spikes and field in, measures of their relation out.

Nothing here knows of units, areas or windows. `pairs[i, j]` is what the spikes of trial i give
with the field of trial j: its diagonal is the data, and a shuffle of trials picks one entry
from each row.
"""

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from scipy.signal import fftconvolve

from lfptools import resample
from lfptools.checks import read_only
from lfptools.choices import Span

#: Half-length of the Gabor kernel in its sd in time.
KERNEL_SD = 3.0


@dataclass(frozen=True, slots=True, eq=False)
class Shuffles:
    """How the trials of one condition are drawn, the same for all that is measured on them."""

    permutations: np.ndarray  # (n_shuffles, n_trials)
    weights: np.ndarray  # (n_draws, n_trials) bootstrap
    level: float  # coverage of the intervals

    def __post_init__(self) -> None:
        object.__setattr__(self, "permutations", read_only(self.permutations))
        object.__setattr__(self, "weights", read_only(self.weights))


def draw_shuffles(
    n_trials: int, *, n_shuffles: int, n_draws: int, level: float, rng: np.random.Generator
) -> Shuffles:
    """Draw permutations and bootstrap weights of `n_trials` trials.

    All permutations are equally likely, so one may leave a trial with its own field (one does
    on average): shuffles and the data's own order are then exchangeable and the level of p is
    exact, which it would not be if such permutations were left out.

    Raises
    ------
    InputError
        If there is no trial.
    """
    order = np.tile(np.arange(n_trials), (n_shuffles, 1))
    weights = resample.bootstrap_weights(n_trials, n_draws, rng)
    return Shuffles(rng.permuted(order, axis=1), weights, level)


def kernel_sd_s(band_hz: Span) -> float:
    """Return the sd in time of a band's Gabor kernel, in s.

    Its sd in frequency is a quarter of the band's width, so that the edges lie 2 sd from the
    centre and pass 14 % of the amplitude; in time it is 1 / (2 pi sd_hz).
    """
    return 1 / (2 * np.pi * (band_hz[1] - band_hz[0]) / 4)


def kernel_reach(rate_hz: float, band_hz: Span) -> int:
    """Return how many samples a band's Gabor kernel reaches to either side."""
    return int(np.ceil(KERNEL_SD * kernel_sd_s(band_hz) * rate_hz))


def phase_vectors(data_uv: np.ndarray, *, rate_hz: float, band_hz: Span) -> np.ndarray:
    """Return the phase of the field in a band as complex numbers of length 1.

    The field is convolved with a complex Gabor kernel, exp(-t^2 / (2 sd^2) + 2 pi i f t) with f
    the centre of the band and sd that of `kernel_sd_s`, cut at 3 sd. The angle is 0 at a
    positive peak and pi at a trough. Beyond the ends of the data the field counts as 0; where
    the field is flat the value is 0.

    Parameters
    ----------
    data_uv : ndarray, shape (n_trials, n_times)
        The field.
    rate_hz : float
        Its sampling rate.
    band_hz : (float, float)
        Low and high edge in Hz.

    Returns
    -------
    ndarray of complex, shape (n_trials, n_times)
    """
    sd_s = kernel_sd_s(band_hz)
    reach = kernel_reach(rate_hz, band_hz)
    time_s = np.arange(-reach, reach + 1) / rate_hz
    turns = 1j * np.pi * (band_hz[0] + band_hz[1]) * time_s
    kernel = np.exp(-0.5 * (time_s / sd_s) ** 2 + turns)
    # The full length, cut by hand: "same" would keep the length of a kernel longer than the data.
    full = fftconvolve(data_uv, kernel[None, :], mode="full", axes=1)
    passed = full[:, reach : reach + data_uv.shape[1]]
    size = np.abs(passed)
    return np.divide(passed, size, out=np.zeros_like(passed), where=size > 0)


def pairwise_phase_consistency(resultant: np.ndarray, n_spikes: np.ndarray | int) -> np.ndarray:
    """Return (|sum of the phase vectors|^2 - N) / (N (N - 1)); NaN below 2 spikes.

    The mean over all pairs of spikes of the cosine of their phase difference: 1 for one phase,
    0 on average for none, not biased by the number of spikes.

    Parameters
    ----------
    resultant : ndarray of complex, shape (...)
        Sum of the spikes' phase vectors, each of length 1.
    n_spikes : int or ndarray, shape (...)
        Number of spikes N.

    References
    ----------
    Vinck et al. (2010), NeuroImage 51:112-122.
    """
    pairs = np.asarray(n_spikes * (n_spikes - 1.0))
    value = np.abs(resultant) ** 2 - n_spikes
    return np.divide(value, pairs, out=np.full(np.shape(value), np.nan), where=pairs > 0)


def shuffled_sums(pairs: Iterable[np.ndarray], permutations: np.ndarray) -> np.ndarray:
    """Return the sum over trials i of pairs[i][permutation[i]] for each permutation.

    Parameters
    ----------
    pairs : iterable of n_trials ndarrays, shape (n_trials, ...)
        What the spikes of trial i give with the field of each trial; made one at a time, they
        never stand in memory together.
    permutations : ndarray of int, shape (n_shuffles, n_trials)
        Which field each trial's spikes are paired with.

    Returns
    -------
    ndarray, shape (n_shuffles, ...)
    """
    partners = np.ascontiguousarray(permutations.T)
    # A loop over trials, not shuffles: each row stays in cache while all shuffles pick from it.
    return sum(row.take(each, axis=0) for row, each in zip(pairs, partners, strict=True))


def phase_estimates(
    pairs: np.ndarray, per_trial: np.ndarray, shuffles: Shuffles
) -> dict[str, float]:
    """Return value, intervals and null from the sums of phase vectors of all pairs of trials.

    The interval of the value leaves out one trial at a time; a bootstrap would repeat trials
    and pair a spike with itself. That of the phase is a bootstrap around the mean direction;
    its bounds are not wrapped, so that lo <= phase <= hi. p is one-sided against the shuffles.

    Parameters
    ----------
    pairs : ndarray of complex, shape (n_trials, n_trials)
        Sum of the phase vectors of field j at the spikes of trial i.
    per_trial : ndarray of int, shape (n_trials,)
        Spikes of each trial.
    shuffles : Shuffles
        How the trials are drawn.
    """
    n_spikes, own = per_trial.sum(), np.diagonal(pairs)
    resultant = own.sum()
    value = pairwise_phase_consistency(resultant, n_spikes)
    left_out = pairwise_phase_consistency(resultant - own, n_spikes - per_trial)
    lo, hi, _ = resample.jackknife_interval(value, left_out, level=shuffles.level)
    null = pairwise_phase_consistency(shuffled_sums(pairs, shuffles.permutations), n_spikes)
    turned = np.angle(shuffles.weights @ own * np.conj(resultant), deg=True)
    turn = resample.percentile_interval(turned, level=shuffles.level, n_trials=len(per_trial))
    phase_deg = float(np.angle(resultant, deg=True))
    return {
        "value": float(value),
        "lo": float(lo),
        "hi": float(hi),
        "null": float(null.mean()),
        "p": float(resample.exceedance_p(value, null)),
        "phase_deg": phase_deg,
        "phase_lo_deg": phase_deg + float(turn.lo),
        "phase_hi_deg": phase_deg + float(turn.hi),
    }


def band_coherence(cross: np.ndarray, power_a: np.ndarray, power_b: np.ndarray) -> np.ndarray:
    """Return magnitude-squared coherence averaged over the last axis, the band's frequencies.

    NaN where either power is 0.

    Parameters
    ----------
    cross : ndarray of complex, shape (..., n_frequencies)
        Sum over trials and tapers of a's conjugate times b.
    power_a, power_b : ndarray, shape (..., n_frequencies)
        The same sums of the squared magnitudes.
    """
    power = power_a * power_b
    shape = np.broadcast_shapes(cross.shape, power.shape)
    squared = np.divide(np.abs(cross) ** 2, power, out=np.full(shape, np.nan), where=power > 0)
    return squared.mean(axis=-1)


def coherence_estimates(
    unit: np.ndarray, field: np.ndarray, shuffles: Shuffles
) -> dict[str, float]:
    """Return value, interval and null of the coherence from multitaper coefficients.

    The jackknife works on atanh of the coherence's magnitude, whose spread does not depend on
    its size. Both powers are sums over trials, which no shuffle changes. p is one-sided
    against the shuffles.

    Parameters
    ----------
    unit, field : ndarray of complex, shape (n_trials, n_tapers, n_frequencies)
        Fourier coefficients of the spike train and of the field.
    shuffles : Shuffles
        How the trials are drawn.

    References
    ----------
    Jarvis and Mitra (2001), Neural Comput. 13:717-749.
    """
    own = np.einsum("ikf,ikf->if", unit.conj(), field)
    powers = [(np.abs(each) ** 2).sum(axis=1) for each in (unit, field)]
    cross, unit_power, field_power = (each.sum(axis=0) for each in (own, *powers))
    value = band_coherence(cross, unit_power, field_power)
    left_out = band_coherence(cross - own, unit_power - powers[0], field_power - powers[1])
    lo, hi, _ = resample.jackknife_interval(_atanh(value), _atanh(left_out), level=shuffles.level)
    pairs = ((of_trial.conj() * field).sum(axis=1) for of_trial in unit)
    null = band_coherence(shuffled_sums(pairs, shuffles.permutations), unit_power, field_power)
    return {
        "value": float(value),
        "lo": float(np.tanh(np.maximum(lo, 0.0)) ** 2),
        "hi": float(np.tanh(hi) ** 2),
        "null": float(null.mean()),
        "p": float(resample.exceedance_p(value, null)),
    }


def _atanh(squared: np.ndarray) -> np.ndarray:
    """Return atanh of the magnitude behind a squared coherence, kept finite at 1."""
    return np.arctanh(np.minimum(np.sqrt(squared), 1 - 1e-12))
