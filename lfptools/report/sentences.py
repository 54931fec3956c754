"""Results in, what they say in short out: sentences with unit, interval and count."""

from dataclasses import dataclass

import numpy as np

from lfptools.analysis.depth import NO_DENSITY
from lfptools.analysis.elsewhere import ELSEWHERE
from lfptools.analysis.results import Results
from lfptools.layers import ONE_CONTACT
from lfptools.plot.marks import Row, chosen, number
from lfptools.plot.words import cell, probability, verdict_words

#: Names the net value that these trials would have shown; the page explains it where it stands.
SMALLEST = "smallest detectable"


@dataclass(frozen=True, slots=True)
class Said:
    """Sentences on one question."""

    question: str
    sentences: tuple[str, ...]


def in_short(results: Results) -> list[Said]:
    """Return what the tables say, question by question; questions without rows are left out."""
    said = [
        Said("In which order does the wave reach the areas?", _arrivals(results)),
        Said("Where does its current enter?", _sinks(results)),
        Said("Does it drive or silence the units?", _calls(results)),
        Said("Which area leads?", _leads(results)),
    ]
    return [each for each in said if each.sentences]


def _cells(results: Results) -> list[tuple[str, str]]:
    """Every window and condition, in order."""
    return [
        (window.name, condition)
        for window in results.choices.window
        for condition in results.cut.table.conditions
    ]


def _arrivals(results: Results) -> tuple[str, ...]:
    sentences = []
    for window, condition in _cells(results):
        rows = chosen(
            results.rows["latencies"], role="area", window=window, condition=condition
        )  # fmt: skip
        if rows:
            sentences.append(f"{window}, {condition}: {_order(results, rows)}.")
    return tuple(sentences)


def _order(results: Results, rows: list[Row]) -> str:
    found = sorted(
        (row for row in rows if np.isfinite(number(row, "time_ms"))),
        key=lambda row: number(row, "time_ms"),
    )
    text = ""
    for index, row in enumerate(found):
        if index:
            text += (
                " before " if _apart(results, found[index - 1], row) else " and, not told apart, "
            )
        text += f"{row['area']} {cell(row, 'time_ms', 'time_lo_ms', 'time_hi_ms', 'ms')}"
        remarks = _remarks(row)
        text += f" ({'; '.join(remarks)})" if remarks else ""
    missing = [f"{row['area']}: {row['note']}" for row in rows if row not in found]
    parts = [text] if text else []
    parts += [f"{found[0]['n_trials']} trials"] if found else []
    return "; ".join([*parts, *missing])


def _remarks(row: Row) -> list[str]:
    """Return what must be known of a wave that was found: its doubts, in the words of its note."""
    parts = str(row["note"]).split("; ")
    doubt = ["not reliable"] if parts[0].startswith("not reliable") else []
    return doubt + [each for each in parts if each == ONE_CONTACT or each.startswith(ELSEWHERE)]


def _apart(results: Results, first: Row, second: Row) -> bool:
    """Whether the lag between two areas is told from 0: its interval holds no 0 and q <= .05."""
    areas = {first["area"], second["area"]}
    for row in chosen(results.rows["lags"], feature="time", window=first["window"],
                      condition=first["condition"]):  # fmt: skip
        if {row["area_a"], row["area_b"]} == areas:
            clear = number(row, "lo_ms") * number(row, "hi_ms") > 0
            return bool(clear and number(row, "q") <= 0.05)
    return False


def _sinks(results: Results) -> tuple[str, ...]:
    sentences = []
    without = [
        area
        for area in results.cut.area_names
        if any(NO_DENSITY in str(row["note"]) for row in chosen(results.rows["sinks"], area=area))
    ]
    for window in results.choices.window:
        for area in results.cut.area_names:
            rows = chosen(results.rows["sinks"], kind="sink", window=window.name, area=area)
            if rows and area not in without:
                sentences.append(f"{area}, {window.name}: {_sinks_of(rows)}.")
    return (*sentences, *(f"{area}: {NO_DENSITY}." for area in without))


def _sinks_of(rows: list[Row]) -> str:
    found = [row for row in rows if np.isfinite(number(row, "depth_um"))]
    parts = ["strongest sink " + "; ".join(_sink(row) for row in found)] if found else []
    missing = [row for row in rows if row not in found]
    parts += [f"no sink shown ({row['condition']}: {row['note']})" for row in missing]
    return "; ".join(parts)


def _sink(row: Row) -> str:
    layer = f" in {row['layer']}" if row["layer"] else ""
    depth = cell(row, "depth_um", "depth_lo_um", "depth_hi_um", "um")
    peak = cell(row, "peak_ms", "peak_lo_ms", "peak_hi_ms", "ms")
    return (
        f"at {depth}{layer}, greatest at {peak}, {number(row, 'density_ua_mm3'):.2g} uA/mm^3 "
        f"({row['condition']}, {row['n_trials']} trials)"
    )


def _calls(results: Results) -> tuple[str, ...]:
    sentences = []
    for window, condition in _cells(results):
        rows = chosen(results.rows["firing"], window=window, condition=condition)
        if rows:
            sentences.append(f"{window}, {condition}: {_counts(rows)}.")
    return tuple(sentences)


def _counts(rows: list[Row]) -> str:
    tested = [row for row in rows if row["call"]]
    parts = []
    for call, word in (("rise", "rise"), ("fall", "fall")):
        found = chosen(tested, call=call)
        by_area = ", ".join(
            f"{area} {len(chosen(found, area=area))} of {len(chosen(tested, area=area))}"
            for area in dict.fromkeys(row["area"] for row in tested)
        )
        where = f" ({by_area})" if found else ""
        parts.append(f"{len(found)} of {len(tested)} units {word}{where}")
    left = len(rows) - len(tested)
    few = f"; {left} not tested" if left else ""
    n_trials = max(int(number(row, "n_trials")) for row in rows)
    return f"{'; '.join(parts)} (q <= .05, {n_trials} trials){few}"


def _leads(results: Results) -> tuple[str, ...]:
    """One sentence a verdict, those that claim something first."""
    rows = sorted(
        results.rows["verdicts"], key=lambda row: row["verdict"] not in ("leads", "both ways")
    )
    return tuple(_lead(row) for row in rows)


def _lead(row: Row) -> str:
    where = f"({row['window']}, {row['condition']})"
    trials = f"{row['n_trials']} trials"
    pair = f"{row['area_a']} and {row['area_b']}"
    if row["verdict"] == "withheld":
        return f"{pair} {where}: withheld, {row['reason']}; {trials}."
    words = verdict_words(row)
    head = f"{words} {where}" if row["verdict"] == "leads" else f"{pair} {where}: {words}"
    net = cell(row, "net", "lo", "hi")
    text = f"{head}: net {net} (positive: {row['area_a']} leads), "
    text += f"q = {probability(number(row, 'q'))}, {trials}"
    least = number(row, "smallest_detectable")
    if row["verdict"] != "leads" and np.isfinite(least):
        text += f"; {SMALLEST} net {least:.2g}"
    return text + ("" if ONE_CONTACT not in str(row.get("caveat")) else f"; {ONE_CONTACT}") + "."
