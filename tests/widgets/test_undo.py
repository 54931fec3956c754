"""Undo, redo and gestures of the bench, and the laws that any moves obey."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lfptools import InputError
from lfpwidgets.history import MOST_STEPS
from lfpwidgets.state import BenchState
from tests.bench_sessions import CUT, EARLY, LATE, gesture, span


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
    with gesture(state):
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
    with gesture(state):
        state.move("early", 8.0, 140.0)
        assert not state.can_redo
        state.move("early", 5.0, 40.0)  # 5 is between two samples: 4.8
    assert span(state, "early") == (4.8, 40.0)
    state.undo()
    state.nudge("early", "first", 1)
    start = state.view
    with gesture(state):
        state.move("early", 8.0, 140.0)
        state.move("early", *start.window("early").span_ms)
    assert state.view == start
    state.undo()
    assert state.view.windows == (EARLY, LATE)
    with gesture(state):
        state.set_extremum("early", "peak")
        state.set_extremum("early", "trough")
    assert state.view.windows == (EARLY, LATE)  # unmarked
    assert state.can_redo


def test_a_refused_move_in_a_gesture_keeps_the_rest(state):
    def drag():
        with gesture(state):
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
