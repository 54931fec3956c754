"""Cached trials against `cut_trials` itself: equal to the bit, and cut anew when they must be."""

import dataclasses
import os

import h5py
import msgspec
import numpy as np
import pytest

from lfptools import InputError, cut_cache, open_session
from lfptools.cut_cache import cache_folder, cached_cut
from lfptools.trials import cut_trials

replace = msgspec.structs.replace


@pytest.fixture
def folder(tmp_path):
    return tmp_path / "cache"


@pytest.fixture
def session(own_session):
    return open_session(own_session / "session.toml")


def stages(session, folder):
    """Return the stages that a call goes through, each once, with what it returns."""
    seen = []
    cut = cached_cut(session, folder=folder, progress=lambda stage, _: seen.append(stage))
    return list(dict.fromkeys(seen)), cut


READ = ["reading trials cut before"]
CUT = [
    "looking for bad contacts and trials",
    "cutting trials",
    "keeping the trials for the next time",
]


def same(a, b):
    """Assert that two records hold the same, arrays to the bit and of the same type."""
    assert type(a) is type(b)
    if dataclasses.is_dataclass(a):
        for field in dataclasses.fields(a):
            same(getattr(a, field.name), getattr(b, field.name))
    elif isinstance(a, np.ndarray):
        assert a.dtype == b.dtype
        assert a.shape == b.shape
        assert a.tobytes() == b.tobytes()
    elif isinstance(a, tuple):
        assert len(a) == len(b)
        for one, other in zip(a, b, strict=True):
            same(one, other)
    else:
        assert a == b


def test_the_second_time_equals_the_first_to_the_bit(session, folder):
    before = cut_trials(session)
    first_stages, first = stages(session, folder)
    again_stages, again = stages(session, folder)
    assert first_stages == CUT
    assert again_stages == READ
    same(first, before)
    same(again, before)
    assert len(list(folder.iterdir())) == 1


def test_reasons_and_factors_survive(own_session, folder):
    """Trials left out, rejected or outside the recording, and factors with any text."""
    path = own_session / "session.toml"
    text = path.read_text().replace('clock = "rig" # the clock of time_s', "drop = [3]")
    path.write_text(text.replace("[trials]", "[clean]\namplitude_sd = 3.0\n[trials]"))
    events = own_session / "events.csv"
    lines = events.read_text().splitlines()
    lines = [f"{line},<i>é" for line in lines]
    lines[0] = lines[0].replace("<i>é", "note")
    first, *rest = lines[1].split(",")
    lines[1] = ",".join(["0.0", *rest])
    assert float(first) > 0
    events.write_text("\n".join(lines) + "\n", encoding="utf-8")
    session = open_session(path)
    before = cut_trials(session)
    assert set(before.table.rejected_by_reason()) > {
        "left out by hand", "not whole inside the recording",
    }  # fmt: skip
    stages(session, folder)
    seen, again = stages(session, folder)
    assert seen == READ
    same(again, before)


def test_windows_resamples_and_spikes_are_the_present_ones(session, folder):
    stages(session, folder)
    choices = replace(session.choices, window=[], resample=replace(session.choices.resample, n=99))
    other = dataclasses.replace(session, choices=choices, spikes=None, name="other")
    seen, cut = stages(other, folder)
    assert seen == READ
    assert cut.choices is choices
    assert cut.spikes is None
    assert cut.name == "other"


def test_the_session_file_itself_may_change(own_session, session, folder):
    stages(session, folder)
    path = own_session / "session.toml"
    path.write_text(path.read_text() + "\n# saved again\n")
    assert stages(open_session(path), folder)[0] == READ


SETTINGS = {
    "trial window": ("window_ms = [-200, 300]", "window_ms = [-200, 280]"),
    "baseline": ("baseline_ms = [-100, 0]", "baseline_ms = [-120, 0]"),
    "rejection": ("[trials]", "[clean]\namplitude_sd = 5.0\n[trials]"),
    "contacts": ("[trials]", "[clean]\ncontact_factor = 3.0\n[trials]"),
    "channels": ('channels = "0-15"', 'channels = "0-14"'),
    "depths": ("pitch_um = 100", "pitch_um = 50"),
    "bad": ("pitch_um = 100", "bad = [4]\npitch_um = 100"),
    "amplifier delay": ('stream = "imec0.lf"', 'stream = "imec0.lf"\ndelay_ms = 0.4'),
    "event delay": ('file = "events.csv"', 'file = "events.csv"\ndelay_ms = 1.0'),
    "left out": ('file = "events.csv"', 'file = "events.csv"\ndrop = [3]'),
}


@pytest.mark.parametrize("old, new", SETTINGS.values(), ids=list(SETTINGS))  # noqa: PT006
def test_a_setting_that_bears_on_cutting_cuts_anew(own_session, session, folder, old, new):
    cached_cut(session, folder=folder)
    path = own_session / "session.toml"
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))
    other = open_session(path)
    seen, cut = stages(other, folder)
    assert seen == CUT
    same(cut, cut_trials(other))


def test_changed_files_cut_anew(own_session, session, folder):
    stages(session, folder)
    recording = next((own_session / "s1").glob("*.bin"))
    content = bytearray(recording.read_bytes())
    content[len(content) // 2 :: 4001] = bytes(len(content[len(content) // 2 :: 4001]))
    recording.write_bytes(content)
    other = open_session(own_session / "session.toml")
    seen, cut = stages(other, folder)
    assert seen == CUT
    same(cut, cut_trials(other))
    os.utime(recording, ns=(1, 1))  # the time alone
    assert stages(open_session(own_session / "session.toml"), folder)[0] == CUT


def test_changed_events_cut_anew(own_session, session, folder):
    stages(session, folder)
    events = own_session / "events.csv"
    events.write_text(events.read_text().rsplit("\n", 2)[0] + "\n")  # one event less
    seen, cut = stages(open_session(own_session / "session.toml"), folder)
    assert seen == CUT
    assert len(cut.table.time_s) == len(session.events) - 1


@pytest.mark.parametrize("what", ["version", "code", "layout"])
def test_another_version_cuts_anew(session, folder, monkeypatch, what):
    stages(session, folder)
    if what == "version":
        found = [type("Distribution", (), {"version": "99.0"})]
        monkeypatch.setattr(cut_cache, "distributions", lambda name: found)
    elif what == "code":
        monkeypatch.setattr(cut_cache, "_code", lambda: "other")
    else:
        monkeypatch.setattr(cut_cache, "_LAYOUT", 99)
    assert stages(session, folder)[0] == CUT


def spoil_end(path):
    path.write_bytes(path.read_bytes()[:-1000])


def spoil_bits(path):
    with h5py.File(path, "r+") as file:
        file["0/data_uv"][3, 2, 1] += 1e-3


def spoil_names(path):
    with h5py.File(path, "r+") as file:
        del file["1/time_s"]


def spoil_shape(path):
    with h5py.File(path, "r+") as file:
        words = file["words"][()]
        del file["words"]
        file["words"] = words[:-5]


def spoil_all(path):
    path.write_text("no trials here")


@pytest.mark.parametrize("spoil", [spoil_end, spoil_bits, spoil_names, spoil_shape, spoil_all])
def test_a_broken_file_is_ignored_and_written_again(session, folder, spoil):
    before = cached_cut(session, folder=folder)
    (path,) = folder.iterdir()
    spoil(path)
    seen, cut = stages(session, folder)
    assert seen == [*READ, *CUT]
    same(cut, before)
    assert stages(session, folder)[0] == READ


def test_a_file_changed_while_it_is_read_is_not_kept(own_session, session, folder):
    recording = next((own_session / "s1").glob("*.bin"))

    def touch(stage, _share):
        if stage == "cutting trials":
            os.utime(recording, ns=(1, 1))

    cached_cut(session, folder=folder, progress=touch)
    assert not folder.exists()


def test_no_more_than_the_bound_is_kept(own_session, folder, monkeypatch):
    def cut(window_ms):
        path = own_session / "session.toml"
        text = path.read_text()
        at = text.index("window_ms = ")
        path.write_text(text[:at] + f"window_ms = {window_ms}" + text[text.index("\n", at) :])
        before = set(folder.glob("*")) if folder.exists() else set()
        cached_cut(open_session(path), folder=folder)
        return next(iter(set(folder.glob("*")) - before), None)

    first = cut([-200, 300])
    size = first.stat().st_size
    monkeypatch.setattr(cut_cache, "MOST_BYTES", int(2.5 * size))
    second = cut([-200, 290])
    os.utime(first, ns=(1, 1))  # used long ago ...
    os.utime(second, ns=(2, 2))
    assert cut([-200, 300]) is None  # ... and used again
    third = cut([-200, 280])
    assert set(folder.iterdir()) == {first, third}
    half_written = folder / ".cut-0.h5.1.part"
    half_written.write_bytes(bytes(size))
    os.utime(half_written, ns=(1, 1))
    fourth = cut([-200, 270])
    assert half_written not in set(folder.iterdir())
    assert fourth in set(folder.iterdir())
    assert sum(path.stat().st_size for path in folder.iterdir()) <= cut_cache.MOST_BYTES
    monkeypatch.setattr(cut_cache, "MOST_BYTES", size // 2)
    assert cut([-200, 260]) is None  # too large to be kept at all


def test_a_cache_that_cannot_be_written_is_no_error(session, tmp_path):
    folder = tmp_path / "cache"
    folder.write_text("a file where the folder should be")
    seen, cut = stages(session, folder)
    assert seen == [*CUT, "the trials could not be kept for the next time"]
    same(cut, cut_trials(session))


def test_a_session_that_no_file_describes_is_cut(session, folder):
    areas = tuple(
        dataclasses.replace(area, recording=dataclasses.replace(area.recording, files=()))
        for area in session.areas
    )
    stages(dataclasses.replace(session, areas=areas), folder)
    assert not folder.exists()


def test_too_few_trials_are_refused_every_time(own_session, folder):
    path = own_session / "session.toml"
    n_events = len((own_session / "events.csv").read_text().splitlines()) - 1
    left_out = list(range(n_events - 3))
    text = path.read_text().replace(
        'file = "events.csv"', f'file = "events.csv"\ndrop = {left_out}'
    )
    path.write_text(text)
    for _ in range(2):
        with pytest.raises(InputError, match="no condition keeps 8 accepted trials"):
            cached_cut(open_session(path), folder=folder)
    assert not folder.exists()


def test_the_folder_is_the_users_cache(monkeypatch, tmp_path):
    """XDG Base Directory Specification 0.8: a path that is not absolute is ignored."""
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    assert cache_folder() == tmp_path / "lfptools"
    monkeypatch.setenv("XDG_CACHE_HOME", "somewhere")
    monkeypatch.setenv("HOME", str(tmp_path / "home"))
    assert cache_folder() == tmp_path / "home" / ".cache" / "lfptools"
    monkeypatch.delenv("XDG_CACHE_HOME")
    assert cache_folder() == tmp_path / "home" / ".cache" / "lfptools"


def test_the_folder_is_the_users_own(session, monkeypatch, tmp_path):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "xdg"))
    cached_cut(session)
    assert len(list((tmp_path / "xdg" / "lfptools").glob("cut-*.h5"))) == 1
    assert (tmp_path / "xdg" / "lfptools").stat().st_mode & 0o777 == 0o700
