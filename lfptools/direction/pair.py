"""The signals of two areas in, every direction estimate of one window and condition out."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from lfptools.bands import why_not
from lfptools.choices import DirectionChoice, WindowChoice
from lfptools.direction.autoregression import (
    fit_model,
    lagged_products,
    reversed_products,
    with_ridge,
)
from lfptools.direction.controls import RIDGE, LeadTest, lead_test
from lfptools.direction.cross_spectra import coefficients, trial_spectra
from lfptools.direction.granger import OneWay, band_granger, over_reversed, pair_granger
from lfptools.direction.phase_slope import PhaseSlope, phase_slope
from lfptools.direction.prepare import (
    Stretch,
    edge_s,
    orders_for,
    rate_for,
    stretch,
    to_rate,
)
from lfptools.model import Signals
from lfptools.resample import jackknife_interval
from lfptools.trials import MIN_TRIALS

SHORTEST_SPAN_S = 0.060
_ROWS_PER_PARAMETER = 10
_WORST_CONDITION = 1e10


@dataclass(frozen=True, slots=True, eq=False)
class Estimate:
    """One measure: one-way values and net (positive where a leads) with its interval."""

    measure: str
    band: str
    a_to_b: float = np.nan
    b_to_a: float = np.nan
    net: float = np.nan
    lo: float = np.nan
    hi: float = np.nan
    p: float = np.nan
    note: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class PairEstimate:
    """All that was estimated for one pair, window and condition."""

    area_a: str
    area_b: str
    n_trials: int
    span_s: tuple[float, float]
    order: int
    estimates: tuple[Estimate, ...] = ()
    test: LeadTest | None = None
    contrast: OneWay | None = None  # one-way values minus those of reversed time
    contrast_error: float = np.nan
    both_above: bool = False
    slopes: tuple[PhaseSlope | None, ...] = ()
    withheld: str = ""
    caveats: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Plan:
    """How one pair is estimated in one window, and why it is not, where it is withheld."""

    span_s: tuple[float, float]
    rate_hz: float
    orders: tuple[int, ...]
    project: bool
    withheld: str


def plan_pair(
    a: Signals,
    b: Signals,
    event_time_s: np.ndarray,
    window: WindowChoice,
    choices: DirectionChoice,
) -> Plan:
    """Return span, rate, orders and treatment of single trials, or why direction is withheld.

    Parameters
    ----------
    a, b : Signals
        The signals that stand for the areas, as recorded.
    event_time_s : ndarray, shape (n_trials,)
        Stimulus times of the condition's trials.
    window : WindowChoice
        Its `direction_span_s` is used.
    choices : DirectionChoice
        Rate, order, what is done about single trials.
    """
    span_s = window.direction_span_s
    rate_hz = rate_for(span_s, [a.rate_hz, b.rate_hz], choices.rate_hz)
    n_samples = round((span_s[1] - span_s[0]) * rate_hz)
    orders = orders_for(n_samples, rate_hz, choices.order)
    return Plan(
        span_s=span_s,
        rate_hz=rate_hz,
        orders=orders,
        project=choices.single_trial == "project"
        or (choices.single_trial == "auto" and span_s[1] > 0),
        withheld=refusals(a, b, event_time_s, span_s, rate_hz, orders),
    )


def ill_conditioned(mean: np.ndarray) -> str:
    """Say that a fit is ill-conditioned, or nothing; `mean` holds the ridge, (d, d)."""
    condition = np.linalg.cond(mean)
    if condition > _WORST_CONDITION:
        return f"the fit is ill-conditioned (condition number {condition:.1g})"
    return ""


def refusals(
    a: Signals,
    b: Signals,
    event_time_s: np.ndarray,
    span_s: tuple[float, float],
    rate_hz: float,
    orders: tuple[int, ...],
) -> str:
    """Return why direction is withheld, in words; an empty text where nothing speaks against.

    Parameters
    ----------
    a, b : Signals
        One signal each.
    event_time_s : ndarray, shape (n_trials,)
        Stimulus times of the condition's trials.
    span_s : (float, float)
        Span used.
    rate_hz : float
        Common rate.
    orders : tuple of int
        Autoregressive orders, rising.
    """
    n_trials, length = len(event_time_s), span_s[1] - span_s[0]
    n_samples, order = round(length * rate_hz), orders[-1]
    first = max(a.time_s[0], b.time_s[0]) + edge_s(rate_hz)
    last = min(a.time_s[-1], b.time_s[-1]) - edge_s(rate_hz)
    rows = (n_samples - order) * n_trials
    if n_trials < MIN_TRIALS:
        return f"{n_trials} accepted trials; {MIN_TRIALS} are needed"
    if length < SHORTEST_SPAN_S - 1e-9:
        return (
            f"span of {length * 1000:.0f} ms; {SHORTEST_SPAN_S * 1000:.0f} ms are needed "
            "(direction_ms of the window widens it)"
        )
    if span_s[0] < first - 1e-9 or span_s[1] > last + 1.5 / rate_hz:
        return (
            f"the span reaches within {edge_s(rate_hz) * 1000:.0f} ms of the trial's edge, "
            "which the decimating filter spoils; widen trials.window_ms"
        )
    if np.diff(np.sort(event_time_s)).min(initial=np.inf) < length:
        return "the spans of neighbouring trials overlap"
    if order > n_samples // 3:
        return f"order {order} reaches beyond a third of the span's {n_samples} samples"
    if rows < _ROWS_PER_PARAMETER * 2 * order:
        return f"{rows} samples for {2 * order} parameters; 10 a parameter are needed"
    return ""


def estimate_pair(
    a: Signals,
    b: Signals,
    rows: np.ndarray,
    event_time_s: np.ndarray,
    window: WindowChoice,
    *,
    choices: DirectionChoice,
    signs: np.ndarray,
    level: float,
    caveats: tuple[str, ...] = (),
    at_rate: Callable[[Signals, float], Signals] = to_rate,
) -> PairEstimate:
    """Estimate and test the direction between two areas.

    Parameters
    ----------
    a, b : Signals
        The signals that stand for the areas, the same trials.
    rows : ndarray of bool, shape (n_trials_in_all,)
        Trials of the condition.
    event_time_s : ndarray, shape (n_trials_in_all,)
        Stimulus times.
    window : WindowChoice
        Its `direction_span_s` is used.
    choices : DirectionChoice
        Rate, order, bands, what is done about single trials.
    signs : ndarray, shape (n_flips + 1, n_trials)
        Random signs, the first row all +1, the same for all pairs.
    level : float
        Coverage of the intervals.
    caveats : tuple of str
        What the user must know about the two recordings.
    at_rate : callable
        Takes a signal to the common rate; a caller may keep what it returns.
    """
    plan = plan_pair(a, b, event_time_s[rows], window, choices)
    span_s, why = plan.span_s, plan.withheld
    n_trials = int(np.count_nonzero(rows))
    bare = PairEstimate(a.area, b.area, n_trials, span_s, plan.orders[-1], caveats=caveats)
    if not why:
        slow_a, slow_b = (at_rate(each, plan.rate_hz) for each in (a, b))
        both = stretch(slow_a, slow_b, rows, span_s, project=plan.project)
        products = lagged_products(both.x, plan.orders[-1])
        why = ill_conditioned(with_ridge(products.mean(axis=0), RIDGE))
    if why:
        empty = _empty_estimates(choices.bands_hz, why)
        return replace(bare, estimates=empty, withheld=why)
    test = lead_test(both, plan.orders, signs)
    fitted, contrast, contrast_row, error, both_above = _time_domain(products, test, level=level)
    by_band, slopes = _by_band(both, products, span_s, choices.bands_hz, level)
    lagged = Estimate("lagged_interaction", "all", p=test.p_lag, note="of either direction")
    return replace(
        bare,
        estimates=(fitted, contrast_row, lagged, *by_band),
        test=test,
        contrast=contrast,
        contrast_error=error,
        both_above=both_above,
        slopes=tuple(slopes),
    )


def _time_domain(
    products: np.ndarray, test: LeadTest, *, level: float
) -> tuple[Estimate, OneWay, Estimate, float, bool]:
    total = products.sum(axis=0)
    left = with_ridge((total - products) / (len(products) - 1), RIDGE)
    mean = with_ridge(total / len(products), RIDGE)
    fitted, fitted_left = pair_granger(mean), pair_granger(left)
    contrast = over_reversed(fitted, pair_granger(reversed_products(mean, 2)))
    contrast_left = over_reversed(fitted_left, pair_granger(reversed_products(left, 2)))
    lo, hi, _ = jackknife_interval(fitted.net, fitted_left.net, level=level)
    row = Estimate("granger", "all", *_plain(fitted), float(lo), float(hi))
    lo, hi, error = jackknife_interval(contrast.net, contrast_left.net, level=level)
    contrast_row = Estimate(
        "granger_minus_reversed", "all", *_plain(contrast), float(lo), float(hi), test.p_lead
    )
    lowest = [
        jackknife_interval(whole, left, level=level)[0]
        for whole, left in (
            (contrast.a_to_b, contrast_left.a_to_b),
            (contrast.b_to_a, contrast_left.b_to_a),
        )
    ]
    return row, contrast, contrast_row, float(error), bool(min(lowest) > 0)


def _by_band(
    both: Stretch,
    products: np.ndarray,
    span_s: tuple[float, float],
    bands_hz: dict[str, tuple[float, float]],
    level: float,
) -> tuple[list[Estimate], list[PhaseSlope | None]]:
    rows: list[Estimate] = []
    slopes: list[PhaseSlope | None] = []
    found = coefficients(both.x, both.rate_hz)
    spectra = trial_spectra(found)
    n_rows = both.x.shape[-1] - products.shape[-1] // 2 + 1
    carried = {band: why_not(edges, span_s, both.rate_hz) for band, edges in bands_hz.items()}
    if not all(carried.values()):
        total = products.sum(axis=0)
        model, left = (
            fit_model(with_ridge(each, RIDGE), 2, n_rows)
            for each in (total / len(products), (total - products) / (len(products) - 1))
        )
    for band, edges in bands_hz.items():
        why = carried[band]
        if why:
            rows += [Estimate(each, band, note=why) for each in ("granger", "phase_slope")]
            slopes.append(None)
            continue
        value = band_granger(model, edges, both.rate_hz)
        value_left = band_granger(left, edges, both.rate_hz)
        lo, hi, _ = jackknife_interval(value.net, value_left.net, level=level)
        rows.append(Estimate("granger", band, *_plain(value), float(lo), float(hi)))
        slope = phase_slope(spectra, found.frequency_hz, edges, level=level)
        slopes.append(slope)
        rows.append(
            Estimate("phase_slope", band, net=slope.value, lo=slope.lo, hi=slope.hi, p=slope.p)
        )
    return rows, slopes


def _plain(value: OneWay) -> tuple[float, float, float]:
    return float(value.a_to_b), float(value.b_to_a), float(value.net)


def _empty_estimates(bands: dict[str, tuple[float, float]], why: str) -> tuple[Estimate, ...]:
    note = f"withheld: {why}"
    whole = ("granger", "granger_minus_reversed", "lagged_interaction")
    return tuple(Estimate(each, "all", note=note) for each in whole) + tuple(
        Estimate(each, band, note=note) for band in bands for each in ("granger", "phase_slope")
    )
