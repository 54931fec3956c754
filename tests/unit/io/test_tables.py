"""Events and spikes from CSV: what is read, and the row and column of every mistake."""

import re

import numpy as np
import pytest

from lfptools.errors import ReaderError
from lfptools.io.tables import read_events_csv, read_spikes_csv


def table(tmp_path, text):
    path = tmp_path / "table.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


def test_events_keep_the_order_of_the_file(tmp_path):
    text = "condition, time_s ,whisker\nsingle,2.5,C2\npad,1.25,\n\nsingle,1e1,D1\n\n"
    events = read_events_csv(table(tmp_path, text))
    assert events.time_s.tolist() == [2.5, 1.25, 10.0]
    assert events.condition == ("single", "pad", "single")
    assert events.factors == {"whisker": ("C2", "", "D1")}
    assert events.conditions == ("single", "pad")


def test_marks_of_other_programs_are_no_hindrance(tmp_path):
    text = b'\xef\xbb\xbftime_s,condition\r\n1,"a, b"\r\n'  # mark of byte order, quotes, CR LF
    events = read_events_csv(table(tmp_path, text))
    assert events.condition == ("a, b",)


EVENTS_REFUSED = [
    ("", "row 1 has no column time_s; it has nothing; needed are time_s and condition"),
    (
        "time_s;condition\n1;a\n",
        "row 1 has no column time_s; it has time_s;condition; needed are "
        "time_s and condition; its columns seem to be separated by semicolons: needed is a comma "
        "between columns",
    ),
    (
        "time_s\tcondition\n1\ta\n",
        "row 1 has no column time_s; it has time_s\tcondition; needed "
        "are time_s and condition; its columns seem to be separated by tabs: needed is a comma",
    ),
    ("time_s\n1\n", "row 1 has no column condition"),
    ("time_s,condition,time_s\n1,a,2\n", "row 1, column 3 is 'time_s'"),
    ("time_s,condition,\n1,a,2\n", "row 1, column 3 is ''"),
    ("time_s,condition\n", "holds no rows below its header"),
    ("time_s,condition\n\n \n", "holds no rows below its header"),
    ("time_s,condition\n1,a\n\nx,a\n", "row 4, column time_s is 'x'; needed is a finite number"),
    ("time_s,condition\n1,a\nnan,a\n", "row 3, column time_s is 'nan'"),
    ("time_s,condition\n1,a\n,a\n", "row 3, column time_s is ''"),
    ("time_s,condition\ninf,a\n", "row 2, column time_s is 'inf'"),
    ("time_s,condition\n1,a\n2,\n", "row 3, column condition is ''; needed is a text"),
    ("time_s,condition\n1,a\n2\n", "row 3 has 1 fields; needed are 2"),
    ("time_s,condition\n1,a\n2,5,b\n", "row 3 has 3 fields; needed are 2"),
    ('time_s,condition\n1,"a\n', "cannot be read as a table"),
    (b"time_s,condition\n1,\xe9\n", "cannot be read as a table"),
]


@pytest.mark.parametrize(("text", "words"), EVENTS_REFUSED)
def test_events_refused(text, words, tmp_path):
    path = table(tmp_path, text)
    with pytest.raises(ReaderError, match=re.escape(f"{path}: {words}")):
        read_events_csv(path)


def test_a_missing_table_is_named(tmp_path):
    with pytest.raises(ReaderError, match=r"none\.csv: cannot be read"):
        read_events_csv(tmp_path / "none.csv")


def test_spikes(tmp_path):
    text = "unit,time_s,depth_um,area\nb,2,150,S1\na,1,300,M1\nb,0.5,150,S1\n"
    second, first = read_spikes_csv(table(tmp_path, text))  # by name
    assert (first.name, first.time_s.tolist(), first.depth_um) == ("b", [0.5, 2.0], 150.0)
    assert (second.name, second.time_s.tolist(), second.depth_um) == ("a", [1.0], 300.0)
    assert first.columns["area"] == "S1"


def test_units_stand_in_the_natural_order_of_their_names(tmp_path):
    names = ["u10", "u2", "b", "u1", "10", "9", "u2b10", "u2b9", "u02"]
    text = "unit,time_s\n" + "".join(f"{name},1\n" for name in names)
    found = [unit.name for unit in read_spikes_csv(table(tmp_path, text))]
    assert found == ["9", "10", "b", "u1", "u02", "u2", "u2b9", "u2b10", "u10"]


def test_spikes_without_depths(tmp_path):
    (unit,) = read_spikes_csv(table(tmp_path, "unit,time_s\n1,2\n1,3\n"))
    assert np.isnan(unit.depth_um)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("unit,time_s\n1,x\n", "row 2, column time_s is 'x'"),
        ("unit,time_s\n,1\n", "row 2, column unit is ''"),
        ("unit,time_s,depth_um\n1,1,deep\n", "row 2, column depth_um is 'deep'"),
        ("unit,time_s,area\n1,1,S1\n1,2,S2\n", "row 3, column area is 'S2'; needed is 'S1'"),
        ("time_s\n1\n", "row 1 has no column unit"),
    ],
)
def test_spikes_refused(text, words, tmp_path):
    path = table(tmp_path, text)
    with pytest.raises(ReaderError, match=re.escape(f"{path}: {words}")):
        read_spikes_csv(path)
