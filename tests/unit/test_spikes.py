"""Spikes around stimuli and their counts: edges, overlaps, bad input."""

from itertools import pairwise

import numpy as np
import pytest

from lfptools.errors import InputError
from lfptools.spikes import bin_edges, binned_counts, spikes_around


def test_spikes_are_cut_by_trial_and_time():
    found = spikes_around(
        np.array([0.5, 0.99, 1.02, 2.0, 2.05, 3.5]), np.array([1.0, 2.0]), span_s=(-0.05, 0.05)
    )
    assert found.trial.tolist() == [0, 0, 1]
    np.testing.assert_allclose(found.time_s, [-0.01, 0.02, 0.0])
    assert found.n_trials == 2
    assert len(found) == 3


def test_a_spike_between_two_stimuli_counts_for_both():
    found = spikes_around(np.array([1.05]), np.array([1.0, 1.1]), span_s=(-0.1, 0.1))
    assert found.trial.tolist() == [0, 1]
    assert found.time_us.tolist() == [50_000, -50_000]


def test_counts_equal_a_count_by_comparison():
    rng = np.random.default_rng(1)
    time_s = np.sort(rng.uniform(0, 60, 5000)).round(6)
    stimulus_s = np.sort(rng.uniform(1, 59, 40)).round(6)  # unordered gaps, some overlap
    edges_s = np.arange(-50, 101) / 1000
    relative_us = np.rint((time_s[None] - stimulus_s[:, None]) * 1e6)
    expected = np.stack(
        [
            ((relative_us >= round(a * 1e6)) & (relative_us < round(b * 1e6))).sum(axis=1)
            for a, b in pairwise(edges_s)
        ],
        axis=1,
    )
    np.testing.assert_array_equal(binned_counts(time_s, stimulus_s, edges_s=edges_s), expected)


@pytest.mark.parametrize("stimulus_s", [0.1, 1234.567, 98765.4321])
def test_a_spike_on_an_edge_belongs_to_the_later_bin(stimulus_s):
    """Whatever the last binary digit of stimulus + 25 ms says."""
    edges_s = np.array([0.024, 0.025, 0.026])
    counts = binned_counts(np.array([stimulus_s + 0.025]), np.array([stimulus_s]), edges_s=edges_s)
    assert counts.tolist() == [[0, 1]]


def test_no_spike_is_no_error():
    counts = binned_counts(np.empty(0), np.array([1.0, 2.0]), edges_s=np.array([0.0, 0.1, 0.2]))
    np.testing.assert_array_equal(counts, np.zeros((2, 2)))


@pytest.mark.parametrize("time_s", [[1.0, 0.9], [1.0, np.nan, 2.0]])
def test_spike_times_must_rise(time_s):
    with pytest.raises(InputError, match="spike times must be numbers that rise"):
        spikes_around(np.array(time_s), np.array([1.0]), span_s=(0.0, 1.0))


def test_span_and_edges_must_rise():
    with pytest.raises(InputError, match="first below last"):
        spikes_around(np.array([1.0]), np.array([1.0]), span_s=(0.1, 0.0))
    with pytest.raises(InputError, match="edges_s"):
        binned_counts(np.array([1.0]), np.array([1.0]), edges_s=np.array([0.0, 0.1, 0.1]))


def test_bins_are_whole_and_meet_at_the_stimulus():
    np.testing.assert_allclose(bin_edges((-7.0, 12.0), 5.0), [-0.005, 0.0, 0.005, 0.01])
    np.testing.assert_allclose(bin_edges((3.0, 12.0), 2.5), [0.005, 0.0075, 0.01])
    assert len(bin_edges((-200.0, 300.0), 0.1)) == 5001


@pytest.mark.parametrize(("window_ms", "bin_ms"), [((1.0, 4.0), 5.0), ((0.0, 10.0), 0.0)])
def test_bins_that_do_not_fit_are_refused(window_ms, bin_ms):
    with pytest.raises(InputError, match="bin_ms"):
        bin_edges(window_ms, bin_ms)
