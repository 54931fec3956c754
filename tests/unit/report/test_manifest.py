"""The manifest: what a run was made of, without a path of this machine."""

import hashlib
import json
from dataclasses import replace

import msgspec
import pytest

from lfptools.choices import AreaChoice, EventsChoice, SessionChoices, SourceChoice, as_plain
from lfptools.errors import ReaderError
from lfptools.report.manifest import manifest, manifest_bytes
from tests.report_sessions import N_TRIALS, REJECTED, results


def test_the_first_key_tells_a_manifest_and_run_times_stand_alone_under_when():
    account = manifest(results(), when={"seconds": 12.5})
    assert next(iter(account)) == "manifest"
    assert account["when"] == {"seconds": 12.5}
    assert manifest(results()) == {**account, "when": {}}


def test_it_holds_settings_windows_signals_and_counts_as_used():
    account = manifest(results())
    assert account["settings"] == as_plain(results().choices)
    assert account["windows"][0] == {"name": "early", "span_ms": [5.0, 60.0], "chosen": "before"}
    assert [each["area"] for each in account["signals"]] == ["S1", "M1"]
    chosen = [each["chosen"] for each in account["signals"]]
    assert chosen == ["from the average over all conditions and windows"] * 2
    assert account["bad_contacts"] == [
        {"area": "S1", "channel": 13, "depth_um": 300.0, "why": "dead: steps of 0.1 uV"}
    ]
    counts = account["trials"]
    assert counts["accepted_by_condition"] == {"single": N_TRIALS, "pad": N_TRIALS}
    assert counts["events_by_condition"] == {"single": N_TRIALS + 2, "pad": N_TRIALS}
    assert counts["rejected_by_reason"] == {REJECTED: 2}
    assert account["seed"] == 1
    assert set(account["smoothing_sd_ms"]) == {"early", "late"}
    assert {"python", "lfptools", "numpy", "scipy", "neo", "h5py"} <= set(account["versions"])
    assert manifest(results(with_lfp=False))["not_recorded"]["latencies"]


def test_inputs_are_named_from_the_root_with_size_and_hash(tmp_path):
    inside = tmp_path / "session" / "s1" / "run.bin"
    outside = tmp_path / "elsewhere" / "events.csv"
    for path in (inside, outside):
        path.parent.mkdir(parents=True)
        path.write_bytes(b"whisker")
    account = manifest(results(), [inside, outside], root=tmp_path / "session")
    digest = hashlib.sha256(b"whisker").hexdigest()
    assert account["inputs"] == [
        {"name": "s1/run.bin", "bytes": 7, "sha256": digest},
        {"name": "elsewhere/events.csv", "bytes": 7, "sha256": digest},
    ]
    with pytest.raises(ReaderError, match="cannot be read for its hash"):
        manifest(results(), [tmp_path / "missing.bin"])


def test_no_absolute_path_is_written(tmp_path):
    choices = SessionChoices(
        session="whisk",
        root=str(tmp_path),
        trials=results().choices.trials,
        events=EventsChoice(file=str(tmp_path / "events.csv")),
        source=[SourceChoice(name="s1", format="raw", path=str(tmp_path / "s1.bin"))],
        area=[AreaChoice(name="/S1", source="s1")],
    )
    account = manifest(replace(results(), choices=choices), [tmp_path / "a"][:0], root=tmp_path)
    assert str(tmp_path) not in manifest_bytes(account).decode()
    assert account["settings"]["events"]["file"] == "events.csv"
    assert account["settings"]["area"][0]["name"] == "/S1"  # a name is no path


def test_it_is_json_as_others_read_it():
    text = manifest_bytes(manifest(results())).decode("utf-8")
    assert json.loads(text)["session"] == "whisk"
    assert msgspec.json.decode(text.encode()) == json.loads(text)
    assert text.endswith("}\n")
