"""Sinks, the signal that stands for an area, and smoothing."""

import numpy as np
import pytest

from lfptools.csd import csd_operator, csd_signals
from lfptools.errors import InputError
from lfptools.evoked import SMOOTHING_GRID_MS, average, least_risk, smooth, smoothing_risk
from lfptools.layers import (
    candidates,
    chosen,
    grand_mean,
    layer_at,
    measure_sinks,
    strongest,
    usable_contacts,
)
from lfptools.model import Contacts, Signals, Trials
from lfptools.resample import bootstrap_weights, sign_flips
from lfptools.waves import Search

RATE = 1000.0
TIME = np.arange(-200, 300) / RATE
DEPTH = np.arange(12) * 100.0


def currents(noise=0.3, n_trials=60, sink_um=520.0, seed=1):
    """A sink at `sink_um` and 30 ms with a source 300 um above, in white noise."""
    rng = np.random.default_rng(seed)
    profile = -np.exp(-0.5 * ((DEPTH - sink_um) / 120) ** 2)
    profile += 0.5 * np.exp(-0.5 * ((DEPTH - sink_um + 300) / 120) ** 2)
    wave = np.exp(-0.5 * ((TIME - 0.030) / 0.006) ** 2)
    data = profile[:, None] * wave + noise * rng.normal(size=(n_trials, 12, len(TIME)))
    return Signals("S1", "csd", np.arange(12), DEPTH, data, TIME, RATE)


def sink(csd, extremum="trough", usable=None, n=499):
    rng = np.random.default_rng(2)
    n_trials = len(csd.data)
    (found,) = measure_sinks(
        smooth(csd, 0.002),
        np.ones(12, bool) if usable is None else usable,
        np.ones(n_trials, bool),
        (Search((0.01, 0.06), extremum, "half"),),
        weights=bootstrap_weights(n_trials, n, rng),
        signs=sign_flips(n_trials, n, rng),
        level=0.95,
    )
    return found


def test_the_planted_sink_is_found_in_depth_and_time():
    found = sink(currents())
    assert found.kind == "sink"
    assert found.p == pytest.approx(1 / 500)
    # The interval tells the noise of the trials; between contacts 100 um apart the depth is
    # read off a parabola, which is right to a fraction of their distance.
    assert found.depth_um == pytest.approx(520, abs=25)
    assert found.depth.lo < found.depth_um < found.depth.hi
    assert found.peak_s == pytest.approx(0.030, abs=0.001)
    assert found.peak.lo <= 0.030 <= found.peak.hi
    # Half height of a Gaussian of sd 6 ms: 30 - 6 x 1.17741 = 22.94 ms (closed form).
    assert found.onset_s == pytest.approx(0.02294, abs=0.001)
    assert found.density_ua_mm3 == pytest.approx(-1, abs=0.1)
    # Full width at half height of sd 120 um is 283 um; the source above narrows it.
    assert 200 <= found.extent_um <= 300


def test_the_source_lies_above_the_sink():
    found = sink(currents(), "peak")
    assert found.kind == "source"
    assert found.depth_um == pytest.approx(220, abs=60)
    assert found.density_ua_mm3 > 0


def test_a_contact_that_may_not_carry_the_sink_does_not():
    usable = np.ones(12, bool)
    usable[5] = False
    assert abs(sink(currents(noise=0.05), usable=usable).depth_um - 500) > 40


def test_noise_alone_gives_no_sink_in_most_sessions():
    # 60 noise sessions: binomial 99.9 % bound of .05 is 10.
    quiet = []
    for seed in range(60):
        rng = np.random.default_rng(seed)
        data = rng.normal(size=(20, 12, len(TIME)))
        quiet.append(sink(Signals("S1", "csd", np.arange(12), DEPTH, data, TIME, RATE), n=99).p)
    assert np.count_nonzero(np.array(quiet) <= 0.05) <= 10


def trials(bad=(), n_contacts=12):
    rng = np.random.default_rng(3)
    z = np.arange(n_contacts) * 100.0
    wave = np.exp(-0.5 * ((TIME - 0.030) / 0.006) ** 2)
    potential = -80 * np.exp(-0.5 * ((z - 500) / 200) ** 2)
    data = potential[:, None] * wave + 2 * rng.normal(size=(30, n_contacts, len(TIME)))
    marked = np.isin(np.arange(n_contacts), bad)
    why = tuple("listed" if each else "" for each in marked)
    return Trials(
        "S1", data.astype(np.float32), TIME, RATE, Contacts(np.arange(n_contacts), z, marked, why)
    )


ROWS = [np.ones(30, bool)]


def area_signal(cut, csd, kind):
    """The signal that stands for the area, with one window over the wave."""
    found = candidates(cut, csd, kind)
    return chosen(found, strongest(found, grand_mean(found.signals, ROWS), [(0.01, 0.06)]))


def test_an_area_is_represented_by_the_current_at_its_strongest_sink():
    cut = trials(bad=[8])
    csd = csd_signals(cut, csd_operator(cut.contacts, conductivity_s_m=0.3))
    found = area_signal(cut, csd, "csd")
    assert found.kind == "csd"
    assert found.unit == "uA/mm^3"
    assert found.depth_um.tolist() == [500.0]
    assert found.note == ""


def test_few_contacts_fall_back_to_the_potential_and_say_so():
    cut = trials(n_contacts=4)
    found = area_signal(cut, None, "csd")
    assert found.kind == "lfp"
    assert found.unit == "uV"
    assert found.note == "fewer than 5 good contacts; volume conduction not excluded"


def test_the_potential_on_request_carries_the_same_warning():
    found = area_signal(trials(), None, "lfp")
    assert found.depth_um.tolist() == [500.0]
    assert found.note == "volume conduction not excluded"


def test_bad_and_outermost_contacts_carry_no_sink():
    assert np.flatnonzero(~usable_contacts(trials(bad=[3]))).tolist() == [0, 3, 11]


def test_layers_are_half_open():
    layers = {"L23": (150, 400), "L4": (400, 600)}
    assert layer_at(400, layers) == "L4"
    assert layer_at(399.9, layers) == "L23"
    assert layer_at(100, layers) == ""


def course(noise, sd_s=0.006, n_trials=50, seed=1):
    rng = np.random.default_rng(seed)
    wave = -np.exp(-0.5 * ((TIME - 0.05) / sd_s) ** 2)
    data = wave + noise * rng.normal(size=(n_trials, 1, len(TIME)))
    return Signals("S1", "csd", np.array([5]), np.array([500.0]), data, TIME, RATE)


CONDITION = np.array(["single"] * 50)


def test_noisier_averages_are_smoothed_more():
    chosen = [
        least_risk([smoothing_risk(course(noise), CONDITION == "single")], (0.0, 0.1))
        for noise in (0.1, 1.0, 4.0)
    ]
    assert chosen == sorted(chosen)
    assert chosen[0] < chosen[2]
    assert all(round(each * 1000, 6) in SMOOTHING_GRID_MS for each in chosen)


def test_smoothing_hardly_moves_height_and_place_of_a_wave():
    # A plain Gaussian of sd 3 ms lowers a wave of sd 6 ms to .894 (closed form); with its
    # leading bias off it stays above .97.
    found = smooth(course(0.0), 0.003)
    mean = found.data[0, 0]
    assert -1.0 <= mean.min() <= -0.97
    assert found.time_s[np.argmin(mean)] == pytest.approx(0.05, abs=0.5 / found.rate_hz)


def test_smoothing_thins_out_samples_and_keeps_the_time():
    fine = np.arange(-0.2, 0.3, 1 / 5000)
    data = np.sin(2 * np.pi * 10 * fine)[None, None]
    found = smooth(Signals("S1", "lfp", np.array([0]), np.array([0.0]), data, fine, 5000.0), 0.002)
    assert found.rate_hz == 1000.0
    inner = slice(20, -20)
    np.testing.assert_allclose(
        found.data[0, 0, inner], np.sin(2 * np.pi * 10 * found.time_s[inner]), atol=1e-3
    )


def test_band_of_an_average_is_the_t_interval():
    found = average(course(1.0), CONDITION, "single", level=0.95)
    data = course(1.0).data[:, 0]
    half = 2.00957524 * data.std(axis=0, ddof=1) / np.sqrt(50)  # t of .975 at 49 degrees, table
    np.testing.assert_allclose(found.hi[0] - found.mean[0], half, rtol=1e-6)
    assert found.n_trials == 50


def test_an_average_needs_two_trials():
    with pytest.raises(InputError, match="condition 'pad' has 0 trials"):
        average(course(1.0), CONDITION, "pad", level=0.95)
