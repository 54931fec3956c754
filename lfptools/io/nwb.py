"""An NWB file (HDF5) comes in; a lazy Recording of one ElectricalSeries goes out.

Volts = data * conversion * channel_conversion + offset. The library that reads the other formats
passes over channel_conversion, offset and series in `processing`, hence a reader of our own.
"""

from pathlib import Path
from typing import Any

import h5py
import numpy as np

from lfptools.choices import SourceChoice
from lfptools.errors import ReaderError
from lfptools.io.guard import checked, guarded_fetch, reading
from lfptools.io.hdf5 import attribute_text, column, find, open_hdf5, walk
from lfptools.io.timestamps import runs_of
from lfptools.model import Recording, Run
from lfptools.units import UV_PER_V

ELECTRODES = "general/extracellular_ephys/electrodes"


def open_nwb(source: SourceChoice, path: Path) -> Recording:
    """Open one ElectricalSeries.

    Parameters
    ----------
    source : SourceChoice
        `stream` is the series' path inside the file, such as "acquisition/lfp"; without it the
        file must hold exactly one.
    path : Path
        The .nwb file.

    Returns
    -------
    Recording
        With runs split at gaps of the time stamps; `depth_um` is the electrodes' `rel_y` as it
        stands there. Nothing is read before it is asked for.

    Raises
    ------
    ReaderError
        If the series is missing, contradicts itself or lies in another file.
    """
    with reading(path, "nwb"):
        series = _series(open_hdf5(path), source.stream, path)
        return checked(_recording(series, source, path), path)


def _series(file: h5py.File, stream: str | None, path: Path) -> h5py.Group:
    found = [
        place
        for place, group in walk(file)
        if attribute_text(group, "neurodata_type") == "ElectricalSeries"
    ]
    listed = f"the file holds {', '.join(found) if found else 'none'}"
    if stream is None:
        if len(found) != 1:
            raise ReaderError(f"{path}: `stream` must name an ElectricalSeries; {listed}")
        stream = found[0]
    series = find(file, stream)
    if not isinstance(series, h5py.Group) or find(file, f"{stream}/data") is None:
        raise ReaderError(f"{path}: there is no ElectricalSeries {stream!r}; {listed}")
    return series


def _recording(series: h5py.Group, source: SourceChoice, path: Path) -> Recording:
    data = find(series.file, f"{series.name}/data")
    if data.ndim not in (1, 2):
        raise ReaderError(f"{path}: {data.name} has shape {data.shape}; needed is (time, channel)")
    n_samples, n_channels = data.shape[0], data.shape[1] if data.ndim == 2 else 1
    rows = _electrode_rows(series, n_channels, path)
    rate_hz, runs = _clock(series, n_samples, path)
    return Recording(
        source=source.name,
        clock=source.clock_name,
        rate_hz=rate_hz,
        channel_names=_names(series.file, rows, n_channels),
        runs=runs,
        gain_uv=_gain_uv(series, data, n_channels, path),
        offset_uv=np.full(n_channels, float(data.attrs.get("offset", 0.0)) * UV_PER_V),
        fetch=guarded_fetch(path, "nwb", n_samples, n_channels, _reader(data)),
        files=(path,),
        depth_um=_depth_um(series.file, rows),
        amplifier_hz=source.amplifier_hz,
    )


def _reader(data: h5py.Dataset) -> Any:
    def read(first: int, last: int, channels: np.ndarray) -> np.ndarray:
        if data.ndim == 1:
            return np.repeat(data[first:last, None], len(channels), axis=1)
        low, high = channels.min(), channels.max() + 1
        return data[first:last, low:high][:, channels - low]

    return read


def _gain_uv(series: h5py.Group, data: h5py.Dataset, n_channels: int, path: Path) -> np.ndarray:
    unit = attribute_text(data, "unit")
    if unit not in ("volts", "volt", "V"):
        raise ReaderError(f"{path}: {data.name} has unit {unit!r}; needed is 'volts'")
    gain = np.full(n_channels, float(data.attrs.get("conversion", 1.0)) * UV_PER_V)
    own = find(series.file, f"{series.name}/channel_conversion")
    if own is not None:
        if own.shape != (n_channels,):
            raise ReaderError(
                f"{path}: {own.name} has shape {own.shape}; needed is one value for "
                f"each of {n_channels} channels"
            )
        gain = gain * own[()]
    return gain


def _clock(series: h5py.Group, n_samples: int, path: Path) -> tuple[float, tuple[Run, ...]]:
    start = find(series.file, f"{series.name}/starting_time")
    if start is not None:
        rate = start.attrs.get("rate", np.float32(0))
        # float32 in the standard: its shortest decimal text is the rate that was meant
        rate_hz = float(str(rate)) if isinstance(rate, np.float32) else float(rate)
        return rate_hz, (Run(0, n_samples, float(start[()])),)
    stamps = find(series.file, f"{series.name}/timestamps")
    if stamps is None:
        raise ReaderError(f"{path}: {series.name} has neither starting_time nor timestamps")
    if stamps.shape != (n_samples,):
        raise ReaderError(
            f"{path}: {stamps.name} has shape {stamps.shape}; needed is one time for "
            f"each of {n_samples} samples"
        )
    return runs_of(stamps, str(path))


def _electrode_rows(series: h5py.Group, n_channels: int, path: Path) -> np.ndarray | None:
    item = find(series.file, f"{series.name}/electrodes")
    if item is None:
        return None
    if item.shape != (n_channels,):
        raise ReaderError(
            f"{path}: {item.name} lists {item.shape[0]} electrodes; the data hold "
            f"{n_channels} channels"
        )
    return item[()]


def _names(file: h5py.File, rows: np.ndarray | None, n_channels: int) -> tuple[str, ...]:
    table = find(file, ELECTRODES)
    ids = column(table, "id") if table is not None else None
    if rows is None or ids is None:
        return tuple(str(index) for index in range(n_channels))
    return tuple(str(each) for each in ids[rows])


def _depth_um(file: h5py.File, rows: np.ndarray | None) -> np.ndarray | None:
    table = find(file, ELECTRODES)
    rel_y = column(table, "rel_y") if table is not None else None
    if rows is None or rel_y is None:
        return None
    depth_um = np.asarray(rel_y, dtype=float)[rows]
    return depth_um if np.all(np.isfinite(depth_um)) else None
