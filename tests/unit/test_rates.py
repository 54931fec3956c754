"""Firing rows, calls, latencies and rate curves on spikes whose rates are known."""

import numpy as np
import pytest
from scipy.stats import binom, poisson, t

from lfptools import rates, resample
from lfptools.errors import InputError
from lfptools.firing_latency import critical_counts, poisson_latency
from lfptools.model import CutSession
from tests.spike_sessions import choices, session, trains, unfinished_rows

WINDOWS = {"early": (5.0, 40.0), "late": (50.0, 150.0)}


def fire(rng, pieces, n_trials):
    """Poisson spikes of one unit: pieces of (first_s, last_s, rate_hz)."""
    return [
        np.concatenate([rng.uniform(a, b, rng.poisson(hz * (b - a))) for a, b, hz in pieces])
        for _ in range(n_trials)
    ]


RISE_FALL = [(-0.2, 0.012, 20), (0.012, 0.04, 80), (0.04, 0.06, 20), (0.06, 0.3, 2)]


def whisk(units, *, condition, n=499, **chosen) -> CutSession:
    return session(
        choices(windows=chosen.pop("windows", WINDOWS), n=n, **chosen),
        condition=condition,
        spikes=trains(units),
    )


def rows_of(cut, seed=1):
    rng = np.random.default_rng(seed)
    counts = {each: int((cut.condition == each).sum()) for each in cut.table.conditions}
    weights = {each: resample.bootstrap_weights(n, 499, rng) for each, n in counts.items()}
    signs = {
        each: resample.sign_flips(n, cut.choices.resample.n, rng) for each, n in counts.items()
    }
    return unfinished_rows(cut, weights=weights, signs=signs)


@pytest.fixture(scope="module")
def responding():
    rng = np.random.default_rng(2)
    units = [fire(rng, RISE_FALL, 100), fire(rng, [(-0.2, 0.3, 20)], 100)]
    return whisk(units, condition=["single", "pad"] * 50, bin_ms=5.0)


def test_one_row_a_unit_condition_and_window(responding):
    keys = [(row["unit"], row["condition"], row["window"]) for row in rows_of(responding)]
    assert keys == [
        (unit, condition, window)
        for unit in ("u0", "u1")
        for condition in ("single", "pad")
        for window in ("early", "late")
    ]


def test_rates_and_changes_are_those_of_the_counts(responding):
    row = rows_of(responding)[0]
    time_s = responding.spikes.time_s[0]
    stimulus_s = responding.table.time_s[responding.condition == "single"]
    relative = (time_s[None] - stimulus_s[:, None]).ravel()
    before = np.count_nonzero((relative >= -0.1) & (relative < 0)) / 50 / 0.1
    after = np.count_nonzero((relative >= 0.005) & (relative < 0.04))
    assert row["n_spikes"] == after
    assert row["baseline_hz"] == pytest.approx(before)
    assert row["window_hz"] == pytest.approx(after / 50 / 0.035)
    assert row["change_hz"] == pytest.approx(row["window_hz"] - row["baseline_hz"])
    assert row["lo_hz"] < row["change_hz"] < row["hi_hz"]
    assert all(type(each) in (str, int, float) for each in row.values())


def test_rise_early_and_fall_late_are_called(responding):
    rows = rates.finish_calls([row | {"q": row["p"]} for row in rows_of(responding)])
    assert [row["call"] for row in rows[:4]] == ["rise", "fall", "rise", "fall"]
    # The first whole bin of 5 ms after 12 ms starts at 15, the one that holds 12 ms at 10.
    assert {row["latency_ms"] for row in rows[:4:2]} <= {10.0, 15.0}
    assert all(
        row["latency_lo_ms"] <= row["latency_ms"] <= row["latency_hi_ms"] for row in rows[:4:2]
    )
    assert [row["latency_method"] for row in rows] == ["poisson"] * 8


def test_without_a_change_there_is_no_latency(responding):
    row = rows_of(responding)[0]
    assert np.isfinite(row["latency_ms"])
    (blank,) = rates.finish_calls([row | {"q": 0.2}])
    assert blank["call"] == "none"
    assert np.isnan([blank[f"latency_{each}"] for each in ("ms", "lo_ms", "hi_ms")]).all()
    assert blank["note"] == "no change, so no latency"
    assert "latency_note" not in blank


def test_calls():
    assert rates.call(3.0, 0.05) == "rise"
    assert rates.call(-3.0, 0.01) == "fall"
    assert rates.call(3.0, 0.051) == "none"
    assert rates.call(np.nan, np.nan) == ""


def test_calls_need_q(responding):
    with pytest.raises(InputError, match="no q"):
        rates.finish_calls(rows_of(responding)[:1])


def test_same_generator_same_rows(responding):
    assert str(rows_of(responding, seed=3)) == str(rows_of(responding, seed=3))


def test_few_spikes_are_said():
    units = [[np.array([-0.05, 0.02])] * 2 + [np.empty(0)] * 18]
    early, late = rows_of(whisk(units, condition=["single"] * 20))
    assert early["note"] == "4 spikes in baseline and window; not estimated below 5"
    assert late["note"].startswith("2 spikes")
    assert np.isnan([early["change_hz"], early["lo_hz"], early["p"]]).all()
    assert early["n_spikes"] == 2
    one = [[np.array([0.02])] + [np.empty(0)] * 19]
    early, late = rows_of(whisk(one, condition=["single"] * 20))
    assert early["note"] == "1 spike in baseline and window; not estimated below 5"
    assert late["note"].startswith("0 spikes in baseline")


def test_few_trials_are_said(responding):
    rng = np.random.default_rng(4)
    cut = whisk([fire(rng, RISE_FALL, 27)], condition=["single"] * 20 + ["pad"] * 7)
    rows = rows_of(cut)
    assert [row["note"] for row in rows if row["condition"] == "pad"] == [
        "fewer than 8 accepted trials"
    ] * 2
    assert np.isnan([row["p"] for row in rows if row["condition"] == "pad"]).all()
    assert np.isfinite([row["p"] for row in rows if row["condition"] == "single"]).all()


def test_a_silent_baseline_has_no_poisson_latency():
    rng = np.random.default_rng(5)
    cut = whisk([fire(rng, [(0.01, 0.04, 50)], 30)], condition=["single"] * 30)
    early = rows_of(cut)[0]
    assert early["change_hz"] > 0
    assert np.isnan(early["latency_ms"])
    assert early["latency_note"] == "latency not computed: no spike in the baseline"


def test_a_latency_of_few_resamples_is_said():
    rng = np.random.default_rng(6)
    pieces = [(-0.2, 0.02, 20), (0.02, 0.023, 150), (0.023, 0.3, 20)]
    cut = whisk([fire(rng, pieces, 60)], condition=["single"] * 60)
    early = rows_of(cut)[0]
    assert early["latency_ms"] == pytest.approx(20.0)
    assert early["latency_note"].startswith("latency found in ")
    assert early["latency_note"].endswith(" % of resamples")


def test_no_units_or_no_windows_give_no_rows(responding):
    rng = np.random.default_rng(7)
    bare = session(choices(windows=WINDOWS), condition=["single"] * 10)
    assert unfinished_rows(bare, weights={}, signs={}) == []
    assert rates.rate_curves(bare, level=0.95) == ()
    unwindowed = whisk([fire(rng, RISE_FALL, 10)], condition=["single"] * 10, windows={})
    assert rows_of(unwindowed) == []


def test_weights_must_fit(responding):
    with pytest.raises(InputError, match="no bootstrap weights for condition 'single'"):
        unfinished_rows(responding, weights={}, signs={})
    wrong = {each: np.full((9, 3), 1 / 3) for each in ("single", "pad")}
    with pytest.raises(InputError, match=r"weights of 'single' has shape \(9, 3\)"):
        unfinished_rows(responding, weights=wrong, signs={})
    fits = {each: np.full((9, 50), 1 / 50) for each in ("single", "pad")}
    with pytest.raises(InputError, match="no random signs for condition 'single'"):
        unfinished_rows(responding, weights=fits, signs={})


def test_bins_wider_than_the_window_are_refused(responding):
    rng = np.random.default_rng(9)
    cut = whisk([fire(rng, RISE_FALL, 20)], condition=["single"] * 20, bin_ms=60.0)
    with pytest.raises(InputError, match="no bin starts inside the window"):
        rows_of(cut)


def test_level_and_coverage_without_a_response():
    """300 units, none responds. Bounds: 99.9 % of the binomial with .05 and .95."""
    rng = np.random.default_rng(10)
    n_units = 300
    units = [fire(rng, [(-0.2, 0.3, 15)], 40) for _ in range(n_units)]
    rows = rows_of(whisk(units, condition=["single"] * 40, windows={"late": (50.0, 150.0)}))
    false = sum(row["p"] <= 0.05 for row in rows)
    covered = sum(row["lo_hz"] <= 0 <= row["hi_hz"] for row in rows)
    low, high = binom.ppf([0.0005, 0.9995], n_units, 0.05)
    assert low <= false <= high
    low, high = binom.ppf([0.0005, 0.9995], n_units, 0.95)
    assert low <= covered <= high


@pytest.mark.parametrize("rise", [True, False])
@pytest.mark.parametrize("p", [0.01, 0.05])
def test_critical_counts_are_the_first_beyond_the_level(rise, p):
    baseline = np.random.default_rng(11).uniform(0.1, 60, 200)
    critical = critical_counts(baseline, p=p, rise=rise)
    if rise:
        assert (poisson.sf(critical - 1, baseline) < p).all()
        assert (poisson.sf(critical - 2, baseline) >= p).all()
    else:
        assert (poisson.cdf(critical, baseline) < p).all()  # P(X <= -1) = 0
        assert (poisson.cdf(critical + 1, baseline) >= p).all()


def test_latency_of_a_stack_equals_each_alone_by_tail_calls():
    rng = np.random.default_rng(12)
    baseline = rng.uniform(6, 9, 50)
    counts = rng.poisson(baseline[:, None] * np.repeat([1, 0.2, 1], 10), (50, 30))
    left_s = np.arange(30) / 1000
    stacked = poisson_latency(counts, baseline, left_s, span_s=(0.002, 0.02), rise=False)

    def alone(row, mean):
        tail = poisson.cdf(row, mean)
        for k in range(2, 20):
            if tail[k] < 0.01 and tail[k + 1] < 0.01 and tail[k + 2] < 0.05:
                return left_s[k]
        return np.nan

    expected = [alone(row, mean) for row, mean in zip(counts, baseline, strict=True)]
    np.testing.assert_array_equal(stacked, expected)
    assert np.isfinite(stacked).sum() > 25


def test_latency_is_looked_for_in_the_span_and_confirmed_beyond_it():
    counts = np.array([9, 9, 9, 0, 0, 9, 9, 9, 0])
    left_s = np.arange(9) / 1000
    inside = poisson_latency(counts, np.array(1.0), left_s, span_s=(0.003, 0.006), rise=True)
    assert float(inside) == 0.005
    before = poisson_latency(counts, np.array(1.0), left_s, span_s=(0.003, 0.005), rise=True)
    assert np.isnan(before)
    ends = poisson_latency(counts[:7], np.array(1.0), left_s[:7], span_s=(0.003, 0.007), rise=True)
    assert np.isnan(ends)  # the trial ends before the third bin


def test_latency_needs_a_baseline_and_as_many_edges_as_bins():
    zero = poisson_latency(
        np.full((2, 4), 9), np.zeros(2), np.arange(4.0), span_s=(0, 4), rise=True
    )
    assert np.isnan(zero).all()
    with pytest.raises(InputError, match="4 bins and 3 left edges"):
        poisson_latency(np.ones((2, 4)), np.ones(2), np.arange(3.0), span_s=(0, 4), rise=True)


def test_rate_curves_have_the_t_interval(responding):
    curves = rates.rate_curves(responding, level=0.9)
    assert [(each.area, each.condition) for each in curves] == [("S1", "single"), ("S1", "pad")]
    curve = curves[0]
    assert curve.bin_s == pytest.approx(0.005)
    assert curve.time_s[0] == pytest.approx(-0.1975)
    assert len(curve.time_s) == 100
    np.testing.assert_allclose(curve.rate_hz, curve.unit_rate_hz.mean(axis=0))
    stimulus_s = responding.table.time_s[responding.condition == "single"]
    relative = responding.spikes.time_s[0][None] - stimulus_s[:, None]
    counts = ((relative >= 0.02) & (relative < 0.025)).sum(axis=1) / 0.005
    half = t.ppf(0.95, 49) * counts.std(ddof=1) / np.sqrt(50)
    assert curve.unit_rate_hz[0, 44] == pytest.approx(counts.mean())
    assert curve.unit_lo_hz[0, 44] == pytest.approx(counts.mean() - half)
    assert curve.unit_hi_hz[0, 44] == pytest.approx(counts.mean() + half)
    with pytest.raises(ValueError, match="read-only"):
        curve.rate_hz[0] = 1.0


def test_curves_are_not_drawn_in_bins_of_a_millisecond():
    rng = np.random.default_rng(13)
    fine = whisk([fire(rng, RISE_FALL, 10)], condition=["single"] * 10, bin_ms=1.0)
    coarse = whisk([fire(rng, RISE_FALL, 10)], condition=["single"] * 10, bin_ms=20.0)
    assert rates.rate_curves(fine, level=0.95)[0].bin_s == pytest.approx(0.005)
    assert rates.rate_curves(coarse, level=0.95)[0].bin_s == pytest.approx(0.02)


def test_raster_holds_every_spike_of_the_trial(responding):
    trial, time_s = rates.spike_raster(responding, 0, "pad")
    assert trial.max() < 50
    assert time_s.min() >= -0.2
    assert time_s.max() < 0.3
    _, other = rates.spike_raster(responding, 0, "single")
    assert len(time_s) + len(other) == len(responding.spikes.time_s[0])


def test_raster_of_what_is_not_there_is_refused(responding):
    with pytest.raises(InputError, match="unit 2 of 2"):
        rates.spike_raster(responding, 2, "pad")
    with pytest.raises(InputError, match="condition 'puff'; known are single, pad"):
        rates.spike_raster(responding, 0, "puff")
