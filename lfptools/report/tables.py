"""Results in, CSV tables out: the same bytes for the same results.

Numbers carry 6 significant digits, columns in s 6 decimals; empty means not measured.
"""

import csv
import io
from collections.abc import Iterable
from math import isfinite
from pathlib import Path

import numpy as np

from lfptools.analysis.results import Results
from lfptools.columns import COLUMNS
from lfptools.io.whole import write_whole


def write_tables(results: Results, folder: Path) -> list[Path]:
    """Write every table, header included where there are no rows; return the paths.

    Raises
    ------
    OutputError
        If the file system refuses.
    """
    return [
        write_whole(folder / f"{name}.csv", table_bytes(results, name)) for name in COLUMNS
    ]  # fmt: skip


def table_bytes(results: Results, name: str) -> bytes:
    """Return one table as UTF-8 CSV, lines ended by a line feed.

    Raises
    ------
    InputError
        If there is no such table.
    """
    columns = [str(each) for each in results.table(name).columns]
    lines = [_line(columns)]
    lines += [_line(text_of(row.get(each), each) for each in columns) for row in results.rows[name]]
    return "".join(lines).encode()


def text_of(value: object, column: str) -> str:
    """Return a value as its table prints it.

    Parameters
    ----------
    value : bool, int, float, str or None
        None and NaN are empty, booleans are true and false, texts stay as they are.
    column : str
        Floats in a column that ends in `_s` (seconds) have 6 decimals, others 6 significant
        digits.
    """
    if value is None:
        return ""
    if isinstance(value, bool | np.bool_):
        return "true" if value else "false"
    if isinstance(value, float | np.floating):
        return _number(float(value), column)
    return str(value)


def _number(value: float, column: str) -> str:
    if not isfinite(value):
        return "" if value != value else str(value)
    if column.endswith("_s"):
        return f"{round(value, 6) + 0.0:.6f}"  # + 0.0: no "-0"
    return f"{value + 0.0:.6g}"


def _line(cells: Iterable[str]) -> str:
    # With "\r\n" as its line end the csv module quotes stray line ends of either kind.
    buffer = io.StringIO(newline="")
    csv.writer(buffer).writerow(cells)
    return buffer.getvalue().removesuffix("\r\n") + "\n"
