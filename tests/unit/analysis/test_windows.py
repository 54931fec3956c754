"""Windows that are proposed where the session file names none."""

from itertools import pairwise

import numpy as np
import pytest

from lfptools.analysis.windows import _widened, propose_windows
from lfptools.model import Signals

RATE = 1000.0
TIME = np.arange(-200, 300) / RATE
CONDITION = np.array(["single"] * 50)


def signal(wave, noise=0.5):
    data = wave + noise * np.random.default_rng(1).normal(size=(50, 1, len(TIME)))
    return Signals("S1", "csd", np.array([5]), np.array([500.0]), data, TIME, RATE)


def bump(peak_s, sd_s, size=1.0):
    return size * np.exp(-0.5 * ((TIME - peak_s) / sd_s) ** 2)


def proposed(wave, noise=0.5, span_s=(0.0, 0.3)):
    return propose_windows([signal(wave, noise)], CONDITION, ["single"], span_s)


def test_windows_are_proposed_around_both_waves_and_marked():
    found = proposed(-bump(0.03, 0.006) - bump(0.15, 0.02, 0.7))
    assert [each.name for each in found] == ["wave 1", "wave 2"]
    assert found[0].span_ms[0] < 30 < found[0].span_ms[1] < 100
    assert found[1].span_ms[0] < 150 < found[1].span_ms[1]
    assert {each.chosen for each in found} == {"on these trials"}
    assert {each.extremum for each in found} == {"trough"}


def test_no_window_is_proposed_in_noise():
    assert proposed(np.zeros(len(TIME)), noise=1.0) == []


@pytest.mark.parametrize("second", [0.6, 1.0, 1.6])
def test_windows_of_overlapping_waves_meet_at_the_lowest_point_between_them(second):
    # The waves reach into one another: between them the course keeps more than a quarter of
    # the lower peak, so that neither window would end before the other wave.
    wave = bump(0.050, 0.012) + bump(0.095, 0.014, second)
    between = (TIME > 0.050) & (TIME < 0.095)
    assert wave[between].min() > 0.25 * min(1.0, second)
    first, last = (each.span_ms for each in proposed(-wave, noise=0.1))
    lowest_ms = 1000 * TIME[between][np.argmin(wave[between])]
    assert first[1] <= last[0]
    for edge in (first[1], last[0]):
        assert edge == pytest.approx(lowest_ms, abs=3)
    assert first[0] < 50 < first[1]
    assert last[0] < 95 < last[1]


def test_an_asymmetric_wave_is_one_window():
    # A quick rise and a slow fall with a shoulder: a local maximum, but hardly a rise.
    decay = np.where(TIME > 0.03, np.exp(-(TIME - 0.03) / 0.05), 0)
    wave = bump(0.03, 0.005) * (TIME <= 0.03) + decay + bump(0.075, 0.008, 0.35)
    part = wave[TIME > 0.05]
    assert np.any((part[1:-1] > part[:-2]) & (part[1:-1] > part[2:]))  # the shoulder is there
    (found,) = proposed(-wave, noise=0.1)
    assert found.span_ms[0] < 30 < 75 < found.span_ms[1]


@pytest.mark.parametrize(
    ("span", "bounds", "widened"),
    [
        ((50.0, 55.0), (0.0, 300.0), (48.0, 58.0)),
        ((50.0, 62.0), (0.0, 300.0), (50.0, 62.0)),
        ((1.0, 5.0), (0.0, 300.0), (0.0, 10.0)),
        ((296.0, 300.0), (0.0, 300.0), (290.0, 300.0)),
        ((50.0, 55.0), (49.0, 56.0), (49.0, 56.0)),
    ],
)
def test_widening_keeps_to_the_room_there_is(span, bounds, widened):
    assert _widened(*span, *bounds) == widened


def test_windows_close_to_one_another_keep_their_peaks():
    wave = bump(0.006, 0.001, 9.0) + bump(0.020, 0.001, 9.0) + bump(0.034, 0.001, 9.0)
    found = [each.span_ms for each in proposed(-wave, noise=0.05)]
    assert len(found) == 3
    assert all(a[1] <= b[0] for a, b in pairwise(found))
    assert found[0][0] >= 0
    for (first, last), peak_ms in zip(found, (6, 20, 34), strict=True):
        assert first < peak_ms < last


def test_windows_have_whole_milliseconds_inside_the_span():
    for peak_s in np.arange(0.02, 0.28, 0.013):
        for each in proposed(-bump(peak_s, 0.007), noise=0.2):
            assert all(edge == round(edge) for edge in each.span_ms)
            assert 0 <= each.span_ms[0] < each.span_ms[1] <= 300
            assert each.span_ms[1] - each.span_ms[0] >= 10
