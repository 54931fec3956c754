"""The bench without a browser: messages in, traits and messages out."""

import asyncio
import json
from dataclasses import replace

import numpy as np
import pytest

from lfptools import analyse, open_session
from lfptools.errors import InputError
from lfptools.trials import cut_trials
from lfpwidgets.bench import Bench
from lfpwidgets.keepsake import keepsake_path
from lfpwidgets.quick import QuickAnswer
from lfpwidgets.snap import around_waves
from tests.loops import run

pytestmark = pytest.mark.filterwarnings("ignore::DeprecationWarning")


@pytest.fixture(autouse=True)
def own_cache(monkeypatch, tmp_path):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


@pytest.fixture
def session_file(own_session):
    return own_session / "session.toml"


class Talk:
    """A bench whose messages are kept instead of sent."""

    def __init__(self, session):
        self.bench = Bench(session)
        self.said = []
        self.bench.surface.send = lambda content, buffers=None: self.said.append(content)

    def of(self, kind):
        return [each for each in self.said if each["kind"] == kind]

    @property
    def scene(self):
        return self.bench.surface.scene

    def spans(self):
        return {each["name"]: [each["first"], each["last"]] for each in self.scene["windows"]}

    async def tell(self, *messages, wait=True):
        self.said.clear()
        for message in messages:
            self.bench._heard(message)
        await asyncio.sleep(0.02)
        for _ in range(600):
            if not wait or any(not a["answer"]["stale"] for a in self.of("answer")):
                return
            await asyncio.sleep(0.02)
        raise AssertionError("no full answer came")


def conversation(session, *steps):
    """Run messages one after the other, each to its full answer; return the talk."""
    talk = Talk(session)

    async def main():
        for step in steps:
            await talk.tell(*(step if isinstance(step, tuple) else (step,)))
        talk.bench._background.close()

    run(main())
    return talk


def test_the_scene_is_plain_and_names_everything(session_file):
    talk = Talk(session_file)
    scene = json.loads(json.dumps(talk.scene))  # travels as JSON
    assert talk.spans() == {"early": [5, 40], "late": [100, 200]}
    assert scene["options"]["area"] == ["S1", "S2", "M1"]
    assert [strip["picture"] for strip in scene["strips"]] == [
        "averages_png", "map_png", "units_png",
    ]  # fmt: skip
    assert all(strip["alt"] for strip in scene["strips"])
    for name in ("averages_png", "map_png", "units_png"):
        assert getattr(talk.bench.surface, name).startswith(b"\x89PNG")
    assert [frame["name"] for frame in scene["strips"][0]["frames"]] == ["S1", "S2", "M1"]


def test_hello_is_answered_quickly_then_fully(session_file):
    talk = conversation(session_file, {"do": "hello"})
    answers = [each["answer"] for each in talk.of("answer")]
    assert [each["stale"] for each in answers] == [True, False]
    captions = [table["caption"] for table in answers[-1]["tables"]]
    assert captions == [
        "When the wave arrives (ms)", "Lags (ms)",
        "Which area leads (net Granger causality minus that of reversed time)",
        "Units that rise or fall (q <= .05)", "Strongest sink and source",
    ]  # fmt: skip
    json.dumps(answers, allow_nan=False)


def test_two_hundred_moves_end_at_the_last_one(session_file):
    talk = Talk(session_file)

    async def main():
        await talk.tell({"do": "hello"})
        talk.said.clear()
        talk.bench._heard({"do": "grip", "name": "early"})
        for turn in range(1, 201):
            last = 40 - 0.8 * (turn % 20)
            message = {"do": "move", "name": "early", "first": 5, "last": last, "turn": turn}
            talk.bench._heard(message)
        await talk.tell({"do": "settle"})
        talk.bench._background.close()

    run(main())
    assert talk.spans()["early"] == [5, 40]  # 200 % 20 is 0: where it began
    assert talk.scene["canUndo"] is False  # a gesture that ends where it began is no step


def test_a_drag_is_one_step_of_undo_and_is_marked(session_file):
    move = {"do": "move", "name": "early", "first": 5.6, "last": 36.0, "turn": 1}
    drag = ({"do": "grip", "name": "early"}, move, move | {"last": 30.4}, {"do": "settle"})
    talk = conversation(session_file, {"do": "hello"}, drag)
    assert talk.spans()["early"] == [5.6, 30.4]
    heading = talk.of("answer")[-1]["answer"]["heading"]
    assert "window chosen on these trials" in heading
    talk = conversation(session_file, drag, {"do": "undo"})
    assert talk.spans()["early"] == [5, 40]


@pytest.mark.parametrize(
    ("message", "parts"),
    [
        ({"do": "type", "name": "late", "edge": "last", "value": "400"}, ["late", "400", "300"]),
        ({"do": "type", "name": "late", "edge": "last", "value": "soon"}, ["late", "'soon'"]),
        ({"do": "type", "name": "late", "edge": "last", "value": "90"}, ["late", "90", "100"]),
        ({"do": "rename", "name": "late", "to": "early"}, ["early"]),
        ({"do": "show", "key": "area", "value": "V1"}, ["area", "V1", "S1, S2, M1"]),
        ({"do": "show", "key": "condition", "value": "none"}, ["condition", "none"]),
        ({"do": "take", "name": "rebound"}, ["rebound"]),
        ({"do": "dance"}, ["dance"]),
    ],
)
def test_faults_are_said_and_change_nothing(session_file, message, parts):
    talk = Talk(session_file)
    before = talk.bench.value
    run(talk.tell(message, wait=False))
    (said,) = talk.of("error")
    for part in parts:
        assert part in said["text"]
    assert talk.bench.value == before


def test_an_exception_in_a_computation_reaches_the_user(session_file, monkeypatch):
    talk = Talk(session_file)

    def fails(*_args, **_kwargs):
        raise MemoryError("no room for the resamples")

    monkeypatch.setattr(talk.bench.answers, "full", fails)

    async def main():
        talk.bench._heard({"do": "hello"})
        await asyncio.sleep(0.5)

    run(main())
    assert [each["text"] for each in talk.of("error")] == ["MemoryError: no room for the resamples"]


def test_a_file_changed_on_disk_is_not_overwritten(session_file):
    talk = Talk(session_file)
    typed = {"do": "type", "name": "early", "edge": "last", "value": "32"}

    async def main():
        await talk.tell(typed)
        session_file.write_text(session_file.read_text() + "# somebody else was here\n")
        await talk.tell({"do": "save"}, wait=False)
        talk.bench._background.close()

    run(main())
    assert "changed on disk" in talk.of("error")[0]["text"]
    assert session_file.read_text().endswith("# somebody else was here\n")
    assert "span_ms = [5, 40]" in session_file.read_text()


def test_saved_windows_give_the_same_numbers_from_the_file(session_file):
    typed = {"do": "type", "name": "early", "edge": "last", "value": "32"}
    talk = conversation(session_file, typed)
    run(talk.tell({"do": "save"}, wait=False))
    assert talk.of("said")[0]["text"].startswith("saved: session.toml")
    state = talk.bench.state
    here = analyse(replace(state.cut, choices=state.as_choices())).rows
    there = analyse(cut_trials(open_session(session_file))).rows
    for table in here:
        assert repr(here[table]) == repr(there[table]), table


def test_unsaved_windows_survive_the_kernel(session_file):
    typed = {"do": "type", "name": "early", "edge": "last", "value": "32"}
    conversation(session_file, typed)
    assert keepsake_path(session_file).exists()
    again = conversation(session_file, {"do": "hello"})
    assert again.spans()["early"] == [5, 32]
    assert "not saved last time" in again.of("said")[0]["text"]
    talk = conversation(session_file, {"do": "undo"})
    assert talk.spans()["early"] == [5, 40]
    assert not keepsake_path(session_file).exists()  # nothing unsaved is left


def test_what_was_kept_for_another_file_or_is_broken_is_left_alone(session_file):
    kept = keepsake_path(session_file)
    kept.write_text('{"session": "other", "signal": "csd", "windows": []}')
    assert Talk(session_file).spans()["early"] == [5, 40]
    kept.write_text("{not json")
    assert Talk(session_file).spans()["early"] == [5, 40]


def test_snap_holds_the_waves(session_file):
    talk = conversation(session_file, {"do": "snap"})
    first, last = talk.spans()["early"]
    assert first < 13
    assert last > 25


def test_snap_without_a_wave_is_refused_in_words():
    with pytest.raises(InputError, match="no wave was found in window 'quiet'"):
        around_waves(QuickAnswer("quiet", "single", 20, 400), (-200.0, 300.0))


def test_tables_and_figures_are_left_behind(session_file):
    talk = Talk(session_file)

    async def main():
        for what in ("tables", "figure"):
            talk.said.clear()
            talk.bench._heard({"do": what})
            for _ in range(600):
                await asyncio.sleep(0.05)
                if any(each["text"].startswith("written") for each in talk.of("said")):
                    break
        talk.bench._background.close()

    run(main())
    tables = {path.name for path in (session_file.parent / "bench-tables").iterdir()}
    assert {"latencies.csv", "verdicts.csv"} <= tables
    figures = session_file.parent / "bench-figure"
    assert {path.suffix for path in figures.iterdir()} == {".pdf", ".svg", ".png"}
    svg = (figures / "averages.svg").read_text()
    assert ">time after the stimulus (ms)</text>" in svg  # text stays text


def test_moves_while_tables_are_written_lose_neither(session_file):
    talk = Talk(session_file)
    typed = {"do": "type", "name": "early", "edge": "last", "value": "32"}

    async def main():
        talk.bench._heard({"do": "tables"})
        talk.bench._heard({"do": "tables"})
        talk.bench._heard(typed)
        for _ in range(600):
            await asyncio.sleep(0.05)
            if sum(each["text"].startswith("written") for each in talk.of("said")) == 2:
                break
        talk.bench._background.close()

    run(main())
    assert [each["text"] for each in talk.of("said")][-2:] == [
        f"written: {session_file.parent / name}" for name in ("bench-tables", "bench-tables-2")
    ]
    # Written as things stood at the press, before the window was moved.
    notes = (session_file.parent / "bench-tables-2" / "latencies.csv").read_text()
    assert "window chosen on these trials" not in notes
    assert any(not each["answer"]["stale"] for each in talk.of("answer"))


def test_a_name_with_markup_travels_as_text(session_file):
    rename = {"do": "rename", "name": "early", "to": "<img src=x onerror=alert(1)>"}
    talk = conversation(session_file, rename)
    assert "<img src=x onerror=alert(1)>" in talk.spans()
    assert "innerHTML" not in talk.bench.surface._esm
    assert "insertAdjacentHTML" not in talk.bench.surface._esm


def test_trials_already_cut_are_shown_without_a_file(session_file):
    talk = Talk(cut_trials(open_session(session_file)))
    assert talk.scene["canSave"] is False
    run(talk.tell({"do": "save"}, wait=False))
    assert "no session file" in talk.of("error")[0]["text"]


def test_a_session_without_field_is_refused(session_file):
    cut = replace(cut_trials(open_session(session_file)), areas=())
    with pytest.raises(InputError, match="no LFP"):
        Bench(cut)


def test_a_session_without_spikes_shows_the_time_axis(session_file):
    talk = Talk(replace(cut_trials(open_session(session_file)), spikes=None))
    assert [strip["picture"] for strip in talk.scene["strips"]][-1] == "time_png"
    assert talk.scene["options"]["unit"] == []


def test_the_still_picture_is_a_png(session_file):
    bench = Talk(session_file).bench
    assert bench._leaving.still().startswith(b"\x89PNG")


def test_a_condition_with_few_trials_says_so(session_file):
    events = session_file.parent / "events.csv"
    header, *lines = events.read_text().splitlines()
    kept = [line for line in lines if ",pad," in line]
    kept += [line for line in lines if ",single," in line][:5]
    events.write_text("\n".join([header, *kept]) + "\n")
    talk = conversation(session_file, {"do": "show", "key": "condition", "value": "single"})
    answer = talk.of("answer")[-1]["answer"]
    assert answer["heading"].startswith("early, single: ")
    notes = [row[-1] for row in answer["tables"][0]["rows"]]
    assert notes == ["fewer than 8 accepted trials"] * 3
    assert talk.of("error") == []


def test_a_unit_without_spikes_is_shown_and_not_estimated(session_file):
    cut = cut_trials(open_session(session_file))
    silent = replace(cut.spikes, time_s=(np.array([]), *cut.spikes.time_s[1:]))
    talk = conversation(replace(cut, spikes=silent), {"do": "hello"})
    assert talk.of("error") == []
    assert talk.scene["chosen"]["unit"] == cut.spikes.unit[0]
    tables = {each["caption"]: each for each in talk.of("answer")[-1]["answer"]["tables"]}
    units = tables["Units that rise or fall (q <= .05)"]["rows"][0][-1]["more"]
    assert "(not estimated)" in units[0]
    assert "spikes" in units[0]
