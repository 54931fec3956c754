"""Lengths and stimulus times come in; 1/f activity and what is coupled in it goes out."""

import numpy as np
from scipy.fft import irfft, next_fast_len, rfftfreq

from lfptools.simulate.scenario import Link, Scenario
from lfptools.simulate.waves import place
from lfptools.units import s_from_ms


def pink(
    n_samples: int, *, rate_hz: float, corner_hz: float, rng: np.random.Generator
) -> np.ndarray:
    """Noise of unit variance whose power falls as 1/f above a corner and is flat below.

    Parameters
    ----------
    n_samples : int
        Length.
    rate_hz : float
        Sampling rate.
    corner_hz : float
        Where the fall begins.
    rng : np.random.Generator
        Source of amplitudes and phases.

    Returns
    -------
    np.ndarray, shape (n_samples,)
        Gaussian, stationary, mean 0 and variance 1 in expectation.
    """
    n_fast = next_fast_len(n_samples, real=True)
    freq_hz = rfftfreq(n_fast, 1 / rate_hz)
    amplitude = 1 / np.sqrt(np.maximum(freq_hz, corner_hz))
    amplitude[0] = 0.0
    # Each line stands for two of the full spectrum and has a real and an imaginary part.
    amplitude *= n_fast / (2 * np.sqrt(np.sum(amplitude**2)))
    normal = rng.standard_normal((2, len(freq_hz)))
    spectrum = amplitude * (normal[0] + 1j * normal[1])
    return irfft(spectrum, n_fast)[:n_samples]


def gate(link: Link, at_s: np.ndarray, n_samples: int, rate_hz: float) -> np.ndarray:
    """Where a link is on: 1 inside its span after each stimulus, 0 elsewhere."""
    span_s = (s_from_ms(link.gate_ms[0]), s_from_ms(link.gate_ms[1]))
    ones = np.ones(len(at_s))
    is_on = place(
        np.ones_like, span_s, at_s=at_s, weight=ones, n_samples=n_samples, rate_hz=rate_hz
    )
    return np.minimum(is_on, 1.0)


def couple(
    sources: dict[str, np.ndarray], scenario: Scenario, at_s: np.ndarray
) -> dict[str, np.ndarray]:
    """Add to each follower the leader's source of `delay_ms` earlier, while the link is on.

    Leaders send what they make themselves, not what they receive, so that no link opens a
    second way round.

    Parameters
    ----------
    sources : dict
        One series of unit variance an area, shape (n_samples,) each.
    scenario : Scenario
        Gives the links and their strength.
    at_s : np.ndarray, shape (n_events,)
        Stimulus times after the first sample, in s.

    Returns
    -------
    dict
        New series; areas that follow nobody keep theirs.
    """
    coupled = dict(sources)
    for link in scenario.links:
        sent = sources[link.leader]
        delay = round(s_from_ms(link.delay_ms) * scenario.rate_hz)
        received = np.concatenate([np.zeros(delay), sent[: len(sent) - delay]])
        is_on = gate(link, at_s, len(sent), scenario.rate_hz)
        coupled[link.follower] = coupled[link.follower] + scenario.coupling * is_on * received
    return coupled
