"""The files of a simulated session: same seed, same bytes, and they open as what they are."""

import json
from pathlib import Path

import numpy as np
import pytest

from lfptools.errors import OutputError
from lfptools.io.opening import open_session
from lfptools.model import Session
from lfptools.simulate import Scenario, Simulated, simulate, write_demo


def _contents(folder: Path) -> dict[str, bytes]:
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


@pytest.fixture(scope="module")
def folder(session: Simulated, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_demo(session, tmp_path_factory.mktemp("demo") / "recording").parent


@pytest.fixture(scope="module")
def opened(folder: Path) -> Session:
    return open_session(folder / "session.toml")


def test_the_same_seed_writes_the_same_bytes(folder: Path, small: Scenario, tmp_path: Path) -> None:
    again = simulate(small, rng=np.random.default_rng(7))
    write_demo(again, tmp_path / "again")
    first, second = _contents(folder), _contents(tmp_path / "again")
    assert list(first) == list(second)
    assert set(first) >= {"session.toml", "truth.json", "events.csv", "m1.nwb"}
    assert sum(name.endswith(".lf.bin") for name in first) == 2
    for name, content in first.items():
        assert content == second[name], name


def test_streams_of_two_formats_start_at_different_times_on_one_clock(
    opened: Session, session: Simulated
) -> None:
    recordings = [area.recording for area in opened.areas]
    assert [recording.clock for recording in recordings] == ["rig"] * 3
    assert [recording.rate_hz for recording in recordings] == [2500, 2500, 1250]
    starts_s = [recording.runs[0].start_s for recording in recordings]
    assert starts_s == pytest.approx([10.0, 10.5, 10.3])
    assert all(recording.amplifier_hz == (0.5, 500) for recording in recordings)


@pytest.mark.parametrize("index", [0, 1, 2])
def test_signals_are_what_was_simulated_at_the_same_time(
    opened: Session, session: Simulated, index: int
) -> None:
    recording = opened.areas[index].recording
    every = round(session.rate_hz / recording.rate_hz)
    clean = next(
        each
        for number, each in enumerate(session.events.time_s)
        if number > 2 and number not in session.truth["artefact_events"]
    )
    channels = np.array([0, 6, 15])
    middle = recording.locate(clean, 100, 200)
    got_uv = recording.read_uv(middle - 100, middle + 200, channels)
    start = round((recording.time_of(middle - 100) - session.start_s) * session.rate_hz)
    made_uv = session.areas[index].data_uv[start : start + 300 * every : every, channels].T
    if every == 1:  # to half a count and the rounding of float32
        assert np.abs(got_uv - made_uv).max() <= 0.5 * recording.gain_uv[0] * 1.001
    else:  # what decimation takes away is noise above 625 Hz
        shifted = [np.std(got_uv[:, 5:-5] - np.roll(made_uv, by, 1)[:, 5:-5]) for by in (-1, 0, 1)]
        assert np.argmin(shifted) == 1
        assert shifted[1] < 4


def test_saturated_artefacts_stay_large(opened: Session, session: Simulated) -> None:
    event = session.truth["artefact_events"][0]
    recording = opened.areas[0].recording
    middle = recording.locate(session.events.time_s[event], 250, 500)
    trial_uv = recording.read_uv(middle - 250, middle + 500, np.array([0]))
    assert np.ptp(trial_uv) > 1500


def test_events_units_and_windows_open_as_simulated(opened: Session, session: Simulated) -> None:
    np.testing.assert_array_equal(opened.events.time_s, session.events.time_s)
    assert opened.events.condition == session.events.condition
    assert opened.events.factors == session.events.factors
    assert opened.spikes.unit == session.spikes.unit
    assert opened.spikes.area == session.spikes.area
    np.testing.assert_array_equal(opened.spikes.depth_um, session.spikes.depth_um)
    for one, other in zip(opened.spikes.time_s, session.spikes.time_s, strict=True):
        np.testing.assert_array_equal(one, other)
    early, late = opened.choices.window
    assert (early.span_ms, early.direction_ms) == ((5, 40), (0, 100))
    assert (late.span_ms, late.direction_ms) == ((100, 200), (100, 220))
    assert opened.choices.trials.window_ms == (-200, 300)
    assert list(opened.areas[2].layers) == ["L1", "L23", "L4", "L5", "L6"]
    np.testing.assert_array_equal(opened.areas[0].contacts.depth_um, 100 * np.arange(16))


def test_the_bad_contacts_are_not_given_away(opened: Session) -> None:
    assert not any(area.contacts.bad.any() for area in opened.areas)


def test_the_truth_lies_beside_the_files(folder: Path, session: Simulated) -> None:
    assert json.loads((folder / "truth.json").read_text()) == json.loads(json.dumps(session.truth))


def test_the_session_file_explains_itself_in_short_lines(folder: Path) -> None:
    lines = (folder / "session.toml").read_text().splitlines()
    assert lines[0].startswith("# One session")
    assert sum("#" in line for line in lines) > 15
    assert max(map(len, lines)) <= 100


def test_one_area_alone_is_written_as_nwb(tmp_path: Path) -> None:
    scenario = Scenario(n_trials=2, areas=Scenario().areas[2:], links=(), dead=(), noisy=())
    write_demo(simulate(scenario, rng=np.random.default_rng(1)), tmp_path / "one")
    opened = open_session(tmp_path / "one" / "session.toml")
    assert [area.name for area in opened.areas] == ["M1"]


@pytest.mark.parametrize("there", ["file", "folder"])
def test_what_exists_is_not_overwritten(session: Simulated, tmp_path: Path, there: str) -> None:
    target = tmp_path / "demo"
    if there == "file":
        target.write_text("mine")
    else:
        target.mkdir()
        (target / "mine.txt").write_text("mine")
    with pytest.raises(OutputError, match="demo exists and is not an empty folder"):
        write_demo(session, target)
    assert len(list(tmp_path.rglob("*"))) == (1 if there == "file" else 2)
