"""Results to be looked at in, still pictures on one shared time axis out.

matplotlib draws what does not move, once; the browser draws windows and marks over it. Every
strip has the same width and the same margins, so that one mapping of time to pixels holds for
all of them.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from io import BytesIO
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from lfptools.evoked import Average
from lfptools.model import Contacts
from lfptools.plot.averages import draw_averages
from lfptools.plot.depth_map import draw_depth_map
from lfptools.plot.firing import draw_raster, draw_rates
from lfptools.plot.style import SETTINGS, drawing, looks
from lfptools.rates import RateCurve

WIDTH_PX = 680
LEFT_PX = 62
RIGHT_PX = 92
AREA_PX = 112
MAP_PX = 164
UNITS_PX = 210
_TOP_PX = 34
_BOTTOM_PX = 40
#: Pixels of the picture for one of the page: stays sharp on fine screens and when zoomed.
SCALE = 2.0
_DPI = 100


@dataclass(frozen=True, slots=True)
class Frame:
    """Where one axes lies in its strip, in px from the top left, and what its edges mean."""

    name: str
    top_px: float
    bottom_px: float
    top_value: float
    bottom_value: float


@dataclass(frozen=True, slots=True, eq=False)
class Strip:
    """One still picture with its size, its axes and its words."""

    png: bytes
    height_px: int
    frames: tuple[Frame, ...]
    alt: str


def averages_strip(
    averages: Sequence[Average], span_ms: tuple[float, float], conditions: Sequence[str]
) -> Strip:
    """Draw the signal that stands for each area, one axes an area, all conditions."""
    areas = list(dict.fromkeys(each.area for each in averages))
    height = AREA_PX * len(areas) + _TOP_PX
    with drawing():
        figure = _figure(height)
        frames = []
        for index, area in enumerate(areas):
            top = _TOP_PX + AREA_PX * index
            ax = _axes(figure, top + 18, top + AREA_PX - 6, height, span_ms)
            parts = [each for each in averages if each.area == area]
            draw_averages(ax, parts, (), looks=looks(conditions), spans_ms={})
            ax.tick_params(labelbottom=False)
            if index == 0:
                ax.legend(
                    loc="lower right",
                    bbox_to_anchor=(1.0, 1.0),
                    ncols=3,
                    frameon=False,
                    borderpad=0.1,
                )
            low, high = ax.get_ylim()
            frames.append(Frame(area, top + 18, top + AREA_PX - 6, high, low))
        png = _png(figure)
    told = ", ".join(areas)
    return Strip(png, height, tuple(frames), f"Averages with bands of {told} by condition")


def map_strip(
    average: Average,
    span_ms: tuple[float, float],
    *,
    contacts: Contacts,
    layers: Mapping[str, tuple[float, float]],
    limit: float,
) -> Strip:
    """Draw the map of depth and time of one area and condition."""
    with drawing():
        figure = _figure(MAP_PX)
        ax = _axes(figure, 18, MAP_PX - 18, MAP_PX, span_ms)
        draw_depth_map(ax, average, (), contacts=contacts, layers=layers, limit=limit)
        ax.set_xlabel("")
        ax.tick_params(labelbottom=False)
        _colour_bar(figure, ax, average)
        ax.tick_params(length=2)
        ax.set_xlim(*span_ms)
        low, high = ax.get_ylim()
        frame = Frame(average.area, 18, MAP_PX - 18, high, low)
        png = _png(figure)
    kind = "current source density" if average.kind == "csd" else "potential"
    alt = f"Map of {kind} by depth and time, {average.area}, {average.condition}"
    return Strip(png, MAP_PX, (frame,), alt)


def units_strip(
    curves: Sequence[RateCurve],
    spikes: Mapping[str, tuple[np.ndarray, np.ndarray]],
    span_ms: tuple[float, float],
    *,
    unit: str,
    n_trials: Mapping[str, int],
    conditions: Sequence[str],
) -> Strip:
    """Draw the rates of an area by condition and the raster of one unit."""
    middle = 20 + (UNITS_PX - 20 - _BOTTOM_PX) // 2
    with drawing():
        figure = _figure(UNITS_PX)
        upper = _axes(figure, 18, middle - 8, UNITS_PX, span_ms)
        draw_rates(upper, curves, looks=looks(conditions), spans_ms={})
        upper.tick_params(labelbottom=False)
        lower = _axes(figure, middle + 18, UNITS_PX - _BOTTOM_PX, UNITS_PX, span_ms)
        draw_raster(
            lower, spikes, unit=unit, looks=looks(conditions), n_trials=n_trials, spans_ms={}
        )
        frames = (Frame(curves[0].area, 18, middle - 8, upper.get_ylim()[1], 0.0),)
        png = _png(figure)
    alt = f"Firing rate of {curves[0].area} by condition and spikes of unit {unit}"
    return Strip(png, UNITS_PX, frames, alt)


def still_picture(
    averages: Sequence[Average],
    latencies: Sequence[Mapping[str, Any]],
    windows_ms: Mapping[str, Mapping[str, tuple[float, float]]],
    span_ms: tuple[float, float],
    conditions: Sequence[str],
) -> bytes:
    """Draw averages, windows and marks as one plain picture, for a saved notebook.

    Parameters
    ----------
    averages : sequence of Average
        The signal that stands for each area, by condition.
    latencies : sequence of rows
        Of latencies.csv, role area; may be empty.
    windows_ms : mapping of area to mapping of window to (first, last)
    span_ms : (float, float)
        Time shown.
    conditions : sequence of str
        In their order.
    """
    areas = list(dict.fromkeys(each.area for each in averages))
    height = AREA_PX * len(areas) + _TOP_PX + _BOTTOM_PX
    with drawing():
        figure = _figure(height)
        for index, area in enumerate(areas):
            top = _TOP_PX + AREA_PX * index
            ax = _axes(figure, top + 24, top + AREA_PX - 6, height, span_ms)
            parts = [each for each in averages if each.area == area]
            rows = [dict(row) for row in latencies if row["area"] == area]
            spans = dict(windows_ms[area])
            look = looks(conditions)
            draw_averages(ax, parts, rows, looks=look, spans_ms=spans, name_windows=index == 0)
            ax.set_xlim(*span_ms)
            if index == 0:
                ax.legend(loc="lower right", bbox_to_anchor=(1.0, 1.1), ncols=4, frameon=False)
            if area == areas[-1]:
                ax.set_xlabel("time after the stimulus (ms)")
            else:
                ax.tick_params(labelbottom=False)
        return _png(figure)


def time_strip(span_ms: tuple[float, float]) -> Strip:
    """Draw the time axis alone, for sessions whose lowest strip has none."""
    height = _BOTTOM_PX + 4
    with drawing():
        figure = _figure(height)
        ax = _axes(figure, 2, 4, height, span_ms)
        ax.set_yticks([])
        ax.spines["left"].set_visible(False)
        ax.set_xlabel("time after the stimulus (ms)")
        png = _png(figure)
    return Strip(png, height, (), "Time axis in ms after the stimulus")


def as_plain(strip: Strip) -> dict[str, Any]:
    """Return what the browser needs to know of a strip, the picture left out."""
    return {
        "height": strip.height_px,
        "alt": strip.alt,
        "frames": [
            {
                "name": frame.name,
                "top": frame.top_px,
                "bottom": frame.bottom_px,
                "topValue": frame.top_value,
                "bottomValue": frame.bottom_value,
            }
            for frame in strip.frames
        ],
    }


def _figure(height_px: int) -> Figure:
    return Figure(figsize=(WIDTH_PX / _DPI, height_px / _DPI), dpi=_DPI * SCALE)


def _axes(
    figure: Figure, top_px: float, bottom_px: float, height_px: float, span_ms: tuple[float, float]
) -> Axes:
    ax = figure.add_axes(
        (
            LEFT_PX / WIDTH_PX,
            1 - bottom_px / height_px,
            (WIDTH_PX - LEFT_PX - RIGHT_PX) / WIDTH_PX,
            (bottom_px - top_px) / height_px,
        )
    )
    ax.set_xlim(*span_ms)
    return ax


def _colour_bar(figure: Figure, ax: Axes, average: Average) -> None:
    box = ax.get_position()
    beside = figure.add_axes((box.x1 + 0.016, box.y0, 0.016, box.height))
    bar = figure.colorbar(ax.collections[0], cax=beside)
    bar.set_label(f"{average.kind.upper()} ({average.unit})")
    if average.kind == "csd":
        beside.set_title("source", fontsize=SETTINGS["font.size"], pad=2)
        beside.set_xlabel("sink", fontsize=SETTINGS["font.size"], labelpad=2)


def _png(figure: Figure) -> bytes:
    out = BytesIO()
    figure.savefig(out, format="png", metadata={"Software": None})
    return out.getvalue()
