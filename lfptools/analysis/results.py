"""What one analysis leaves: the tables, the curves behind the figures and how it was done."""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from lfptools.checks import one_of
from lfptools.choices import AnalysisChoices
from lfptools.columns import COLUMNS
from lfptools.evoked import Average
from lfptools.model import Contacts, CutSession
from lfptools.rates import RateCurve
from lfptools.resample import false_discovery_rate

Row = dict[str, Any]


@dataclass(frozen=True, slots=True, eq=False)
class Results:
    """Everything one session has to say."""

    session: str
    cut: CutSession
    choices: AnalysisChoices  # as used, proposed windows included
    rows: dict[str, tuple[Row, ...]]  # by name of the table
    averages: tuple[Average, ...]  # LFP of the good contacts, by area and condition
    maps: tuple[Average, ...]  # current source density by depth, smoothed
    signal_averages: tuple[Average, ...]  # the signal that stands for each area, smoothed
    rates: tuple[RateCurve, ...]
    smooth_s: dict[str, float]  # SD of the Gaussian, by window
    not_recorded: dict[str, str]  # table -> why it has no rows

    @property
    def contacts(self) -> dict[str, Contacts]:
        """Contacts by area, bad ones marked with the reason."""
        return {each.area: each.contacts for each in self.cut.areas}

    def table(self, name: str) -> pd.DataFrame:
        """Return a table as a data frame, columns as in its CSV file.

        Raises
        ------
        InputError
            If there is no such table.
        """
        one_of("table", name, tuple(COLUMNS))
        columns = list(COLUMNS[name])
        extra = [
            key for key in (self.rows[name][0] if self.rows[name] else ()) if key not in columns
        ]
        return pd.DataFrame(list(self.rows[name]), columns=columns + extra)


def ms(value_s: float | np.ndarray) -> float:
    """Milliseconds of one value in s, as a plain float."""
    return float(value_s) * 1000


def note(*parts: str) -> str:
    """Join what is to be said of a row, empty parts left out."""
    return "; ".join(part for part in parts if part)


def add_q(rows: list[Row], group: str | None) -> None:
    """Write q into each row: the false discovery rate over the rows of the same measure."""
    names = [row[group] if group else "" for row in rows]
    for name in dict.fromkeys(names):
        chosen = [row for row, each in zip(rows, names, strict=True) if each == name]
        p = np.array([row.get("p", np.nan) for row in chosen], dtype=float)
        for row, q in zip(chosen, false_discovery_rate(p), strict=True):
            row["q"] = float(q)
