"""An NWB file comes in; its sorted units or its table of trials go out."""

from pathlib import Path

import h5py
import numpy as np
import pandas as pd

from lfptools.errors import ReaderError
from lfptools.io.guard import reading
from lfptools.io.hdf5 import column, find, open_hdf5
from lfptools.io.nwb import ELECTRODES
from lfptools.io.stored_units import StoredUnit

_NAME_COLUMNS = ("unit_name", "id")
_RAGGED = ("spike_times", "spike_times_index", "electrodes", "electrodes_index")


def read_nwb_units(path: Path) -> list[StoredUnit]:
    """Read the units table.

    Parameters
    ----------
    path : Path
        The .nwb file.

    Returns
    -------
    list of StoredUnit
        Named by the column `unit_name`, else by `id`; the other columns of one value a unit
        go along. Where the units name their electrodes and have no column of their own,
        `depth_um` is the mean `rel_y` of these and `location` that of the first.

    Raises
    ------
    ReaderError
        If the table is missing or contradicts itself.
    """
    with reading(path, "nwb"), open_hdf5(path) as file:
        table = find(file, "units")
        ends = column(table, "spike_times_index") if table is not None else None
        times = column(table, "spike_times") if table is not None else None
        if ends is None or times is None:
            raise ReaderError(f"{path}: holds no units table with spike_times")
        spikes = _ragged(times, ends, f"{path}: spike_times")
        if not all(np.all(np.isfinite(each)) for each in spikes):
            raise ReaderError(f"{path}: a spike time is not finite; all must be numbers")
        columns = _columns(table, len(ends))
        names = next(
            (columns.pop(key) for key in _NAME_COLUMNS if key in columns), np.arange(len(ends))
        )
        for key, values in _from_electrodes(table, len(ends)).items():
            columns.setdefault(key, values)
        return [
            StoredUnit(
                str(name),
                spikes[index],
                {key: _plain(values[index]) for key, values in columns.items()},
            )
            for index, name in enumerate(names)
        ]


def read_nwb_trials(path: Path) -> pd.DataFrame:
    """Read the table of trials.

    Parameters
    ----------
    path : Path
        The .nwb file.

    Returns
    -------
    DataFrame
        One row a trial, `start_time` and `stop_time` in s; columns with one value a trial.

    Raises
    ------
    ReaderError
        If there is none.
    """
    with reading(path, "nwb"), open_hdf5(path) as file:
        table = find(file, "intervals/trials")
        ids = column(table, "id") if table is not None else None
        if ids is None:
            raise ReaderError(f"{path}: holds no table of trials (intervals/trials)")
        return pd.DataFrame(_columns(table, len(ids))).set_index("id")


def _ragged(values: np.ndarray, ends: np.ndarray, where: str) -> list[np.ndarray]:
    """Cut one long column into one array a row at the cumulative ends."""
    ends = ends.astype(np.int64)
    if np.any(np.diff(ends, prepend=0) < 0) or (len(ends) and ends[-1] != len(values)):
        raise ReaderError(
            f"{where}: the index ends at {ends.tolist()[-3:]} and {len(values)} "
            "values are there; it must rise to their number"
        )
    return np.split(values, ends[:-1]) if len(ends) else []


def _columns(table: h5py.Group, n_rows: int) -> dict[str, np.ndarray]:
    """Return the columns with one number or text a row; ragged ones and references are left."""
    found = {}
    for name in table:
        item = find(table.file, f"{table.name}/{name}")
        ragged = name in _RAGGED or name.endswith("_index") or f"{name}_index" in table
        if ragged or not isinstance(item, h5py.Dataset) or item.ndim != 1:
            continue
        if item.dtype.kind in "biuf" or h5py.check_string_dtype(item.dtype):
            values = column(table, name, n_rows)
            if values is not None:
                found[name] = values
    return found


def _from_electrodes(table: h5py.Group, n_units: int) -> dict[str, np.ndarray]:
    rows, ends = column(table, "electrodes"), column(table, "electrodes_index", n_units)
    electrodes = find(table.file, ELECTRODES)
    if rows is None or ends is None or electrodes is None:
        return {}
    of_unit = _ragged(rows, ends, f"{table.file.filename}: electrodes of units")
    if not all(len(each) for each in of_unit):
        return {}
    found = {}
    rel_y, location = column(electrodes, "rel_y"), column(electrodes, "location")
    if rel_y is not None:
        found["depth_um"] = np.array([np.mean(rel_y[each]) for each in of_unit], dtype=float)
    if location is not None:
        found["location"] = np.array([str(location[each[0]]) for each in of_unit])
    return found


def _plain(value: object) -> str | float:
    return float(value) if isinstance(value, np.number | np.bool_) else str(value)
