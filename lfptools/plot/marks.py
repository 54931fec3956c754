"""Rows of tables and an axes in; intervals, shaded windows and zero lines drawn on it."""

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes

from lfptools.plot.style import FAINT, INK, SHADES, Look, short

Row = Mapping[str, Any]
Spans = Mapping[str, tuple[float, float]]


def number(row: Row, column: str) -> float:
    """Return a value of a row as a float, NaN where it is empty."""
    found = row.get(column)
    return float("nan") if found is None or found == "" else float(found)


def chosen(rows: Sequence[Row], **wanted: str) -> list[Row]:
    """Return the rows whose columns have the wanted values."""
    return [row for row in rows if all(row.get(key) == value for key, value in wanted.items())]


def draw_interval(
    ax: Axes, x: float, y: float, bounds: tuple[float, float], look: Look, *, filled: bool = True
) -> None:
    """Draw a value at (x, y) and its interval along x; nothing where the value is empty."""
    if not np.isfinite([x, y]).all():
        return
    if np.isfinite(bounds).all():
        ax.plot(bounds, (y, y), color=look.colour, lw=1.2, marker="|", ms=7, mew=1.2, zorder=4)
    ax.plot(
        x,
        y,
        marker=look.marker,
        ls="none",
        ms=3.4,
        color=look.colour,
        mfc=look.colour if filled else "white",
        mew=1.0,
        zorder=5,
    )


def shade_windows(ax: Axes, spans_ms: Spans, *, names: bool = False) -> None:
    """Shade windows along time (ms), in turn in two greys, with their names on request."""
    for index, (name, (first, last)) in enumerate(spans_ms.items()):
        ax.axvspan(first, last, color=SHADES[index % len(SHADES)], lw=0, zorder=0)
        if names:
            ax.text(
                (first + last) / 2,
                1.0,
                short(name, 14),
                transform=ax.get_xaxis_transform(),
                ha="center",
                va="bottom",
                color=INK,
            )


def zero_line(ax: Axes, *, along: str = "x") -> None:
    """Draw a faint line at 0 along an axis ("x": horizontal)."""
    draw = ax.axhline if along == "x" else ax.axvline
    draw(0.0, color=FAINT, lw=0.8, zorder=1)
