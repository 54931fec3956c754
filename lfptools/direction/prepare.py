"""The signals of two areas in, comparable stretches at one rate out, evoked response removed."""

from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np
from scipy.interpolate import CubicSpline
from scipy.ndimage import gaussian_filter1d
from scipy.signal import resample_poly

from lfptools.errors import InputError
from lfptools.model import Signals

#: Rates at which direction is estimated: slow for long spans, fast for short ones.
LONG_SPAN_S = 0.250
LONG_SPAN_RATE_HZ = 250.0
SHORT_SPAN_RATE_HZ = 1000.0
#: The decimating filter reaches this many samples of the new rate to either side.
FILTER_REACH = 10
#: Longest memory of the autoregressive model, s.
MEMORY_S = 0.032
#: SD of the Gaussian that smooths the mean before gain and shift are projected out, s.
_BASIS_SD_S = 0.008


@dataclass(frozen=True, slots=True, eq=False)
class Stretch:
    """Both areas over one span: x of shape (n_trials, 2, n_samples) at one rate."""

    x: np.ndarray
    rate_hz: float


def rate_for(span_s: tuple[float, float], native_hz: list[float], asked_hz: float | None) -> float:
    """Return the common rate: the one asked for, else by the span's length.

    Raises
    ------
    InputError
        If the rate asked for is above that of one of the signals.
    """
    if asked_hz is not None:
        if asked_hz > min(native_hz):
            raise InputError(
                f"direction.rate_hz is {asked_hz:g} Hz; it must not exceed {min(native_hz):g} Hz, "
                "the lowest rate of the recorded signals"
            )
        return asked_hz
    long = span_s[1] - span_s[0] >= LONG_SPAN_S
    return min(LONG_SPAN_RATE_HZ if long else SHORT_SPAN_RATE_HZ, *native_hz)


def orders_for(n_samples: int, rate_hz: float, asked: int | None) -> tuple[int, ...]:
    """Return three autoregressive orders; the largest reaches at most a third of the span."""
    if asked is None and rate_hz == LONG_SPAN_RATE_HZ and n_samples >= 24:
        return (4, 6, 8)
    largest = min(round(MEMORY_S * rate_hz), n_samples // 3) if asked is None else asked
    return tuple(sorted({max(1, round(largest * share)) for share in (0.5, 0.75, 1.0)}))


def to_rate(signals: Signals, rate_hz: float) -> Signals:
    """Return the signal at `rate_hz`, on samples at whole multiples of 1 / rate_hz.

    A zero-phase FIR whose cut-off and length in s depend on `rate_hz` alone, so that all areas
    pass through the same filter whatever rate they were recorded at. The grid is the same for
    all areas too: what reaches both at once (a reference, a mixture) would look delayed if
    their samples stood a fraction of a millisecond apart, and a delay is taken for a lead.
    """
    aligned = _on_grid(signals, rate_hz)
    ratio = Fraction(rate_hz / signals.rate_hz).limit_denominator(10_000)
    slow = resample_poly(
        aligned.data.astype(float), ratio.numerator, ratio.denominator, axis=-1, padtype="line"
    )
    time_s = aligned.time_s[0] + np.arange(slow.shape[-1]) / rate_hz
    return replace(aligned, data=slow, time_s=time_s, rate_hz=rate_hz)


def _on_grid(signals: Signals, rate_hz: float) -> Signals:
    """Shift the signal, by less than a sample, to start at a whole multiple of 1 / rate_hz."""
    start = np.ceil(signals.time_s[0] * rate_hz - 1e-6) / rate_hz
    n_times = int((signals.time_s[-1] - start) * signals.rate_hz + 1e-6) + 1
    time_s = start + np.arange(n_times) / signals.rate_hz
    at = (start - signals.time_s[0]) * signals.rate_hz
    if abs(at - round(at)) < 1e-6:
        return replace(signals, data=signals.data[..., round(at) :][..., :n_times], time_s=time_s)
    spline = CubicSpline(signals.time_s, signals.data.astype(float), axis=-1)
    return replace(signals, data=spline(time_s), time_s=time_s)


def edge_s(rate_hz: float) -> float:
    """Time at either end of a trial that the decimating filter spoils, s."""
    return FILTER_REACH / rate_hz


def stretch(
    first: Signals,
    second: Signals,
    rows: np.ndarray,
    span_s: tuple[float, float],
    *,
    project: bool,
) -> Stretch:
    """Return both signals over the span, evoked response taken out.

    The mean over the trials is always removed. With `project`, trials are also projected off
    one common basis (constant, slope, both smoothed means and their slopes in time), which
    takes out single-trial gain and shift of the evoked response.

    Parameters
    ----------
    first, second : Signals
        One signal each, the same trials, at one rate (`to_rate`).
    rows : ndarray of bool, shape (n_trials,)
        Trials of one condition.
    span_s : (float, float)
        Half-open span.
    project : bool
        Whether gain and shift are projected out.
    """
    rate_hz = first.rate_hz
    n_samples = round((span_s[1] - span_s[0]) * rate_hz)
    parts, basis = [], [np.ones(n_samples), np.linspace(-1, 1, n_samples)]
    for signals in (first, second):
        start = round((span_s[0] - signals.time_s[0]) * rate_hz)  # one grid for all areas
        trials = signals.data[rows, 0]
        mean = trials.mean(axis=0)
        inside = slice(start, start + n_samples)
        smooth = gaussian_filter1d(mean, _BASIS_SD_S * rate_hz, mode="nearest")
        basis += [smooth[inside], np.gradient(smooth)[inside]]
        parts.append((trials - mean)[:, inside])
    x = np.stack(parts, axis=1)
    if project:
        scaled = [each / (np.linalg.norm(each) + np.finfo(float).tiny) for each in basis]
        q = _orthonormal(np.array(scaled))
        x = x - (x @ q.T) @ q
    else:
        x = x - x.mean(axis=-1, keepdims=True)
    return Stretch(x=x, rate_hz=rate_hz)


def _orthonormal(basis: np.ndarray) -> np.ndarray:
    """Return an orthonormal basis of the rows of `basis`, nearly dependent ones left out."""
    _, size, vectors = np.linalg.svd(basis, full_matrices=False)
    return vectors[size > 1e-6 * size[0]]
