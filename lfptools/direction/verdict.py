"""The estimates and tests of one pair in, one verdict with its reason out: the rules, on a page.

1. withheld          a rule of `refusals` applies (too few trials or samples, a span too short
                     or at the trial's edge, overlapping trials, an ill-conditioned fit).
2. leads             q <= .05 (Benjamini-Hochberg over the table on p_lead) and the net Granger
                     causality changes sign when time is reversed.
3. both ways         q > .05, p_lag <= .05, and both one-way values exceed their time-reversed
                     values, each with a jackknife interval above 0.
4. no lead shown     everything else; where p_lag <= .05 a lagged interaction is there and its
                     direction is not claimed.
"""

from dataclasses import dataclass

from scipy.special import ndtri

from lfptools.direction.pair import PairEstimate

ALPHA = 0.05
#: Share of cases in which the smallest detectable lead would have been seen.
_POWER = 0.80
CONTROL = "time-reversal randomisation with sign condition"
CAVEAT = "a lead in time is not proof of a projection: unrecorded common input can make one"


@dataclass(frozen=True, slots=True, eq=False)
class Verdict:
    """What may be said of one pair, window and condition."""

    verdict: str
    leader: str
    reason: str
    smallest_detectable: float
    caveat: str


def smallest_detectable(error: float) -> float:
    """Return the smallest net value that would have been seen in 80 % of cases at 5 %."""
    return float((ndtri(1 - ALPHA / 2) + ndtri(_POWER)) * error)


def verdict(estimate: PairEstimate, q: float) -> Verdict:
    """Return the verdict on a pair whose p_lead has the false discovery rate `q`."""
    caveat = "; ".join([CAVEAT, *estimate.caveats])
    if estimate.withheld:
        return Verdict("withheld", "", estimate.withheld, float("nan"), caveat)
    assert estimate.test is not None
    smallest = smallest_detectable(estimate.contrast_error)
    if q <= ALPHA and estimate.test.sign_changes:
        leader = estimate.area_a if estimate.test.score > 0 else estimate.area_b
        reason = f"q = {q:.2g} and the net changes sign in reversed time"
        return Verdict("leads", leader, reason + _slope_word(estimate), smallest, caveat)
    if q <= ALPHA:
        reason = (
            f"q = {q:.2g}, but the net does not change sign in reversed time: mixing, a common "
            "reference or unequal noise is not excluded"
        )
        return Verdict("no lead shown", "", reason, smallest, caveat)
    if estimate.test.p_lag <= ALPHA and estimate.both_above:
        reason = f"q = {q:.2g}; both one-way values exceed those of reversed time"
        return Verdict("both ways", "", reason, smallest, caveat)
    if estimate.test.p_lag <= ALPHA:
        reason = f"lagged interaction, direction not claimed (q = {q:.2g})"
        return Verdict("no lead shown", "", reason, smallest, caveat)
    return Verdict("no lead shown", "", f"q = {q:.2g} is above {ALPHA:g}", smallest, caveat)


def _slope_word(estimate: PairEstimate) -> str:
    """Say whether the phase slope, where it was estimated and is clear, agrees."""
    clear = [each for each in estimate.slopes if each is not None and each.p <= ALPHA]
    assert estimate.test is not None
    against = [each for each in clear if each.value * estimate.test.score < 0]
    if against:
        return "; the phase slope points the other way"
    return "; the phase slope agrees" if clear else ""
