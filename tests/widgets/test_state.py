"""The state of the bench: moves, bounds, undo and gestures, and the session file it leaves."""

import math
import os
import subprocess
import sys

import msgspec
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lfptools import InputError, OutputError, SessionFileError, analyse, open_session
from lfptools.choices import (
    AnalysisChoices,
    DirectionChoice,
    ResampleChoice,
    TrialsChoice,
    WindowChoice,
    WindowFor,
)
from lfptools.model import Contacts, CutSession, SpikeTrains, Trials, TrialTable
from lfptools.trials import cut_trials
from lfpwidgets.history import MOST_STEPS
from lfpwidgets.state import BenchState

#: S1 at 2500 Hz, M1 at 1250 Hz: edges lie on multiples of 0.8 ms, as the slower area's samples.
STEP_MS = 0.8
N_TRIALS = 20
EARLY = WindowChoice(
    name="early",
    span_ms=(5.0, 40.0),
    direction_ms=(0.0, 100.0),
    for_={"M1": WindowFor(span_ms=(10.0, 50.0))},
)
LATE = WindowChoice(name="late", span_ms=(100.0, 200.0), extremum="peak")


def area(name, rate_hz):
    time_s = np.arange(-round(0.2 * rate_hz), round(0.3 * rate_hz)) / rate_hz
    depth_um = 100.0 * np.arange(6)
    wave = -200 * np.exp(-0.5 * ((time_s - 0.02) / 0.005) ** 2)
    noise = np.random.default_rng(len(name)).normal(0, 5, (N_TRIALS, 6, len(time_s)))
    return Trials(
        area=name,
        data_uv=(noise + wave * np.exp(-(((depth_um - 250) / 100) ** 2))[:, None]).astype("f4"),
        time_s=time_s,
        rate_hz=rate_hz,
        contacts=Contacts(np.arange(6), depth_um, np.zeros(6, bool), ("",) * 6),
    )


def cut_session(windows=(EARLY, LATE), rates_hz=(2500.0, 1250.0), window_ms=(-200.0, 300.0)):
    names = ("S1", "M1")
    condition = np.array(["none"] * 2 + ["single"] * (N_TRIALS - 2))
    return CutSession(
        name="whisk-01",
        table=TrialTable(
            time_s=np.arange(float(N_TRIALS)), condition=condition, reason=np.full(N_TRIALS, "")
        ),
        areas=tuple(area(*each) for each in zip(names, rates_hz, strict=False)),
        area_names=names,
        choices=AnalysisChoices(
            trials=TrialsChoice(window_ms=window_ms, baseline_ms=(-100.0, 0.0)),
            window=list(windows),
            resample=ResampleChoice(n=99),
        ),
        spikes=SpikeTrains(
            unit=("a", "<b>", "c"),
            area=("S1", "S1", "M1"),
            depth_um=np.full(3, 100.0),
            time_s=(np.array([0.1]), np.array([]), np.array([0.2])),
        ),
    )


CUT = cut_session()


@pytest.fixture
def state():
    return BenchState(CUT)


def span(state, name):
    return state.view.window(name).span_ms


def refused(state, move, *words):
    """Assert that a move is refused with all these words, and that nothing changes."""
    before = state.view
    told = []
    stop = state.observe(lambda *_: told.append(1))
    can = state.can_undo, state.can_redo
    with pytest.raises(InputError) as caught:
        move()
    stop()
    assert state.view is before
    assert told == []
    assert (state.can_undo, state.can_redo) == can
    for word in words:
        assert word in str(caught.value)


def test_needs_no_widget():
    code = "import sys, lfpwidgets.state; print('ipywidgets' in sys.modules)"
    env = os.environ | {"PYTHONPATH": os.pathsep.join(sys.path)}
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, env=env)
    assert done.stdout == "False\n", done.stderr


def test_starts_from_the_sessions_windows(state):
    view = state.view
    assert view.windows == (EARLY, LATE)
    assert (view.hand, view.area, view.signal, view.units) == ("early", "S1", "csd", ())
    assert view.condition == "single"  # the first has too few trials
    assert state.step_ms == pytest.approx(STEP_MS)
    assert (state.can_undo, state.can_redo, state.unsaved) == (False, False, False)
    assert state.as_choices() == CUT.choices


def test_starts_from_the_windows_a_run_would_propose():
    cut = cut_session(windows=())
    state = BenchState(cut)
    assert list(state.view.windows) == analyse(cut).choices.window
    assert {each.chosen for each in state.view.windows} == {"on these trials"}
    first, last = span(state, "wave 1")
    assert first < 20 < last  # where the wave was put


def test_starts_without_any_window():
    flat = cut_session(windows=(), rates_hz=())
    state = BenchState(flat)
    assert state.view.windows == ()
    assert state.view.hand == ""
    assert state.step_ms == 1.0  # no LFP
    assert state.add(5.2, 40.0) == "window 1"
    assert span(state, "window 1") == (5.0, 40.0)
    state.undo()
    assert state.view.windows == ()


# Moves of a window.


def test_an_edge_goes_to_the_nearest_sample_of_the_slowest_area(state):
    state.move("early", 7.1, 39.9)
    assert span(state, "early") == (7.2, 40.0)
    state.move("early", 7.2, 99.99999999999999)  # what a slider sends for 100
    assert span(state, "early") == (7.2, 100.0)


def test_an_edge_that_stays_is_not_rounded(state):
    state.move("early", 5.0, 48.3)
    assert span(state, "early") == (5.0, 48.0)  # 5 is no multiple of 0.8


@pytest.mark.parametrize("rate_hz", [1000.0, 1250.0, 2500.0, 2500.035, 30000.0 / 24])
def test_every_edge_is_a_sample(rate_hz):
    """Edges written to 1e-6 ms still name the sample they were rounded to."""
    state = BenchState(cut_session(rates_hz=(rate_hz,)))
    for first_ms in np.linspace(-190, 250, 23):
        state.move("late", float(first_ms), 299.0)
        samples = span(state, "late")[0] * rate_hz / 1000
        assert abs(samples - round(samples)) < 1e-5
        assert abs(span(state, "late")[0] - first_ms) <= 500 / rate_hz + 1e-6


def test_the_trials_ends_can_be_reached(state):
    state.move("early", -200.0, 300.0)
    assert span(state, "early") == (-200.0, 300.0)
    odd = BenchState(cut_session(window_ms=(-199.9, 299.9)))
    odd.move("late", -199.9, 299.9)  # the nearest samples lie outside: the next ones inside
    assert span(odd, "late") == (-199.2, 299.2)


def test_edges_outside_or_crossing_are_refused(state):
    refused(state, lambda: state.move("early", -200.1, 40.0),
            "first edge of window 'early' is -200.1 ms", "-200 to 300 ms")  # fmt: skip
    refused(state, lambda: state.move("early", 5.0, 301.0), "last edge", "301 ms")
    refused(state, lambda: state.move("early", 50.0, 40.0), "'early'", "from 50.4 to 40 ms",
            "at least 2.4 ms (3 samples)")  # fmt: skip
    refused(state, lambda: state.move("early", 40.0, 41.6), "needed is a last edge")
    for value in (math.nan, math.inf, -math.inf):
        refused(state, lambda value=value: state.move("early", value, 40.0), "inside the trial")
    refused(state, lambda: state.move("middle", 5.0, 40.0), "no window 'middle'", "'early', 'late'")
    state.move("early", 40.0, 42.4)  # three samples are enough
    assert span(state, "early") == (40.0, 42.4)


def test_nudges_are_samples(state):
    state.nudge("early", "first", 1)
    assert span(state, "early") == (5.6, 40.0)  # from between two samples to the next one
    state.undo()
    state.nudge("early", "first", -1)
    assert span(state, "early") == (4.8, 40.0)
    state.nudge("early", "last", 10)
    assert span(state, "early") == (4.8, 48.0)
    state.nudge("early", "both", -10)
    assert span(state, "early") == (-3.2, 40.0)
    before = state.view
    state.nudge("early", "both", 0)
    assert state.view is before
    refused(state, lambda: state.nudge("early", "first", -1000), "inside the trial")
    refused(state, lambda: state.nudge("early", "first", 60), "3 samples")
    refused(state, lambda: state.nudge("early", "middle", 1), "'middle'", "first, last, both")


def test_what_is_moved_is_marked_and_nothing_else(state):
    state.move("early", 8.0, 40.0)
    early, late = state.view.windows
    assert early == msgspec.structs.replace(EARLY, span_ms=(8.0, 40.0), chosen="on these trials")
    assert late is LATE
    state.move("late", *LATE.span_ms)
    assert state.view.window("late") is LATE  # to where it was is no move


def test_the_direction_span_holds_the_window_and_comes_back(state):
    state.move("early", 8.0, 80.0)
    assert state.view.window("early").direction_ms == (0.0, 100.0)
    state.move("early", -8.0, 120.0)
    assert state.view.window("early").direction_ms == (-8.0, 120.0)
    state.move("early", 8.0, 40.0)
    assert state.view.window("early").direction_ms == (0.0, 100.0)
    state.move("late", 80.0, 220.0)
    assert state.view.window("late").direction_ms is None  # its own span, as before


def test_windows_are_added_named_and_removed(state):
    assert state.add(50.0, 60.0) == "window 3"
    assert state.view.hand == "window 3"
    added = state.view.window("window 3")
    assert added == WindowChoice(name="window 3", span_ms=(50.4, 60.0), chosen="on these trials")
    state.rename("window 3", "  <b>mid</b> ")
    assert state.view.hand == "<b>mid</b>"
    state.rename("early", "window 4")
    assert state.add(50.0, 60.0) == "window 5"  # 4 is taken
    assert state.add(70.0, 80.0, "named") == "named"
    state.remove("named")
    assert state.view.hand == "window 5"  # its neighbour
    state.remove("window 4")
    assert state.view.hand == "window 5"
    assert [each.name for each in state.view.windows] == ["late", "<b>mid</b>", "window 5"]


def test_a_name_is_no_choice_on_the_trials(state):
    state.rename("early", "first")
    assert state.view.window("first") == msgspec.structs.replace(EARLY, name="first")
    before = state.view
    state.rename("first", "first")
    assert state.view == before


def test_names_that_cannot_be_used_are_refused(state):
    refused(state, lambda: state.rename("early", "late"), "'late' already", "another name")
    refused(state, lambda: state.rename("other", "x"), "no window 'other'")
    for name in ("", "  ", "x" * 101, "a\nb", "\ud800"):
        refused(state, lambda name=name: state.rename("early", name), "1 to 100 printable")
        refused(state, lambda name=name: state.add(50.0, 60.0, name), "1 to 100 printable")
    refused(state, lambda: state.add(50.0, 60.0, "late"), "'late' already")
    refused(state, lambda: state.add(60.0, 50.0), "'window 3'")


def test_the_last_window_stays(state):
    state.remove("late")
    refused(state, lambda: state.remove("early"), "'early'", "last one", "at least one")


def test_the_sign_is_a_choice_on_the_trials(state):
    state.set_extremum("early", "peak")
    assert state.view.window("early").extremum == "peak"
    assert state.view.window("early").chosen == "on these trials"
    state.set_extremum("late", "peak")  # it was one
    assert state.view.window("late") is LATE
    refused(state, lambda: state.set_extremum("early", "valley"), "'valley'", "trough, peak")


# What is looked at.


def test_what_is_shown(state):
    state.take("late")
    state.show(condition="none", area="M1", signal="lfp", units=("c",))
    view = state.view
    assert (view.hand, view.condition, view.area) == ("late", "none", "M1")
    assert (view.signal, view.units) == ("lfp", ("c",))
    state.show(area="M1")
    assert state.view.units == ("c",)
    state.show(area="S1")
    assert state.view.units == ()
    state.show(units=("<b>", "a", "<b>"))
    assert state.view.units == ("<b>", "a")
    assert state.as_choices().direction == DirectionChoice(signal="lfp")


def test_what_is_not_there_cannot_be_shown(state):
    refused(state, lambda: state.show(condition="pad"), "condition is 'pad'", "none, single")
    refused(state, lambda: state.show(area="S2"), "area is 'S2'", "S1, M1")
    refused(state, lambda: state.show(signal="eeg"), "signal is 'eeg'", "csd, lfp")
    refused(state, lambda: state.show(area="S1", units=("c",)), "unit of S1 is 'c'", "a, <b>")
    refused(state, lambda: state.show(condition="none", units=("x",)), "'x'")
    refused(state, lambda: state.take("middle"), "no window 'middle'")


def test_one_show_is_one_change(state):
    told = []
    state.observe(lambda before, after: told.append((before, after)))
    start = state.view
    state.show(condition="none", area="M1", signal="lfp")
    assert told == [(start, state.view)]
    state.show(condition="none")
    assert len(told) == 1


# Observers.


def test_observers_are_told_until_they_stop(state):
    told = []
    stop = state.observe(lambda before, after: told.append((before.windows, after.windows)))
    state.move("early", 8.0, 40.0)
    assert told == [((EARLY, LATE), state.view.windows)]
    state.move("early", 8.0, 40.0)
    assert len(told) == 1
    stop()
    stop()
    state.undo()
    assert len(told) == 1


def test_a_move_made_by_an_observer_is_told_in_its_turn(state):
    told = []

    def follow(_before, after):
        if after.hand != "late":
            state.take("late")

    state.observe(follow)
    state.observe(lambda before, after: told.append((before.hand, after.hand)))
    state.move("early", 8.0, 40.0)
    assert told == [("early", "early"), ("early", "late")]


def test_an_observer_that_fails_keeps_nothing_from_the_others(state):
    told = []

    def fail(_before, _after):
        raise RuntimeError("no picture")

    stop = state.observe(fail)
    state.observe(lambda _before, after: told.append(after))
    with pytest.raises(RuntimeError, match="no picture"):
        state.move("early", 8.0, 40.0)
    assert told == [state.view]
    assert span(state, "early") == (8.0, 40.0)
    stop()
    state.undo()
    assert told[-1] == state.view


# Back and forth.


def test_undo_and_redo(state):
    state.move("early", 8.0, 40.0)
    state.rename("early", "first")
    state.undo()
    assert span(state, "early") == (8.0, 40.0)
    state.undo()
    assert state.view.windows == (EARLY, LATE)
    assert not state.can_undo
    state.undo()  # nothing left: nothing happens
    state.redo()
    state.redo()
    assert span(state, "first") == (8.0, 40.0)
    assert not state.can_redo
    state.redo()
    state.undo()
    state.move("late", 104.0, 200.0)
    assert not state.can_redo


def test_looking_elsewhere_is_no_step(state):
    state.move("early", 8.0, 40.0)
    state.undo()
    state.show(condition="none", area="M1")
    state.take("late")
    assert not state.can_undo
    state.redo()
    assert span(state, "early") == (8.0, 40.0)
    assert (state.view.condition, state.view.area) == ("none", "M1")
    state.undo()
    assert state.view.hand == "late"  # in hand when redo was asked for


def test_the_window_then_in_hand_comes_back(state):
    state.take("late")
    state.remove("late")
    state.undo()
    assert state.view.hand == "late"
    name = state.add(50.0, 60.0)
    state.undo()
    assert state.view.hand == "late"
    state.redo()
    assert state.view.hand == name


def test_the_signal_is_a_step(state):
    state.show(signal="lfp")
    assert state.can_undo
    state.undo()
    assert state.view.signal == "csd"


def test_a_gesture_is_one_step(state):
    with state.gesture():
        for first_ms in np.arange(5.6, 30, 0.8):
            state.move("early", float(first_ms), 40.0)
        assert state.can_undo
    assert span(state, "early")[0] == pytest.approx(29.6)
    state.undo()
    assert state.view.windows == (EARLY, LATE)
    assert not state.can_undo
    state.redo()
    assert span(state, "early")[0] == pytest.approx(29.6)


def test_a_gesture_that_comes_back_leaves_nothing(state):
    state.move("late", 104.0, 200.0)
    state.undo()
    with state.gesture():
        state.move("early", 8.0, 140.0)
        assert not state.can_redo
        state.move("early", 5.0, 40.0)  # 5 is between two samples: 4.8
    assert span(state, "early") == (4.8, 40.0)
    state.undo()
    state.nudge("early", "first", 1)
    start = state.view
    with state.gesture():
        state.move("early", 8.0, 140.0)
        state.move("early", *start.window("early").span_ms)
    assert state.view == start
    state.undo()
    assert state.view.windows == (EARLY, LATE)
    with state.gesture():
        state.set_extremum("early", "peak")
        state.set_extremum("early", "trough")
    assert state.view.windows == (EARLY, LATE)  # unmarked
    assert state.can_redo


def test_a_refused_move_in_a_gesture_keeps_the_rest(state):
    def drag():
        with state.gesture():
            state.move("early", 8.0, 40.0)
            state.move("early", 8.0, 400.0)

    with pytest.raises(InputError):
        drag()
    assert span(state, "early") == (8.0, 40.0)
    state.undo()
    assert span(state, "early") == (5.0, 40.0)


def test_a_gesture_whose_end_was_lost_ends_with_the_next(state):
    state.begin_gesture()
    state.move("early", 8.0, 40.0)
    state.begin_gesture()
    state.move("early", 9.6, 40.0)
    state.undo()
    assert span(state, "early") == (8.0, 40.0)
    state.undo()
    assert span(state, "early") == (5.0, 40.0)
    state.end_gesture()
    assert not state.can_undo


def test_the_history_is_bounded(state):
    for n_samples in [1, -1] * (MOST_STEPS // 2 + 5):
        state.nudge("late", "both", n_samples)
    count = 0
    while state.can_undo:
        state.undo()
        count += 1
    assert count == MOST_STEPS == 500


moves = st.one_of(
    st.tuples(st.just("move"), st.floats(-250, 350), st.floats(-250, 350)),
    st.tuples(st.just("nudge"), st.sampled_from(["first", "last", "both"]), st.integers(-400, 400)),
    st.tuples(st.just("add"), st.floats(-250, 350), st.floats(-250, 350)),
    st.tuples(st.just("rename"), st.sampled_from(["early", "late", "x", ""])),
    st.tuples(st.just("remove")),
    st.tuples(st.just("set_extremum"), st.sampled_from(["trough", "peak"])),
    st.tuples(st.just("take")),
    st.tuples(st.just("show"), st.sampled_from(["csd", "lfp"])),
    st.tuples(st.just("begin_gesture")),
    st.tuples(st.just("end_gesture")),
)


def make(state, move, which):
    """Make a move of the drawn window; one that is refused must change nothing."""
    name, *rest = move
    before = state.view
    try:
        if name == "show":
            state.show(signal=rest[0])
        elif name in ("add", "begin_gesture", "end_gesture"):
            getattr(state, name)(*rest)
        else:
            window = state.view.windows[which % len(state.view.windows)].name
            getattr(state, name)(window, *rest)
    except InputError:
        assert state.view is before


@settings(max_examples=150, deadline=None)
@given(st.lists(st.tuples(moves, st.integers(0, 5)), max_size=30))
def test_laws_of_any_moves(drawn):
    state = BenchState(CUT)
    for move, which in drawn:
        make(state, move, which)
        view = state.view
        names = [each.name for each in view.windows]
        assert len(set(names)) == len(names) > 0
        assert view.hand in names
        for window in view.windows:
            first, last = window.span_ms
            assert -200 <= first < last <= 300
            assert last - first > 2.4 - 1e-6
            if window.direction_ms:
                assert window.direction_ms[0] <= first < last <= window.direction_ms[1]
            if window.span_ms not in (EARLY.span_ms, LATE.span_ms):
                assert window.chosen == "on these trials"
    state.end_gesture()
    end = state.view
    undone = 0
    while state.can_undo:
        state.undo()
        undone += 1
        assert undone <= len(drawn)
    assert (state.view.windows, state.view.signal) == ((EARLY, LATE), "csd")
    while state.can_redo:
        state.redo()
    assert state.view.numbers == end.numbers


# The session file.


@pytest.fixture
def opened(own_session):
    """Return the small session's folder and a state over its cut trials, quick to analyse."""
    path = own_session / "session.toml"
    quick = "\n[resample]\nn = 99\n[coupling]\nn_shuffles = 19\n"
    path.write_text(path.read_text() + quick)
    return own_session, BenchState(cut_trials(open_session(path)), path=path)


def test_a_saved_session_gives_the_same_numbers(opened):
    """Every row of every table, to the bit."""
    folder, state = opened
    state.move("early", 7.0, 48.0)
    state.rename("early", "feed <b>forward")
    state.show(signal="lfp")
    state.remove("late")
    assert state.unsaved
    assert state.save() == folder / "session.toml"
    assert not state.unsaved
    again = open_session(folder / "session.toml")
    assert again.choices == state.as_choices()
    cut = state.cut
    here = CutSession(
        cut.name, cut.table, cut.areas, cut.area_names, state.as_choices(), cut.spikes
    )
    saved, shown = analyse(again).rows, analyse(here).rows
    assert saved.keys() == shown.keys()
    for table, rows in shown.items():
        assert len(saved[table]) == len(rows) > 0, table
        for one, other in zip(saved[table], rows, strict=True):
            assert one.keys() == other.keys()
            for column, value in one.items():
                np.testing.assert_equal(value, other[column])
    assert "window chosen on these trials" in saved["latencies"][0]["note"]


def test_comments_stay_through_rename_save_and_undo(opened):
    folder, state = opened
    text = (folder / "session.toml").read_text()
    comment = "# each window holds one wave of each area"
    assert comment in text
    state.rename("early", "first")
    state.save()
    state.rename("first", "second")
    state.nudge("second", "last", 1)
    state.save()
    state.save()  # nothing new
    saved = (folder / "session.toml").read_text()
    assert f'name = "second" {comment}' in saved
    state.undo()
    state.undo()
    state.undo()
    assert state.unsaved
    state.save()
    assert (folder / "session.toml").read_text() == text.replace(
        "\n\n[[window]]\nname = \"late\"", "\nchosen = \"before\"\n\n[[window]]\nname = \"late\""
    )  # fmt: skip


def test_a_removed_window_can_be_brought_back_after_saving(opened):
    folder, state = opened
    before = state.view.windows
    state.remove("early")
    state.save()
    state.undo()
    state.save()
    assert tuple(open_session(folder / "session.toml").choices.window) == before


def test_a_file_changed_on_disk_is_left_alone_and_nothing_is_lost(opened):
    folder, state = opened
    path = folder / "session.toml"
    state.move("early", 7.0, 48.0)
    path.write_text(path.read_text() + "# by somebody else\n")
    before = path.read_bytes()
    with pytest.raises(SessionFileError, match="changed on disk"):
        state.save()
    assert path.read_bytes() == before
    assert state.unsaved
    with pytest.raises(OutputError, match="exists already"):
        state.save_as(path)
    assert state.save_as("mine.toml") == folder / "mine.toml" == state.path
    assert not state.unsaved
    assert path.read_bytes() == before
    saved = open_session(folder / "mine.toml")
    assert saved.choices == state.as_choices()
    state.nudge("early", "last", 1)
    state.save()
    assert open_session(folder / "mine.toml").choices == state.as_choices()
    path.unlink()
    with pytest.raises(SessionFileError, match="another folder"):
        state.save_as(folder.parent / "far.toml")


def test_trials_of_no_file_cannot_be_saved(state):
    assert state.path is None
    for save in (state.save, lambda: state.save_as("mine.toml")):
        with pytest.raises(InputError, match="no session file"):
            save()


def test_a_file_that_says_something_else_is_refused(opened):
    folder, state = opened
    path = folder / "session.toml"
    path.write_text(path.read_text().replace("n = 99", "n = 199"))
    with pytest.raises(SessionFileError, match=r"session\.toml: .* differs in resample; open"):
        BenchState(state.cut, path=path)
    path.write_text(path.read_text().replace("n = 199", "n = 99").replace("[5, 40]", "[6, 40]"))
    assert BenchState(state.cut, path=path).view.windows == state.view.windows
