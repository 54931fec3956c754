"""Resampling against printed examples and general-purpose reference libraries.

Sources
-------
- Efron and Tibshirani (1993), An Introduction to the Bootstrap: the law school data (15 pairs;
  data from memory, confirmed by r = .776374), jackknife standard error .142519.
- Benjamini and Hochberg (1995), J. R. Stat. Soc. B 57:289-300: 15 p-values, as in SciPy's own
  documentation.
- Student's sleep data and Darwin's 15 pairs: exact sign-flip counts (data from R's help).
"""

from itertools import product

import numpy as np
import pytest
from statsmodels.stats.multitest import multipletests

from lfptools.resample import (
    bootstrap_weights,
    exceedance_p,
    false_discovery_rate,
    jackknife_interval,
    jackknife_weights,
    percentile_interval,
)

LSAT = [576, 635, 558, 578, 666, 580, 555, 661, 651, 605, 653, 575, 545, 572, 594]
GPA = [3.39, 3.30, 2.81, 3.03, 3.44, 3.07, 3.00, 3.43, 3.36, 3.13, 3.12, 2.74, 2.76, 2.88, 2.96]
BH = [0.0001, 0.0004, 0.0019, 0.0095, 0.0201, 0.0278, 0.0298, 0.0344, 0.0459, 0.3240,
      0.4262, 0.5719, 0.6528, 0.7590, 1.0]  # fmt: skip
BH_ADJUSTED = [0.0015, 0.003, 0.0095, 0.035625, 0.0603, 0.063857, 0.063857, 0.0645, 0.0765,
               0.486, 0.581182, 0.714875, 0.753231, 0.813214, 1]  # fmt: skip
SLEEP = [1.2, 2.4, 1.3, 1.3, 0.0, 1.0, 1.8, 0.8, 4.6, 1.4]
DARWIN = [49, -67, 8, 16, 6, 23, 28, 41, 14, 29, 56, 24, 75, 60, -48]


def correlation(weights, x, y):
    """Correlation as a function of weighted means: the shape of every estimator here."""
    statistics = np.stack([x, y, x * x, y * y, x * y], axis=1)
    mx, my, mxx, myy, mxy = (weights @ statistics).T
    return (mxy - mx * my) / np.sqrt((mxx - mx**2) * (myy - my**2))


@pytest.fixture
def law():
    return np.array(LSAT, float), np.array(GPA)


def test_law_school_correlation_and_jackknife_error(law):
    whole = correlation(np.full((1, 15), 1 / 15), *law)[0]
    left_out = correlation(jackknife_weights(15), *law)
    assert whole == pytest.approx(0.776374, abs=5e-7)
    _, _, error = jackknife_interval(whole, left_out, level=0.95)
    assert error == pytest.approx(0.142519, abs=5e-7)


def test_law_school_bootstrap_error_and_percentile_interval(law):
    # Book: SE .132 at 3200 draws; Monte Carlo with many draws: .1339; percentile 90 % interval
    # (.524, .948). At 15 trials the expanded interval must hold the plain one.
    draws = correlation(bootstrap_weights(15, 20_000, np.random.default_rng(1)), *law)
    assert draws.std() == pytest.approx(0.1339, abs=0.003)
    plain = np.quantile(draws, [0.05, 0.95])
    np.testing.assert_allclose(plain, [0.524, 0.948], atol=0.01)
    expanded = percentile_interval(draws, level=0.90, n_trials=15)
    assert expanded.lo < plain[0]
    assert expanded.hi > plain[1]


def test_benjamini_hochberg_fifteen_values():
    q = false_discovery_rate(np.array(BH))
    np.testing.assert_allclose(q, BH_ADJUSTED, atol=6e-7)
    assert np.count_nonzero(q <= 0.05) == 4
    np.testing.assert_allclose(q, multipletests(BH, method="fdr_bh")[1], atol=1e-12)


def test_missing_p_values_do_not_count():
    q = false_discovery_rate(np.array([*BH, np.nan, np.nan]))
    np.testing.assert_allclose(q[:15], false_discovery_rate(np.array(BH)))
    assert np.isnan(q[15:]).all()


def every_sign(n):
    return np.array(list(product([1.0, -1.0], repeat=n)))


def test_sleep_exact_sign_flip():
    # Two-sided 4/1024: t = -4.06, so few sign patterns reach the observed sum.
    sums = np.abs(every_sign(10) @ np.array(SLEEP))
    assert np.count_nonzero(sums >= sums[0] - 1e-9) == 4
    assert exceedance_p(sums[0], sums[1:]) == pytest.approx(4 / 1024)


def test_darwin_exact_sign_flip():
    sums = every_sign(15) @ np.array(DARWIN, float)
    assert np.count_nonzero(sums >= 314) == 863
    two_sided = exceedance_p(np.abs(sums[0]), np.abs(sums[1:]))
    assert two_sided == pytest.approx(1726 / 32768)
