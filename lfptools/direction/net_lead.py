"""The signals of two areas in, their net lead with a quick interval out, without the jackknife.

The value is that of `granger_minus_reversed`. Its interval is a t interval whose standard error
rests on what each trial adds to the value, to first order (infinitesimal jackknife). It is
meant for windows that are being moved; the jackknife of `estimate_pair` is what tables hold.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from lfptools.choices import DirectionChoice, WindowChoice
from lfptools.direction.autoregression import mean_products, with_ridge
from lfptools.direction.controls import RIDGE, lead_influence
from lfptools.direction.granger import pair_contrast
from lfptools.direction.pair import ill_conditioned, plan_pair
from lfptools.direction.prepare import stretch, to_rate
from lfptools.model import Signals


@dataclass(frozen=True, slots=True, eq=False)
class NetLead:
    """Net Granger causality minus that of reversed time; positive where a leads."""

    area_a: str
    area_b: str
    n_trials: int
    net: float = np.nan
    lo: float = np.nan
    hi: float = np.nan
    withheld: str = ""


def net_lead(
    a: Signals,
    b: Signals,
    rows: np.ndarray,
    event_time_s: np.ndarray,
    window: WindowChoice,
    *,
    choices: DirectionChoice,
    level: float,
    at_rate: Callable[[Signals, float], Signals] = to_rate,
) -> NetLead:
    """Estimate the net lead of area a over area b.

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
        Rate, order, what is done about single trials.
    level : float
        Coverage of the interval.
    at_rate : callable
        Takes a signal to the common rate; a caller may keep what it returns.
    """
    n_trials = int(np.count_nonzero(rows))
    plan = plan_pair(a, b, event_time_s[rows], window, choices)
    if plan.withheld:
        return NetLead(a.area, b.area, n_trials, withheld=plan.withheld)
    slow_a, slow_b = (at_rate(each, plan.rate_hz) for each in (a, b))
    both = stretch(slow_a, slow_b, rows, plan.span_s, project=plan.project)
    mean = with_ridge(mean_products(both.x, plan.orders[-1]), RIDGE)
    why = ill_conditioned(mean)
    if why:
        return NetLead(a.area, b.area, n_trials, withheld=why)
    net = float(pair_contrast(mean).net)
    error = lead_influence(both.x, plan.orders[-1]).std(ddof=1) / np.sqrt(n_trials)
    half = float(stdtrit(n_trials - 1, (1 + level) / 2) * error)
    return NetLead(a.area, b.area, n_trials, net, net - half, net + half)
