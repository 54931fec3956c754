"""Granger causality against published models and tests.

Sources
-------
- Lutkepohl (2005), New Introduction to Multiple Time Series Analysis, Springer: data E1 and
  equations 3.2.22 and 3.2.23 (read second-hand; the estimates below were reproduced with
  statsmodels, the reference library here, and the five named coefficients and standard errors
  are printed in the manual of a general statistics package for the same data).
- Barnett and Seth (2011), J. Neurosci. Methods 201:404-419: closed form of the VAR(1); formula
  from memory, checked numerically to 1e-14.
- Ding, Chen and Bressler (2006), arXiv q-bio/0608035: two-channel system; coefficients from
  memory except the noise covariance.
- Geweke (1982), J. Am. Stat. Assoc. 77:304-313: F_total = F_xy + F_yx + F_inst.
"""

from pathlib import Path

import numpy as np
import pytest
from scipy import stats
from scipy.linalg import solve_discrete_lyapunov
from statsmodels.tsa.api import VAR

from lfptools.direction.autoregression import (
    Model,
    fit_model,
    lagged_products,
    residual_filters,
    residual_products,
)
from lfptools.direction.granger import (
    block_granger,
    granger_spectrum,
    pair_contrast,
    pair_granger,
    transfer,
)

E1 = Path(__file__).parent / "data" / "lutkepohl_e1.csv"


@pytest.fixture(scope="module")
def growth():
    levels = np.loadtxt(E1, delimiter=",", skiprows=1)
    return np.diff(np.log(levels), axis=0)[:75]


@pytest.fixture(scope="module")
def products(growth):
    return lagged_products(growth.T[None], 2, intercept=True)[0]


def autocovariance(model, n_lags):
    """Theoretical autocovariance E x_t x_{t-k}' of a stable model, (n_lags + 1, n, n)."""
    order, n, _ = model.coefficients.shape
    companion = np.zeros((order * n, order * n))
    companion[:n] = np.hstack(list(model.coefficients))
    companion[n:, :-n] = np.eye((order - 1) * n)
    noise = np.zeros_like(companion)
    noise[:n, :n] = model.noise
    state = solve_discrete_lyapunov(companion, noise)
    gammas = []
    for _ in range(n_lags + 1):
        gammas.append(state[:n, :n])
        state = companion @ state
    return np.array(gammas)


def theoretical_products(gammas, order):
    """Lagged products z z' in expectation, laid out channel after channel."""
    n = gammas.shape[1]
    width = order + 1
    found = np.zeros((n * width, n * width))
    for i in range(width):
        for j in range(width):
            block = gammas[j - i] if j >= i else gammas[i - j].T
            for a in range(n):
                found[a * width + i, np.arange(n) * width + j] = block[a]
    return found


VAR1 = Model(np.array([[[0.3, 0.5], [0.0, 0.8]]]), np.eye(2))
DING = Model(
    np.array([[[0.9, 0.0], [0.16, 0.8]], [[-0.5, 0.0], [-0.2, -0.5]]]),
    np.array([[1.0, 0.4], [0.4, 0.7]]),
)


def test_lutkepohl_estimates_to_three_decimals(products):
    model = fit_model(products, 3, 73 - 7)
    a1 = [[-0.320, 0.146, 0.961], [0.044, -0.153, 0.289], [-0.002, 0.225, -0.264]]
    a2 = [[-0.161, 0.115, 0.934], [0.050, 0.019, -0.010], [0.034, 0.355, -0.022]]
    sigma = [[21.30, 0.72, 1.23], [0.72, 1.37, 0.61], [1.23, 0.61, 0.89]]
    np.testing.assert_allclose(model.coefficients, [a1, a2], atol=0.0006)
    np.testing.assert_allclose(model.noise * 1e4, sigma, atol=0.006)


def test_lutkepohl_first_row_to_seven_digits_with_single_precision_logs():
    # Printed in the manual of a general statistics package (public test text quoting it). Its
    # data file keeps the logarithms in single precision; so do we here, and all digits agree.
    levels = np.loadtxt(E1, delimiter=",", skiprows=1)
    growth = np.diff(np.log(levels).astype(np.float32).astype(float), axis=0)[:75]
    single = lagged_products(growth.T[None], 2, intercept=True)[0]
    row = fit_model(single, 3, 66).coefficients[:, 0].ravel()
    printed = [-0.3196318, 0.1459851, 0.9612288, -0.1605508, 0.1146009]
    np.testing.assert_allclose(row[:5], printed, atol=6e-8)


def test_estimates_equal_statsmodels(growth, products):
    reference = VAR(growth).fit(2)
    model = fit_model(products, 3, 66)
    np.testing.assert_allclose(model.coefficients, reference.coefs, atol=1e-10)
    np.testing.assert_allclose(model.noise, reference.sigma_u, atol=1e-14)


def wald(products, source, target):
    """Wald statistic of "the past of source does not help target", from the module's fits."""
    everything = (0, 1, 2)
    full = residual_filters(products, 3, target, everything)
    bare = residual_filters(products, 3, target, tuple(c for c in everything if c not in source))
    s_full, s_bare = (residual_products(products, w)[0, 0] for w in (full, bare))
    return (s_bare - s_full) / (s_full / 66)


def test_lutkepohl_causality_income_consumption_to_investment(products):
    # F(4, 198) = 1.5917, p = .178; Wald 6.3668, p = .1734; the book prints lambda_F = 1.59.
    statistic = wald(products, (1, 2), (0,))
    assert statistic == pytest.approx(6.3668, abs=5e-5)
    assert stats.chi2.sf(statistic, 4) == pytest.approx(0.1734, abs=5e-5)
    assert stats.f.sf(statistic / 4, 4, 198) == pytest.approx(0.1780, abs=5e-5)


def test_lutkepohl_causality_agrees_with_statsmodels(growth, products):
    reference = VAR(growth).fit(2).test_causality(0, [1, 2], kind="f")
    assert wald(products, (1, 2), (0,)) / 4 == pytest.approx(reference.test_statistic, rel=1e-10)


def test_lutkepohl_log_ratio_form(products):
    forward = block_granger(products, 3, source=(1, 2), target=(0,))
    backward = block_granger(products, 3, source=(0,), target=(1, 2))
    assert forward == pytest.approx(0.092092996, abs=5e-9)
    assert backward == pytest.approx(0.078176667, abs=5e-9)


@pytest.mark.parametrize(
    ("a", "b", "c", "expected"), [(0.3, 0.8, 0.5, 0.37019428), (0.9, -0.5, 1.0, 0.75742733)]
)
def test_var1_closed_form(a, b, c, expected):
    model = Model(np.array([[[a, c], [0.0, b]]]), np.eye(2))
    closed = np.log((1 + b**2 + c**2 + np.sqrt((1 + b**2 + c**2) ** 2 - 4 * b**2)) / 2)
    assert closed == pytest.approx(expected, abs=5e-9)
    found = pair_granger(theoretical_products(autocovariance(model, 60), 60))
    assert found.b_to_a == pytest.approx(expected, abs=1e-8)
    assert found.a_to_b == pytest.approx(0.0, abs=1e-10)


def test_var1_spectrum_closed_form():
    w = np.linspace(0, np.pi, 257)
    found = granger_spectrum(VAR1, w / (2 * np.pi), 1.0)
    closed = np.log(1 + 0.5**2 / (1 + 0.8**2 - 2 * 0.8 * np.cos(w)))
    np.testing.assert_allclose(found.b_to_a, closed, atol=1e-13)
    np.testing.assert_allclose(found.a_to_b, 0, atol=1e-13)


def mean_over_circle(values):
    """Mean over all frequencies of a spectrum sampled evenly from 0 to the Nyquist rate."""
    return np.trapezoid(values) / (len(values) - 1)


def test_ding_time_domain_is_the_mean_of_the_spectrum():
    frequency = np.linspace(0, 100, 8193)
    spectrum = granger_spectrum(DING, frequency, 200.0)
    in_time = pair_granger(theoretical_products(autocovariance(DING, 80), 80))
    assert in_time.a_to_b == pytest.approx(0.053457869, abs=5e-9)
    assert in_time.b_to_a == pytest.approx(0.0, abs=1e-9)
    assert mean_over_circle(spectrum.a_to_b) == pytest.approx(in_time.a_to_b, abs=1e-9)
    assert frequency[np.argmax(spectrum.a_to_b)] == pytest.approx(31.64, abs=0.02)
    assert spectrum.a_to_b.max() == pytest.approx(0.1189, abs=5e-5)


def test_ding_total_is_the_sum_of_its_parts():
    frequency = np.linspace(0, 100, 8193)
    h = transfer(DING, frequency, 200.0)
    s = h @ DING.noise @ np.conj(np.swapaxes(h, -1, -2))
    coherence = np.abs(s[:, 0, 1]) ** 2 / (s[:, 0, 0] * s[:, 1, 1]).real
    total = mean_over_circle(-np.log(1 - coherence))
    instantaneous = np.log(0.7 * 1.0 / np.linalg.det(DING.noise))
    one_way = pair_granger(theoretical_products(autocovariance(DING, 80), 80))
    assert total == pytest.approx(0.312969065, abs=5e-9)
    assert one_way.a_to_b + one_way.b_to_a + instantaneous == pytest.approx(total, abs=1e-8)


def test_reversal_contrast_of_the_var1():
    # Derived numerically: net minus reversed net .676258 for (.3, .8, .5), b leads a.
    found = pair_contrast(theoretical_products(autocovariance(VAR1, 60), 60))
    assert found.net == pytest.approx(-0.676258, abs=5e-6)


def test_mixture_of_independent_sources_has_no_contrast():
    # Derived numerically: forward .257502 and .247130, the reversed values identical.
    sources = Model(np.array([[[0.9, 0.0], [0.0, -0.3]]]), np.eye(2))
    mixing = np.array([[1.0, 0.6], [0.4, 1.0]])
    gammas = mixing @ autocovariance(sources, 80) @ mixing.T
    products = theoretical_products(gammas, 80)
    naive = pair_granger(products)
    assert naive.a_to_b == pytest.approx(0.257502, abs=2e-5)
    assert naive.b_to_a == pytest.approx(0.247130, abs=2e-5)
    contrast = pair_contrast(products)
    np.testing.assert_allclose([contrast.a_to_b, contrast.b_to_a], 0, atol=1e-9)
