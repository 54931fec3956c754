"""Laws that hold for any input: scale, shift, order, linearity."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from lfptools.csd import csd_operator
from lfptools.direction.autoregression import lagged_products
from lfptools.direction.granger import pair_contrast, pair_granger
from lfptools.model import Contacts
from lfptools.resample import bootstrap_weights, false_discovery_rate, percentile_interval
from lfptools.waves import Search, landmarks, prominence

TIME = np.arange(-100, 300) / 1000
SEARCH = Search((0.05, 0.2), "trough", "half")
seeds = st.integers(0, 10_000)


def curve(seed):
    rng = np.random.default_rng(seed)
    rough = rng.normal(size=len(TIME) + 60)
    smooth = np.convolve(rough, np.hanning(61) / 30, "valid")
    return smooth - smooth[:100].mean()


@given(seed=seeds, scale=st.floats(0.01, 1000))
@settings(max_examples=50, deadline=None)
def test_landmarks_do_not_move_with_scale(seed, scale):
    one, other = (landmarks(c[None], TIME, SEARCH) for c in (curve(seed), scale * curve(seed)))
    np.testing.assert_allclose(one.time_s, other.time_s, rtol=1e-9)
    np.testing.assert_allclose(one.onset_s, other.onset_s, rtol=1e-6)
    np.testing.assert_allclose(scale * one.amplitude, other.amplitude, rtol=1e-9)


@given(seed=seeds, level=st.floats(-50, 50))
@settings(max_examples=50, deadline=None)
def test_prominence_does_not_change_with_a_constant(seed, level):
    one, other = (prominence(c[None], TIME, SEARCH) for c in (curve(seed), curve(seed) + level))
    np.testing.assert_allclose(one, other, atol=1e-9)


@given(seed=seeds, delay_ms=st.integers(-20, 20))
@settings(max_examples=50, deadline=None)
def test_landmarks_move_with_the_wave(seed, delay_ms):
    shifted = Search((0.05 + delay_ms / 1000, 0.2 + delay_ms / 1000), "trough", "half")
    one = landmarks(curve(seed)[None], TIME, SEARCH)
    other = landmarks(curve(seed)[None], TIME + delay_ms / 1000, shifted)
    np.testing.assert_allclose(one.time_s + delay_ms / 1000, other.time_s, atol=1e-9)


@given(seed=seeds)
@settings(max_examples=30, deadline=None)
def test_swapping_the_areas_swaps_the_directions(seed):
    x = np.random.default_rng(seed).normal(size=(10, 2, 60))
    for measure in (pair_granger, pair_contrast):
        forward = measure(lagged_products(x, 5).mean(axis=0))
        swapped = measure(lagged_products(x[:, ::-1], 5).mean(axis=0))
        np.testing.assert_allclose(forward.a_to_b, swapped.b_to_a, atol=1e-10)
        np.testing.assert_allclose(forward.net, -swapped.net, atol=1e-10)


@given(seed=seeds)
@settings(max_examples=30, deadline=None)
def test_reversing_time_turns_the_contrast_round(seed):
    x = np.random.default_rng(seed).normal(size=(10, 2, 60))
    forward = pair_contrast(lagged_products(x, 5).mean(axis=0)).net
    backward = pair_contrast(lagged_products(x[..., ::-1].copy(), 5).mean(axis=0)).net
    np.testing.assert_allclose(forward, -backward, atol=1e-10)


@given(seed=seeds)
@settings(max_examples=30, deadline=None)
def test_a_common_reference_does_not_reach_the_current(seed):
    rng = np.random.default_rng(seed)
    depth = np.cumsum(rng.uniform(50, 150, size=12))
    contacts = Contacts(np.arange(12), depth, rng.random(12) < 0.1, ("",) * 12)
    operator = csd_operator(contacts, conductivity_s_m=0.3).matrix
    potential = rng.normal(size=(12, 20))
    reference = 1000 * rng.normal(size=20)
    np.testing.assert_allclose(operator @ (potential + reference), operator @ potential, atol=1e-8)


@given(n=st.integers(1, 60), seed=seeds)
@settings(max_examples=50, deadline=None)
def test_bootstrap_weights_are_counts_over_n(n, seed):
    weights = bootstrap_weights(n, 20, np.random.default_rng(seed))
    np.testing.assert_allclose(weights.sum(axis=1), 1)
    np.testing.assert_allclose(weights * n, np.rint(weights * n), atol=1e-9)


@given(p=st.lists(st.floats(1e-6, 1), min_size=1, max_size=30))
@settings(max_examples=50, deadline=None)
def test_q_is_at_least_p_and_keeps_the_order(p):
    q = false_discovery_rate(np.array(p))
    assert (q >= np.array(p) - 1e-12).all()
    assert (np.diff(q[np.argsort(p)]) >= -1e-12).all()


@given(seed=seeds, n=st.integers(3, 200))
@settings(max_examples=50, deadline=None)
def test_intervals_widen_with_fewer_trials(seed, n):
    draws = np.random.default_rng(seed).normal(size=1000)
    few = percentile_interval(draws, level=0.95, n_trials=n)
    many = percentile_interval(draws, level=0.95, n_trials=100_000)
    assert few.lo <= many.lo <= many.hi <= few.hi
