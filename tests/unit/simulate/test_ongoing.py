"""The spectrum of ongoing activity, and coupling inside its gate and nowhere else."""

import numpy as np
import pytest
from scipy.signal import welch

from lfptools.simulate import Scenario
from lfptools.simulate.ongoing import couple, gate, pink

RATE_HZ = 2500.0
AT_S = np.arange(2.0, 100.0, 1.2)
N_SAMPLES = round(102 * RATE_HZ)


def test_pink_noise_has_unit_variance_and_a_one_over_f_spectrum() -> None:
    series = pink(400_000, rate_hz=RATE_HZ, corner_hz=1.0, rng=np.random.default_rng(1))
    assert len(series) == 400_000
    assert series.std() == pytest.approx(1, rel=0.1)
    freq_hz, power = welch(series, RATE_HZ, nperseg=25_000)
    inside = (freq_hz >= 4) & (freq_hz <= 400)
    slope = np.polyfit(np.log(freq_hz[inside]), np.log(power[inside]), 1)[0]
    assert slope == pytest.approx(-1, abs=0.05)
    long_freq, long_power = welch(series, RATE_HZ, nperseg=100_000)
    flat = [long_power[(long_freq >= low) & (long_freq < low + 0.3)].mean() for low in (0.1, 0.6)]
    assert flat[0] / flat[1] == pytest.approx(1, abs=0.6)


def test_the_variance_is_one_in_expectation() -> None:
    rng = np.random.default_rng(2)
    square = [np.mean(pink(2000, rate_hz=250.0, corner_hz=5.0, rng=rng) ** 2) for _ in range(400)]
    assert np.mean(square) == pytest.approx(1, abs=4 * np.std(square) / 20)


def test_a_gate_is_on_inside_its_span_only() -> None:
    link = Scenario().links[1]
    is_on = gate(link, np.array([1.0001]), 4000, RATE_HZ)
    on_ms = np.flatnonzero(is_on) / RATE_HZ * 1000 - 1000.1
    assert 100 <= on_ms[0] < 100.4
    assert 219.6 <= on_ms[-1] < 220
    assert set(np.unique(is_on)) == {0.0, 1.0}


def test_overlapping_gates_do_not_add_up() -> None:
    is_on = gate(Scenario().links[0], np.array([1.0, 1.05]), 4000, RATE_HZ)
    assert is_on.max() == 1


def _lagged(leader: np.ndarray, follower: np.ndarray, chosen: np.ndarray) -> np.ndarray:
    """Correlation of follower with leader of 0 to 30 samples before, both differenced."""
    inside = np.flatnonzero(chosen[1:])
    inside = inside[inside > 30]
    steps = np.diff(leader), np.diff(follower)
    return np.array(
        [np.corrcoef(steps[0][inside - lag], steps[1][inside])[0, 1] for lag in range(31)]
    )


@pytest.fixture(scope="module")
def sources() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(5)
    return {
        name: pink(N_SAMPLES, rate_hz=RATE_HZ, corner_hz=1.0, rng=rng)
        for name in ("S1", "S2", "M1")
    }


@pytest.mark.parametrize("index", [0, 1])
def test_coupling_is_there_at_6_ms_inside_the_gate_and_absent_outside(
    sources: dict[str, np.ndarray], index: int
) -> None:
    scenario = Scenario()
    link = scenario.links[index]
    coupled = couple(sources, scenario, AT_S)
    is_on = gate(link, AT_S, N_SAMPLES, RATE_HZ) > 0
    inside = _lagged(sources[link.leader], coupled[link.follower], is_on)
    outside = _lagged(sources[link.leader], coupled[link.follower], ~is_on)
    noise = 5 / np.sqrt(is_on.sum())
    assert inside.argmax() == 15  # 6 ms at 2500 Hz
    assert inside[15] == pytest.approx(0.4 / np.sqrt(1 + 0.4**2), abs=noise)
    assert np.abs(outside).max() < noise
    # Nothing goes the other way meanwhile.
    back = _lagged(coupled[link.follower], sources[link.leader], is_on)
    assert np.abs(back).max() < noise


def test_the_uncoupled_area_is_untouched_and_zero_switches_off(
    sources: dict[str, np.ndarray],
) -> None:
    coupled = couple(sources, Scenario(), AT_S)
    np.testing.assert_array_equal(coupled["S2"], sources["S2"])
    off = couple(sources, Scenario(coupling=0.0), AT_S)
    for name, series in sources.items():
        np.testing.assert_array_equal(off[name], series)
