"""From a session file to a Session: areas, contacts, units, events, delays, files."""

import re

import numpy as np
import pytest

from lfptools.errors import ReaderError, SessionFileError
from lfptools.io.opening import open_session
from lfptools.io.session_file import read_session_file


def changed(folder, *changes):
    """Write the session file with each (old, new) replaced once; return its path."""
    path = folder / "session.toml"
    text = path.read_text()
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    path.write_text(text)
    return path


def test_areas_contacts_and_names(folder):
    session = open_session(folder / "session.toml")
    assert (session.name, session.subject) == ("whisk-01", "rat 1")
    s1, m1 = session.areas
    assert (s1.name, s1.layers) == ("S1", {"L4": (100.0, 250.0)})
    assert s1.contacts.channel.tolist() == [0, 1, 2, 3]
    assert s1.contacts.depth_um.tolist() == [0, 100, 200, 300]
    assert s1.contacts.bad.tolist() == [False, False, True, False]
    assert s1.contacts.why == ("", "", "listed in the session file", "")
    assert m1.contacts.channel.tolist() == [3, 2, 1, 0]
    assert m1.contacts.depth_um.tolist() == [0, 100, 250, 300]
    assert (s1.recording.rate_hz, m1.recording.rate_hz) == (1000.0, 500.0)
    assert s1.recording.clock == m1.recording.clock == "rig"
    assert session.choices.window[0].name == "early"


def test_the_depth_that_stands_for_an_area(folder):
    path = changed(folder, ("pitch_um = 100", "pitch_um = 100\nsignal_depth_um = 310"))
    assert [area.signal_depth_um for area in open_session(path).areas] == [310.0, None]


def test_a_session_file_already_read_opens_the_same(folder):
    session = open_session(read_session_file(folder / "session.toml"))
    assert [area.name for area in session.areas] == ["S1", "M1"]


def test_units_by_area_and_label(folder):
    spikes = open_session(folder / "session.toml").spikes
    assert spikes.unit == ("a", "c")  # b of S1 is labelled "mua"
    assert spikes.area == ("S1", "M1")
    assert spikes.depth_um.tolist() == [150.0, 120.0]
    assert [each.tolist() for each in spikes.time_s] == [[10.5, 11.25], [12.0, 12.5, 13.0]]


def test_every_file_is_listed_once(folder):
    files = open_session(folder / "session.toml").files
    names = ["session.toml", "events.csv", "m1.nwb", "run_g0_t0.imec0.lf.bin",
             "run_g0_t0.imec0.lf.meta"]  # fmt: skip
    assert sorted(path.name for path in files) == sorted(names)


def test_delays(folder):
    path = changed(
        folder,
        ('format = "spikeglx"', 'format = "spikeglx"\ndelay_ms = 2.5'),
        ('format = "nwb"', 'format = "nwb"\ndelay_ms = -4'),
        ('file = "events.csv"', 'file = "events.csv"\ndelay_ms = 6'),
    )
    session = open_session(path)
    # taken off a source's times; added to the events
    assert session.areas[0].recording.time_of(0) == pytest.approx(9.9975, abs=1e-12)
    assert session.areas[1].recording.time_of(0) == pytest.approx(10.004, abs=1e-12)
    assert session.spikes.time_s[0] == pytest.approx([10.504, 11.254], abs=1e-12)
    assert session.events.time_s == pytest.approx([11.006, 11.506, 12.256], abs=1e-12)


def test_events_with_factors_and_dropped_ones(folder):
    path = changed(folder, ('file = "events.csv"', 'file = "events.csv"\ndrop = [1]'))
    events = open_session(path).events
    assert events.condition == ("single", "pad", "single")
    assert events.factors == {"whisker": ("C2", "C2", "D1")}
    assert events.dropped.tolist() == [False, True, False]


def test_a_dropped_event_that_is_not_there(folder):
    path = changed(folder, ('file = "events.csv"', 'file = "events.csv"\ndrop = [3]'))
    with pytest.raises(
        SessionFileError, match=r"events\.drop names event 3; .* holds 3, .* 0 to 2"
    ):
        open_session(path)


def test_a_channel_outside_the_array(folder):
    path = changed(folder, ('channels = "0-3"', "channels = [0, 1, 2, 4]"))
    words = r"area\[0\]\.channels \(S1\) names channel 4; source 's1_lfp' holds 4 channels, 0 to 3"
    with pytest.raises(SessionFileError, match=words):
        open_session(path)


def test_channels_from_the_tip_up_are_refused_where_the_geometry_tells(folder):
    path = changed(folder, ('channels = "0-3"', 'channels = "3-0"'))
    with pytest.raises(SessionFileError, match=r"area\[0\]\.channels \(S1\) is '3-0'; .* tip up"):
        open_session(path)


def test_events_wholly_outside_every_recording(folder):
    (folder / "events.csv").write_text("time_s,condition\n1,a\n9.9,a\n15,b\n")
    words = r"events\.csv: all 3 events, 1 to 15 s, lie outside .* 10 to 14 s"
    with pytest.raises(ReaderError, match=words):
        open_session(folder / "session.toml")
    (folder / "events.csv").write_text("time_s,condition\n1,a\n11,a\n")
    assert len(open_session(folder / "session.toml").events) == 2


@pytest.mark.parametrize(("times", "asked"), [((11000, 12250), True), ((11000, 99000), False)])
def test_events_in_ms_are_suspected(times, asked, folder):
    rows = "".join(f"{time},a\n" for time in times)
    (folder / "events.csv").write_text(f"time_s,condition\n{rows}")
    with pytest.raises(ReaderError, match="lie outside what was recorded") as caught:
        open_session(folder / "session.toml")
    assert ("are they in ms?" in str(caught.value)) is asked


def test_no_event_at_all(folder):
    (folder / "events.csv").write_text("time_s,condition\n")
    with pytest.raises(ReaderError, match="holds no rows"):
        open_session(folder / "session.toml")


SPIKES_ONLY = """\
session = "spikes"
[[source]]
name = "sorted"
format = "table"
path = "spikes.csv"
delay_ms = 1
[[area]]
name = "S1"
[[units]]
area = "S1"
source = "sorted"
[events]
file = "events.csv"
[trials]
window_ms = [-200, 300]
baseline_ms = [-100, 0]
"""


def test_a_session_of_spikes_alone(tmp_path):
    (tmp_path / "session.toml").write_text(SPIKES_ONLY)
    (tmp_path / "spikes.csv").write_text("unit,time_s\nu,1.5\nu,1.0\nv,2\n")
    (tmp_path / "events.csv").write_text("time_s,condition\n1.2,single\n")
    session = open_session(tmp_path / "session.toml")
    (area,) = session.areas
    assert (area.recording, area.contacts) == (None, None)
    assert session.spikes.unit == ("u", "v")
    assert session.spikes.time_s[0] == pytest.approx([0.999, 1.499])
    assert np.isnan(session.spikes.depth_um).all()
    (tmp_path / "events.csv").write_text("time_s,condition\n100,single\n")
    with pytest.raises(ReaderError, match=r"lie outside what was recorded, 0\.999 to 1\.999 s"):
        open_session(tmp_path / "session.toml")


def two_areas(tmp_path, header, first, second):
    text = SPIKES_ONLY.replace("[[units]]", '[[area]]\nname = "M1"\n[[units]]', 1)
    text = text.replace("[events]", '[[units]]\narea = "M1"\nsource = "sorted"\n[events]')
    (tmp_path / "session.toml").write_text(text)
    (tmp_path / "spikes.csv").write_text(f"{header}\nu,1.5,{first}\nv,2,{second}\n")
    (tmp_path / "events.csv").write_text("time_s,condition\n1.7,single\n")
    return open_session(tmp_path / "session.toml").spikes


@pytest.mark.parametrize("column", ["area", "location"])
def test_several_areas_share_a_file_of_units(column, tmp_path):
    spikes = two_areas(tmp_path, f"unit,time_s,{column}", "M1", "S1")
    assert (spikes.unit, spikes.area) == (("v", "u"), ("S1", "M1"))


@pytest.mark.parametrize(
    ("header", "first", "second", "words"),
    [
        ("unit,time_s,depth_um", 1, 2, "does not tell them apart; needed is a column `area`"),
        ("unit,time_s,area", "S1", "S2", "no unit of M1; its column `area` names S1, S2"),
    ],
)
def test_a_file_of_units_that_does_not_tell_areas_apart(header, first, second, words, tmp_path):
    with pytest.raises(ReaderError, match=re.escape(words)):
        two_areas(tmp_path, header, first, second)


@pytest.mark.parametrize(
    ("table", "words"),
    [
        ("unit,time_s\nu,1\n", "have no column quality, group, label"),
        ("unit,time_s,quality\nu,1,mua\nv,2,noise\n", "no unit of S1 has a label of ['good']; "
         "found are mua, noise"),
    ],
)  # fmt: skip
def test_labels_to_keep_that_are_not_there(table, words, tmp_path):
    text = SPIKES_ONLY.replace('source = "sorted"', 'source = "sorted"\nkeep = ["good"]')
    (tmp_path / "session.toml").write_text(text)
    (tmp_path / "spikes.csv").write_text(table)
    (tmp_path / "events.csv").write_text("time_s,condition\n1,single\n")
    with pytest.raises(ReaderError, match=re.escape(words)):
        open_session(tmp_path / "session.toml")


def test_a_raw_recording(tmp_path):
    counts = np.arange(40, dtype="<i2").reshape(20, 2)
    counts.tofile(tmp_path / "lfp.bin")
    (tmp_path / "events.csv").write_text("time_s,condition\n0.01,single\n")
    (tmp_path / "session.toml").write_text(
        'session = "raw"\n[[source]]\nname = "lfp"\nformat = "raw"\npath = "lfp.bin"\n'
        'rate_hz = 1000\nn_channels = 2\ngain_uv = 0.25\ndtype = "int16"\n'
        '[[area]]\nname = "S1"\nsource = "lfp"\nchannels = "1-0"\npitch_um = 50\n'
        'first_depth_um = 25\n[events]\nfile = "events.csv"\n'
        "[trials]\nwindow_ms = [-200, 300]\nbaseline_ms = [-100, 0]\n"
    )
    (area,) = open_session(tmp_path / "session.toml").areas
    assert area.contacts.depth_um.tolist() == [25.0, 75.0]
    read_uv = area.recording.read_uv(0, 20, area.contacts.channel)
    assert np.array_equal(read_uv, counts[:, ::-1].T * 0.25)
