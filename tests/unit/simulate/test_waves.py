"""Profiles without net current, pulses, and the expected average against brute force."""

import numpy as np
import pytest
from scipy.signal import butter, sosfilt

from lfptools.simulate import Scenario, waves
from lfptools.simulate.scenario import Bump, Layered

SCENARIO = Scenario()
ALL_WAVES = [
    pytest.param(wave, id=f"{area.name}-{name}")
    for area in SCENARIO.areas
    for name, wave in area.waves.items()
]


def test_every_profile_has_its_greatest_sink_at_minus_one_and_no_net_current() -> None:
    cells_um = waves.cell_depth_um(SCENARIO)
    assert cells_um[0] == 5
    assert np.all(np.diff(cells_um) == 10)
    for area in SCENARIO.areas:
        for layered in (*(wave.profile for wave in area.waves.values()), *area.ongoing):
            density = waves.profile(layered, cells_um, SCENARIO)
            assert density.min() == pytest.approx(-1)
            assert density.sum() == pytest.approx(0, abs=1e-9)
            assert density.max() > 0.2


def test_there_is_no_current_outside_the_cortex() -> None:
    layered = Layered((Bump(100.0, 300.0),), (Bump(1700.0, 300.0),))
    outside = waves.profile(layered, np.array([-10.0, 1801.0]), SCENARIO)
    np.testing.assert_array_equal(outside, 0)


def test_the_late_sink_lies_elsewhere_and_reaches_layer_4() -> None:
    cells_um = waves.cell_depth_um(SCENARIO)
    for area in SCENARIO.areas:
        early, late = (
            waves.profile(wave.profile, cells_um, SCENARIO) for wave in area.waves.values()
        )
        assert abs(cells_um[early.argmin()] - area.layer4_um) <= 5
        assert abs(cells_um[late.argmin()] - area.layer4_um) >= 200
        at_layer4 = waves.profile(area.waves["late"].profile, np.array([area.layer4_um]), SCENARIO)
        assert at_layer4[0] < -0.5


@pytest.mark.parametrize("wave", ALL_WAVES)
def test_a_pulse_starts_rises_and_peaks_when_it_should(wave: waves.Wave) -> None:
    time_s = np.arange(-100, 600, 0.05) / 1000
    course = waves.pulse(wave, time_s)
    start_ms = wave.peak_ms - wave.rise_ms
    assert course.max() == pytest.approx(1)
    assert time_s[course.argmax()] * 1000 == pytest.approx(wave.peak_ms, abs=0.03)
    np.testing.assert_array_equal(course[time_s * 1000 < start_ms - 1e-9], 0)
    first_s, last_s = waves.pulse_span_s(wave)
    assert first_s * 1000 == pytest.approx(start_ms)
    assert course[time_s > last_s].max(initial=0.0) < 1e-9


def test_the_late_wave_is_12_to_16_ms_wide_at_half_height_to_each_side() -> None:
    time_s = np.arange(0, 400, 0.01) / 1000
    for area in SCENARIO.areas:
        above = time_s[waves.pulse(area.waves["late"], time_s) > 0.5]
        assert 12 < (above[-1] - above[0]) * 1000 / 2 < 16


def test_place_puts_each_shape_at_its_own_time_between_samples() -> None:
    series = waves.place(
        lambda time_s: 1 + time_s,
        (0.0, 0.25),
        at_s=np.array([0.05, 0.95]),
        weight=np.array([1.0, 2.0]),
        n_samples=10,
        rate_hz=10.0,
    )
    np.testing.assert_allclose(series, [0, 1.05, 1.15, 0, 0, 0, 0, 0, 0, 0])
    late = waves.place(
        np.ones_like,
        (0.0, 0.3),
        at_s=np.array([-0.1, 0.8]),
        weight=np.ones(2),
        n_samples=10,
        rate_hz=10.0,
    )
    np.testing.assert_array_equal(late, [1, 1, 0, 0, 0, 0, 0, 0, 1, 1])


@pytest.mark.parametrize("wave", ALL_WAVES[1:3])
def test_the_expected_average_equals_brute_force(wave: waves.Wave) -> None:
    expected = waves.expected_average(wave, SCENARIO, rng=np.random.default_rng(1))
    # Single trials one by one at the recording's rate, each with its own gain, shift and
    # place between two samples, each through the amplifier, averaged on a common grid.
    rng = np.random.default_rng(2)
    sos = butter(1, [0.5, 500], "bandpass", fs=2500, output="sos")
    time_s = np.arange(-0.1, 0.3, 1 / 2500)
    common_s = np.arange(0.0, 0.25, 1e-4)
    total = np.zeros(len(common_s))
    n_trials = 4000
    rise_s, start_s = wave.rise_ms / 1000, (wave.peak_ms - wave.rise_ms) / 1000
    for _ in range(n_trials):
        own_s = time_s + rng.uniform(0, 1 / 2500)
        since = np.maximum(own_s - start_s - wave.shift_sd_ms / 1000 * rng.normal(), 0) / rise_s
        trial = (1 + 0.2 * rng.normal()) * (since * np.exp(1 - since)) ** wave.sharpness
        total += np.interp(common_s, own_s, sosfilt(sos, trial))
    brute = total / n_trials
    got = np.interp(common_s, expected.time_s, expected.value)
    # 4000 trials: gain to 0.2 / sqrt(4000) = .3 %, the shift's mean to sd / 63.
    np.testing.assert_allclose(got, brute, atol=0.015)
    trough_ms = common_s[[got.argmax(), brute.argmax()]] * 1000
    assert abs(trough_ms[0] - trough_ms[1]) <= 5 * wave.shift_sd_ms / np.sqrt(n_trials) + 0.1


def test_the_amplifier_delays_the_expected_average() -> None:
    wave = SCENARIO.areas[0].waves["early"]
    expected = waves.expected_average(wave, SCENARIO, rng=np.random.default_rng(1))
    peak_ms = expected.time_s[expected.value.argmax()] * 1000
    assert wave.peak_ms < peak_ms < wave.peak_ms + 1


@pytest.mark.parametrize("shared", [0.0, 0.5, 1.0])
def test_draws_keep_their_sd_and_share_what_is_asked(shared: float) -> None:
    rng = np.random.default_rng(3)
    wave = SCENARIO.areas[0].waves["late"]
    common = rng.standard_normal((2, 20_000))
    one, other = (
        waves.draw_trials(wave, 20_000, gain_sd=0.2, rng=rng, shared=shared, common=common)
        for _ in range(2)
    )
    assert one.gain.mean() == pytest.approx(1, abs=0.01)
    assert one.gain.std() == pytest.approx(0.2, rel=0.03)
    assert one.shift_s.std() * 1000 == pytest.approx(4.0, rel=0.03)
    for field in ("gain", "shift_s"):
        both = np.corrcoef(getattr(one, field), getattr(other, field))[0, 1]
        assert both == pytest.approx(shared, abs=0.03)
