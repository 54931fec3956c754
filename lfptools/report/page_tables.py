"""Rows of the tables in, the shorter tables of the page out: value, unit and interval in one cell.

The CSV files hold every column and digit.
"""

import re
from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np

from lfptools.analysis.prepared import CHOSEN_HERE
from lfptools.plot.marks import Row, number
from lfptools.plot.words import cell, probability, rounded, verdict_words

Column = tuple[str, Callable[[Row], str]]


@dataclass(frozen=True, slots=True)
class PageTable:
    """A table as the page prints it."""

    caption: str
    headings: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    folded: bool
    notes: tuple[str, ...] = ()


#: Reasons that are counted one by one.
_MOST_REASONS = 8


def _text(name: str) -> Callable[[Row], str]:
    return lambda row: str(row.get(name) or "")


def _count(name: str) -> Callable[[Row], str]:
    return lambda row: rounded(number(row, name), 0)


def _figures(name: str) -> Callable[[Row], str]:
    """Three significant digits, all of the whole part, empty where there is no value."""

    def read(row: Row) -> str:
        value = number(row, name)
        if abs(value) >= 1000:
            return rounded(value, 0)
        return f"{value:.3g}" if np.isfinite(value) else ""

    return read


def _interval(name: str, lo: str, hi: str) -> Callable[[Row], str]:
    return partial(cell, column=name, lo=lo, hi=hi)


def _probability(name: str) -> Callable[[Row], str]:
    return lambda row: probability(number(row, name))


def _pair(row: Row) -> str:
    return f"{row['area_a']}, {row['area_b']}"


def _amplitude(row: Row) -> str:
    return cell(row, "amplitude", "amplitude_lo", "amplitude_hi", str(row["unit"]))


def _signal(row: Row) -> str:
    return f"{str(row['signal']).upper()} at {number(row, 'depth_um'):g} um"


def _span(row: Row) -> str:
    return f"{number(row, 'span_lo_ms'):g} to {number(row, 'span_hi_ms'):g}"


_WHERE: tuple[Column, ...] = (("window", _text("window")), ("condition", _text("condition")))
_TRIALS: Column = ("trials", _count("n_trials"))
_NOTE: Column = ("note", _text("note"))
_LATENCIES: tuple[Column, ...] = (
    ("area", _text("area")),
    *_WHERE,
    ("signal", _signal),
    ("wave", _text("extremum")),
    ("time (ms)", _interval("time_ms", "time_lo_ms", "time_hi_ms")),
    ("onset (ms)", _interval("onset_ms", "onset_lo_ms", "onset_hi_ms")),
    ("amplitude", _amplitude),
    ("p", _probability("p")),
    _TRIALS,
    _NOTE,
)
_COLUMNS: dict[str, tuple[Column, ...]] = {
    "latencies": _LATENCIES,
    "contacts": _LATENCIES,
    "lags": (
        ("areas", _pair),
        *_WHERE,
        ("feature", _text("feature")),
        ("second minus first (ms)", _interval("difference_ms", "lo_ms", "hi_ms")),
        ("p", _probability("p")),
        ("q", _probability("q")),
        _TRIALS,
        _NOTE,
    ),
    "sinks": (
        ("area", _text("area")),
        *_WHERE,
        ("kind", _text("kind")),
        ("depth (um)", _interval("depth_um", "depth_lo_um", "depth_hi_um")),
        ("layer", _text("layer")),
        ("extent (um)", _figures("extent_um")),
        ("onset (ms)", _interval("onset_ms", "onset_lo_ms", "onset_hi_ms")),
        ("peak (ms)", _interval("peak_ms", "peak_lo_ms", "peak_hi_ms")),
        ("density (uA/mm^3)", _figures("density_ua_mm3")),
        ("p", _probability("p")),
        _TRIALS,
        _NOTE,
    ),
    "firing": (
        ("area", _text("area")),
        ("unit", _text("unit")),
        ("depth (um)", _figures("depth_um")),
        *_WHERE,
        ("spikes", _count("n_spikes")),
        ("baseline (Hz)", _figures("baseline_hz")),
        ("window (Hz)", _figures("window_hz")),
        ("change (Hz)", _interval("change_hz", "lo_hz", "hi_hz")),
        ("q", _probability("q")),
        ("call", _text("call")),
        ("latency (ms)", _interval("latency_ms", "latency_lo_ms", "latency_hi_ms")),
        _TRIALS,
        _NOTE,
    ),
    "coupling": (
        ("area", _text("area")),
        ("unit", _text("unit")),
        ("field", _text("field_area")),
        ("channel", _count("field_channel")),
        *_WHERE,
        ("band", _text("band")),
        ("measure", _text("measure")),
        ("value", _interval("value", "lo", "hi")),
        ("null", _figures("null")),
        ("p", _probability("p")),
        ("q", _probability("q")),
        ("phase (degrees)", _interval("phase_deg", "phase_lo_deg", "phase_hi_deg")),
        ("spikes", _count("n_spikes")),
        _TRIALS,
    ),
    "verdicts": (
        ("areas", _pair),
        *_WHERE,
        ("verdict", verdict_words),
        ("net (positive: first leads)", _interval("net", "lo", "hi")),
        ("q", _probability("q")),
        ("smallest detectable", _figures("smallest_detectable")),
        _TRIALS,
        ("reason", _text("reason")),
    ),
    "direction": (
        ("areas", _pair),
        *_WHERE,
        ("span (ms)", _span),
        ("band", _text("band")),
        ("measure", _text("measure")),
        ("first to second", _figures("a_to_b")),
        ("second to first", _figures("b_to_a")),
        ("net", _interval("net", "lo", "hi")),
        ("p", _probability("p")),
        ("q", _probability("q")),
        ("order", _count("order")),
        _TRIALS,
    ),
}
_CAPTIONS = {
    "latencies": "Latencies of the signal that stands for each area",
    "contacts": "Latencies of single contacts",
    "lags": "Lags between areas",
    "sinks": "Strongest sinks and sources",
    "firing": "Firing of each unit",
    "coupling": "Units against the field, rows that were estimated",
    "verdicts": "Verdicts",
    "direction": "Estimates of direction, rows that were estimated",
}
#: Long tables stay folded.
_FOLDED = ("contacts", "firing", "coupling", "direction")
#: In these tables only rows with one of the columns are printed; the rest is counted by reason.
_NEEDS = {"coupling": ("value",), "direction": ("net", "p")}


def _not_estimated(name: str, rows: Sequence[Row]) -> list[str]:
    """Count rows without an estimate by reason, the commonest first."""
    reasons = Counter(_reason(row) for row in rows).most_common()
    first, rest = reasons[:_MOST_REASONS], sum(count for _, count in reasons[_MOST_REASONS:])
    notes = [f"not estimated: {_rows(count)} ({reason})" for reason, count in first]
    if rest:
        notes.append(f"not estimated: {_rows(rest)} more ({name}.csv gives each reason)")
    return notes


def _rows(count: int) -> str:
    return f"{count} row" if count == 1 else f"{count} rows"


def _reason(row: Row) -> str:
    """Return why a row was not estimated, without counts that differ from row to row."""
    said = str(row["note"]).removesuffix(CHOSEN_HERE).removesuffix("; ")
    return re.sub(r"^\d+ spikes?;", "too few spikes;", said)


def page_table(name: str, rows: Sequence[Row]) -> PageTable:
    """Return one table for the page.

    Parameters
    ----------
    name : str
        A key of the tables, or "contacts" for the rows of single contacts in latencies.csv.
    rows : sequence of rows
        All of them.
    """
    needs = _NEEDS.get(name, ())
    shown: list[Row] = []
    left: list[Row] = []
    for row in rows:
        has = not needs or any(np.isfinite(number(row, column)) for column in needs)
        (shown if has else left).append(row)
    columns = [each for each in _COLUMNS[name] if each is not _NOTE or any(map(_NOTE[1], shown))]
    notes = list(dict.fromkeys(str(row["caveat"]) for row in rows)) if name == "verdicts" else []
    notes += _not_estimated(name, left)
    return PageTable(
        caption=f"{_CAPTIONS[name]} ({_rows(len(shown))})",
        headings=tuple(heading for heading, _ in columns),
        rows=tuple(tuple(read(row) for _, read in columns) for row in shown),
        folded=name in _FOLDED and bool(shown),
        notes=tuple(notes),
    )
