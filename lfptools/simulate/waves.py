"""A wave's settings come in; its depth profile, its course in time and its average go out.

Times within this module are in s after the stimulus. Profiles are current source densities
relative to the greatest sink, which is -1.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.signal import butter, fftconvolve, sosfilt

from lfptools.forward import forward_matrix
from lfptools.simulate.scenario import AreaScenario, Bump, Condition, Layered, Scenario, Wave
from lfptools.units import s_from_ms

#: Draws of gain and shift behind an expected average.
N_DRAWS = 10_000
#: A pulse is over after this many rise times (below 1e-9 of its peak for k = 4).
_RISES_LONG = 9.0


def cell_depth_um(scenario: Scenario) -> np.ndarray:
    """Centres of the source cells, from the surface down, shape (n_cells,), in um."""
    n_cells = round(scenario.cortex_um / scenario.step_um)
    return (np.arange(n_cells) + 0.5) * scenario.step_um


def profile(layered: Layered, depth_um: np.ndarray, scenario: Scenario) -> np.ndarray:
    """Return the current source density over depth, the greatest sink being -1.

    Parameters
    ----------
    layered : Layered
        Sinks and sources; the sources are scaled until the cells sum to 0.
    depth_um : np.ndarray, shape (n,)
        Depths, in um.
    scenario : Scenario
        Gives the grid of cells.

    Returns
    -------
    np.ndarray, shape (n,)
        Relative density, sinks negative.
    """
    cells_um = cell_depth_um(scenario)
    sinks, sources = _sum(layered.sinks, cells_um), _sum(layered.sources, cells_um)
    balance = sinks.sum() / sources.sum()
    deepest = np.max(sinks - balance * sources)
    inside = (depth_um >= 0) & (depth_um <= scenario.cortex_um)
    density = balance * _sum(layered.sources, depth_um) - _sum(layered.sinks, depth_um)
    return np.where(inside, density, 0.0) / deepest


def _sum(bumps: tuple[Bump, ...], depth_um: np.ndarray) -> np.ndarray:
    total = np.zeros(len(depth_um))
    for bump in bumps:
        total += bump.weight * np.exp(-0.5 * ((depth_um - bump.depth_um) / bump.sd_um) ** 2)
    return total


def pulse(wave: Wave, time_s: np.ndarray) -> np.ndarray:
    """Course of a wave: (t/rise)^k exp(k (1 - t/rise)) from its start, 0 before, 1 at its peak."""
    since = (time_s - s_from_ms(wave.peak_ms - wave.rise_ms)) / s_from_ms(wave.rise_ms)
    since = np.maximum(since, 0.0)
    return since**wave.sharpness * np.exp(wave.sharpness * (1 - since))


def pulse_span_s(wave: Wave) -> tuple[float, float]:
    """First and last time at which a wave without shift is not negligible, in s."""
    start_ms = wave.peak_ms - wave.rise_ms
    return s_from_ms(start_ms), s_from_ms(start_ms + _RISES_LONG * wave.rise_ms)


@dataclass(frozen=True, slots=True, eq=False)
class Draws:
    """Gain and shift of one wave of one area, one value a trial."""

    gain: np.ndarray
    shift_s: np.ndarray


def draw_trials(
    wave: Wave,
    n_trials: int,
    *,
    gain_sd: float,
    rng: np.random.Generator,
    shared: float = 0.0,
    common: np.ndarray | None = None,
) -> Draws:
    """Draw gains and shifts of single trials.

    Parameters
    ----------
    wave : Wave
        Gives the sd of the shift.
    n_trials : int
        How many.
    gain_sd : float
        SD of the gain, whose mean is 1.
    rng : np.random.Generator
        Source of the area's own part.
    shared : float
        Share of the variance that `common` carries, 0 to 1.
    common : np.ndarray, shape (2, n_trials)
        Standard normal numbers that all areas share.

    Returns
    -------
    Draws
        Normal in both, their sd that of the settings whatever is shared.
    """
    normal = np.sqrt(1 - shared) * rng.standard_normal((2, n_trials))
    if common is not None:
        normal += np.sqrt(shared) * common
    return Draws(1 + gain_sd * normal[0], s_from_ms(wave.shift_sd_ms) * normal[1])


def place(
    shape: Callable[[np.ndarray], np.ndarray],
    span_s: tuple[float, float],
    *,
    at_s: np.ndarray,
    weight: np.ndarray,
    n_samples: int,
    rate_hz: float,
) -> np.ndarray:
    """Add one shape to an empty series at each of many times, off the sample grid.

    Parameters
    ----------
    shape : callable
        Value of the shape at times in s relative to `at_s`.
    span_s : (first, last)
        Where the shape is not 0, in s relative to `at_s`.
    at_s : np.ndarray, shape (n,)
        Times after the first sample, in s.
    weight : np.ndarray, shape (n,)
        Factor of each.
    n_samples : int
        Length of the series.
    rate_hz : float
        Its sampling rate.

    Returns
    -------
    np.ndarray, shape (n_samples,)
    """
    series = np.zeros(n_samples)
    for time_s, factor in zip(at_s, weight, strict=True):
        first = max(int(np.ceil((time_s + span_s[0]) * rate_hz)), 0)
        last = min(int(np.ceil((time_s + span_s[1]) * rate_hz)), n_samples)
        series[first:last] += factor * shape(np.arange(first, last) / rate_hz - time_s)
    return series


def amplifier_sos(scenario: Scenario) -> np.ndarray:
    """Sections of the amplifier: a causal first-order band-pass at the recording's rate."""
    return butter(1, scenario.amplifier_hz, "bandpass", fs=scenario.rate_hz, output="sos")


@dataclass(frozen=True, slots=True, eq=False)
class Expected:
    """A wave as the average of very many noise-free trials shows it behind the amplifier."""

    time_s: np.ndarray  # (n_times,), 0 at the stimulus
    value: np.ndarray  # (n_times,), 1 would be the peak of a trial of gain 1


def expected_average(
    wave: Wave,
    scenario: Scenario,
    *,
    rng: np.random.Generator,
    span_s: tuple[float, float] = (-0.1, 0.4),
    per_sample: int = 4,
) -> Expected:
    """Average a wave over `N_DRAWS` draws of gain and shift and pass it through the amplifier.

    The average of shifted copies is one convolution with the gains laid out at their shifts.
    The amplifier works at the recording's rate, stimuli fall anywhere between two samples:
    each of the `per_sample` interleaved grids passes through it on its own.

    Parameters
    ----------
    wave : Wave
        The wave of one area.
    scenario : Scenario
        Gives gains, rate and amplifier.
    rng : np.random.Generator
        For the draws.
    span_s : (first, last)
        Span of the result, which begins before any trial does.
    per_sample : int
        Fine steps in one sample of the recording.

    Returns
    -------
    Expected
    """
    step_s = 1 / (scenario.rate_hz * per_sample)
    n_times = round((span_s[1] - span_s[0]) * scenario.rate_hz) * per_sample
    time_s = span_s[0] + step_s * np.arange(n_times)
    draws = draw_trials(wave, N_DRAWS, gain_sd=scenario.gain_sd, rng=rng)
    spread = _at_shifts(draws, step_s)
    average = fftconvolve(pulse(wave, time_s), spread, mode="same")
    filtered = sosfilt(amplifier_sos(scenario), average.reshape(-1, per_sample), axis=0)
    return Expected(time_s, filtered.reshape(-1))


def _at_shifts(draws: Draws, step_s: float) -> np.ndarray:
    """Gains laid out at their shifts, split between neighbours; odd length, 0 in the middle."""
    place_steps = draws.shift_s / step_s
    below = np.floor(place_steps).astype(int)
    upper_share = place_steps - below
    half = int(np.max(np.abs(below))) + 1
    spread = np.bincount(below + half, draws.gain * (1 - upper_share), 2 * half + 1)
    spread += np.bincount(below + half + 1, draws.gain * upper_share, 2 * half + 1)
    return spread / len(draws.gain)


def evoked_uv(
    area: AreaScenario, wave: str, condition: Condition, scenario: Scenario, depth_um: np.ndarray
) -> np.ndarray:
    """Potential at `depth_um` at the peak of a wave of gain 1, shape (n_depths,), in uV."""
    cells_um = cell_depth_um(scenario)
    lead = forward_matrix(
        depth_um,
        cells_um,
        radius_um=condition.radius_um,
        conductivity_s_m=scenario.conductivity_s_m,
        step_um=scenario.step_um,
    )
    return lead @ evoked_density(area, wave, condition, scenario, cells_um)


def evoked_density(
    area: AreaScenario, wave: str, condition: Condition, scenario: Scenario, depth_um: np.ndarray
) -> np.ndarray:
    """Density at `depth_um` at the peak of a wave of gain 1, shape (n_depths,), in uA/mm^3."""
    plan = area.waves[wave]
    return condition.strength * plan.density_ua_mm3 * profile(plan.profile, depth_um, scenario)
