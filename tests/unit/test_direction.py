"""Direction: the pieces, the laws they obey and the rules of the verdict."""

from dataclasses import replace

import numpy as np
import pytest

from lfptools.choices import DirectionChoice, WindowChoice
from lfptools.direction import verdict as rules
from lfptools.direction.autoregression import (
    lagged_products,
    mean_products,
    reversed_products,
    with_ridge,
)
from lfptools.direction.controls import RIDGE, LeadTest, lead_influence, lead_scores, lead_test
from lfptools.direction.cross_spectra import coefficients, trial_spectra
from lfptools.direction.granger import pair_contrast, pair_granger
from lfptools.direction.net_lead import net_lead
from lfptools.direction.pair import PairEstimate, estimate_pair
from lfptools.direction.phase_slope import PhaseSlope, phase_slope
from lfptools.direction.prepare import Stretch, orders_for, rate_for, stretch, to_rate
from lfptools.errors import InputError
from lfptools.model import Signals
from lfptools.resample import sign_flips

RATE = 1000.0


def coupled(n_trials=60, n_samples=100, c=0.5, delay=5, seed=1):
    """White leader a, follower b receives c x a some samples later."""
    rng = np.random.default_rng(seed)
    leader = rng.normal(size=(n_trials, n_samples + delay))
    follower = rng.normal(size=(n_trials, n_samples)) + c * leader[:, :n_samples]
    return Stretch(np.stack([leader[:, delay:], follower], axis=1), RATE)


def signs(n_trials, n=999, seed=2):
    return sign_flips(n_trials, n, np.random.default_rng(seed))


def test_reversed_products_are_those_of_the_reversed_signals():
    x = np.random.default_rng(1).normal(size=(4, 2, 60))
    products = lagged_products(x, 7)
    backward = lagged_products(np.ascontiguousarray(x[..., ::-1]), 7)
    np.testing.assert_allclose(reversed_products(products, 2), backward, atol=1e-10)


@pytest.mark.parametrize("order", [1, 7, 16])
def test_mean_products_are_the_mean_of_those_of_the_trials(order):
    x = np.random.default_rng(1).normal(size=(9, 2, 60)).cumsum(axis=-1)
    each = lagged_products(x, order)
    np.testing.assert_allclose(mean_products(x, order), each.mean(axis=0), rtol=1e-10)


def test_scores_are_traces_of_the_products():
    # tr[K (G - J G J)] of each trial, K written out from least squares.
    x, order = coupled(n_trials=12).x, 6
    products = lagged_products(x, order)
    difference = products - reversed_products(products, 2)
    pooled = (products + reversed_products(products, 2)).mean(axis=0) / 2
    pooled = pooled + 1e-3 * np.diag(np.diag(pooled))
    kernel = np.zeros_like(pooled)
    width = order + 1
    for target, sign in ((1, 1), (0, -1)):
        for given, part in (((target,), sign), ((0, 1), -sign)):
            past = np.concatenate([np.arange(1, width) + width * each for each in given])
            w = np.zeros(len(pooled))
            w[target * width] = 1
            w[past] = -np.linalg.solve(pooled[np.ix_(past, past)], pooled[past, target * width])
            kernel += part * np.outer(w, w) / (w @ pooled @ w)
    expected = [np.trace(kernel @ each) for each in difference]
    np.testing.assert_allclose(lead_scores(x, order), expected, atol=1e-10)


def test_score_is_the_net_contrast_to_first_order():
    # A mean of scores near net minus reversed net where the coupling is weak.
    both = coupled(n_trials=200, c=0.15)
    products = lagged_products(both.x, 8)
    exact = pair_contrast(products.mean(axis=0)).net
    score = lead_scores(both.x, 8).mean()
    assert score == pytest.approx(exact, rel=0.1)


def test_score_changes_sign_with_the_order_of_the_pair():
    both = coupled()
    forward = lead_scores(both.x, 8)
    backward = lead_scores(both.x[:, ::-1], 8)
    np.testing.assert_allclose(forward, -backward, atol=1e-10)


@pytest.mark.parametrize(("swap", "sign"), [(False, 1), (True, -1)])
def test_a_planted_lead_is_found_with_its_sign(swap, sign):
    both = coupled()
    x = both.x[:, ::-1] if swap else both.x
    found = lead_test(Stretch(x, RATE), (8, 12, 16), signs(len(x)))
    assert found.p_lead == pytest.approx(1 / 1000)
    assert found.p_lag <= 0.01
    assert found.sign_changes
    assert np.sign(found.score) == sign


def test_instantaneous_mixing_is_not_a_lead():
    # Exact law: mixtures of independent sources have a lag-symmetric covariance.
    rng = np.random.default_rng(4)
    p = []
    for _ in range(40):
        sources = rng.normal(size=(30, 2, 103))
        sources[:, 0] = np.apply_along_axis(lambda s: np.convolve(s, [1, 0.8, 0.5], "same"), 1,
                                            sources[:, 0])  # fmt: skip
        mixed = np.einsum("ij,njt->nit", np.array([[1, 0.6], [0.4, 1]]), sources)
        found = lead_test(Stretch(mixed[..., 2:-1], RATE), (8, 12, 16), signs(30, 199))
        p.append(found.p_lead)
    # 40 tests at .05: 7 or more have a chance of .0034.
    assert np.count_nonzero(np.array(p) <= 0.05) <= 6


def test_phase_slope_of_a_pure_delay():
    # Unit coherence, delay of 3 samples at 100 Hz in a 200-sample segment: K sin(2 pi df tau),
    # 9.410831332 for K = 100 - 0 pairs of neighbouring bins (derived numerically).
    x = np.random.default_rng(1).normal(size=(1, 1, 200))
    spectrum = np.fft.rfft(x[0, 0])
    frequency = np.fft.rfftfreq(200, 0.01)
    delayed = spectrum * np.exp(-2j * np.pi * frequency * 0.03)
    spectra = np.stack([abs(spectrum) ** 2, abs(delayed) ** 2, spectrum * delayed.conj()])[None]
    twice = np.concatenate([spectra, spectra])
    found = phase_slope(twice, frequency, (0, 50), level=0.95)
    assert found.value == pytest.approx(100 * np.sin(2 * np.pi * 0.5 * 0.03), abs=1e-9)
    assert found.value == pytest.approx(9.410831332, abs=5e-9)


def test_phase_slope_is_positive_where_the_first_leads_and_turns_with_time():
    both = coupled(n_trials=100)
    found = coefficients(both.x, RATE)
    forward = phase_slope(trial_spectra(found), found.frequency_hz, (30, 200), level=0.95)
    assert forward.value > 0
    assert forward.lo > 0
    assert forward.p < 0.01
    turned = coefficients(np.ascontiguousarray(both.x[..., ::-1]), RATE)
    backward = phase_slope(trial_spectra(turned), turned.frequency_hz, (30, 200), level=0.95)
    assert backward.value == pytest.approx(-forward.value, rel=1e-6)


def test_granger_does_not_change_with_scale():
    products = lagged_products(coupled().x * np.array([1, 50.0])[:, None], 8).mean(axis=0)
    scaled = pair_granger(products)
    plain = pair_granger(lagged_products(coupled().x, 8).mean(axis=0))
    assert scaled.a_to_b == pytest.approx(plain.a_to_b, rel=1e-9)
    assert scaled.b_to_a == pytest.approx(plain.b_to_a, rel=1e-9)


def test_rates_and_orders_follow_the_span():
    assert rate_for((0, 0.1), [2500, 1250], None) == 1000
    assert rate_for((0, 0.3), [2500, 1250], None) == 250
    assert rate_for((0, 0.1), [2500, 500], None) == 500
    assert orders_for(100, 1000, None) == (16, 24, 32)
    assert orders_for(60, 1000, None) == (10, 15, 20)
    assert orders_for(256, 250, None) == (4, 6, 8)
    assert orders_for(100, 1000, 12) == (6, 9, 12)
    with pytest.raises(InputError, match="must not exceed 500 Hz"):
        rate_for((0, 0.1), [2500, 500], 1000)


def area(name, data, rate=RATE):
    time_s = np.arange(-200, 300) / 1000
    return Signals(name, "lfp", np.array([0]), np.array([0.0]), data[:, None], time_s, rate)


def test_decimation_keeps_a_slow_wave_in_place():
    fine = np.arange(-0.2, 0.3, 1 / 2500)
    wave = np.exp(-0.5 * ((fine - 0.05) / 0.01) ** 2)[None, None]
    signals = Signals("S1", "lfp", np.array([0]), np.array([0.0]), wave, fine, 2500.0)
    slow = to_rate(signals, 1000.0)
    assert len(slow.time_s) == 500
    expected = np.exp(-0.5 * ((slow.time_s - 0.05) / 0.01) ** 2)
    np.testing.assert_allclose(slow.data[0, 0], expected, atol=2e-3)


def test_the_evoked_response_with_gain_and_shift_is_projected_out():
    rng = np.random.default_rng(2)
    time_s = np.arange(-200, 300) / 1000
    gain, shift = 1 + 0.3 * rng.normal(size=50), 0.002 * rng.normal(size=50)
    wave = np.exp(-0.5 * ((time_s - 0.05 - shift[:, None]) / 0.02) ** 2) * gain[:, None]
    noise = 0.01 * rng.normal(size=(2, 50, 500))
    a, b = area("S1", wave + noise[0]), area("M1", wave + noise[1])
    rows = np.ones(50, dtype=bool)
    left = {
        project: stretch(a, b, rows, (0.0, 0.1), project=project).x.std()
        for project in (True, False)
    }
    assert left[True] < 0.012
    assert left[False] > 0.1


def pair(span_ms=(0.0, 100.0), n=40, seed=3, **choices):
    rng = np.random.default_rng(seed)
    x = rng.normal(size=(2, n, 500))
    window = WindowChoice(name="early", span_ms=(5, 40), direction_ms=span_ms)
    spacing = choices.pop("spacing", 1.0)
    return estimate_pair(
        area("S1", x[0]), area("M1", x[1]), np.ones(n, dtype=bool), np.arange(n) * spacing,
        window, choices=DirectionChoice(**choices), signs=signs(n, 199), level=0.95,
    )  # fmt: skip


def test_the_quick_net_is_that_of_the_full_estimate():
    rng = np.random.default_rng(5)
    a, b = area("S1", rng.normal(size=(40, 500))), area("M1", rng.normal(size=(40, 500)))
    window = WindowChoice(name="early", span_ms=(5, 40), direction_ms=(0, 100))
    given = (a, b, np.arange(40) % 2 == 0, np.arange(40.0), window)
    quick = net_lead(*given, choices=DirectionChoice(), level=0.95)
    full = estimate_pair(*given, choices=DirectionChoice(), signs=signs(20, 99), level=0.95)
    row = next(each for each in full.estimates if each.measure == "granger_minus_reversed")
    assert quick.net == pytest.approx(row.net, rel=1e-9)
    # First order against leaving each trial out: alike up to 1 / n_trials.
    assert quick.hi - quick.lo == pytest.approx(row.hi - row.lo, rel=0.1)
    assert (quick.n_trials, quick.withheld) == (20, "")
    short = WindowChoice(name="early", span_ms=(5, 40))
    held = net_lead(*given[:-1], short, choices=DirectionChoice(), level=0.95)
    assert "60 ms are needed" in held.withheld
    assert np.isnan(held.net)


@pytest.mark.parametrize("c", [0.0, 0.25])
def test_the_quick_interval_is_as_wide_as_the_net_varies(c):
    # Over 80 sessions the half-width over t (40 trials: 2.0227, t table) estimates the SD of
    # the net, which is itself known to 8 %: .76 to 1.24 is 3 of them to either side. Without
    # coupling the value's derivative is small at 0 and every jackknife is up to sqrt(2) wide.
    window = WindowChoice(name="early", span_ms=(50, 150))
    nets, errors = [], []
    for seed in range(80):
        x = coupled(n_trials=40, n_samples=500, c=c, seed=seed).x
        found = net_lead(
            area("S1", x[:, 0]), area("M1", x[:, 1]), np.ones(40, dtype=bool), np.arange(40.0),
            window, choices=DirectionChoice(order=8, single_trial="keep"), level=0.95,
        )  # fmt: skip
        nets.append(found.net)
        errors.append((found.hi - found.lo) / 2 / 2.0227)
    widest = 1.24 if c else 1.24 * np.sqrt(2)
    assert 0.76 <= np.mean(errors) / np.std(nets, ddof=1) <= widest


def test_the_influence_of_a_trial_is_the_change_it_makes():
    # Central difference of the value over the weight of a trial, ridge left out of both.
    x, order, step = coupled(n_trials=30, c=0.4).x, 4, 1e-4
    products = lagged_products(x, order)
    found = lead_influence(x, order)
    for trial in (0, 7):
        weights = np.full(30, 1 / 30) + step * (np.eye(30)[trial] - 1 / 30)
        less = np.full(30, 1 / 30) - step * (np.eye(30)[trial] - 1 / 30)
        nets = [
            pair_contrast(with_ridge(np.tensordot(each, products, 1), RIDGE)).net
            for each in (weights, less)
        ]
        slope = (nets[0] - nets[1]) / (2 * step)
        assert found[trial] - found.mean() == pytest.approx(slope, rel=0.02)


@pytest.mark.parametrize(
    ("how", "why"),
    [
        ({"n": 6}, "6 accepted trials; 8 are needed"),
        ({"span_ms": (0.0, 40.0)}, "span of 40 ms; 60 ms are needed"),
        ({"span_ms": (-195.0, 20.0)}, "within 10 ms of the trial's edge"),
        ({"span_ms": (200.0, 300.0)}, "within 10 ms of the trial's edge"),
        ({"spacing": 0.05}, "the spans of neighbouring trials overlap"),
        ({"order": 40}, "order 40 reaches beyond a third of the span's 100 samples"),
        ({"n": 8, "order": 33}, "536 samples for 66 parameters"),
    ],
)
def test_direction_is_withheld_with_its_reason(how, why):
    found = pair(**how)
    assert why in found.withheld
    said = rules.verdict(found, float("nan"))
    assert said.verdict == "withheld"
    assert why in said.reason
    assert all(np.isnan(each.net) for each in found.estimates)
    assert all(why in each.note for each in found.estimates)


def test_bands_that_the_span_cannot_hold_keep_an_empty_row():
    rows = {(each.measure, each.band): each for each in pair().estimates}
    assert "3 are needed" in rows["granger", "theta"].note
    assert np.isnan(rows["granger", "theta"].net)
    assert np.isfinite(rows["granger", "gamma"].net)
    assert rows["phase_slope", "gamma"].lo < rows["phase_slope", "gamma"].hi


def judged(q, p_lag=0.5, score=1.0, changes=True, both_above=False, slopes=()):
    estimate = PairEstimate(
        "S1", "M1", 100, (0.0, 0.1), 32, test=LeadTest(score, 0.01, p_lag, changes),
        contrast_error=0.01, both_above=both_above, slopes=slopes,
    )  # fmt: skip
    return rules.verdict(estimate, q)


def test_rules_of_the_verdict():
    assert (judged(0.01).verdict, judged(0.01).leader) == ("leads", "S1")
    assert (judged(0.01, score=-1).verdict, judged(0.01, score=-1).leader) == ("leads", "M1")
    mixed = judged(0.01, changes=False)
    assert (mixed.verdict, mixed.leader) == ("no lead shown", "")
    assert "does not change sign" in mixed.reason
    assert judged(0.2, p_lag=0.01, both_above=True).verdict == "both ways"
    lagged = judged(0.2, p_lag=0.01)
    assert lagged.verdict == "no lead shown"
    assert lagged.reason.startswith("lagged interaction, direction not claimed")
    assert judged(0.2).verdict == "no lead shown"


def test_a_phase_slope_against_the_lead_is_said():
    against = judged(0.01, slopes=(PhaseSlope(-1, -2, -0.5, 0.01), None))
    assert against.reason.endswith("the phase slope points the other way")
    unclear = judged(0.01, slopes=(PhaseSlope(-1, -2, 0.5, 0.2),))
    assert "phase slope" not in unclear.reason


def test_smallest_detectable_is_2_8_standard_errors():
    # z of .975 plus z of .80 (normal table): 1.959964 + .841621.
    assert judged(0.2).smallest_detectable == pytest.approx(0.02801585, abs=1e-7)


def test_every_verdict_carries_the_standing_caveat():
    assert "unrecorded common input" in judged(0.01).caveat


def recorded(name, course, rate_hz, offset_s):
    """What a source recorded at `rate_hz` whose samples stand `offset_s` off the grid."""
    time_s = np.arange(-0.2, 0.3 - 1e-9, 1 / rate_hz) + offset_s
    data = np.stack([one(time_s) for one in course])[:, None]
    return Signals(name, "lfp", np.array([0]), np.array([0.0]), data, time_s, rate_hz)


def courses(n, seed):
    """Smooth random courses, of 2 to 120 Hz, as functions of time."""
    rng = np.random.default_rng(seed)
    hz, phase = rng.uniform(2, 120, (n, 40)), rng.uniform(0, 2 * np.pi, (n, 40))
    size = rng.normal(size=(n, 40)) / np.sqrt(hz)

    def course(k):
        return lambda t: (size[k] * np.sin(2 * np.pi * hz[k] * t[:, None] + phase[k])).sum(-1)

    return [course(k) for k in range(n)]


@pytest.mark.parametrize("offset_s", [0.0, 1e-5, -1e-5, 0.0004, -0.0003])
def test_rates_and_offsets_of_two_recordings_make_no_delay(offset_s):
    # What reaches both areas at once must stand at the same samples of the common grid.
    common = courses(3, 1)
    a = to_rate(recorded("S1", common, 2500.0, 0.0), RATE)
    b = to_rate(recorded("M1", common, 1250.0, offset_s), RATE)
    rows = np.ones(3, dtype=bool)
    both = stretch(a, b, rows, (0.0, 0.1), project=False).x
    np.testing.assert_allclose(both[:, 0], both[:, 1], atol=0.02 * both.std())


def test_a_common_reference_at_two_rates_is_no_lead():
    # 30 sessions at .05: 6 or more false leads have a chance of .0033.
    false = 0
    for seed in range(30):
        rng = np.random.default_rng(seed)
        common = courses(30, 100 + seed)
        a, b = recorded("S1", common, 2500.0, 1e-5), recorded("M1", common, 1250.0, -1e-5)
        noisy = [
            replace(each, data=each.data + 0.3 * rng.normal(size=each.data.shape))
            for each in (a, b)
        ]
        ready = [to_rate(each, RATE) for each in noisy]
        x = stretch(*ready, np.ones(30, dtype=bool), (0.0, 0.1), project=False)
        found = lead_test(x, (16, 24, 32), signs(30, 199, seed))
        false += found.p_lead <= 0.05 and found.sign_changes
    assert false <= 5
