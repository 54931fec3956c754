"""Signals of single trials in, averages with interval bands and smoothed signals out."""

from dataclasses import dataclass, replace

import numpy as np
from scipy.ndimage import correlate1d, gaussian_filter1d
from scipy.special import stdtrit

from lfptools.errors import InputError
from lfptools.model import Signals
from lfptools.trials import window_mask

#: Candidates for the SD of the Gaussian that smooths averages, ms.
SMOOTHING_GRID_MS = (0.0, 0.5, 1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0, 12.0, 14.0)


@dataclass(frozen=True, slots=True, eq=False)
class Average:
    """Mean over the trials of one condition with its pointwise interval."""

    area: str
    condition: str
    kind: str
    unit: str
    channel: np.ndarray  # (n_signals,)
    depth_um: np.ndarray  # (n_signals,)
    time_s: np.ndarray  # (n_times,)
    mean: np.ndarray  # (n_signals, n_times)
    lo: np.ndarray  # (n_signals, n_times)
    hi: np.ndarray  # (n_signals, n_times)
    n_trials: int
    level: float


def average(signals: Signals, condition: np.ndarray, name: str, *, level: float) -> Average:
    """Average the trials of condition `name` with a pointwise t interval.

    Parameters
    ----------
    signals : Signals
        data of shape (n_trials, n_signals, n_times).
    condition : ndarray of str, shape (n_trials,)
        Condition of each trial.
    name : str
        The condition to average.
    level : float
        Coverage of the band at each sample by itself.

    Raises
    ------
    InputError
        If the condition has fewer than 2 trials.
    """
    rows = condition == name
    n_trials = int(np.count_nonzero(rows))
    if n_trials < 2:
        raise InputError(f"condition {name!r} has {n_trials} trials; an average needs at least 2")
    data = signals.data[rows]
    mean = data.mean(axis=0, dtype=float)
    half = stdtrit(n_trials - 1, (1 + level) / 2) * data.std(axis=0, ddof=1, dtype=float)
    half = half / np.sqrt(n_trials)
    return Average(
        area=signals.area,
        condition=name,
        kind=signals.kind,
        unit=signals.unit,
        channel=signals.channel,
        depth_um=signals.depth_um,
        time_s=signals.time_s,
        mean=mean,
        lo=mean - half,
        hi=mean + half,
        n_trials=n_trials,
        level=level,
    )


def smooth(signals: Signals, sd_s: float, span_s: tuple[float, float] | None = None) -> Signals:
    """Smooth every trial (zero-phase) and thin out samples no longer needed.

    Smoothing is linear, so it is done once, before any resampling. At least 2 samples an SD
    and 1000 a second stay.

    A Gaussian flattens what is curved: to leading order it adds sd^2 / 2 times the second
    derivative, which moves troughs later and onsets earlier. That part is taken off, so that
    the intervals, which rest on the smoothed average, hold the unsmoothed landmark. (The
    kernel is the Gaussian of fourth order, phi(u) (3 - u^2) / 2; on the simulated sessions
    coverage of troughs and onsets rises from .92 and .84 to .94 and .94.)

    Parameters
    ----------
    signals : Signals
        data of shape (n_trials, n_signals, n_times).
    sd_s : float
        SD of the Gaussian in s; 0 leaves the samples as they are.
    span_s : (float, float), optional
        Keep only samples that lie in this span: the same samples with the same values, at
        less cost. By default all.
    """
    sd_samples = sd_s * signals.rate_hz
    step = max(1, int(min(signals.rate_hz // 1000, sd_samples // 2)))
    kept = np.arange(0, len(signals.time_s), step)
    if span_s is not None:
        kept = kept[window_mask(signals.time_s[kept], span_s)]
    data = signals.data[..., kept]
    if sd_samples > 0 and kept.size:
        kernel = _kernel(sd_samples)
        reach = len(kernel) // 2
        first = max(0, kept[0] - reach)
        part = signals.data[..., first : kept[-1] + reach + 1]
        data = correlate1d(part, kernel, axis=-1, mode="nearest")[..., kept - first]
    return replace(signals, data=data, time_s=signals.time_s[kept], rate_hz=signals.rate_hz / step)


def _kernel(sd_samples: float) -> np.ndarray:
    """Return the Gaussian less sd^2 / 2 times its second derivative, cut at 4 SD."""
    pulse = np.zeros(2 * int(4 * sd_samples + 0.5) + 1)
    pulse[len(pulse) // 2] = 1.0
    plain, curved = (
        gaussian_filter1d(pulse, sd_samples, order=order, mode="constant") for order in (0, 2)
    )
    return plain - 0.5 * sd_samples**2 * curved


@dataclass(frozen=True, slots=True, eq=False)
class SmoothingRisk:
    """What smoothing one average with each SD of the grid costs and what noise it leaves."""

    time_s: np.ndarray  # (n_times,)
    misfit: np.ndarray  # (n_sd, n_times) square of what the Gaussian takes off the average
    noise: np.ndarray  # (n_sd,) 2 tr(S Sigma) / N
    scale: float  # noise power of the average, unsmoothed


def least_risk(risks: list[SmoothingRisk], span_s: tuple[float, float]) -> float:
    """Choose one smoothing SD (s) for all averages that will be compared.

    Risks are divided by the noise power of their average and summed. Because the extremum of a
    smoothed average needs a little more than its mean square, the next larger SD of the grid
    is taken.

    Parameters
    ----------
    risks : list of SmoothingRisk
        One for each signal that stands for an area, and condition.
    span_s : (float, float)
        Where the waves are looked for.
    """
    total = np.zeros(len(SMOOTHING_GRID_MS))
    for each in risks:
        misfit = each.misfit[:, window_mask(each.time_s, span_s)].mean(axis=1)
        total += (misfit + each.noise) / each.scale
    best = int(np.argmin(total))
    return SMOOTHING_GRID_MS[min(best + 1, len(SMOOTHING_GRID_MS) - 1)] / 1000


def smoothing_risk(signals: Signals, rows: np.ndarray) -> SmoothingRisk:
    """Return the parts of the risk of smoothing an average that no window changes.

    The estimated risk of smoothing an average m of N trials with a plain Gaussian S is
    |m - S m|^2 + 2 tr(S Sigma) / N, with Sigma from the autocovariance of the trials'
    residuals, so that 1/f noise is not taken for signal.

    Parameters
    ----------
    signals : Signals
        One signal.
    rows : ndarray of bool, shape (n_trials,)
        Trials of one condition.
    """
    trials = signals.data[rows, 0].astype(float)
    n_trials = len(trials)
    mean = trials.mean(axis=0)
    covariance = _autocovariance(trials - mean) * n_trials / (n_trials - 1)
    lags = np.arange(len(covariance))
    misfit, noise = [], []
    for sd_ms in SMOOTHING_GRID_MS:
        sd = sd_ms / 1000 * signals.rate_hz
        smoothed = gaussian_filter1d(mean, sd, mode="nearest") if sd > 0 else mean
        kernel = np.exp(-0.5 * (lags / sd) ** 2) if sd > 0 else (lags == 0).astype(float)
        kernel = kernel / (2 * kernel.sum() - kernel[0])
        misfit.append((mean - smoothed) ** 2)
        noise.append(2 * (2 * kernel @ covariance - kernel[0] * covariance[0]) / n_trials)
    return SmoothingRisk(
        time_s=signals.time_s,
        misfit=np.array(misfit),
        noise=np.array(noise),
        scale=covariance[0] / n_trials,
    )


def _autocovariance(residuals: np.ndarray) -> np.ndarray:
    """Return the autocovariance over lags 0 .. n_times - 1, averaged over trials."""
    n_times = residuals.shape[1]
    spectrum = np.fft.rfft(residuals, 2 * n_times, axis=1)
    power = (np.abs(spectrum) ** 2).mean(axis=0)
    return np.fft.irfft(power)[:n_times] / n_times
