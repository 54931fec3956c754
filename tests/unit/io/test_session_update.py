"""The session file on disk: replaced whole or not at all, and only as it was seen."""

import msgspec
import pytest

from lfptools.choices import WindowChoice
from lfptools.errors import OutputError, SessionFileError
from lfptools.io.session_file import read_session_file
from lfptools.io.session_update import file_digest, save_session_as, update_session_file

replace = msgspec.structs.replace


@pytest.fixture
def path(commented):
    return commented


def windows_of(path):
    return read_session_file(path).choices.window


def update(path, windows, **more):
    return update_session_file(path, windows, seen=file_digest(path), **more)


def refused(path, windows, error=SessionFileError, **more):
    before = path.read_bytes()
    with pytest.raises(error) as caught:
        update(path, windows, **more)
    assert path.read_bytes() == before
    assert {each.name for each in path.parent.iterdir()} == {
        "session.toml", "s1", "m1.nwb", "events.csv",
    }  # fmt: skip
    return str(caught.value)


def test_impossible_windows_are_refused(path):
    early, late = windows_of(path)
    said = refused(path, [replace(early, span_ms=(40.0, 5.0)), late])
    assert "session.toml: window[0].span_ms (early) is [40.0, 5.0]; needed is" in said
    assert "(early)" in refused(path, [replace(early, span_ms=(5.0, 400.0)), late])
    assert "window[1].name" in refused(path, [early, replace(late, name="early")])
    assert "cannot be written" in refused(path, [replace(early, name="\ud800"), late])
    assert "window[0].name" in refused(path, [replace(early, name=""), late])


def test_a_file_changed_meanwhile_is_refused(path):
    windows = windows_of(path)
    seen = file_digest(path)
    path.write_text(path.read_text() + "# a note\n")
    before = path.read_bytes()
    with pytest.raises(SessionFileError, match="changed on disk since it was opened"):
        update_session_file(path, windows, seen=seen, direction_signal="lfp")
    assert path.read_bytes() == before


def test_a_file_changed_at_the_last_moment_is_refused(path, monkeypatch):
    """Another program writes between the first look and the replacement."""
    windows = windows_of(path)
    other = path.read_bytes() + b"# a note\n"

    def copymode(_source, _target):
        path.write_bytes(other)

    monkeypatch.setattr("lfptools.io.session_update.shutil.copymode", copymode)
    with pytest.raises(SessionFileError, match="changed on disk"):
        update(path, windows, direction_signal="lfp")
    assert path.read_bytes() == other
    assert not list(path.parent.glob(".*.part"))


def test_a_lost_file_is_named(path):
    windows, seen = windows_of(path), file_digest(path)
    path.unlink()
    with pytest.raises(SessionFileError, match=r"session\.toml: there is no such session file"):
        update_session_file(path, windows, seen=seen)
    with pytest.raises(SessionFileError, match="there is no such session file"):
        file_digest(path)


def test_a_write_that_fails_leaves_the_file(path, monkeypatch):
    def replace_fails(_source, _target):
        raise OSError("no space left on device")

    monkeypatch.setattr("lfptools.io.whole.os.replace", replace_fails)
    said = refused(path, windows_of(path), OutputError, direction_signal="lfp")
    assert "session.toml: cannot be written (no space left on device)" in said


def test_mode_and_link_stay(path):
    real = path.rename(path.with_name("real.toml"))
    real.chmod(0o640)
    path.symlink_to(real.name)
    update(path, windows_of(path), direction_signal="lfp")
    assert path.is_symlink()
    assert real.stat().st_mode & 0o777 == 0o640
    assert read_session_file(real).choices.direction.signal == "lfp"


def test_saved_under_another_name(path):
    before = path.read_bytes()
    windows = [WindowChoice(name="only", span_ms=(5.0, 40.0))]
    new = save_session_as(path, "other.toml", windows, direction_signal="lfp")
    assert new == path.parent / "other.toml"
    assert windows_of(new) == windows
    assert path.read_bytes() == before
    written = new.read_bytes()
    with pytest.raises(OutputError, match=r"other\.toml: exists already"):
        save_session_as(path, new, [])
    with pytest.raises(OutputError, match="exists already"):
        save_session_as(path, path, [])
    assert new.read_bytes() == written


def test_saved_in_another_folder_is_refused(path):
    with pytest.raises(SessionFileError, match="lies in another folder"):
        save_session_as(path, path.parent / "s1" / "other.toml", windows_of(path))
    assert not (path.parent / "s1" / "other.toml").exists()


def test_a_lost_file_can_be_saved_from_what_was_opened(path):
    content, windows = path.read_bytes(), windows_of(path)
    path.unlink()
    assert save_session_as(path, path, windows, content=content) == path
    assert path.read_bytes() == content
