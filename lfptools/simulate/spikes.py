"""Rates and phases come in; spike times of sorted units go out."""

from dataclasses import dataclass

import numpy as np
from scipy.fft import ifft, next_fast_len, rfft, rfftfreq

from lfptools.simulate.scenario import Scenario, UnitsScenario, Wave
from lfptools.simulate.waves import place
from lfptools.units import s_from_ms

#: Rise and fall of the window of lowered firing.
_EDGE_S = 0.010


@dataclass(frozen=True, slots=True, eq=False)
class Unit:
    """What a unit does; `preferred_rad` is the field phase at which a locked one fires most."""

    name: str
    area: str
    depth_um: float
    baseline_hz: float
    locked: bool
    preferred_rad: float


def draw_units(area: str, scenario: Scenario, *, rng: np.random.Generator) -> list[Unit]:
    """Draw the units of an area, spread over its array from the surface down."""
    plan = scenario.units
    deepest_um = scenario.contact_depth_um[-1]
    middle_um = (np.arange(plan.n_units) + 0.5) * deepest_um / max(plan.n_units, 1)
    depth_um = np.round(middle_um + rng.uniform(-0.2, 0.2, plan.n_units) * deepest_um / 6, -1)
    locked = rng.permutation(plan.n_units) < plan.n_locked
    baseline_hz = rng.uniform(*plan.baseline_hz, plan.n_units)
    preferred_rad = rng.uniform(-np.pi, np.pi, plan.n_units)
    return [
        Unit(
            name=f"{area}-{index + 1}",
            area=area,
            depth_um=float(depth_um[index]),
            baseline_hz=float(baseline_hz[index]),
            locked=bool(locked[index]),
            preferred_rad=float(preferred_rad[index]),
        )
        for index in range(plan.n_units)
    ]


def response(
    first_wave: np.ndarray,
    last: Wave,
    plan: UnitsScenario,
    *,
    at_s: np.ndarray,
    rate_hz: float,
) -> np.ndarray:
    """Rate relative to baseline: up with the first wave, down around the last one.

    Parameters
    ----------
    first_wave : np.ndarray, shape (n_samples,)
        Course of the area's first wave through the session, 1 at the peak of a trial of gain 1.
    last : Wave
        The area's last wave.
    plan : UnitsScenario
        How far up and down.
    at_s : np.ndarray, shape (n_events,)
        Stimulus times after the first sample, in s.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    np.ndarray, shape (n_samples,), not negative
    """
    first_s, last_s = (s_from_ms(last.peak_ms + edge_ms) for edge_ms in plan.fall_ms)

    def lowered(time_s: np.ndarray) -> np.ndarray:
        return np.clip(np.minimum(time_s - first_s, last_s - time_s) / _EDGE_S, 0.0, 1.0)

    silence = place(
        lowered,
        (first_s, last_s),
        at_s=at_s,
        weight=np.ones(len(at_s)),
        n_samples=len(first_wave),
        rate_hz=rate_hz,
    )
    factor = (1 + (plan.rise - 1) * first_wave) * (1 - (1 - plan.fall) * silence)
    return np.maximum(factor, 0.0)


def band_phase(field_uv: np.ndarray, band_hz: tuple[float, float], rate_hz: float) -> np.ndarray:
    """Phase of a band of a field: its spectrum cut to the positive side of the band.

    Parameters
    ----------
    field_uv : np.ndarray, shape (n_samples,)
        The field.
    band_hz : (low, high)
        The band.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    np.ndarray, shape (n_samples,)
        Phase in rad; 0 at the crest of the band's oscillation.
    """
    n_fast = next_fast_len(len(field_uv))
    freq_hz = rfftfreq(n_fast, 1 / rate_hz)
    inside = (freq_hz >= band_hz[0]) & (freq_hz < band_hz[1])
    one_sided = np.zeros(n_fast, dtype=complex)
    one_sided[: len(freq_hz)] = rfft(field_uv, n_fast) * inside
    return np.angle(ifft(one_sided)[: len(field_uv)])


def fire(
    relative_rate: np.ndarray,
    unit: Unit,
    plan: UnitsScenario,
    *,
    field_uv: np.ndarray,
    rate_hz: float,
    rng: np.random.Generator,
) -> np.ndarray:
    """Draw the spikes of a unit: Poisson in bins of one sample, then the refractory time.

    Parameters
    ----------
    relative_rate : np.ndarray, shape (n_samples,)
        Rate relative to baseline.
    unit : Unit
        Its baseline and its locking.
    plan : UnitsScenario
        Depth of locking, band, refractory time.
    field_uv : np.ndarray, shape (n_samples,)
        Ongoing field where the unit is.
    rate_hz : float
        Sampling rate.
    rng : np.random.Generator
        For the spikes.

    Returns
    -------
    np.ndarray, shape (n_spikes,)
        Rising times after the first sample, in s.
    """
    expected = relative_rate * (unit.baseline_hz / rate_hz)
    if unit.locked:
        phase = band_phase(field_uv, plan.band_hz, rate_hz)
        expected = expected * (1 + plan.locking * np.cos(phase - unit.preferred_rad))
    # At most one spike a bin: two would fall into one refractory time anyway.
    spiking = np.flatnonzero(rng.random(len(expected)) < -np.expm1(-expected))
    time_s = (spiking + rng.random(len(spiking))) / rate_hz
    return after_refractory(time_s, s_from_ms(plan.refractory_ms))


def after_refractory(time_s: np.ndarray, refractory_s: float) -> np.ndarray:
    """Drop every spike that comes too soon after the last one kept."""
    kept: list[float] = []
    for time in time_s.tolist():
        if not kept or time - kept[-1] >= refractory_s:
            kept.append(time)
    return np.array(kept)
