"""`lfptools run` on small sessions: what it leaves, the same bytes twice, what it says."""

import csv
import json
import subprocess
import sys

import pytest

from lfptools.cli import main
from lfptools.columns import COLUMNS


@pytest.fixture(scope="module")
def results(small_session, tmp_path_factory):
    out = tmp_path_factory.mktemp("run") / "results"
    assert main(["run", str(small_session / "session.toml"), "--out", str(out), "--quiet"]) == 0
    return out


def rows(folder, table):
    with (folder / f"{table}.csv").open(newline="") as file:
        return list(csv.DictReader(file))


def test_everything_is_left_behind(results):
    names = {path.name for path in results.iterdir()}
    expected = {f"{table}.csv" for table in COLUMNS}
    assert names == expected | {"report.html", "arrays.h5", "manifest.json", "methods.md"}


@pytest.mark.parametrize("table", list(COLUMNS))
def test_headers_are_the_contract(results, table):
    header = (results / f"{table}.csv").read_text().splitlines()[0].split(",")
    assert tuple(header[: len(COLUMNS[table])]) == COLUMNS[table]
    assert header == list(COLUMNS[table]) or table == "trials"


def test_every_number_has_its_interval_and_count(results):
    found = rows(results, "latencies")
    assert {row["role"] for row in found} == {"area", "contact"}
    for row in found:
        assert int(row["n_trials"]) >= 8
        assert bool(row["time_ms"]) == bool(row["time_lo_ms"]) == bool(row["time_hi_ms"])
        assert row["time_ms"] or row["note"].startswith("not found")


def test_verdicts_have_one_row_a_pair_window_and_condition(results):
    found = rows(results, "verdicts")
    assert len(found) == 3 * 2 * 2
    assert {row["verdict"] for row in found} <= {
        "leads", "both ways", "no lead shown", "withheld",
    }  # fmt: skip
    assert all(row["reason"] and row["caveat"] and row["control"] for row in found)


def test_tables_and_arrays_are_the_same_bytes_twice(small_session, results, tmp_path):
    again = tmp_path / "again"
    assert main(["run", str(small_session / "session.toml"), "--out", str(again), "--quiet"]) == 0
    for path in sorted(results.iterdir()):
        if path.suffix in {".csv", ".h5", ".md"}:
            assert path.read_bytes() == (again / path.name).read_bytes(), path.name
    plain = [json.loads((folder / "manifest.json").read_text()) for folder in (results, again)]
    for each in plain:
        each.pop("when")
    assert plain[0] == plain[1]


def test_a_condition_with_few_trials_is_said_and_the_rest_runs(own_session, tmp_path):
    path = own_session / "events.csv"
    header, *lines = path.read_text().splitlines()
    kept = [line for line in lines if ",single," in line]
    kept += [line for line in lines if ",pad," in line][:5]
    path.write_text("\n".join([header, *kept]) + "\n")
    out = tmp_path / "out"
    assert main(["run", str(own_session / "session.toml"), "--out", str(out), "--quiet"]) == 0
    for table in ("latencies", "lags", "sinks", "firing", "coupling"):
        notes = {row["note"] for row in rows(out, table) if row["condition"] == "pad"}
        assert notes == {"fewer than 8 accepted trials"}, table
    verdicts = [row for row in rows(out, "verdicts") if row["condition"] == "pad"]
    assert {row["verdict"] for row in verdicts} == {"withheld"}
    single = [row for row in rows(out, "latencies") if row["condition"] == "single"]
    assert any(row["time_ms"] for row in single)


def test_the_depth_that_stands_for_an_area_is_carried_through(own_session, tmp_path):
    path = own_session / "session.toml"
    path.write_text(
        path.read_text().replace("pitch_um = 100", "pitch_um = 100\nsignal_depth_um = 290", 1)
    )
    out = tmp_path / "out"
    assert main(["run", str(path), "--out", str(out), "--quiet"]) == 0
    areas = [row for row in rows(out, "latencies") if row["role"] == "area"]
    assert {row["depth_um"] for row in areas if row["area"] == "S1"} == {"300"}
    assert {row["signal"] for row in areas} == {"csd"}
    account = json.loads((out / "manifest.json").read_text())
    assert account["signals"][0]["depth_um"] == 300
    assert account["signals"][0]["chosen"] == "as given by signal_depth_um (290 um)"
    assert account["settings"]["area"][0]["signal_depth_um"] == 290
    # The scenario's early sink of S1 is planted 300 um deeper.
    early = [row for row in areas if (row["area"], row["window"]) == ("S1", "early")]
    assert all("this window's strongest sink is at 600 um" in row["note"] for row in early)
    report = (out / "report.html").read_text()
    assert "strongest sink is at 600 um" in report.partition("In short")[2].partition("<h2>")[0]


def test_a_session_without_spikes_says_not_recorded(own_session, tmp_path):
    path = own_session / "session.toml"
    text = path.read_text()
    start, end = text.index("[[units]]"), text.index("[events]")
    path.write_text(text[:start] + text[end:])
    out = tmp_path / "out"
    assert main(["run", str(path), "--out", str(out), "--quiet"]) == 0
    assert rows(out, "firing") == []
    said = json.loads((out / "manifest.json").read_text())["not_recorded"]
    assert set(said) == {"firing", "coupling"}
    assert "no spikes were recorded" in (out / "report.html").read_text()


def test_windows_are_proposed_where_none_is_named_and_marked(own_session, tmp_path):
    path = own_session / "session.toml"
    text = path.read_text()
    path.write_text(text[: text.index("[[window]]")])
    out = tmp_path / "out"
    assert main(["run", str(path), "--out", str(out), "--quiet"]) == 0
    found = rows(out, "latencies")
    assert found
    assert all("window chosen on these trials" in row["note"] for row in found)
    assert all("window chosen on these trials" in row["note"] for row in rows(out, "firing"))


def test_check_says_what_it_found_and_writes_nothing(small_session, capsys):
    before = sorted(small_session.rglob("*"))
    assert main(["check", str(small_session / "session.toml")]) == 0
    said = capsys.readouterr().out
    for part in ("2500 Hz", "1250 Hz", "S1", "S2", "M1", "single", "pad", "dead", "noisy", "MB"):
        assert part in said
    assert sorted(small_session.rglob("*")) == before


def test_formats_are_listed(capsys):
    assert main(["formats"]) == 0
    said = capsys.readouterr().out
    assert all(name in said for name in ("spikeglx", "nwb", "raw", "table"))


def test_help_names_every_command_and_the_cautions():
    done = subprocess.run(
        [sys.executable, "-m", "lfptools", "--help"], capture_output=True, text=True, check=True
    )
    for part in ("demo", "check", "run", "formats", "no medical device"):
        assert part in done.stdout


def test_names_in_brackets_are_shown_by_check_as_they_are(own_session, capsys):
    path = own_session / "session.toml"
    path.write_text(path.read_text().replace('"whisker-demo"', '"[/red] whisker"'))
    events = own_session / "events.csv"
    events.write_text(events.read_text().replace(",pad,", ",[bold]pad,"))
    assert main(["check", str(path)]) == 0
    said = capsys.readouterr().out
    assert "[/red] whisker" in said
    assert "[bold]pad" in said
