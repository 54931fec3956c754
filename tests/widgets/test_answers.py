"""The bench's answers: quick ones against full ones, full ones against a run, to the digit."""

import os
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor
from dataclasses import asdict, replace

import msgspec
import numpy as np
import pytest

from lfptools.analysis import analyse, lead
from lfptools.analysis.prepared import prepare
from lfptools.choices import DirectionChoice, ResampleChoice, WindowChoice, WindowFor
from lfptools.errors import InputError
from lfptools.io.opening import open_session
from lfptools.trials import FEW_TRIALS, cut_trials
from lfpwidgets.answers import Answers
from lfpwidgets.full import Stopped
from tests import report_sessions

CONDITIONS = ("single", "pad")
N = 199
TABLES = ("latencies", "lags", "firing", "sinks", "verdicts")
HERE = {"chosen": "on these trials"}


@pytest.fixture(scope="module")
def cut(small_session):
    """Three areas, two conditions of 14 trials, 18 units."""
    made = cut_trials(open_session(small_session / "session.toml"))
    return replace(
        made, choices=msgspec.structs.replace(made.choices, resample=ResampleChoice(n=N))
    )


@pytest.fixture(scope="module")
def answers(cut):
    return Answers(cut)


@pytest.fixture(scope="module")
def half(cut):
    """Quick answers from half of the resamples."""
    return Answers(cut, n_draws=N // 2)


def moved(cut, number, **changes):
    """Windows of the session, one of them changed by the hand."""
    windows = list(cut.choices.window)
    windows[number] = msgspec.structs.replace(windows[number], **changes | HERE)
    return tuple(windows)


def chosen(cut, windows, signal="csd"):
    direction = msgspec.structs.replace(cut.choices.direction, signal=signal)
    return msgspec.structs.replace(cut.choices, window=list(windows), direction=direction)


#: What a hand does: which window, to where, and what stands for an area.
MOVES = [
    (0, {}, "csd"),
    (0, {"span_ms": (8.0, 44.8)}, "csd"),
    (1, {"span_ms": (92.0, 188.0), "direction_ms": (92.0, 230.0)}, "csd"),
    (1, {"span_ms": (20.0, 120.0), "extremum": "peak"}, "csd"),
    (0, {"for_": {"M1": WindowFor(span_ms=(10.0, 60.0), extremum="peak")}}, "csd"),
    (0, {"areas": ["S2", "M1"]}, "csd"),
    (1, {"span_ms": (110.0, 205.0)}, "lfp"),
]


@pytest.fixture(scope="module")
def run_of(cut):
    """What a run gives for a move, computed once."""
    known = {}

    def results(number, changes, signal):
        key = repr((number, changes, signal))
        if key not in known:
            choices = chosen(cut, moved(cut, number, **changes), signal)
            known[key] = analyse(replace(cut, choices=choices))
        return known[key]

    return results


def rows_of(results, table, window, condition):
    return [
        row
        for row in results.rows[table]
        if row["window"] == window
        and row["condition"] == condition
        and row.get("role", "area") == "area"
    ]


def same_rows(found, expected):
    """Columns, order and every value alike; NaN is like NaN."""
    assert [list(row) for row in found] == [list(row) for row in expected]
    for one, other in zip(found, expected, strict=True):
        np.testing.assert_equal(one, other)


@pytest.mark.parametrize("move", MOVES, ids=lambda move: repr(move[1:]))
@pytest.mark.parametrize("condition", CONDITIONS)
def test_full_rows_are_those_of_a_run(cut, answers, run_of, move, condition):
    number, changes, signal = move
    windows = moved(cut, number, **changes)
    for window in windows:
        found = answers.full(chosen(cut, windows, signal), window.name, condition)
        assert (found.window, found.condition) == (window.name, condition)
        for table in TABLES:
            expected = rows_of(run_of(*move), table, window.name, condition)
            assert expected or (table == "lags" and window.areas)
            same_rows(getattr(found, table), expected)


@pytest.mark.parametrize("move", MOVES, ids=lambda move: repr(move[1:]))
@pytest.mark.parametrize("condition", CONDITIONS)
def test_quick_values_are_the_full_ones(cut, half, run_of, move, condition):
    number, changes, signal = move
    windows = moved(cut, number, **changes)
    hand = windows[number]
    quick = half.quick(windows, hand.name, condition, signal)
    results = run_of(*move)
    waves = rows_of(results, "latencies", hand.name, condition)
    assert [each.area for each in quick.waves] == [row["area"] for row in waves]
    for each, row in zip(quick.waves, waves, strict=True):
        assert (each.unit, each.extremum) == (row["unit"], row["extremum"])
        # Half of the random signs may judge otherwise, but only near .05.
        assert each.found == (row["p"] <= 0.05) or 0.01 < row["p"] < 0.12
        if each.found and row["p"] <= 0.05:
            found = [each.time_s * 1000, each.onset_s * 1000, each.amplitude]
            expected = [row[name] for name in ("time_ms", "onset_ms", "amplitude")]
            np.testing.assert_allclose(found, expected, rtol=1e-9)
    units = rows_of(results, "firing", hand.name, condition)
    assert [each.unit for each in quick.unit_rates] == [row["unit"] for row in units]
    for each, row in zip(quick.unit_rates, units, strict=True):
        for name in ("baseline_hz", "window_hz", "change_hz"):
            assert getattr(each, name) == pytest.approx(row[name], rel=1e-9, nan_ok=True)
    leads = rows_of(results, "verdicts", hand.name, condition)
    assert [(each.area_a, each.area_b) for each in quick.leads] == [
        (row["area_a"], row["area_b"]) for row in leads
    ]
    for each, row in zip(quick.leads, leads, strict=True):
        assert each.net == pytest.approx(row["net"], rel=1e-9, abs=1e-12, nan_ok=True)
        assert bool(each.withheld) == (row["verdict"] == "withheld")


@pytest.mark.parametrize("condition", CONDITIONS)
def test_with_all_resamples_quick_intervals_are_the_full_ones(cut, run_of, condition):
    quick = Answers(cut, n_draws=N).quick(cut.choices.window, "late", condition, "csd")
    assert quick.n_draws == N
    for each, row in zip(
        quick.waves, rows_of(run_of(*MOVES[0]), "latencies", "late", condition), strict=True
    ):
        for name, column in (("time", "time"), ("onset", "onset")):
            ends = [getattr(each, f"{name}_{end}_s") * 1000 for end in ("lo", "hi")]
            np.testing.assert_allclose(ends, [row[f"{column}_{end}_ms"] for end in ("lo", "hi")])
        assert (each.p, each.note) == (row["p"], row["note"])
    lags = rows_of(run_of(*MOVES[0]), "lags", "late", condition)
    for each, row in zip(quick.lags, lags, strict=True):
        assert (each.area_a, each.area_b, each.feature) == (
            row["area_a"],
            row["area_b"],
            row["feature"],
        )
        found = [each.difference_s, each.lo_s, each.hi_s, each.p]
        expected = [row.get(name, np.nan) for name in ("difference_ms", "lo_ms", "hi_ms", "p")]
        np.testing.assert_allclose(found, np.array(expected) / [1000, 1000, 1000, 1])
    for each, row in zip(
        quick.unit_rates, rows_of(run_of(*MOVES[0]), "firing", "late", condition), strict=True
    ):
        found = [each.lo_hz, each.hi_hz, each.p]
        np.testing.assert_allclose(found, [row[name] for name in ("lo_hz", "hi_hz", "p")])


def test_the_rate_of_an_area_is_the_mean_of_its_units(answers, cut):
    quick = answers.quick(cut.choices.window, "early", "single", "csd")
    assert [each.area for each in quick.rates] == ["S1", "S2", "M1"]
    for each in quick.rates:
        own = [unit for unit in quick.unit_rates if unit.area == each.area and unit.call]
        assert each.n_units == len(own) > 0
        assert each.change_hz == pytest.approx(np.mean([unit.change_hz for unit in own]))
        assert each.lo_hz <= each.change_hz <= each.hi_hz
        # The scenario's units fire more with the early wave.
        assert each.call == "rise"


def test_a_unit_with_few_spikes_is_said_and_left_out_of_its_area(cut):
    spikes = cut.spikes
    times = (spikes.time_s[0][:0], *spikes.time_s[1:])
    bare = Answers(replace(cut, spikes=replace(spikes, time_s=times)))
    quick = bare.quick(cut.choices.window, "early", "single", "csd")
    assert quick.unit_rates[0].call == ""
    assert "fewer than 5 spikes" in quick.unit_rates[0].note
    assert np.isnan(quick.unit_rates[0].change_hz)
    first = next(each for each in quick.rates if each.area == spikes.area[0])
    assert first.n_units == sum(area == first.area for area in spikes.area) - 1


def test_a_moved_window_alone_is_computed_again(cut, monkeypatch):
    answers = Answers(cut)
    answers.full(cut.choices, "late", "single")
    asked = []
    real = lead.estimate_pair

    def counted(a, b, rows, times, window, **rest):
        asked.append(window.name)
        return real(a, b, rows, times, window, **rest)

    monkeypatch.setattr(lead, "estimate_pair", counted)
    answers.full(cut.choices, "early", "pad")
    assert asked == []
    windows = moved(cut, 1, span_ms=(100.0, 196.0), direction_ms=(100.0, 228.0))
    signals = [prepare(replace(cut, choices=each)).signals
               for each in (cut.choices, chosen(cut, windows))]  # fmt: skip
    stays = {area for area in signals[0]
             if signals[0][area].channel[0] == signals[1][area].channel[0]}  # fmt: skip
    assert stays == {"S1", "S2", "M1"}  # else the early window would change with its signals
    answers.full(chosen(cut, windows), "late", "single")
    assert asked == ["late"] * 6  # 3 pairs x 2 conditions


def test_an_answer_no_longer_wanted_is_given_up_and_loses_nothing(cut, run_of):
    answers = Answers(cut)
    steps = []
    answers.full(cut.choices, "late", "single", stop=lambda: bool(steps.append(1)))
    fresh = Answers(cut)
    for allowed in (0, 5, len(steps) - 1):
        left = iter([False] * allowed)
        with pytest.raises(Stopped, match="given up while"):
            fresh.full(cut.choices, "late", "single", stop=lambda left=left: next(left, True))
    found = fresh.full(cut.choices, "late", "single", stop=lambda: False)
    same_rows(found.verdicts, rows_of(run_of(*MOVES[0]), "verdicts", "late", "single"))


def test_quick_and_full_may_be_asked_at_once(cut, run_of):
    answers = Answers(cut)
    with ThreadPoolExecutor(1) as worker:
        full = worker.submit(answers.full, cut.choices, "late", "single")
        quick = [answers.quick(moved(cut, 1, span_ms=(100.0 + step, 200.0 + step)), "late",
                               "single", "csd") for step in range(5)]  # fmt: skip
        same_rows(full.result().verdicts, rows_of(run_of(*MOVES[0]), "verdicts", "late", "single"))
    alone = Answers(cut).quick(moved(cut, 1, span_ms=(104.0, 204.0)), "late", "single", "csd")
    np.testing.assert_equal(asdict(quick[-1]), asdict(alone))


def test_other_settings_are_answered_too(cut):
    answers = Answers(cut)
    answers.quick(cut.choices.window, "late", "single", "csd")
    other = msgspec.structs.replace(
        cut.choices, resample=ResampleChoice(n=N, seed=7), direction=DirectionChoice(order=12)
    )
    found = answers.full(other, "late", "single")
    results = analyse(replace(cut, choices=other))
    for table in TABLES:
        same_rows(getattr(found, table), rows_of(results, table, "late", "single"))


def test_pictures_are_those_of_a_run(cut, answers, run_of):
    results = run_of(*MOVES[0])
    for each in results.maps:
        found = answers.map(each.area, each.condition, "csd")
        for name in ("mean", "lo", "hi", "time_s", "depth_um"):
            np.testing.assert_array_equal(getattr(found, name), getattr(each, name))
    for each in results.signal_averages:
        found = answers.average(each.area, each.condition)
        for name in ("mean", "lo", "hi", "time_s"):
            np.testing.assert_array_equal(getattr(found, name), getattr(each, name))
    for each in results.rates:
        found = answers.rates(each.area, each.condition)
        np.testing.assert_array_equal(found.rate_hz, each.rate_hz)
    lfp = answers.map("S1", "single", "lfp")
    assert len(lfp.mean) == np.count_nonzero(~cut.areas[0].contacts.bad)


def test_a_raster_holds_the_spikes_of_the_trials(cut, answers):
    unit = cut.spikes.unit[3]
    trial, time_s = answers.raster(unit, "pad")
    stimulus_s = cut.table.accepted_time_s()[cut.condition == "pad"]
    relative = cut.spikes.time_s[3][None] - stimulus_s[:, None]
    assert len(trial) == np.count_nonzero((relative >= -0.2) & (relative < 0.3))
    np.testing.assert_array_equal(trial, np.sort(trial))
    assert -0.2 <= time_s.min() < time_s.max() < 0.3


def test_a_condition_with_few_trials_is_said(cut):
    table = cut.table
    pads = np.flatnonzero(table.condition == "pad")
    reason = table.reason.astype(object)
    reason[pads[5:]] = "left out by hand"
    kept = ~np.isin(np.flatnonzero(table.accepted), pads[5:])
    small = replace(
        cut,
        table=replace(table, reason=reason.astype(str)),
        areas=tuple(replace(each, data_uv=each.data_uv[kept]) for each in cut.areas),
    )
    answers = Answers(small)
    quick = answers.quick(cut.choices.window, "late", "pad", "csd")
    assert (quick.note, quick.n_trials, quick.waves, quick.leads) == (FEW_TRIALS, 5, (), ())
    results = analyse(small)
    found = answers.full(cut.choices, "late", "pad")
    for table_name in TABLES:
        same_rows(getattr(found, table_name), rows_of(results, table_name, "late", "pad"))
    assert {row["verdict"] for row in found.verdicts} == {"withheld"}


@pytest.mark.parametrize("options", [{"spikes": False}, {"with_lfp": False}, {"areas": ("S1",)}],
                         ids=str)  # fmt: skip
def test_what_was_not_recorded_has_no_answer(options):
    cut = report_sessions.cut_session(**options)
    answers = Answers(cut)
    quick = answers.quick(cut.choices.window, "early", "single", "csd")
    full = answers.full(cut.choices, "early", "single")
    results = analyse(cut)
    for table in TABLES:
        same_rows(getattr(full, table), rows_of(results, table, "early", "single"))
    assert len(quick.waves) == len(cut.areas)
    assert bool(quick.unit_rates) == (cut.spikes is not None)
    assert bool(quick.leads) == (len(cut.areas) > 1)
    if not cut.areas:
        with pytest.raises(InputError, match="no LFP was recorded in 'S1'"):
            answers.map("S1", "single", "csd")
        with pytest.raises(InputError, match="no LFP was recorded in 'S1'"):
            answers.average("S1", "single")
    if cut.spikes is None:
        assert answers.rates("S1", "single") is None


def test_bad_questions_get_plain_messages(cut, answers):
    windows = cut.choices.window
    with pytest.raises(
        InputError,
        match="no window 'none of them'; needed is the name of a window: 'early', 'late'",
    ):
        answers.quick(windows, "none of them", "single", "csd")
    with pytest.raises(
        InputError, match="no window ''; needed is the name of a window: none is there"
    ):
        answers.full(msgspec.structs.replace(cut.choices, window=[]), "", "single")
    with pytest.raises(InputError, match="no condition 'nothing'; known are pad, single"):
        answers.quick(windows, "late", "nothing", "csd")
    with pytest.raises(InputError, match="no condition 'nothing'"):
        answers.map("S1", "nothing", "csd")
    with pytest.raises(InputError, match="no unit 'x'; known are"):
        answers.raster("x", "single")
    with pytest.raises(InputError, match="no LFP was recorded in 'V1'"):
        answers.map("V1", "single", "csd")
    narrow = (WindowChoice(name="narrow", span_ms=(50.0, 50.5)),)
    with pytest.raises(InputError, match="holds fewer than 3 samples"):
        answers.quick(narrow, "narrow", "single", "csd")


def test_a_session_whose_conditions_are_all_small_is_refused(cut):
    reason = np.full(len(cut.table.reason), "left out by hand")
    empty = replace(
        cut,
        table=replace(cut.table, reason=reason),
        areas=tuple(replace(each, data_uv=each.data_uv[:0]) for each in cut.areas),
    )
    with pytest.raises(InputError, match="no condition has 8 accepted trials"):
        Answers(empty)


def test_no_widget_is_needed():
    code = "import sys, lfpwidgets.answers; print('ipywidgets' in sys.modules)"
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=True,
        env=os.environ | {"PYTHONPATH": os.pathsep.join(sys.path)},
    )
    assert done.stdout.strip() == "False"
