"""Potentials in uV and sorted units come in; a minimal NWB 2 file goes out.

The same input gives the same bytes: dates and identifier are arguments, HDF5 keeps no times.
"""

import uuid
from collections.abc import Sequence
from pathlib import Path

import h5py
import numpy as np

from lfptools.errors import InputError
from lfptools.io.whole import whole
from lfptools.model import SpikeTrains

_VERSION = "2.8.0"
_DATE = "2024-01-01T00:00:00+00:00"
_COUNT_MAX = 32000
_CHUNK = 65536
_TEXT = h5py.string_dtype()


def write_nwb(
    path: str | Path,
    *,
    data_uv: np.ndarray,
    rate_hz: float,
    starting_time_s: float,
    depth_um: np.ndarray,
    area: str,
    units: SpikeTrains | None = None,
    quality: Sequence[str] | None = None,
    gain_uv: float | None = None,
    identifier: str = "lfptools",
    session_description: str = "simulated session",
    session_start_time: str = _DATE,
) -> Path:
    """Write one ElectricalSeries ("acquisition/lfp", int16) and, where given, a units table.

    Parameters
    ----------
    path : str or Path
        The .nwb file.
    data_uv : array, shape (n_samples, n_channels)
        Potentials in uV.
    rate_hz : float
        Sampling rate.
    starting_time_s : float
        Time of the first sample.
    depth_um : array, shape (n_channels,)
        Depth of each contact, written as `rel_y` of its electrode.
    area : str
        Written as the `location` of the electrodes.
    units : SpikeTrains, optional
        Units of this and other areas; columns `unit_name`, `area`, `depth_um`.
    quality : sequence of str, optional
        One label a unit, by default "good".
    gain_uv : float, optional
        uV per count; by default the largest potential becomes 32000 counts.
    identifier, session_description, session_start_time : str
        As the standard asks for; the time in ISO 8601 with its zone.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    InputError
        If a shape does not fit.
    OutputError
        If the file system refuses.
    """
    if data_uv.ndim != 2 or len(depth_um) != data_uv.shape[1] or not len(data_uv):
        raise InputError(
            f"data_uv has shape {data_uv.shape} and depth_um {len(depth_um)} values; needed are "
            "(n_samples, n_channels) and one depth a channel"
        )
    path = Path(path)
    with whole(path) as part, h5py.File(part, "w") as file:
        _top(file, identifier, session_description, session_start_time)
        _array(file, np.asarray(depth_um, dtype=float), area)
        _series(file, data_uv, rate_hz, starting_time_s, gain_uv)
        if units is not None:
            _units(file, units, quality or ["good"] * len(units))
        _name_objects(file, identifier)
    return path


def _top(file: h5py.File, identifier: str, description: str, start: str) -> None:
    _typed(file, "NWBFile", "core")
    file.attrs["nwb_version"] = _VERSION
    file["identifier"] = identifier
    file["session_description"] = description
    file["session_start_time"] = start
    file["timestamps_reference_time"] = start
    file.create_dataset("file_create_date", data=[start], dtype=_TEXT, track_times=False)
    for name in (
        "acquisition", "analysis", "general", "processing",
        "stimulus/presentation", "stimulus/templates",
    ):  # fmt: skip
        file.create_group(name)


def _array(file: h5py.File, depth_um: np.ndarray, area: str) -> None:
    """Write the array of contacts: device, electrode group and table of electrodes."""
    n_channels = len(depth_um)
    device = file.create_group("general/devices/array")
    _typed(device, "Device", "core")
    device.attrs["description"] = "linear array"
    group = file.create_group("general/extracellular_ephys/array")
    _typed(group, "ElectrodeGroup", "core")
    group.attrs.update({"description": "linear array", "location": area})
    group["device"] = h5py.SoftLink("/general/devices/array")
    columns = {
        "location": ("recorded area", [area] * n_channels),
        "group": ("the array", [group.ref] * n_channels),
        "group_name": ("name of the array", ["array"] * n_channels),
        "rel_y": ("depth below the surface, um", depth_um),
    }
    place = file["general/extracellular_ephys"].create_group("electrodes")
    _table(place, "DynamicTable", "hdmf-common", "contacts", n_channels, columns)


def _series(
    file: h5py.File,
    data_uv: np.ndarray,
    rate_hz: float,
    starting_time_s: float,
    gain_uv: float | None,
) -> None:
    gain_uv = gain_uv or float(np.max(np.abs(data_uv))) / _COUNT_MAX or 1.0
    series = file.create_group("acquisition/lfp")
    _typed(series, "ElectricalSeries", "core")
    series.attrs.update({"description": "local field potential", "comments": "no comments"})
    data = series.create_dataset("data", shape=data_uv.shape, dtype="<i2", track_times=False)
    for first in range(0, len(data_uv), _CHUNK):
        counts = np.rint(data_uv[first : first + _CHUNK].astype(float) / gain_uv)
        data[first : first + len(counts)] = np.clip(counts, -32768, 32767).astype("<i2")
    data.attrs.update(
        {"unit": "volts", "conversion": gain_uv * 1e-6, "offset": 0.0, "resolution": -1.0}
    )
    start = series.create_dataset("starting_time", data=float(starting_time_s), track_times=False)
    start.attrs.update({"rate": np.float32(rate_hz), "unit": "seconds"})
    region = series.create_dataset(
        "electrodes", data=np.arange(data_uv.shape[1]), track_times=False
    )
    _typed(region, "DynamicTableRegion", "hdmf-common")
    region.attrs["description"] = "all contacts"
    region.attrs["table"] = file["general/extracellular_ephys/electrodes"].ref


def _units(file: h5py.File, units: SpikeTrains, quality: Sequence[str]) -> None:
    n_units = len(units)
    if len(quality) != n_units:
        raise InputError(f"quality lists {len(quality)} labels; needed are {n_units}")
    columns = {
        "unit_name": ("name of the unit", list(units.unit)),
        "area": ("recorded area", list(units.area)),
        "depth_um": ("depth below the surface, um", np.asarray(units.depth_um, dtype=float)),
        "quality": ("label of the unit", list(quality)),
    }
    table = file.create_group("units")
    _table(table, "Units", "core", "sorted units", n_units, columns, also=["spike_times"])
    times = np.concatenate([*units.time_s, np.empty(0)]).astype(float)
    spikes = _column(table, "spike_times", "spike times, s", times)
    ends = np.cumsum([len(each) for each in units.time_s]).astype(np.uint64)
    index = table.create_dataset("spike_times_index", data=ends, track_times=False)
    _typed(index, "VectorIndex", "hdmf-common")
    index.attrs.update({"description": "end of each unit's spikes", "target": spikes.ref})


def _table(
    group: h5py.Group,
    kind: str,
    namespace: str,
    description: str,
    n_rows: int,
    columns: dict[str, tuple[str, object]],
    *,
    also: Sequence[str] = (),
) -> None:
    """Write a table of columns; `also` names those that are written apart."""
    _typed(group, kind, namespace)
    group.attrs["description"] = description
    group.attrs.create("colnames", [*columns, *also], dtype=_TEXT)
    ids = group.create_dataset("id", data=np.arange(n_rows), track_times=False)
    _typed(ids, "ElementIdentifiers", "hdmf-common")
    for name, (what, values) in columns.items():
        _column(group, name, what, values)


def _column(group: h5py.Group, name: str, description: str, values: object) -> h5py.Dataset:
    dtype = None
    if isinstance(values, list):
        dtype = _TEXT if not values or isinstance(values[0], str) else h5py.ref_dtype
    item = group.create_dataset(name, data=values, dtype=dtype, track_times=False)
    _typed(item, "VectorData", "hdmf-common")
    item.attrs["description"] = description
    return item


def _typed(item: h5py.HLObject, kind: str, namespace: str) -> None:
    item.attrs["neurodata_type"] = kind
    item.attrs["namespace"] = namespace


def _name_objects(file: h5py.File, identifier: str) -> None:
    """Give every typed object the unique name that the standard asks for, the same each time."""

    def name(place: str, item: h5py.HLObject) -> None:
        if "neurodata_type" in item.attrs:
            own = uuid.uuid5(uuid.NAMESPACE_URL, f"{identifier}/{place}")
            item.attrs["object_id"] = str(own)

    name("", file)
    file.visititems(name)
