"""Small scenarios: the default scene in a shorter session, and what is left without noise."""

from dataclasses import replace

import numpy as np
import pytest

from lfptools.simulate import Scenario, Simulated, simulate


def steady(scenario: Scenario) -> Scenario:
    """Return the scenario with every trial alike: no gain, no shift."""
    areas = tuple(
        replace(
            area,
            waves={name: replace(wave, shift_sd_ms=0.0) for name, wave in area.waves.items()},
        )
        for area in scenario.areas
    )
    return replace(scenario, areas=areas, gain_sd=0.0)


@pytest.fixture(scope="session")
def small() -> Scenario:
    return Scenario(n_trials=13)


@pytest.fixture(scope="session")
def noise_free() -> Scenario:
    return Scenario(
        n_trials=12,
        ongoing_density_ua_mm3=0.0,
        sensor_uv=0.0,
        reference_uv=0.0,
        artefact_share=0.0,
        dead=(),
        noisy=(),
    )


@pytest.fixture(scope="session")
def alike(noise_free: Scenario) -> Scenario:
    return steady(noise_free)


@pytest.fixture(scope="session")
def session(small: Scenario) -> Simulated:
    return simulate(small, rng=np.random.default_rng(7))
