"""Tables as files, read back by another reader (pandas)."""

import io
from dataclasses import replace
from math import nan

import numpy as np
import pandas as pd
import pytest

from lfptools.analysis import analyse
from lfptools.columns import COLUMNS
from lfptools.errors import InputError
from lfptools.report.tables import table_bytes, text_of, write_tables
from tests.report_sessions import cut_session, results


def _with_rows(**rows):
    return replace(results(), rows={**results().rows, **rows})


@pytest.mark.parametrize(
    ("value", "column", "text"),
    [
        (1 / 3, "net", "0.333333"),
        (123456.789, "amplitude", "123457"),
        (1234567.0, "amplitude", "1.23457e+06"),
        (600.0, "depth_um", "600"),
        (12.3456789, "event_time_s", "12.345679"),
        (3.0, "event_time_s", "3.000000"),
        (-1e-9, "event_time_s", "0.000000"),
        (-0.0, "net", "0"),
        (np.float32(0.5), "net", "0.5"),
        (nan, "net", ""),
        (np.float64("nan"), "event_time_s", ""),
        (None, "note", ""),
        (True, "accepted", "true"),
        (np.bool_(False), "accepted", "false"),
        (7, "trial", "7"),
        (np.int64(1234567), "trial", "1234567"),
        ("=1+1", "condition", "=1+1"),
    ],
)
def test_values_are_printed_by_the_rules_of_the_tables(value, column, text):
    assert text_of(value, column) == text


@pytest.mark.parametrize("name", COLUMNS)
def test_another_reader_finds_the_same_values(name):
    found = results()
    read = pd.read_csv(io.BytesIO(table_bytes(found, name)), keep_default_na=False, dtype=str)
    assert list(read.columns[: len(COLUMNS[name])]) == list(COLUMNS[name])
    assert len(read) == len(found.rows[name]) > 0
    for column in COLUMNS[name]:
        for text, row in zip(read[column], found.rows[name], strict=True):
            value = row.get(column)
            if isinstance(value, bool):
                assert text == str(value).lower()
            elif isinstance(value, float):
                assert (text == "") == bool(np.isnan(value))
                # Half a unit in the sixth digit: 5e-6 of the value at most.
                assert text == "" or float(text) == pytest.approx(value, rel=5e-6, abs=5e-7)
            else:
                assert text == ("" if value is None else str(value))


def test_lines_end_with_a_line_feed_and_text_is_utf_8():
    rows = ({"session": "Schnurrhaar-Übung", "condition": "σ"},)
    content = table_bytes(_with_rows(verdicts=rows), "verdicts")
    assert b"\r" not in content
    assert content.endswith(b"\n")
    assert "Schnurrhaar-Übung" in content.decode("utf-8")


@pytest.mark.parametrize(
    "text", ["a,b", 'a "quoted" name', "two\nlines", "a\rb", "=cmd|' /C x'!A0"]
)
def test_texts_survive_whatever_they_hold(text):
    # Quoting by RFC 4180, read by pandas' own parser.
    content = table_bytes(_with_rows(verdicts=({"session": "s", "reason": text},)), "verdicts")
    read = pd.read_csv(io.BytesIO(content), keep_default_na=False, lineterminator="\n")
    assert list(read.reason) == [text]


def test_the_same_session_gives_the_same_bytes_twice():
    again = analyse(cut_session())
    for name in COLUMNS:
        assert table_bytes(results(), name) == table_bytes(again, name)


def test_every_table_is_written_with_its_header_also_without_rows(tmp_path):
    empty = _with_rows(**dict.fromkeys(COLUMNS, ()))
    paths = write_tables(empty, tmp_path)
    assert [path.name for path in paths] == [f"{name}.csv" for name in COLUMNS]
    for name, path in zip(COLUMNS, paths, strict=True):
        assert path.read_text() == ",".join(COLUMNS[name]) + "\n"


def test_trials_carry_factors_and_places_for_single_trial_measures():
    header = table_bytes(results(), "trials").decode().splitlines()[0].split(",")
    assert header[:7] == [*COLUMNS["trials"], "factor.whisker"]
    assert "S1.early.amplitude" in header


def test_an_unknown_table_is_refused():
    with pytest.raises(InputError, match="table is 'orders'"):
        table_bytes(results(), "orders")
