"""The session file that the bench leaves: the same numbers, the user's comments, nothing lost."""

import numpy as np
import pytest

from lfptools import InputError, OutputError, SessionFileError, analyse, open_session
from lfptools.model import CutSession
from lfptools.trials import cut_trials
from lfpwidgets.state import BenchState


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
