"""Rates, refractory time and locking of simulated units."""

import numpy as np
import pytest

from lfptools.simulate import Scenario, Simulated
from lfptools.simulate.scenario import UnitsScenario
from lfptools.simulate.spikes import Unit, after_refractory, band_phase, draw_units, fire, response

RATE_HZ = 2500.0
N_SAMPLES = round(400 * RATE_HZ)
TIME_S = np.arange(N_SAMPLES) / RATE_HZ
FIELD_UV = np.cos(2 * np.pi * 50 * TIME_S)


def _unit(locked: bool) -> Unit:
    return Unit("S1-1", "S1", 500.0, baseline_hz=20.0, locked=locked, preferred_rad=1.0)


def _fire(plan: UnitsScenario, locked: bool) -> np.ndarray:
    return fire(
        np.ones(N_SAMPLES),
        _unit(locked),
        plan,
        field_uv=FIELD_UV,
        rate_hz=RATE_HZ,
        rng=np.random.default_rng(4),
    )


def test_band_phase_of_a_cosine_is_its_phase() -> None:
    mixed = FIELD_UV + 3 * np.cos(2 * np.pi * 10 * TIME_S)
    phase = band_phase(mixed, (30.0, 90.0), RATE_HZ)
    off = np.angle(np.exp(1j * (phase - 2 * np.pi * 50 * TIME_S)))
    assert np.abs(off[2500:-2500]).max() < 0.01


@pytest.mark.parametrize(("locked", "expected"), [(True, 0.09), (False, 0.0)])
def test_pairwise_phase_consistency_is_a_quarter_of_m_squared(
    locked: bool, expected: float
) -> None:
    # Rate 1 + m cos(phase): PPC = (m/2)^2; PPC = (|sum e^(i phase)|^2 - N) / (N (N - 1)),
    # Vinck et al. 2010, NeuroImage 51:112-122.
    time_s = _fire(UnitsScenario(locking=0.6, refractory_ms=0.0), locked)
    phase = 2 * np.pi * 50 * time_s
    n = len(phase)
    resultant = np.exp(1j * phase).sum()
    ppc = (abs(resultant) ** 2 - n) / (n * (n - 1))
    assert ppc == pytest.approx(expected, abs=0.02 if locked else 0.001)
    if locked:
        assert np.angle(resultant) == pytest.approx(1.0, abs=0.1)


def test_the_rate_is_the_one_asked_for() -> None:
    time_s = _fire(UnitsScenario(refractory_ms=0.0), locked=False)
    assert len(time_s) == pytest.approx(20 * 400, abs=4 * np.sqrt(20 * 400))
    assert np.all(np.diff(time_s) > 0)


def test_spikes_are_dropped_that_come_too_soon_after_the_last_one_kept() -> None:
    kept = after_refractory(np.array([0.0, 0.0015, 0.0025, 0.004, 0.0046]), 0.002)
    np.testing.assert_array_equal(kept, [0.0, 0.0025, 0.0046])
    assert len(after_refractory(np.array([]), 0.002)) == 0


def test_no_unit_of_a_session_breaks_its_refractory_time(session: Simulated) -> None:
    for time_s in session.spikes.time_s:
        assert len(time_s) > 50
        assert np.diff(time_s).min() >= 0.002 - 1e-9


def test_the_response_rises_four_times_and_falls_to_a_third() -> None:
    scenario = Scenario()
    late = scenario.areas[2].waves["late"]
    early = np.zeros(5000)
    early[2500 + 60] = 1.0
    relative = response(early, late, scenario.units, at_s=np.array([1.0]), rate_hz=RATE_HZ)
    assert relative[2560] == pytest.approx(4)
    trough = round((1 + late.peak_ms / 1000) * RATE_HZ)
    assert relative[trough] == pytest.approx(0.3)
    below_half = np.flatnonzero(relative < 0.65) / RATE_HZ * 1000 - 1000
    assert 80 <= below_half[-1] - below_half[0] <= 100
    assert np.all(relative[:2500] == 1)
    assert np.all(relative[3200:] == 1)


def test_units_are_spread_and_half_of_them_locked() -> None:
    scenario = Scenario()
    units = draw_units("S1", scenario, rng=np.random.default_rng(3))
    depth_um = [unit.depth_um for unit in units]
    assert sum(unit.locked for unit in units) == 3
    assert all(8 <= unit.baseline_hz <= 15 for unit in units)
    assert depth_um == sorted(depth_um)
    assert depth_um[-1] - depth_um[0] > 1000
    assert len({unit.name for unit in units}) == 6


def test_rates_of_a_session_rise_early_and_fall_late() -> None:
    from lfptools.simulate import simulate

    quiet = Scenario(n_trials=60, units=UnitsScenario(n_units=1, n_locked=0))
    session = simulate(quiet, rng=np.random.default_rng(11))
    truth = {row["unit"]: row for row in session.truth["units"]}
    peaks = {area.name: [w.peak_ms / 1000 for w in area.waves.values()] for area in quiet.areas}
    n_events = len(session.events)
    for name, area, time_s in zip(
        session.spikes.unit, session.spikes.area, session.spikes.time_s, strict=True
    ):
        after_s = (time_s[None] - session.events.time_s[:, None]).ravel()
        early_s, late_s = peaks[area]

        def rate_hz(low_s: float, high_s: float, after_s: np.ndarray = after_s) -> float:
            return np.sum((after_s >= low_s) & (after_s < high_s)) / n_events / (high_s - low_s)

        base_hz = truth[name]["baseline_hz"]
        error_hz = np.sqrt(base_hz / (n_events * 0.5))
        assert rate_hz(-0.5, 0.0) == pytest.approx(base_hz, abs=4 * error_hz)
        assert rate_hz(early_s - 0.003, early_s + 0.003) > 2.5 * base_hz
        assert rate_hz(late_s - 0.025, late_s + 0.04) < 0.5 * base_hz
        assert truth[name]["calls"] == {"early": "rise", "late": "fall"}
