"""Current source density of one area and condition in; a map of depth and time drawn."""

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes

from lfptools.evoked import Average
from lfptools.model import Contacts
from lfptools.plot.marks import Row, number
from lfptools.plot.style import DIVERGING, FAINT, INK, short


def draw_depth_map(
    ax: Axes,
    average: Average,
    sinks: Sequence[Row],
    *,
    contacts: Contacts,
    layers: Mapping[str, tuple[float, float]],
    limit: float,
) -> Axes:
    """Draw current source density by depth and time, the surface up.

    Parameters
    ----------
    ax : Axes
        Where to draw. The map is its first collection, for a colour bar.
    average : Average
        Mean of shape (n_contacts, n_times), uA/mm^3, sinks negative.
    sinks : sequence of rows
        Of sinks.csv, of this area and condition; those of kind sink are marked with the
        intervals of depth and peak time.
    contacts : Contacts
        Bad ones, whose values were filled in along depth, are marked at the left edge.
    layers : mapping of name to (top, end)
        Borders in um, drawn and named; may be empty.
    limit : float
        The colours reach from -limit to limit, uA/mm^3.

    Returns
    -------
    Axes
        Time in ms to the right, depth in um downwards.
    """
    ax.pcolormesh(
        average.time_s * 1000,
        average.depth_um,
        average.mean,
        shading="nearest",
        cmap=DIVERGING,
        vmin=-limit,
        vmax=limit,
        rasterized=True,
    )
    ax.axvline(0.0, color=FAINT, lw=0.8)
    for border in sorted({edge for span in layers.values() for edge in span}):
        ax.axhline(border, color=FAINT, lw=0.7, ls=":")
    for name, (top, end) in layers.items():
        ax.text(
            0.03,
            (top + end) / 2,
            short(name, 8),
            transform=ax.get_yaxis_transform(),
            va="center",
            color=INK,
        )
    for depth_um in contacts.depth_um[contacts.bad]:
        ax.plot(
            0.0,
            depth_um,
            marker="x",
            color=INK,
            transform=ax.get_yaxis_transform(),
            clip_on=False,
        )
    for row in sinks:
        if row["kind"] == "sink":
            _mark_sink(ax, row)
    half_um = np.diff(average.depth_um).mean() / 2
    ax.set_ylim(average.depth_um[-1] + half_um, average.depth_um[0] - half_um)
    ax.set_xlabel("time after the stimulus (ms)")
    ax.set_ylabel("depth (um)")
    ax.set_title(
        f"{short(average.area, 12)}, {short(average.condition, 16)} ({average.n_trials} trials)",
        loc="left",
    )
    return ax


def _mark_sink(ax: Axes, row: Row) -> None:
    x, y = number(row, "peak_ms"), number(row, "depth_um")
    if not np.isfinite([x, y]).all():
        return
    along_time = number(row, "peak_lo_ms"), number(row, "peak_hi_ms")
    along_depth = number(row, "depth_lo_um"), number(row, "depth_hi_um")
    ax.plot(along_time, (y, y), color=INK, lw=1.2, marker="|", ms=6, mew=1.2)
    ax.plot((x, x), along_depth, color=INK, lw=1.2, marker="_", ms=6, mew=1.2)
    ax.plot(x, y, marker="o", ls="none", ms=3.2, color=INK, mfc="white", mew=1.0)
