"""README keeps step with the code: keys of an area, extras, reserved columns, notebooks."""

import tomllib
from pathlib import Path

import pytest

from lfptools.choices import AreaChoice
from tests.report_sessions import results

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()


def test_every_extra_is_explained():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    table = README.partition("| extra |")[2].partition("\n\n")[0]
    assert [name for name in project["optional-dependencies"] if f"`{name}`" not in table] == []


@pytest.mark.parametrize("key", AreaChoice.__struct_fields__)
def test_every_key_of_an_area_is_named(key):
    assert key in README or key == "contacts_file"  # refused until it is read


@pytest.mark.parametrize(("table", "column"), [
    ("sinks", "p_earliest"), ("sinks", "radius_um"), ("direction", "given"),
    ("trials", "S1.early.amplitude"), ("trials", "S1.late.shift_ms"),
])  # fmt: skip
def test_reserved_columns_are_empty_and_said_to_be(table, column):
    rows = results().rows[table]
    assert rows
    assert all(row.get(column) in (None, "") for row in rows)
    said = README.partition("reserved and stay empty")[2].partition("\n")[0]
    assert f"`{column}`" in said or column.startswith("S1.")


def test_every_notebook_is_named():
    folder = ROOT / "demo_notebooks"
    assert folder.name in README
    assert list(folder.glob("*.ipynb"))
    assert all(each.name in README for each in folder.glob("*.ipynb"))
