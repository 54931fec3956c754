"""Cutting trials, streaming averages, finding bad contacts and bad trials."""

import msgspec
import numpy as np
import pytest

from lfptools import clean
from lfptools.choices import AnalysisChoices
from lfptools.errors import InputError
from lfptools.model import Area, Contacts, Events, Recording, Run, Session
from lfptools.trials import (
    BY_HAND,
    OUTSIDE,
    cut_trials,
    sample_span,
    stream_average,
    survey,
    windows_of,
)

RATE = 1000.0
CHOICES = msgspec.convert(
    {"trials": {"window_ms": [-100, 200], "baseline_ms": [-100, 0]}}, AnalysisChoices
)


def recording(data, runs=None, rate=RATE, start_s=0.0):
    """A recording over an array (n_samples, n_channels) of uV, gain 1."""
    n = data.shape[1]
    return Recording(
        source="s1",
        clock="rig",
        rate_hz=rate,
        channel_names=tuple(map(str, range(n))),
        runs=runs or (Run(0, len(data), start_s),),
        gain_uv=np.ones(n),
        offset_uv=np.zeros(n),
        fetch=lambda first, last, channels: data[first:last, channels],
    )


def contacts(n):
    return Contacts(np.arange(n), np.arange(n) * 100.0, np.zeros(n, bool), ("",) * n)


def session(data, times, condition=None, dropped=None, runs=None):
    events = Events(
        np.asarray(times, float), tuple(condition or ["single"] * len(times)), dropped=dropped
    )
    area = Area("S1", recording(data, runs), contacts(data.shape[1]))
    return Session("whisk", (area,), events, CHOICES)


def noise(n_samples, n_channels=6, seed=1):
    rng = np.random.default_rng(seed)
    return rng.normal(size=(n_samples, n_channels)) + 3 * rng.normal(size=(n_samples, 1))


TIMES = 1.0 + np.arange(20) * 0.5


def test_half_open_windows_on_the_sample_grid():
    assert sample_span((0.005, 0.040), 1000.0) == (5, 40)
    assert sample_span((0.005, 0.040), 1250.0) == (7, 50)
    assert sample_span((-0.2, 0.3), 2500.0) == (-500, 750)


def test_cut_trials_hold_the_samples_around_each_stimulus():
    data = noise(12_000)
    cut = cut_trials(session(data, TIMES))
    trials = cut.areas[0]
    assert trials.data_uv.shape == (20, 6, 300)
    raw = data[900:1200].T
    np.testing.assert_allclose(
        trials.data_uv[0], raw - raw[:, :100].mean(axis=1, keepdims=True), atol=1e-5
    )
    np.testing.assert_allclose(trials.time_s[[0, 100]], [-0.1, 0.0], atol=1e-12)


def test_the_time_axis_carries_the_mean_distance_to_the_sample_grid():
    # Stimuli .4 ms after a sample of a 1 kHz recording: the sample stands .4 ms early.
    cut = cut_trials(session(noise(12_000), TIMES + 0.0004))
    np.testing.assert_allclose(cut.areas[0].time_s[100], -0.0004, atol=1e-9)


def test_a_trial_across_a_gap_is_rejected_with_the_reason():
    data = noise(12_000)
    runs = (Run(0, 5000, 0.0), Run(5000, 7000, 7.0))
    cut = cut_trials(session(data, [*np.arange(1, 4.5, 0.3), 4.95, 6.0, *np.arange(8, 12, 0.4)],
                             runs=runs))  # fmt: skip
    assert cut.table.rejected_by_reason() == {OUTSIDE: 2}
    rejected = cut.table.time_s[~cut.table.accepted]
    np.testing.assert_allclose(rejected, [4.95, 6.0])


def test_samples_after_a_gap_are_found_by_their_time():
    data = np.zeros((10_000, 1))
    data[6000] = 1.0  # 1000 samples into the second run, which starts at 20 s
    rec = recording(data, (Run(0, 5000, 0.0), Run(5000, 5000, 20.0)))
    _, offset, window = next(windows_of(rec, np.array([0]), np.array([21.0]), (-0.01, 0.01)))
    assert np.argmax(window[0]) == 10
    assert offset == 0


def test_trials_left_out_by_hand_say_so():
    dropped = np.zeros(20, dtype=bool)
    dropped[[3, 7]] = True
    cut = cut_trials(session(noise(12_000), TIMES, dropped=dropped))
    assert cut.table.rejected_by_reason() == {BY_HAND: 2}
    assert len(cut.areas[0].data_uv) == 18


def test_an_artefact_is_rejected_by_amplitude():
    data = noise(12_000)
    data[int(TIMES[4] * RATE) + 50] += 500.0
    cut = cut_trials(session(data, TIMES))
    assert cut.table.rejected_by_reason() == {"amplitude in S1": 1}
    assert not cut.table.accepted[4]


def test_no_condition_with_enough_trials_is_an_error_that_counts():
    with pytest.raises(InputError, match=r"accepted: single: 5; rejected: .*: 2"):
        cut_trials(session(noise(4_000), [1.0, 1.5, 2.0, 2.5, 3.0, 3.95, 8.0]))


def test_dead_and_noisy_contacts_are_marked_with_their_noise():
    data = noise(12_000, n_channels=12)
    data[:, 4] *= 0.001
    data[:, 9] += 30 * np.random.default_rng(2).normal(size=len(data))
    found = cut_trials(session(data, TIMES)).areas[0].contacts
    assert np.flatnonzero(found.bad).tolist() == [4, 9]
    assert found.why[4].startswith("dead: steps of")
    assert found.why[9].startswith("noisy: ")


def test_healthy_contacts_are_not_marked():
    marked = 0
    for seed in range(20):
        found = cut_trials(session(noise(12_000, 16, seed), TIMES)).areas[0].contacts
        marked += np.count_nonzero(found.bad)
    assert marked == 0


def test_a_contact_listed_as_bad_keeps_its_reason():
    listed = contacts(3).mark(1, "listed in the session file")
    step = np.array([[1.0, 0.001, 1.0]])
    found = clean.find_bad_contacts(listed, step, step, factor=4)
    assert found.why[1] == "listed in the session file"


def test_survey_leaves_unread_trials_empty():
    area = session(noise(4_000), TIMES).areas[0]
    found = survey(area, np.array([1.0, 9.0]), (-0.1, 0.2))
    assert np.isfinite(found.amplitude_uv[0]).all()
    assert np.isnan(found.amplitude_uv[1]).all()


def test_large_trials_are_judged_within_their_condition():
    amplitude = np.ones((40, 2)) * np.exp(0.05 * np.random.default_rng(1).normal(size=(40, 2)))
    amplitude[20:] *= 10  # the other condition is large throughout
    amplitude[3] *= 5
    condition = np.array(["single"] * 20 + ["pad"] * 20)
    assert np.flatnonzero(clean.large_trials(amplitude, condition, robust_sd=6)).tolist() == [3]


def test_streamed_average_equals_that_of_the_cut_trials():
    data = noise(12_000) + 1e5  # an offset shows sums that lose digits
    cut = cut_trials(session(data, TIMES))
    streamed = stream_average(
        recording(data), np.arange(6), TIMES, span_s=(-0.1, 0.2), baseline_s=(-0.1, 0.0)
    )
    raw = np.stack([data[i - 100 : i + 200].T for i in np.rint(TIMES * RATE).astype(int)])
    raw = raw - raw[..., :100].mean(axis=-1, keepdims=True)
    np.testing.assert_allclose(streamed.mean_uv, raw.mean(axis=0), atol=1e-8)
    np.testing.assert_allclose(streamed.sd_uv, raw.std(axis=0, ddof=1), rtol=1e-9)
    np.testing.assert_allclose(streamed.mean_uv, cut.areas[0].data_uv.mean(axis=0), atol=0.02)
    assert streamed.n_trials == 20


def test_a_streamed_average_needs_two_trials():
    with pytest.raises(InputError, match="1 of 2 windows lie whole inside"):
        stream_average(
            recording(noise(4_000)), np.arange(6), np.array([1.0, 9.0]),
            span_s=(-0.1, 0.2), baseline_s=(-0.1, 0.0),
        )  # fmt: skip
