"""What `lfptools check` says of a session, and what it warns of."""

from dataclasses import replace

import numpy as np
import pytest

from lfptools.cli.doubts import doubts, unit_rates_hz
from lfptools.cli.overview import look_at, show_formats, show_overview
from lfptools.errors import InputError
from lfptools.io.opening import open_session
from lfptools.model import SpikeTrains


@pytest.fixture(scope="module")
def session(small_session):
    return open_session(small_session / "session.toml")


def with_spikes(session, *trains, area=None):
    spikes = SpikeTrains(
        unit=tuple(f"u{number}" for number in range(len(trains))),
        area=area or ("S1",) * len(trains),
        depth_um=np.full(len(trains), np.nan),
        time_s=tuple(np.asarray(each, dtype=float) for each in trains),
    )
    return replace(session, spikes=spikes)


def said(text, capsys):
    """The overview without the lines of its tables, so that broken cells read on."""
    show_overview(text)
    return " ".join(capsys.readouterr().out.replace("│", " ").split())


def test_a_sound_session_raises_no_doubt(session):
    assert doubts(session) == []


def test_tables_hold_depths_rates_and_the_interval(small_session, session, capsys):
    out = said(small_session / "session.toml", capsys)
    times = np.sort(session.events.time_s)
    assert f"{len(times)} events, median interval {np.median(np.diff(times)):.3g} s" in out
    # The scenario's depths and rates, counted here by hand.
    mine = [unit for unit, area in enumerate(session.spikes.area) if area == "S1"]
    depths = session.spikes.depth_um[mine]
    assert f"{depths.min():g} to {depths.max():g} um" in out
    length_s = max(
        run.start_s + run.n_samples / area.recording.rate_hz
        for area in session.areas
        for run in area.recording.runs
    ) - min(run.start_s for area in session.areas for run in area.recording.runs)
    rate = np.mean([len(session.spikes.time_s[unit]) for unit in mine]) / length_s
    assert f"{rate:.3g} Hz" in out
    assert "warning" not in out


def test_depths_that_are_unknown_are_said_to_be(own_session, capsys):
    # A CSV without depth_um in the place of the units of the recording.
    path = own_session / "session.toml"
    text = path.read_text()
    start, end = text.index("[[units]]"), text.index("[events]")
    source = '[[source]]\nname = "csv"\nformat = "table"\npath = "units.csv"\nclock = "rig"\n'
    units = '[[units]]\narea = "S1"\nsource = "csv"\n'
    path.write_text(text[:start] + source + units + text[end:])
    first = open_session_times(own_session)
    (own_session / "units.csv").write_text(
        "unit,time_s\n" + "".join(f"u,{first + step}\n" for step in range(20))
    )
    assert "S1 1 20 unknown" in said(path, capsys)


def open_session_times(folder):
    return float((folder / "events.csv").read_text().splitlines()[1].split(",")[0])


def test_the_median_sd_follows_the_gain(session):
    area = session.areas[0]
    _, sd_uv = look_at(session, area)
    assert 5 < sd_uv < 500  # uV of an LFP: common practice, no source
    recording = replace(area.recording, gain_uv=area.recording.gain_uv * 1000)
    _, wrong_uv = look_at(session, replace(area, recording=recording))
    assert wrong_uv == pytest.approx(1000 * sd_uv)


def test_sources_of_unequal_duration(session):
    area = session.areas[1]
    (run,) = area.recording.runs
    for share, warned in ((0.95, False), (0.8, True)):
        short = replace(run, n_samples=int(share * run.n_samples))
        recording = replace(area.recording, runs=(short,))
        areas = (session.areas[0], replace(area, recording=recording), session.areas[2])
        found = [each for each in doubts(replace(session, areas=areas)) if "duration" in each]
        assert bool(found) is warned
        if warned:
            assert f"s2_lfp {recording.duration_s:.1f} s" in found[0]


def test_events_outside_a_recording_are_counted(session):
    times = session.events.time_s.copy()
    times[:3] += 1e5
    found = doubts(replace(session, events=replace(session.events, time_s=times)))
    assert len(found) == 3  # one a source
    assert found[0].startswith(f"3 of {len(times)} events lie outside what source s1_lfp recorded")
    times[1:3] -= 1e5
    assert doubts(replace(session, events=replace(session.events, time_s=times)))[0].startswith(
        f"1 of {len(times)} events lies outside"
    )


def test_spike_times_in_ms_are_suspected(session):
    events = session.events.time_s
    sound = np.linspace(events.min(), events.max(), 200)
    found = doubts(with_spikes(session, sound, 1000 * sound, 1000 * sound))
    assert len(found) == 1
    assert found[0].startswith(
        "S1: 2 of 3 units (u1, u2) have no spike between the first and the last event"
    )
    assert found[0].endswith("are their times in ms?")


def test_units_that_hardly_fire_are_suspected(session):
    events = session.events.time_s
    late = 1000 * events.max()  # one spike among the events, the rest spread far beyond
    slow = np.concatenate([[events.mean()], np.linspace(events.max(), late, 50)])
    found = doubts(with_spikes(session, slow, area=("M1",)))
    assert found == ["M1: 1 of 1 units (u0) fire below 0.01 Hz; are their times in ms?"]


def test_rates_are_taken_over_all_that_was_recorded(session):
    start_s = min(run.start_s for area in session.areas for run in area.recording.runs)
    end_s = max(area.recording.spans_s[-1][1] for area in session.areas)
    some = np.linspace(start_s + 1, start_s + 2, 50)
    rates = unit_rates_hz(with_spikes(session, some, []))
    assert rates == pytest.approx([50 / (end_s - start_s), 0.0])
    alone = replace(with_spikes(session, [0.0, 5.0], [2.0, 10.0, 4.0]), areas=())
    ordered = replace(
        alone, spikes=replace(alone.spikes, time_s=tuple(map(np.sort, alone.spikes.time_s)))
    )
    assert unit_rates_hz(ordered) == pytest.approx([0.2, 0.3])


def test_many_units_are_named_in_short(session):
    far = [1000 * session.events.time_s.max() + np.arange(5.0)] * 5
    assert "5 of 5 units (u0, u1, u2, ...) have" in doubts(with_spikes(session, *far))[0]


def test_warnings_stand_on_the_terminal(own_session, capsys):
    path = own_session / "events.csv"
    header, first, *lines = path.read_text().splitlines()
    path.write_text("\n".join([header, "1e5" + first[first.index(",") :], *lines]) + "\n")
    out = said(own_session / "session.toml", capsys)
    assert "warning: 1 of 28 events lies outside what source s1_lfp recorded" in out


def test_check_refuses_a_depth_whose_contact_proves_bad(own_session):
    path = own_session / "session.toml"
    text = path.read_text()
    path.write_text(text.replace("pitch_um = 100", "pitch_um = 100\nsignal_depth_um = 1000", 1))
    with pytest.raises(InputError, match=r"signal_depth_um of area S1 is 1000 um.*dead"):
        show_overview(path)


def test_formats_say_what_a_table_of_units_may_hold(capsys):
    show_formats()
    out = " ".join(capsys.readouterr().out.replace("│", " ").replace("┃", " ").split())
    assert "[[source]]" in out  # not taken for markup
    for word in ("area", "depth_um", "neighbouring"):
        assert word in out
