"""The state of the bench: moves of windows, their bounds, what is shown, who is told."""

import math
import os
import subprocess
import sys

import msgspec
import numpy as np
import pytest

from lfptools import InputError, analyse
from lfptools.choices import DirectionChoice, WindowChoice
from lfpwidgets.state import BenchState
from tests.bench_sessions import CUT, EARLY, LATE, STEP_MS, cut_session, span


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
