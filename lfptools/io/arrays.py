"""Named arrays with attributes come in, an HDF5 file goes out, and back.

The same input gives the same bytes: no times are kept, and names are written in order.
"""

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from lfptools.io.guard import reading
from lfptools.io.hdf5 import find, open_hdf5
from lfptools.io.whole import whole

Arrays = Mapping[str, tuple[np.ndarray, Mapping[str, Any]]]


def write_arrays(path: str | Path, arrays: Arrays) -> Path:
    """Write arrays, whole or not at all.

    Parameters
    ----------
    path : str or Path
        The file.
    arrays : mapping of "group/name" to (array, attributes)
        Arrays of numbers, bools or texts; attributes are texts, numbers or short arrays.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    OutputError
        If the file system refuses.
    """
    path = Path(path)
    with whole(path) as part, h5py.File(part, "w") as file:
        for name in sorted(arrays):
            values, attributes = arrays[name]
            values = np.asarray(values)
            dtype = h5py.string_dtype() if values.dtype.kind in "UO" else values.dtype
            item = file.create_dataset(
                name, data=values.astype(dtype), dtype=dtype, track_times=False
            )
            for key in sorted(attributes):
                item.attrs[key] = attributes[key]
    return path


def read_arrays(path: str | Path) -> dict[str, tuple[np.ndarray, dict[str, Any]]]:
    """Read what `write_arrays` wrote.

    Parameters
    ----------
    path : str or Path
        The file.

    Returns
    -------
    dict of "group/name" to (array, attributes)
        Texts as an array of str objects.

    Raises
    ------
    ReaderError
        If it is no such file, or leads to another one.
    """
    found: dict[str, tuple[np.ndarray, dict[str, Any]]] = {}
    with reading(Path(path), "arrays (HDF5)"), open_hdf5(Path(path)) as file:
        names: list[str] = []
        file.visit(names.append)
        for name in names:
            item = find(file, name)
            if isinstance(item, h5py.Dataset):
                text = h5py.check_string_dtype(item.dtype)
                values = item.asstr()[()] if text else item[()]
                found[name] = (values, dict(item.attrs))
    return found
