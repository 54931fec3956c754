"""Rows of latencies.csv of single contacts in; latency by depth drawn."""

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes

from lfptools.plot.marks import Row, draw_interval, number
from lfptools.plot.style import Look, short


def draw_contacts(ax: Axes, rows: Sequence[Row], *, looks: Mapping[str, Look]) -> Axes:
    """Draw when each contact's wave is greatest, by depth, the surface up.

    Parameters
    ----------
    ax : Axes
        Where to draw.
    rows : sequence of rows
        Of latencies.csv, role "contact", one area and window. Contacts without a wave are
        left out; those that are not reliable have open markers and may lie beyond the
        axis. Conditions stand a little above one another at the same contact.
    looks : mapping of condition to Look

    Returns
    -------
    Axes
        Time of the extremum in ms to the right, depth in um downwards.
    """
    depths = sorted({number(row, "depth_um") for row in rows})
    pitch = (depths[-1] - depths[0]) / max(1, len(depths) - 1) or 100.0
    conditions = list(dict.fromkeys(row["condition"] for row in rows))
    middle = (len(conditions) - 1) / 2
    for row in rows:
        beside = (conditions.index(row["condition"]) - middle) * 0.5 * pitch / len(conditions)
        draw_interval(
            ax,
            number(row, "time_ms"),
            number(row, "depth_um") + beside,
            (number(row, "time_lo_ms"), number(row, "time_hi_ms")),
            looks[row["condition"]],
            filled=_reliable(row),
        )
    ax.set_ylim(depths[-1] + pitch, depths[0] - pitch)
    _fit_time(ax, rows)
    ax.set_xlabel(f"time of the {rows[0]['extremum']} (ms)")
    ax.set_ylabel("depth (um)")
    ax.set_title(f"{short(rows[0]['area'])}, {short(rows[0]['window'])}", loc="left")
    return ax


def _reliable(row: Row) -> bool:
    return not str(row.get("note") or "").startswith("not")


def _fit_time(ax: Axes, rows: Sequence[Row]) -> None:
    """Let the axis hold the reliable times and intervals, so that no vague one flattens them."""
    held = [row for row in rows if _reliable(row)] or rows
    shown = [number(row, key) for row in held for key in ("time_ms", "time_lo_ms", "time_hi_ms")]
    known = [each for each in shown if np.isfinite(each)]
    if known:
        margin = 0.15 * (max(known) - min(known)) or 1.0
        ax.set_xlim(min(known) - margin, max(known) + margin)
