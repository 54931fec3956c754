"""Prepared spikes in, the rows of firing.csv out."""

import msgspec

from lfptools.analysis.prepared import Prepared, chosen_note
from lfptools.analysis.results import Row, add_q, note
from lfptools.choices import WindowChoice
from lfptools.rates import finish_calls, in_order, window_rows
from lfptools.trials import Progress, no_progress


def firing_rows(prepared: Prepared, progress: Progress = no_progress) -> list[Row]:
    """Return one row a unit, condition and window, q and call included."""
    jobs = [
        (number, condition, place, window)
        for number, condition in enumerate(prepared.conditions)
        for place, window in enumerate(prepared.choices.window)
    ]
    parts = []
    for done, (number, condition, place, window) in enumerate(jobs):
        progress("counting the spikes", done / len(jobs))
        parts.append((number, place, _window_rows(prepared, condition, window)))
    rows = in_order(parts)
    add_q(rows, None)
    return named(prepared, finish_calls(rows))


def _window_rows(prepared: Prepared, condition: str, window: WindowChoice) -> dict[int, Row]:
    """Return the rows of one condition and window, fresh copies of what was kept of them."""
    basis = prepared.basis
    kept = basis.estimates.get(
        ("firing", condition, msgspec.json.encode(window)),
        lambda: window_rows(
            basis.cut,
            basis.spikes(condition),
            condition,
            window,
            weights=basis.weights,
            signs=basis.firing_signs,
        ),
    )
    return {unit: dict(row) for unit, row in kept.items()}


def named(prepared: Prepared, rows: list[Row]) -> list[Row]:
    """Add the session's name, and say so where the window was chosen on the same trials."""
    chosen = {window.name: chosen_note(window) for window in prepared.choices.window}
    return [
        {
            "session": prepared.cut.name,
            **row,
            "note": note(str(row.get("note", "")), chosen[str(row["window"])]),
        }
        for row in rows
    ]
