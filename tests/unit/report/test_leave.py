"""The output folder: whole or not at all, and never over what was there."""

import json
from pathlib import Path

import pytest

from lfptools.columns import COLUMNS
from lfptools.errors import OutputError
from lfptools.io.arrays import read_arrays
from lfptools.model import Session
from lfptools.report import leave
from lfptools.report.leave import need_folder, write_results
from tests.report_sessions import results

FILES = {*(f"{name}.csv" for name in COLUMNS), "arrays.h5", "manifest.json", "methods.md",
         "report.html"}  # fmt: skip


def _names(folder: Path) -> set[str]:
    return {each.name for each in folder.iterdir()}


def test_a_run_leaves_every_file_and_nothing_else(tmp_path):
    found = write_results(results(), tmp_path / "new" / "out")
    assert found == tmp_path / "new" / "out" / "report.html"
    assert _names(found.parent) == FILES
    assert _names(tmp_path / "new") == {"out"}


@pytest.fixture
def blank_page(monkeypatch):
    """Leave the figures out where only the folder is looked at."""
    monkeypatch.setattr(leave, "page", lambda *_: "<p>new</p>")


@pytest.mark.usefixtures("blank_page")
def test_an_empty_folder_is_used(tmp_path):
    write_results(results(), tmp_path)
    assert _names(tmp_path) == FILES


def test_a_folder_that_is_not_empty_is_refused_and_left_alone(tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    for act in (lambda: need_folder(tmp_path), lambda: write_results(results(), tmp_path)):
        with pytest.raises(OutputError, match="exists and is not empty"):
            act()
    assert _names(tmp_path) == {"notes.txt"}


def test_a_file_in_the_place_of_the_folder_is_refused(tmp_path):
    (tmp_path / "out").write_text("mine")
    for force in (False, True):
        with pytest.raises(OutputError, match="is a file"):
            need_folder(tmp_path / "out", force=force)


@pytest.mark.usefixtures("blank_page")
def test_force_replaces_its_own_files_and_keeps_the_others(tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    (tmp_path / "report.html").write_text("old")
    write_results(results(), tmp_path, force=True)
    assert _names(tmp_path) == FILES | {"notes.txt"}
    assert (tmp_path / "notes.txt").read_text() == "mine"
    assert (tmp_path / "report.html").read_text() != "old"


@pytest.mark.parametrize("there", [True, False])
def test_a_failure_on_the_way_leaves_nothing_behind(tmp_path, monkeypatch, there):
    out = tmp_path / "out"
    if there:
        out.mkdir()

    def fail(*_):
        raise RuntimeError("no ink")

    monkeypatch.setattr(leave, "page", fail)  # the last file to be built
    with pytest.raises(RuntimeError, match="no ink"):
        write_results(results(), out)
    assert _names(tmp_path) == ({"out"} if there else set())
    assert not there or _names(out) == set()


def test_a_place_that_cannot_be_written_is_an_output_error(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(OutputError):
        write_results(results(), tmp_path / "file" / "out")


def test_two_runs_differ_in_nothing_but_the_time(tmp_path):
    for name in ("a", "b"):
        write_results(results(), tmp_path / name, when={"run": name})
    for name in FILES - {"manifest.json"}:
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name
    accounts = [json.loads((tmp_path / each / "manifest.json").read_text()) for each in "ab"]
    assert [each.pop("when") for each in accounts] == [{"run": "a"}, {"run": "b"}]
    assert accounts[0] == accounts[1]


@pytest.mark.usefixtures("blank_page")
def test_the_files_of_the_session_are_named_in_the_manifest(tmp_path):
    (tmp_path / "session.toml").write_text("session = 'whisk'")
    session = Session(
        name="whisk", areas=(), events=None, choices=results().choices, subject="rat 7",
        files=(tmp_path / "session.toml",),
    )  # fmt: skip
    write_results(results(), tmp_path / "out", session=session, root=tmp_path)
    account = json.loads((tmp_path / "out" / "manifest.json").read_text())
    assert [each["name"] for each in account["inputs"]] == ["session.toml"]
    assert account["subject"] == "rat 7"


@pytest.mark.usefixtures("blank_page")
def test_arrays_hold_every_curve_with_axes_and_units(tmp_path):
    names = {"areas": ("S1/a", ".."), "conditions": ("single", "p.d")}
    found = results(**names)
    write_results(found, tmp_path)
    arrays = read_arrays(tmp_path / "arrays.h5")
    means = {name: each for name, each in arrays.items() if name.endswith("/mean")}
    assert len(means) == 3 * 2 * 2  # lfp, csd and signals of each area and condition
    assert {attributes["area"] for _, attributes in means.values()} == {"S1/a", ".."}
    for name, (values, attributes) in means.items():
        place = name.removesuffix("mean")
        depth, time = (arrays[place + axis][0] for axis in attributes["axes"].split(", "))
        assert values.shape == (len(depth), len(time))
        assert attributes["unit"] in ("uV", "uA/mm^3")
    average = found.maps[0]
    values, _ = next(each for name, each in means.items() if name.startswith("csd/S1%2Fa/single"))
    assert (values == average.mean).all()
    rates = [name for name in arrays if name.startswith("firing/") and name.endswith("/rate_hz")]
    rasters = [name for name in arrays if name.startswith("rasters/") and name.endswith("time_s")]
    assert len(rates) == len(rasters) == 4
