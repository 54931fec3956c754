"""Landmarks, prominence and what is said of a wave."""

import numpy as np
import pytest

from lfptools.errors import InputError
from lfptools.model import Signals
from lfptools.resample import bootstrap_weights, sign_flips
from lfptools.waves import Search, landmarks, measure, prominence

RATE = 1000.0
TIME = np.arange(-200, 300) / RATE
WINDOW = Search((0.1, 0.2), "trough", "half")


def bump(at_s=0.15, sd_s=0.02):
    return -np.exp(-0.5 * ((TIME - at_s) / sd_s) ** 2)


def signals(data):
    data = np.asarray(data)
    n = data.shape[1]
    return Signals("S1", "lfp", np.arange(n), np.arange(n) * 100.0, data, TIME, RATE)


def measured(data, search=WINDOW, seed=1, n=499):
    rng = np.random.default_rng(seed)
    rows = np.ones(len(data), dtype=bool)
    weights = bootstrap_weights(len(data), n, rng)
    signs = sign_flips(len(data), n, rng)
    return measure(signals(data), rows, search, weights=weights, signs=signs, level=0.95)


def test_trough_and_half_height_of_a_gaussian():
    # Closed form: mean .15, sd .02: 50 % of the peak at .15 - .02 sqrt(2 ln 2) = .12645.
    found = landmarks(bump()[None], TIME, WINDOW)
    assert found.time_s[0] == pytest.approx(0.15, abs=1e-9)
    assert found.amplitude[0] == pytest.approx(-1, abs=1e-9)
    assert found.onset_s[0] == pytest.approx(0.12645, abs=5e-6)


def test_half_height_of_a_triangle():
    # Closed form: centre .15, half-width .05: 50 % of the peak at .125.
    triangle = -np.maximum(0, 1 - np.abs(TIME - 0.15) / 0.05)
    assert landmarks(triangle[None], TIME, WINDOW).onset_s[0] == pytest.approx(0.125, abs=1e-4)


def test_a_trough_between_samples_is_refined():
    found = landmarks(bump(at_s=0.1503)[None], TIME, WINDOW)
    assert found.time_s[0] == pytest.approx(0.1503, abs=2e-5)


def test_a_peak_is_the_mirror_of_a_trough():
    up = landmarks(-bump()[None], TIME, Search((0.1, 0.2), "peak", "half"))
    down = landmarks(bump()[None], TIME, WINDOW)
    np.testing.assert_allclose(up.time_s, down.time_s)
    np.testing.assert_allclose(up.onset_s, down.onset_s)
    np.testing.assert_allclose(up.amplitude, -down.amplitude)


def test_no_local_extremum_gives_nothing():
    found = landmarks(np.linspace(0, 1, len(TIME))[None], TIME, WINDOW)
    assert np.isnan(found.time_s[0])
    assert np.isnan(found.onset_s[0])


def test_onset_is_undefined_where_the_flank_starts_high():
    found = landmarks(bump()[None] - 2, TIME, WINDOW)
    assert np.isfinite(found.time_s[0])
    assert np.isnan(found.onset_s[0])


def test_prominence_is_the_smaller_rise():
    curve = bump() + 0.5 * bump(at_s=0.15 + 0.035, sd_s=0.01)
    whole = prominence(np.stack([curve, bump()]), TIME, WINDOW)
    assert whole[1] == pytest.approx(1.0, abs=0.05)
    assert 0 < whole[0] <= whole[1] + 0.2


def test_a_ramp_has_no_prominence():
    assert prominence(np.linspace(0, 1, len(TIME))[None], TIME, WINDOW)[0] == 0


def test_a_planted_wave_is_found_with_an_interval_around_it():
    rng = np.random.default_rng(3)
    data = bump()[None, None] + 0.5 * rng.normal(size=(60, 2, len(TIME)))
    smooth = np.apply_along_axis(lambda x: np.convolve(x, np.ones(9) / 9, "same"), -1, data)
    found = measured(smooth)
    assert (found.p <= 0.01).all()
    assert (found.found == 1).all()
    assert (np.abs(found.time_s - 0.15) < 0.004).all()
    assert (found.time_lo_s < found.time_s).all()
    assert (found.time_s < found.time_hi_s).all()
    assert found.note == ("", "")


def test_noise_alone_is_not_found_and_is_left_empty():
    data = np.random.default_rng(5).normal(size=(40, 1, len(TIME)))
    found = measured(data)
    assert found.p[0] > 0.05
    assert found.note[0].startswith("not found (p = ")
    for name in ("time_s", "time_lo_s", "time_hi_s", "onset_s", "amplitude", "amplitude_lo"):
        assert np.isnan(getattr(found, name)[0])


def test_false_finds_in_noise_are_near_five_per_cent():
    # 400 noise signals; binomial 99.9 % bounds of .05 are .019 and .09.
    data = np.random.default_rng(7).normal(size=(30, 400, len(TIME)))
    share = np.mean(measured(data, n=199).p <= 0.05)
    assert 0.019 <= share <= 0.09


def test_a_weak_wave_is_not_reliable():
    rng = np.random.default_rng(11)
    noise = rng.normal(size=(40, 1, len(TIME) + 24)) @ _running_mean(len(TIME) + 24, 25)
    found = measured(0.4 * bump()[None, None] + noise / noise.std())
    assert found.p[0] <= 0.05
    assert found.note[0].startswith("not reliable: signal-to-noise ratio")
    assert np.isfinite(found.time_s[0])


def _running_mean(n, width):
    matrix = np.zeros((n, n - width + 1))
    for column in range(n - width + 1):
        matrix[column : column + width, column] = 1 / width
    return matrix


def test_a_window_without_samples_is_refused():
    data = np.zeros((10, 1, len(TIME)))
    with pytest.raises(InputError, match="fewer than 3 samples"):
        measured(data, Search((0.4, 0.5), "trough", "half"))


def test_an_unknown_landmark_is_refused():
    with pytest.raises(InputError, match="extremum is 'valley'"):
        Search((0.1, 0.2), "valley", "half")
    with pytest.raises(InputError, match="onset is 'tenth'"):
        Search((0.1, 0.2), "trough", "tenth")


@pytest.mark.parametrize("span_s", [(-0.15, -0.05), (-0.02, 0.05)])
def test_a_window_before_the_stimulus_is_measured_like_any_other(span_s):
    rng = np.random.default_rng(1)
    data = 3 * bump(at_s=sum(span_s) / 2, sd_s=0.008)[None, None]
    found = measured(data + rng.normal(size=(30, 1, len(TIME))), Search(span_s, "trough", "half"))
    assert found.p[0] <= 0.05
    assert found.time_s[0] == pytest.approx(sum(span_s) / 2, abs=0.012)
