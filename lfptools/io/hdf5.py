"""A path inside an HDF5 file comes in; the object goes out, never one from another file.

External links, external storage and virtual datasets would read files that the session does not
name; all are refused.
"""

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from lfptools.errors import ReaderError

#: Deflate packs 1032 bytes into one at best; a dataset that claims more was never written.
_MOST_PACKED = 1100


def open_hdf5(path: Path) -> h5py.File:
    """Open an HDF5 file for reading only."""
    return h5py.File(path, "r")


def find(file: h5py.File, place: str, *, hops: int = 8) -> Any:
    """Return the group or dataset at `place`, or None where there is none.

    Parameters
    ----------
    file : h5py.File
        The open file.
    place : str
        Path inside the file, from its root.
    hops : int
        Soft links (within the file) that may still be followed.

    Raises
    ------
    ReaderError
        If a link on the way leads to another file, or a dataset keeps its samples there.
    """
    here: Any = file
    for part in filter(None, place.split("/")):
        link = here.get(part, getlink=True) if isinstance(here, h5py.Group) else None
        if link is None:
            return None
        if isinstance(link, h5py.ExternalLink):
            raise ReaderError(
                f"{file.filename}: {place} is a link to another file "
                f"({link.filename}); needed are data in this one"
            )
        if isinstance(link, h5py.SoftLink):
            target = link.path if link.path.startswith("/") else f"{here.name}/{link.path}"
            here = find(file, target, hops=hops - 1) if hops else None
        else:
            here = here[part]
        if here is None:
            return None
    return own_data(here)


def own_data(item: Any) -> Any:
    """Return a group or dataset, which must keep all its data in its own file.

    Raises
    ------
    ReaderError
        If a dataset keeps them in another file or was never written.
    """
    if isinstance(item, h5py.Dataset):
        if item.external or item.is_virtual:
            raise ReaderError(
                f"{item.file.filename}: {item.name} keeps its data in another file; "
                "needed are data in this one"
            )
        if item.nbytes > _MOST_PACKED * (item.id.get_storage_size() + 1024):
            raise ReaderError(
                f"{item.file.filename}: {item.name} claims {item.nbytes} bytes and stores "
                f"{item.id.get_storage_size()}; it was not written whole"
            )
    return item


def walk(group: h5py.Group, place: str = "") -> Iterator[tuple[str, h5py.Group]]:
    """Yield (path, group) for all groups below `group`, along hard links only."""
    for name in group:
        if isinstance(group.get(name, getlink=True), h5py.HardLink):
            item = group[name]
            if isinstance(item, h5py.Group):
                yield f"{place}{name}", item
                yield from walk(item, f"{place}{name}/")


def attribute_text(item: Any, name: str) -> str:
    """Return an attribute as text, empty where it is missing."""
    value = item.attrs.get(name, "")
    return value.decode() if isinstance(value, bytes) else str(value)


def column(table: h5py.Group, name: str, n_rows: int | None = None) -> np.ndarray | None:
    """Return a column of a table as numbers or texts, or None where it has no such column.

    Raises
    ------
    ReaderError
        If it lies in another file or its length is not `n_rows`.
    """
    item = find(table.file, f"{table.name}/{name}")
    if not isinstance(item, h5py.Dataset):
        return None
    if n_rows is not None and item.shape[:1] != (n_rows,):
        raise ReaderError(
            f"{item.file.filename}: {item.name} has shape {item.shape}; needed are {n_rows} rows"
        )
    return item.asstr()[()] if h5py.check_string_dtype(item.dtype) else item[()]
