"""Tables of the page: what is printed, and what is counted where nothing was estimated."""

from dataclasses import replace

import pytest

from lfptools.report.manifest import manifest
from lfptools.report.page import page
from lfptools.report.page_tables import page_table
from tests.report_sessions import results

NAN = float("nan")
HERE = "window chosen on these trials"


def row(value, note="", **changed):
    return {
        "area": "S1", "unit": "u0", "field_area": "S1", "field_channel": 11, "window": "early",
        "condition": "single", "band": "gamma", "measure": "ppc", "value": value, "lo": value,
        "hi": value, "null": 0.0, "n_spikes": 30, "n_trials": 12, "note": note, **changed,
    }  # fmt: skip


def test_rows_without_an_estimate_are_counted_by_reason():
    rows = [
        row(0.1, HERE),
        *(row(NAN, f"{count} spikes; not estimated below 20") for count in (3, 4, 7)),
        row(NAN, f"1 spike; not estimated below 20; {HERE}"),
        row(NAN, "depth of the unit is unknown"),
    ]
    table = page_table("coupling", rows)
    assert table.caption.endswith("(1 row)")
    assert len(table.rows) == 1
    assert table.folded
    assert table.notes == (
        "not estimated: 4 rows (too few spikes; not estimated below 20)",
        "not estimated: 1 row (depth of the unit is unknown)",
    )


def test_many_reasons_are_summed_up():
    rows = [row(NAN, f"reason {number}") for number in range(10)]
    notes = page_table("coupling", rows).notes
    assert len(notes) == 9
    assert notes[-1] == "not estimated: 2 rows more (coupling.csv gives each reason)"


def test_direction_counts_the_same_way():
    span = "span of 100 ms holds 0.4 cycles of 4 Hz; 3 are needed"
    found = results().rows["direction"]
    table = page_table("direction", [{**found[0], "net": NAN, "p": NAN, "note": span}])
    assert table.notes == (f"not estimated: 1 row ({span})",)


@pytest.mark.parametrize("estimated", [True, False])
def test_no_empty_table_is_printed(estimated):
    found = results()
    rows = (row(0.1 if estimated else NAN, "" if estimated else "depth of the unit is unknown"),)
    text = page(changed := replace(found, rows=found.rows | {"coupling": rows}), manifest(changed))
    part = text.partition("<h2>Spikes and field</h2>")[2].partition("<h2>")[0]
    assert ("<table>" in part) is estimated
    assert ("<details>" in part) is estimated
    assert ("not estimated: 1 row (depth of the unit is unknown)" in part) is not estimated
