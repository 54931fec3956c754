"""Sorted units as a file stores them come in; those of one area, with depths, go out."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from lfptools.checks import read_only
from lfptools.errors import ReaderError

#: Columns in which sorters and people say how good a unit is.
LABEL_COLUMNS = ("quality", "group", "label")


@dataclass(frozen=True, slots=True, eq=False)
class StoredUnit:
    """One unit of a file: its name, spike times on the source's clock and further columns."""

    name: str
    time_s: np.ndarray  # (n_spikes,), sorted
    columns: dict[str, str | float] = field(default_factory=dict)

    def __post_init__(self) -> None:
        object.__setattr__(self, "time_s", read_only(np.sort(self.time_s)))

    @property
    def depth_um(self) -> float:
        """Depth as the file gives it; NaN where it does not."""
        return float(self.columns.get("depth_um", np.nan))


def pick_units(
    units: Sequence[StoredUnit],
    *,
    area: str,
    keep: Sequence[str] | None,
    shared: bool,
    path: Path,
) -> list[StoredUnit]:
    """Return the units that belong to `area` and carry a label to keep.

    Parameters
    ----------
    units : sequence of StoredUnit
        All units of the file.
    area : str
        The area wanted. A column `area` decides; without one, a column `location` does where
        several areas take units from the file.
    keep : sequence of str or None
        Labels to keep, looked for in the columns `quality`, `group` and `label`.
    shared : bool
        Whether several areas take units from the file.
    path : Path
        For the messages.

    Raises
    ------
    ReaderError
        If the file does not tell the areas apart, or no unit is left.
    """
    found = _of_area(units, area, shared, path)
    if keep is None:
        return found
    labelled = [unit for unit in found if any(name in unit.columns for name in LABEL_COLUMNS)]
    if not labelled:
        raise ReaderError(
            f"{path}: the units of {area} have no column {', '.join(LABEL_COLUMNS)}; leave out "
            "`keep` or add one"
        )
    kept = [
        unit for unit in labelled if any(unit.columns.get(name) in keep for name in LABEL_COLUMNS)
    ]
    if not kept:
        labels = {
            str(unit.columns[name])
            for unit in labelled
            for name in LABEL_COLUMNS
            if name in unit.columns
        }
        raise ReaderError(
            f"{path}: no unit of {area} has a label of {list(keep)}; found are "
            + ", ".join(sorted(labels))
        )
    return kept


def _of_area(units: Sequence[StoredUnit], area: str, shared: bool, path: Path) -> list[StoredUnit]:
    has = {name for unit in units for name in unit.columns}
    column = "area" if "area" in has else "location" if shared and "location" in has else None
    if column is None and shared:
        raise ReaderError(
            f"{path}: several areas take units from this file and it does not tell them apart; "
            "needed is a column `area` in its units"
        )
    found = [unit for unit in units if column is None or unit.columns.get(column) == area]
    if not found:
        places = sorted({str(unit.columns.get(column)) for unit in units}) if column else []
        there = f"; its column `{column}` names {', '.join(places)}" if places else ""
        raise ReaderError(f"{path}: holds no unit of {area}{there}")
    return found
