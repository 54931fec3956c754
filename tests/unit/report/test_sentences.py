"""What the report says in short, from rows written by hand."""

from dataclasses import replace

import pytest

from lfptools.report.sentences import in_short
from tests.report_sessions import results

NAN = float("nan")
AWAY = "this window's strongest sink is at 400 um"
HERE = "window chosen on these trials"


def _latency(area: str, time_ms: float, note: str = "") -> dict:
    return {
        "area": area, "role": "area", "condition": "single", "window": "early", "n_trials": 112,
        "time_ms": time_ms, "time_lo_ms": time_ms - 0.4, "time_hi_ms": time_ms + 0.4, "note": note,
    }  # fmt: skip


def _lag(lo_ms: float, hi_ms: float, q: float) -> dict:
    return {
        "area_a": "S1", "area_b": "M1", "condition": "single", "window": "early",
        "feature": "time", "lo_ms": lo_ms, "hi_ms": hi_ms, "q": q,
    }  # fmt: skip


def _verdict(**changed) -> dict:
    return {
        "area_a": "S1", "area_b": "M1", "condition": "single", "window": "early",
        "verdict": "leads", "leader": "S1", "net": 0.12, "lo": 0.08, "hi": 0.16, "q": 0.01,
        "smallest_detectable": 0.04, "reason": "", "n_trials": 112, **changed,
    }  # fmt: skip


def _said(**rows) -> list[str]:
    empty = dict.fromkeys(results().rows, ())
    found = in_short(replace(results(), rows=empty | rows))
    return [sentence for each in found for sentence in each.sentences]


def test_areas_stand_in_the_order_of_arrival():
    said = _said(latencies=(_latency("M1", 24.0), _latency("S1", 13.0)), lags=(_lag(10, 12, 0.01),))
    assert said == [
        "early, single: S1 13.0 ms [12.6, 13.4] before M1 24.0 ms [23.6, 24.4]; 112 trials."
    ]


@pytest.mark.parametrize("lag", [(-1, 12, 0.01), (10, 12, 0.2)])
def test_areas_whose_lag_is_not_clear_are_not_told_apart(lag):
    said = _said(latencies=(_latency("S1", 13.0), _latency("M1", 14.0)), lags=(_lag(*lag),))
    assert " and, not told apart, M1" in said[0]
    assert "before" not in said[0]


def test_waves_not_found_or_not_reliable_are_said_to_be():
    lost = _latency("M1", NAN, f"not found (p = 0.4); {AWAY}")
    vague = _latency("S1", 13.0, "not reliable: found in 80% of resamples")
    said = _said(latencies=(vague, lost))
    assert said == [
        "early, single: S1 13.0 ms [12.6, 13.4] (not reliable); 112 trials; "
        f"M1: not found (p = 0.4); {AWAY}."
    ]


def test_what_bears_on_a_wave_that_was_found_is_said_beside_it():
    few = _latency("M1", 24.0, "fewer than 5 good contacts; volume conduction not excluded")
    away = _latency("S1", 13.0, f"not reliable: interval 9 ms wider than 5 ms; {AWAY}; {HERE}")
    assert _said(latencies=(away, few)) == [
        f"early, single: S1 13.0 ms [12.6, 13.4] (not reliable; {AWAY}) and, not told apart, "
        "M1 24.0 ms [23.6, 24.4] (volume conduction not excluded); 112 trials."
    ]


def test_leads_between_potentials_carry_that_volume_conduction_is_not_excluded():
    said = _said(verdicts=(_verdict(caveat="S1: volume conduction not excluded; lagged input"),))
    assert said[0].endswith("q = .01, 112 trials; volume conduction not excluded.")
    none = _verdict(verdict="no lead shown", leader="", smallest_detectable=NAN)
    assert _said(verdicts=(none,))[0].endswith("q = .01, 112 trials.")


def test_verdicts_carry_net_interval_q_and_count_and_claims_come_first():
    none = _verdict(verdict="no lead shown", leader="", condition="pad", q=0.6)
    withheld = _verdict(verdict="withheld", leader="", reason="4 accepted trials; 8 are needed")
    said = _said(verdicts=(none, withheld, _verdict()))
    assert said == [
        "S1 leads M1 (early, single): net 0.12 [0.08, 0.16] (positive: S1 leads), q = .01, "
        "112 trials.",
        "S1 and M1 (early, pad): no lead shown: net 0.12 [0.08, 0.16] (positive: S1 leads), "
        "q = .6, 112 trials; smallest detectable net 0.04.",
        "S1 and M1 (early, single): withheld, 4 accepted trials; 8 are needed; 112 trials.",
    ]


def test_units_are_counted_by_call_and_area():
    rows = tuple(
        {"area": area, "condition": "single", "window": "early", "call": call, "n_trials": 12}
        for area, call in (("S1", "rise"), ("S1", "none"), ("M1", "rise"), ("M1", ""))
    )
    assert _said(firing=rows) == [
        "early, single: 2 of 3 units rise (S1 1 of 2, M1 1 of 1); 0 of 3 units fall "
        "(q <= .05, 12 trials); 1 not tested."
    ]


def test_sinks_are_placed_with_depth_layer_and_time():
    row = {
        "area": "S1", "condition": "single", "window": "early", "kind": "sink", "depth_um": 598.0,
        "depth_lo_um": 590.0, "depth_hi_um": 606.0, "layer": "L4", "peak_ms": 13.0,
        "peak_lo_ms": 12.6, "peak_hi_ms": 13.4, "density_ua_mm3": -0.81, "n_trials": 112,
        "note": "",
    }  # fmt: skip
    assert _said(sinks=(row,)) == [
        "S1, early: strongest sink at 598 um [590, 606] in L4, greatest at 13.0 ms [12.6, 13.4], "
        "-0.81 uA/mm^3 (single, 112 trials)."
    ]
    lost = {**row, "condition": "pad", "depth_um": NAN, "note": "not found (p = 0.3)"}
    assert _said(sinks=(lost, row))[0].endswith(
        "uA/mm^3 (single, 112 trials); no sink shown (pad: not found (p = 0.3))."
    )
    assert _said(sinks=(lost,)) == ["S1, early: no sink shown (pad: not found (p = 0.3))."]


def test_an_area_without_current_source_density_is_named_once():
    note = f"fewer than 5 good contacts: no current source density; {HERE}"
    rows = tuple(
        {"area": "S1", "condition": condition, "window": window, "kind": kind, "note": note}
        for window in ("early", "late")
        for condition in ("single", "pad")
        for kind in ("sink", "source")
    )
    assert _said(sinks=rows) == ["S1: fewer than 5 good contacts: no current source density."]


def test_nothing_is_said_of_what_was_not_recorded():
    assert _said() == []
