"""Rows of verdicts.csv in; net leads with intervals drawn, the verdict in words beside each."""

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes

from lfptools.plot.lags import row_label
from lfptools.plot.marks import Row, draw_interval, number, zero_line
from lfptools.plot.style import PALE, Look, short
from lfptools.plot.words import probability, verdict_words

SIGN = "positive: first area leads"


def draw_leads(ax: Axes, rows: Sequence[Row], *, looks: Mapping[str, Look]) -> Axes:
    """Draw the net lead of each pair and condition of one window.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    rows : sequence of rows
        Of verdicts.csv, one window. Filled markers: a lead or both ways; open: no lead shown.
        The pale bar holds the net values too small to be seen in 80 % of cases.
    looks : mapping of condition to Look

    Returns
    -------
    Axes
        Net Granger causality minus that of reversed time to the right; positive where the
        first area leads.
    """
    zero_line(ax, along="y")
    for y, row in enumerate(rows):
        value = number(row, "net")
        reach = number(row, "smallest_detectable")
        if np.isfinite(reach):
            ax.barh(y, 2 * reach, left=-reach, height=0.7, color=PALE, zorder=0)
        claimed = row["verdict"] in ("leads", "both ways")
        bounds = number(row, "lo"), number(row, "hi")
        draw_interval(ax, value, y, bounds, looks[row["condition"]], filled=claimed)
        ax.text(
            1.02,
            y,
            _beside(row),
            transform=ax.get_yaxis_transform(),
            va="center",
            fontweight="bold" if claimed else "normal",
        )
    ax.set_yticks(range(len(rows)), [row_label(row) for row in rows])
    ax.set_ylim(len(rows) - 0.5, -0.5)
    ax.set_xlabel(f"net Granger causality minus that of reversed time; {SIGN}")
    ax.set_ylabel("areas (condition)")
    ax.set_title(short(rows[0]["window"]), loc="left")
    return ax


def _beside(row: Row) -> str:
    q = probability(number(row, "q"))
    words = short(verdict_words(row), 30)
    return f"{words}, q = {q}" if q else words
