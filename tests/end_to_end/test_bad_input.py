"""Bad input: exit status 2, one clear message, nothing written."""

import re

import pytest

from lfptools.cli import main


def spoil(folder, *changes):
    """Replace text in the session file; each old text must stand there."""
    path = folder / "session.toml"
    text = path.read_text()
    for old, new in changes:
        assert re.search(old, text), f"{old!r} is not in the session file"
        text = re.sub(old, new, text, count=1)
    path.write_text(text)


def events(folder, change):
    path = folder / "events.csv"
    header, *rows = path.read_text().splitlines()
    path.write_text("\n".join(change(header, rows)) + "\n")


def shift(rows, by_s):
    cells = [row.split(",") for row in rows]
    return [",".join([str(float(cell[0]) + by_s), *cell[1:]]) for cell in cells]


CASES = {
    "missing recording": (
        lambda f: (f / "m1.nwb").unlink(),
        ["m1.nwb", "source[2]"],
    ),
    "missing key": (
        lambda f: spoil(f, ("window_ms = .*", "")),
        ["session.toml", "trials", "window_ms"],
    ),
    "unknown key": (
        lambda f: spoil(f, ("pitch_um = 100", "pitch = 100")),
        ["session.toml", "area[0]", "pitch", "pitch_um"],
    ),
    "missing column": (
        lambda f: events(f, lambda header, rows: [header.replace("condition", "kind"), *rows]),
        ["events.csv", "condition"],
    ),
    "unknown format": (
        lambda f: spoil(f, ('format = "spikeglx"', 'format = "tape"')),
        ["session.toml", "source[0]", "tape", "spikeglx, nwb, raw"],
    ),
    "channel outside the array": (
        lambda f: spoil(f, ('channels = "0-15"', 'channels = "1-16"')),
        ["S1", "16"],
    ),
    "window outside the trial": (
        lambda f: spoil(f, (r"span_ms = \[100, 200\]", "span_ms = [100, 400]")),
        ["session.toml", "late", "400", "300"],
    ),
    "events outside the recording": (
        lambda f: events(f, lambda header, rows: [header, *shift(rows, 1e4)]),
        ["events.csv", "28"],
    ),
    "no events": (
        lambda f: events(f, lambda header, rows: [header]),
        ["events.csv"],
    ),
    "no condition with 8 accepted trials": (
        lambda f: events(f, lambda header, rows: [header, *rows[:9]]),
        ["8 accepted trials", "single: "],
    ),
    "depth of a contact that proves bad": (
        lambda f: spoil(f, ("pitch_um = 100", "pitch_um = 100\nsignal_depth_um = 1000")),
        ["signal_depth_um of area S1", "1000 um", "dead", "900, 1100"],
    ),
    "clocks that nothing joins": (
        lambda f: spoil(f, ('clock = "rig" # sources', 'clock = "other" # sources')),
        ["session.toml", "other", "rig"],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_bad_input_is_refused_and_nothing_written(case, own_session, tmp_path, capsys):
    change, parts = CASES[case]
    change(own_session)
    before = {path: path.stat().st_mtime_ns for path in own_session.rglob("*")}
    out = tmp_path / "results"
    assert main(["run", str(own_session / "session.toml"), "--out", str(out), "--quiet"]) == 2
    message = capsys.readouterr().err
    assert message.startswith("lfptools: ")
    assert len(message.strip().splitlines()) == 1
    for part in parts:
        assert part in message
    assert not out.exists()
    assert {path: path.stat().st_mtime_ns for path in own_session.rglob("*")} == before
    assert [each.name for each in tmp_path.iterdir()] == ["recording"]


def test_missing_session_file(tmp_path, capsys):
    assert main(["run", str(tmp_path / "none.toml"), "--out", str(tmp_path / "out")]) == 2
    assert "none.toml" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize("command", ["run", "demo"])
def test_a_folder_that_is_not_empty_is_refused_before_any_work(
    command, small_session, tmp_path, capsys
):
    out = tmp_path / "results"
    out.mkdir()
    (out / "mine.txt").write_text("kept")
    asked = ["run", str(small_session / "session.toml")] if command == "run" else ["demo"]
    assert main([*asked, "--out", str(out)]) == 2
    assert "exists and is not empty" in capsys.readouterr().err
    assert [path.name for path in out.iterdir()] == ["mine.txt"]


def test_a_negative_seed_is_refused(tmp_path, capsys):
    assert main(["demo", "--seed", "-3", "--out", str(tmp_path / "d")]) == 2
    assert "--seed is -3" in capsys.readouterr().err


def test_check_refuses_what_run_refuses(own_session, capsys):
    spoil(own_session, ('format = "nwb"', 'format = "tape"'))
    assert main(["check", str(own_session / "session.toml")]) == 2
    assert "tape" in capsys.readouterr().err
