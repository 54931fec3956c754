"""Prepared signals in, the rows of direction.csv and verdicts.csv out."""

from itertools import combinations

import numpy as np

from lfptools.analysis.basis import identity
from lfptools.analysis.prepared import Prepared, chosen_note
from lfptools.analysis.results import Row, ms, note
from lfptools.choices import WindowChoice
from lfptools.direction.pair import PairEstimate, estimate_pair
from lfptools.direction.verdict import CONTROL, verdict
from lfptools.resample import false_discovery_rate, sign_flips
from lfptools.trials import Progress

PRIMARY = "granger_minus_reversed"


def estimate_pairs(
    prepared: Prepared, progress: Progress
) -> list[tuple[str, WindowChoice, PairEstimate]]:
    """Estimate every pair of areas, condition and window."""
    jobs = [
        (first, second, condition, window)
        for first, second in combinations(prepared.signals, 2)
        for condition in prepared.conditions
        for window in prepared.choices.window
        if window.holds(first) and window.holds(second)
    ]
    found = []
    for number, (first, second, condition, window) in enumerate(jobs):
        progress("testing the direction", number / len(jobs))
        found.append((condition, window, _pair(prepared, first, second, condition, window)))
    return found


def _pair(
    prepared: Prepared, first: str, second: str, condition: str, window: WindowChoice
) -> PairEstimate:
    """Estimate one pair, condition and window, or recall it."""
    basis, a, b = prepared.basis, prepared.signals[first], prepared.signals[second]
    rows = prepared.rows(condition)
    # A condition with too few trials is withheld before its signs are looked at.
    signs = prepared.signs.get(condition)
    if signs is None:
        signs = sign_flips(max(1, int(rows.sum())), 1, np.random.default_rng(0))
    return basis.estimates.get(
        ("pair", *identity(a), *identity(b), condition, window.direction_span_s),
        lambda: estimate_pair(
            a,
            b,
            rows,
            prepared.cut.table.accepted_time_s(),
            window,
            choices=prepared.choices.direction,
            signs=signs,
            level=prepared.choices.resample.level,
            caveats=_caveats(prepared, first, second),
            at_rate=basis.at_rate,
        ),
    )


def _caveats(prepared: Prepared, first: str, second: str) -> tuple[str, ...]:
    """Return what the user must know about two recordings before reading a lead."""
    said = [f"{area}: {prepared.signals[area].note}" for area in (first, second)
            if prepared.signals[area].note]  # fmt: skip
    filters = [prepared.cut.trials_of(area).amplifier_hz for area in (first, second)]  # type: ignore[union-attr]
    if None in filters:
        said.append("amplifier filters unknown: unequal delays would make a lead")
    elif filters[0] != filters[1]:
        said.append("the amplifiers' filters differ: unequal delays make a lead")
    return tuple(said)


def direction_rows(
    prepared: Prepared, pairs: list[tuple[str, WindowChoice, PairEstimate]]
) -> list[Row]:
    """Return one row an estimate."""
    rows: list[Row] = []
    for condition, window, pair in pairs:
        for each in pair.estimates:
            rows.append(
                {
                    "session": prepared.cut.name,
                    "area_a": pair.area_a,
                    "signal_a": prepared.signals[pair.area_a].kind,
                    "area_b": pair.area_b,
                    "signal_b": prepared.signals[pair.area_b].kind,
                    "given": "",
                    "condition": condition,
                    "window": window.name,
                    "span_lo_ms": ms(pair.span_s[0]),
                    "span_hi_ms": ms(pair.span_s[1]),
                    "band": each.band,
                    "measure": each.measure,
                    "a_to_b": each.a_to_b,
                    "b_to_a": each.b_to_a,
                    "net": each.net,
                    "lo": each.lo,
                    "hi": each.hi,
                    "p": each.p,
                    "order": pair.order if each.measure.startswith("granger") else None,
                    "n_trials": pair.n_trials,
                    "note": note(each.note, chosen_note(window)),
                }
            )
    return rows


def verdict_rows(
    prepared: Prepared, pairs: list[tuple[str, WindowChoice, PairEstimate]]
) -> list[Row]:
    """Return one row a pair, window and condition."""
    p = np.array([pair.test.p_lead if pair.test else np.nan for _, _, pair in pairs])
    rows: list[Row] = []
    for (condition, window, pair), q in zip(pairs, false_discovery_rate(p), strict=True):
        said = verdict(pair, float(q))
        primary = next(each for each in pair.estimates if each.measure == PRIMARY)
        rows.append(
            {
                "session": prepared.cut.name,
                "area_a": pair.area_a,
                "area_b": pair.area_b,
                "condition": condition,
                "window": window.name,
                "verdict": said.verdict,
                "leader": said.leader,
                "net": primary.net,
                "lo": primary.lo,
                "hi": primary.hi,
                "q": float(q),
                "smallest_detectable": said.smallest_detectable,
                "control": CONTROL,
                "reason": note(said.reason, chosen_note(window)),
                "caveat": said.caveat,
                "n_trials": pair.n_trials,
            }
        )
    return rows
