"""Quick and full answers in, the plain tables that the page prints out.

Everything is text or numbers: the browser sets it as text, so that no name from a file can
become markup.
"""

from collections import Counter
from collections.abc import Sequence
from math import isfinite
from typing import Any

from lfptools.analysis.prepared import CHOSEN_HERE
from lfptools.analysis.results import Row
from lfptools.choices import WindowChoice
from lfptools.plot.words import cell, probability, verdict_words, with_interval
from lfpwidgets.full import FullAnswer
from lfpwidgets.quick import QuickAnswer, QuickWave

Table = dict[str, Any]
_CHOSEN = " · window chosen on these trials: p-values do not account for that"
_CALLS = ("rise", "fall", "none")


def quick_words(answer: QuickAnswer, window: WindowChoice, before: dict[str, Any] | None) -> Table:
    """Return the tables of a quick answer; sinks and verdicts are those of the last full one.

    Parameters
    ----------
    answer : QuickAnswer
        For the window in hand.
    window : WindowChoice
        That window.
    before : dict or None
        The last full answer in words; its slow tables are shown as old until the new ones come.
    """
    tables = [_waves(answer), _lags(answer)] if answer.waves else []
    if answer.leads:
        tables.append(_leads(answer))
    if answer.rates:
        tables.append(_firing(answer))
    tables += [table | {"old": True} for table in (before or {}).get("slow", ())]
    pending = answer.note or (
        f"quick intervals from {answer.n_draws} resamples; those of a run and the verdict follow"
    )
    return _answer(answer, window, tables, pending, stale=True) | {
        "latencies": [_mark(wave) for wave in answer.waves],
        "slow": (before or {}).get("slow", ()),
    }


def full_words(answer: FullAnswer, window: WindowChoice, n_trials: int) -> Table:
    """Return the tables of a full answer: the numbers that `lfptools run` writes."""
    slow = [_verdict_table(answer.verdicts)] if answer.verdicts else []
    slow += [_sink_table(answer.sinks)] if answer.sinks else []
    tables = [_wave_table(answer.latencies)] if answer.latencies else []
    tables += [_lag_table(answer.lags)] if answer.lags else []
    calls = [_call_table(answer.firing)] if answer.firing else []
    said = "as `lfptools run` gives them for these windows"
    return _answer(
        answer, window, tables + slow[:1] + calls + slow[1:], said, stale=False, n_trials=n_trials
    ) | {
        "latencies": [
            {
                "area": row["area"],
                "time": _known(row.get("time_ms")),
                "lo": _known(row.get("time_lo_ms")),
                "hi": _known(row.get("time_hi_ms")),
                "amplitude": _known(row.get("amplitude")),
            }
            for row in answer.latencies
        ],
        "slow": slow,
    }


def _answer(
    answer: Any,
    window: WindowChoice,
    tables: list[Table],
    pending: str,
    *,
    stale: bool,
    n_trials: int | None = None,
) -> Table:
    chosen = _CHOSEN if window.chosen != "before" else ""
    count = answer.n_trials if n_trials is None else n_trials
    first, last = (1000 * edge for edge in window.direction_span_s)
    direction = f" · direction over {first:g} to {last:g} ms"
    return {
        "heading": f"{answer.window}, {answer.condition}: {count} trials{direction}{chosen}",
        "pending": pending,
        "stale": stale,
        "tables": tables,
    }


def _table(caption: str, head: Sequence[str], rows: list[list[Any]]) -> Table:
    """Return a table; a column of notes in which nothing is noted is left out."""
    if head[-1] == "note" and not any(row[-1] for row in rows):
        head, rows = head[:-1], [row[:-1] for row in rows]
    return {"caption": caption, "head": list(head), "rows": rows, "old": False}


def _named(area: str, signal: str) -> str:
    """Return an area with the signal that stands for it: the contact may change with windows."""
    return f"{area} ({signal})"


def _own(note: str) -> str:
    """Return a note without what the heading says already."""
    return "; ".join(part for part in note.split("; ") if part != CHOSEN_HERE)


# Quick.


def _waves(answer: QuickAnswer) -> Table:
    rows: list[list[Any]] = []
    for wave in answer.waves:
        time = with_interval(wave.time_s * 1000, wave.time_lo_s * 1000, wave.time_hi_s * 1000)
        onset = with_interval(wave.onset_s * 1000, wave.onset_lo_s * 1000, wave.onset_hi_s * 1000)
        height = with_interval(wave.amplitude, wave.amplitude_lo, wave.amplitude_hi, wave.unit)
        rows.append([_named(wave.area, wave.signal), time, onset, height, _own(wave.note)])
    return _table(*_WAVES, rows)


def _lags(answer: QuickAnswer) -> Table:
    by_pair: dict[str, list[Any]] = {}
    for lag in answer.lags:
        text = with_interval(lag.difference_s * 1000, lag.lo_s * 1000, lag.hi_s * 1000)
        row = by_pair.setdefault(f"{lag.area_b} after {lag.area_a}", [])
        row += [text, probability(lag.p)] if lag.feature == "time" else [text]
    return _table(*_LAGS, [[pair, *cells] for pair, cells in by_pair.items()])


def _firing(answer: QuickAnswer) -> Table:
    rows: list[list[Any]] = []
    for rate in answer.rates:
        calls = Counter(unit.call for unit in answer.unit_rates if unit.area == rate.area)
        change = with_interval(rate.change_hz, rate.lo_hz, rate.hi_hz)
        rows.append([rate.area, *(str(calls[each]) for each in _CALLS), change or rate.note])
    return _table(
        "Units that rise or fall (quick, p <= .05)",
        ("area", *_CALLS, "mean change (Hz)"),
        rows,
    )


def _leads(answer: QuickAnswer) -> Table:
    rows = [
        [
            f"{lead.area_a}, {lead.area_b}",
            with_interval(lead.net, lead.lo, lead.hi) or lead.withheld,
        ]
        for lead in answer.leads
    ]
    return _table("Net lead (positive: the first leads)", ("areas", "net"), rows)


def _mark(wave: QuickWave) -> dict[str, Any]:
    return {
        "area": wave.area,
        "time": _known(wave.time_s * 1000),
        "lo": _known(wave.time_lo_s * 1000),
        "hi": _known(wave.time_hi_s * 1000),
        "amplitude": _known(wave.amplitude),
    }


# Full.

_WAVES = (
    "When the wave arrives (ms)",
    ("area", "extremum", "onset", "amplitude", "note"),
)
_LAGS = ("Lags (ms)", ("areas", "extremum", "p", "onset"))


def _wave_table(rows: Sequence[Row]) -> Table:
    return _table(
        *_WAVES,
        [
            [
                _named(row["area"], f"{row['signal']} {row['depth_um']:g} um"),
                cell(row, "time_ms", "time_lo_ms", "time_hi_ms"),
                cell(row, "onset_ms", "onset_lo_ms", "onset_hi_ms"),
                cell(row, "amplitude", "amplitude_lo", "amplitude_hi", row["unit"]),
                _own(str(row.get("note", ""))),
            ]
            for row in rows
        ],
    )


def _lag_table(rows: Sequence[Row]) -> Table:
    by_pair: dict[str, list[Any]] = {}
    for row in rows:
        text = cell(row, "difference_ms", "lo_ms", "hi_ms")
        cells = by_pair.setdefault(f"{row['area_b']} after {row['area_a']}", [])
        cells += [text, probability(_number(row, "q"))] if row["feature"] == "time" else [text]
    head = ("areas", "extremum", "q", "onset")
    return _table(_LAGS[0], head, [[pair, *cells] for pair, cells in by_pair.items()])


def _call_table(rows: Sequence[Row]) -> Table:
    shown = []
    for area in dict.fromkeys(row["area"] for row in rows):
        own = [row for row in rows if row["area"] == area]
        calls = Counter(row["call"] for row in own)
        changes = [
            f"{row['unit']}: {cell(row, 'change_hz', 'lo_hz', 'hi_hz', 'Hz') or row['note']}"
            f" ({row['call'] or 'not estimated'})"
            for row in own
        ]
        details = {"key": f"units {area}", "text": "units", "more": changes}
        shown.append([area, *(str(calls[each]) for each in _CALLS), details])
    return _table("Units that rise or fall (q <= .05)", ("area", *_CALLS, "change"), shown)


def _sink_table(rows: Sequence[Row]) -> Table:
    return _table(
        "Strongest sink and source",
        ("area", "", "depth (um)", "peak (ms)", "layer"),
        [
            [
                row["area"],
                row["kind"],
                cell(row, "depth_um", "depth_lo_um", "depth_hi_um"),
                cell(row, "peak_ms", "peak_lo_ms", "peak_hi_ms"),
                str(row.get("layer", "")) or _own(str(row.get("note", ""))),
            ]
            for row in rows
        ],
    )


def _verdict_table(rows: Sequence[Row]) -> Table:
    return _table(
        "Which area leads (net Granger causality minus that of reversed time)",
        ("areas", "verdict", "net (positive: first leads)", "q"),
        [
            [
                f"{row['area_a']}, {row['area_b']}",
                {
                    "key": f"verdict {row['area_a']} {row['area_b']}",
                    "text": verdict_words(row),
                    "more": _reasons(row),
                },
                cell(row, "net", "lo", "hi"),
                probability(_number(row, "q")),
            ]
            for row in rows
        ],
    )


def _reasons(row: Row) -> list[str]:
    smallest = _number(row, "smallest_detectable")
    detectable = (
        [f"smallest net seen in 80 % of cases: {smallest:.2g}"] if isfinite(smallest) else []
    )
    return [
        f"Reason: {row['reason']}.",
        f"Control: {row['control']}; {row['n_trials']} trials.",
        *detectable,
        f"Caveat: {row['caveat']}.",
    ]


def _number(row: Row, column: str) -> float:
    value = row.get(column)
    return float("nan") if value is None else float(value)


def _known(value: float | None) -> float | None:
    """NaN does not travel in JSON."""
    return float(value) if value is not None and isfinite(value) else None
