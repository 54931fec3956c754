"""Rows of lags.csv in; a forest of lags between areas with their intervals drawn."""

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes

from lfptools.plot.marks import Row, draw_interval, number, zero_line
from lfptools.plot.style import FAINT, Look, short

#: Where each feature stands beside its row's middle, and whether its marker is filled.
_PLACE = {"time": (-0.17, True), "onset": (0.17, False)}


def row_label(row: Row) -> str:
    """Return the label of a row of pairs: both areas and the condition."""
    areas = f"{short(row['area_a'], 12)}, {short(row['area_b'], 12)}"
    return f"{areas} ({short(row['condition'], 12)})"


def draw_lags(ax: Axes, rows: Sequence[Row], *, looks: Mapping[str, Look]) -> Axes:
    """Draw the lags of one window: b minus a, filled for the extremum, open for the onset.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    rows : sequence of rows
        Of lags.csv, one window; the first pair stands on top.
    looks : mapping of condition to Look

    Returns
    -------
    Axes
        Lag in ms to the right, one line a pair and condition.
    """
    labels = list(dict.fromkeys(row_label(row) for row in rows))
    zero_line(ax, along="y")
    for row in rows:
        offset, filled = _PLACE[row["feature"]]
        y = labels.index(row_label(row)) + offset
        value = number(row, "difference_ms")
        bounds = number(row, "lo_ms"), number(row, "hi_ms")
        draw_interval(ax, value, y, bounds, looks[row["condition"]], filled=filled)
        if not np.isfinite(value):
            ax.text(0.0, y, f" no {row['feature']} lag", va="center", color=FAINT)
    ax.set_yticks(range(len(labels)), labels)
    ax.set_ylim(len(labels) - 0.5, -0.5)
    ax.set_xlabel("lag, second area minus first (ms)")
    ax.set_ylabel("areas (condition)")
    ax.set_title(short(rows[0]["window"]), loc="left")
    return ax
