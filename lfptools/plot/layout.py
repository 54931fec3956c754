"""Counts of panels and names in, empty figures, grids and legends out, for a printed page."""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from typing import Any

import numpy as np
from matplotlib.artist import Artist
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch

from lfptools.plot.style import INK, WIDTH_IN, Look, drawing, short

#: More panels side by side than this could not be read.
MOST_COLUMNS = 3
#: Letters of a title and of a legend that fit across the page.
_TITLE_LETTERS, _LEGEND_LETTERS = 72, 108
#: Room that a legend's handle takes, in letters.
_HANDLE_LETTERS = 9


@contextmanager
def page_figure(height_in: float) -> Iterator[Figure]:
    """Yield a figure as wide as the page; what is drawn inside has the sizes of `style`."""
    with drawing():
        figure = Figure(figsize=(WIDTH_IN, height_in))
        figure.set_layout_engine("constrained", w_pad=0.1, h_pad=0.05)
        yield figure


def n_rows_of(n_groups: int, n_each: int, *, most: int = MOST_COLUMNS) -> int:
    """Return how many rows `panels` makes."""
    return n_groups * -(-n_each // most)


def panels(
    figure: Figure, n_groups: int, n_each: int, *, most: int = MOST_COLUMNS, **options: Any
) -> np.ndarray:
    """Return axes of shape (n_groups, n_each): each group begins a new row.

    Groups of more than `most` panels take several rows; what is left over is switched off.
    """
    n_columns = min(n_each, most)
    rows = n_rows_of(1, n_each, most=most)
    grid = figure.subplots(n_groups * rows, n_columns, squeeze=False, **options)
    grid = grid.reshape(n_groups, rows * n_columns)
    for spare in grid[:, n_each:].flat:
        spare.set_axis_off()
    return grid[:, :n_each]


def is_first_column(index: int, n_each: int, *, most: int = MOST_COLUMNS) -> bool:
    """Say whether panel `index` of a group of `panels` stands at the left."""
    return index % min(n_each, most) == 0


def fit_titles(grid: np.ndarray, *, most: int = MOST_COLUMNS) -> None:
    """Cut the titles of a grid that would run into their neighbours."""
    letters = _TITLE_LETTERS // min(grid.shape[1], most)
    for ax in grid.flat:
        title = ax.get_title(loc="left")
        if len(title) > letters:
            ax.set_title(short(title, letters), loc="left")


def condition_handles(
    looks: Mapping[str, Look], n_trials: Mapping[str, int] | None = None
) -> list[Artist]:
    """Return one legend handle a condition, with its count of trials where it is given."""
    handles: list[Artist] = []
    for name, look in looks.items():
        count = f" ({n_trials[name]} trials)" if n_trials is not None else ""
        handles.append(
            Line2D([], [], color=look.colour, ls=look.line, marker=look.marker,
                   label=f"{short(name)}{count}")
        )  # fmt: skip
    return handles


def mark_handle(label: str, *, filled: bool) -> Line2D:
    """Return the legend handle of a mark of any condition."""
    face = INK if filled else "white"
    return Line2D([], [], ls="none", marker="o", color=INK, mfc=face, label=label)


def shade_handle(label: str, colour: str) -> Patch:
    """Return the legend handle of a shaded area."""
    return Patch(color=colour, label=label)


def legend(figure: Figure, handles: Sequence[Artist]) -> None:
    """Put a legend above all panels, as many columns as the page is wide."""
    lengths = [len(str(each.get_label())) + _HANDLE_LETTERS for each in handles]
    fitting = (
        n_columns
        for n_columns in range(len(lengths), 0, -1)
        # A legend is filled column by column.
        if sum(max(part) for part in np.array_split(lengths, n_columns)) <= _LEGEND_LETTERS
    )
    figure.legend(handles=handles, loc="outside upper left", ncols=next(fitting, 1), frameon=False)
