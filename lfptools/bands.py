"""A band and a span in; whether the span can carry the band, and the tapers to measure it, out.

Everything that is estimated by frequency rests on the same two rules and the same tapers:
Slepian sequences with a time-bandwidth product of 2, three of them.
"""

from functools import lru_cache

import numpy as np
from scipy.fft import rfft, rfftfreq
from scipy.signal.windows import dpss

from lfptools.checks import read_only
from lfptools.choices import Span

#: Time-bandwidth product of the tapers and how many are used: 2 NW - 1.
TIME_BANDWIDTH = 2.0
N_TAPERS = 3
#: Cycles of a band's low edge that a span must hold.
MIN_CYCLES = 3.0


def why_not(band_hz: Span, span_s: Span, rate_hz: float) -> str:
    """Say in words why a span cannot carry a band, or nothing where it can.

    Parameters
    ----------
    band_hz : (float, float)
        Low and high edge in Hz.
    span_s : (float, float)
        First and last time in s.
    rate_hz : float
        Sampling rate of the field.
    """
    low_hz, high_hz = band_hz
    length_s = span_s[1] - span_s[0]
    cycles = length_s * low_hz
    half_width_hz = TIME_BANDWIDTH / length_s
    if cycles < MIN_CYCLES - 1e-9:
        return (
            f"span of {length_s * 1000:g} ms holds {cycles:.1f} cycles of {low_hz:g} Hz; "
            f"{MIN_CYCLES:g} are needed"
        )
    if half_width_hz > (high_hz - low_hz) / 2 + 1e-9:
        return (
            f"tapers over {length_s * 1000:g} ms reach {half_width_hz:.1f} Hz to either side, "
            f"more than half the band's width of {high_hz - low_hz:g} Hz"
        )
    if high_hz >= rate_hz / 2:
        return (
            f"band reaches {high_hz:g} Hz; the field at {rate_hz:g} Hz ends below {rate_hz / 2:g}"
        )
    return ""


@lru_cache(maxsize=64)
def slepian_tapers(n_times: int) -> np.ndarray:
    """Return the tapers, shape (n_tapers, n_times), each of unit energy.

    References
    ----------
    Slepian (1978), Bell Syst. Tech. J. 57:1371-1430; Thomson (1982), Proc. IEEE 70:1055-1096
    (the second from memory).
    """
    return read_only(dpss(n_times, TIME_BANDWIDTH, Kmax=N_TAPERS))


def coefficients(data: np.ndarray, *, rate_hz: float, band_hz: Span) -> np.ndarray:
    """Return the multitaper Fourier coefficients of a band.

    The sum over t of taper(t) x(t) exp(-2 pi i f t) at the frequencies of the discrete Fourier
    transform inside the band, edges included.

    Parameters
    ----------
    data : ndarray, shape (n_trials, n_times)
        The mean over time is taken off each trial.
    rate_hz : float
        Sampling rate.
    band_hz : (float, float)
        Low and high edge in Hz.

    Returns
    -------
    ndarray of complex, shape (n_trials, n_tapers, n_frequencies)
    """
    n_times = data.shape[1]
    centred = data - data.mean(axis=1, keepdims=True)
    frequency_hz = rfftfreq(n_times, 1 / rate_hz)
    inside = (frequency_hz >= band_hz[0] - 1e-9) & (frequency_hz <= band_hz[1] + 1e-9)
    return rfft(centred[:, None, :] * slepian_tapers(n_times), axis=-1)[..., inside]
