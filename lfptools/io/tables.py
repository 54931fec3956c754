"""A CSV of events or spikes comes in; events or stored units go out."""

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from lfptools.errors import ReaderError
from lfptools.io.guard import reading
from lfptools.io.stored_units import StoredUnit
from lfptools.model import Events

#: What other programs put between columns.
_SEPARATORS = {";": "semicolons", "\t": "tabs"}


@dataclass(frozen=True, slots=True, eq=False)
class _Table:
    """A CSV: texts by column, and the row of the file in which each stands (header: row 1)."""

    path: Path
    columns: dict[str, list[str]]
    rows: list[int]

    def numbers(self, column: str) -> np.ndarray:
        """Return a column as finite numbers."""
        found = np.empty(len(self.rows))
        for index, text in enumerate(self.columns[column]):
            try:
                found[index] = float(text)
            except ValueError:
                found[index] = np.nan
            if not np.isfinite(found[index]):
                raise self._wrong(index, column, "a finite number, with a point for decimals")
        return found

    def texts(self, column: str) -> list[str]:
        """Return a column of texts, none of them empty."""
        for index, text in enumerate(self.columns[column]):
            if not text:
                raise self._wrong(index, column, "a text")
        return self.columns[column]

    def _wrong(self, index: int, column: str, needed: str) -> ReaderError:
        found = self.columns[column][index]
        return ReaderError(
            f"{self.path}: row {self.rows[index]}, column {column} is {found!r}; needed is {needed}"
        )


def read_events_csv(path: Path) -> Events:
    """Read stimuli: columns time_s and condition; further columns are factors, as text.

    Parameters
    ----------
    path : Path
        The CSV, comma-separated, with a header. Times in s on the clock of the events.

    Returns
    -------
    Events
        In the order of the file, times as they stand there (no delay applied).

    Raises
    ------
    ReaderError
        Naming the file, the row (the header is row 1) and the column.
    """
    table = _read_table(path, ("time_s", "condition"))
    factors = {
        name: tuple(texts)
        for name, texts in table.columns.items()
        if name not in ("time_s", "condition")
    }
    return Events(table.numbers("time_s"), tuple(table.texts("condition")), factors)


def read_spikes_csv(path: Path) -> list[StoredUnit]:
    """Read spikes: columns unit and time_s, one row a spike.

    Parameters
    ----------
    path : Path
        The CSV. Further columns (depth_um, area, quality) describe the unit and must be the
        same in all its rows.

    Returns
    -------
    list of StoredUnit
        In the natural order of their names: u1, u2, u10.

    Raises
    ------
    ReaderError
        Naming the file, the row (the header is row 1) and the column.
    """
    table = _read_table(path, ("unit", "time_s"))
    time_s, names = table.numbers("time_s"), table.texts("unit")
    further: dict[str, Sequence[str | float]] = {
        name: table.numbers(name) if name == "depth_um" else texts  # type: ignore[misc]
        for name, texts in table.columns.items()
        if name not in ("unit", "time_s")
    }
    order = {name: index for index, name in enumerate(sorted(set(names), key=_natural))}
    unit_of_row = np.array([order[name] for name in names])
    units = []
    for name, index in order.items():
        rows = np.flatnonzero(unit_of_row == index)
        columns = {
            key: _one_value(table, key, values, rows, name) for key, values in further.items()
        }
        units.append(StoredUnit(name, time_s[rows], columns))
    return units


def _natural(name: str) -> list[tuple[int, str]]:
    """Return a key that sorts the numbers within names as numbers."""
    parts = re.split(r"([0-9]+)", name)
    return [(int(part) if number % 2 else 0, part) for number, part in enumerate(parts)]


def _one_value(
    table: _Table, key: str, values: Sequence[str | float], rows: np.ndarray, unit: str
) -> str | float:
    first = values[rows[0]]
    for row in rows:
        if values[row] != first:
            raise ReaderError(
                f"{table.path}: row {table.rows[row]}, column {key} is {values[row]!r}; needed is "
                f"{first!r} as in the other rows of unit {unit}"
            )
    return first


def _read_table(path: Path, required: Sequence[str]) -> _Table:
    with reading(path, "a table (CSV)"), open(path, newline="", encoding="utf-8-sig") as file:
        reader = csv.reader(file, strict=True)
        header = [name.strip() for name in next(reader, [])]
        _check_header(path, header, required)
        cells, rows = [], []
        for cell in reader:
            if not any(text.strip() for text in cell):
                continue
            if len(cell) != len(header):
                raise ReaderError(
                    f"{path}: row {reader.line_num} has {len(cell)} fields; needed "
                    f"are {len(header)}, as in the header"
                )
            cells.append([text.strip() for text in cell])
            rows.append(reader.line_num)
    if not rows:
        raise ReaderError(f"{path}: holds no rows below its header; needed is at least one")
    return _Table(path, dict(zip(header, map(list, zip(*cells, strict=True)), strict=True)), rows)


def _check_header(path: Path, header: list[str], required: Sequence[str]) -> None:
    missing = [name for name in required if name not in header]
    if missing:
        other = next((name for mark, name in _SEPARATORS.items() if mark in "".join(header)), "")
        separated = (
            f"; its columns seem to be separated by {other}: needed is a comma between columns"
        )
        raise ReaderError(
            f"{path}: row 1 has no column {missing[0]}; it has {', '.join(header) or 'nothing'}; "
            f"needed are {' and '.join(required)}" + (separated if other else "")
        )
    for index, name in enumerate(header):
        if not name or name in header[:index]:
            raise ReaderError(
                f"{path}: row 1, column {index + 1} is {name!r}; needed is a name "
                "that no other column has"
            )
