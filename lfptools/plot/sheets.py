"""The results of a session in, one figure a question out, laid out for a printed page.

No pyplot: figures belong to nobody but the caller. What a session did not record has no
figure (None).
"""

from collections.abc import Callable, Sequence

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from lfptools.analysis.results import Results
from lfptools.evoked import Average
from lfptools.plot.averages import draw_averages
from lfptools.plot.contacts import draw_contacts
from lfptools.plot.depth_map import draw_depth_map
from lfptools.plot.firing import draw_raster, draw_rates
from lfptools.plot.lags import draw_lags, row_label
from lfptools.plot.layout import (
    condition_handles,
    fit_titles,
    is_first_column,
    legend,
    mark_handle,
    n_rows_of,
    page_figure,
    panels,
    shade_handle,
)
from lfptools.plot.lead import draw_leads
from lfptools.plot.marks import Row, Spans, chosen, number
from lfptools.plot.style import INK, PALE, SETTINGS, SHADES, Look, looks, short
from lfptools.rates import spike_raster

#: What is shown around the windows.
_MARGIN_MS = 50.0
_TIME = "time after the stimulus (ms)"
#: Lags of two windows stand side by side where the labels are at most this long.
_SIDE_BY_SIDE = 24


def shown_span_ms(results: Results) -> tuple[float, float]:
    """Return the part of the trial that figures show: the windows and 50 ms on either side."""
    first, last = results.choices.trials.window_ms
    ends = [
        1000 * window.span_s(area)[1]
        for area in results.cut.area_names
        for window in results.choices.window
        if window.holds(area)
    ]
    return max(first, -_MARGIN_MS), min(last, max(ends, default=last) + _MARGIN_MS)


def shown_unit(results: Results, area: str) -> int | None:
    """Return the number of the unit whose raster is shown: the one with most spikes in windows.

    None where the area has no unit.
    """
    spikes = results.cut.spikes
    if spikes is None or area not in spikes.area:
        return None
    counts = dict.fromkeys(zip(spikes.area, spikes.unit, strict=True), 0.0)
    for row in results.rows["firing"]:
        counts[str(row["area"]), str(row["unit"])] += number(row, "n_spikes")
    mine = [index for index, where in enumerate(spikes.area) if where == area]
    return max(mine, key=lambda index: (counts[area, spikes.unit[index]], -index))


def averages_sheet(results: Results) -> Figure | None:
    """Draw the areas' averages one below the other, in the order of the pathway."""
    areas = _areas(results)
    if not areas:
        return None
    with page_figure(1.55 * len(areas) + 0.7) as figure:
        axes = panels(figure, len(areas), 1, sharex=True)[:, 0]
        for index, (ax, area) in enumerate(zip(axes, areas, strict=True)):
            _one_average(results, ax, area, _spans_ms(results, area), name_windows=index == 0)
        axes[0].set_xlim(shown_span_ms(results))
        axes[-1].set_xlabel(_TIME)
        legend(figure, [*_conditions(results), shade_handle("window", SHADES[0])])
        return figure


def waves_sheet(results: Results) -> Figure | None:
    """Draw each window's wave close up: an area a row, a window a column."""
    areas, windows = _areas(results), results.choices.window
    if not areas or not windows:
        return None
    n_rows = n_rows_of(len(areas), len(windows))
    with page_figure(1.6 * n_rows + 0.7) as figure:
        axes = panels(figure, len(areas), len(windows))
        for column, window in enumerate(windows):
            spans_ms = [_ms(window.span_s(area)) for area in areas]
            first, last = min(s[0] for s in spans_ms), max(s[1] for s in spans_ms)
            margin = 0.15 * (last - first)
            for row, (area, span_ms) in enumerate(zip(areas, spans_ms, strict=True)):
                ax = axes[row, column]
                held = {window.name: span_ms} if window.holds(area) else {}
                _one_average(results, ax, area, held, name_windows=False)
                ax.set_xlim(first - margin, last + margin)
                ax.set_title(f"{short(area)}, {short(window.name)}", loc="left")
                if not is_first_column(column, len(windows)):
                    ax.set_ylabel("")
                if row == len(areas) - 1:
                    ax.set_xlabel(_TIME)
        fit_titles(axes)
        marks: list[Artist] = [
            mark_handle("trough or peak, with interval", filled=True),
            mark_handle("onset, with interval", filled=False),
            shade_handle("window", SHADES[0]),
        ]
        legend(figure, [*_conditions(results), *marks])
        return figure


def _one_average(
    results: Results, ax: Axes, area: str, spans_ms: Spans, *, name_windows: bool
) -> None:
    draw_averages(
        ax,
        [each for each in results.signal_averages if each.area == area],
        [
            row
            for row in chosen(results.rows["latencies"], area=area, role="area")
            if row["window"] in spans_ms
        ],
        looks=_looks(results),
        spans_ms=spans_ms,
        name_windows=name_windows,
    )


def depth_sheet(results: Results) -> Figure | None:
    """Draw current source density by depth: an area a row, a condition a column.

    All maps of an area share one scale of colours.
    """
    areas = list(dict.fromkeys(each.area for each in results.maps))
    if not areas:
        return None
    conditions = list(dict.fromkeys(each.condition for each in results.maps))
    with page_figure(2.15 * n_rows_of(len(areas), len(conditions)) + 0.5) as figure:
        axes = panels(figure, len(areas), len(conditions), sharex=True)
        axes[0, 0].set_xlim(shown_span_ms(results))
        for row, area in enumerate(areas):
            maps = [each for each in results.maps if each.area == area]
            _maps_of_area(results, maps, axes[row, [conditions.index(m.condition) for m in maps]])
            for column, ax in enumerate(axes[row]):
                if not is_first_column(column, len(conditions)):
                    ax.set_ylabel("")
                    ax.tick_params(labelleft=False)
                if row < len(areas) - 1:
                    ax.set_xlabel("")
            _colour_bar(figure, axes[row])
        fit_titles(axes)
        handles: list[Artist] = [
            Line2D([], [], marker="o", color=INK, mfc="white", label="strongest sink of a window"),
            Line2D([], [], marker="x", ls="none", color=INK, label="bad contact, filled in"),
        ]
        if any(each.layers for each in results.cut.areas):
            handles.append(Line2D([], [], color=INK, ls=":", lw=0.7, label="border of a layer"))
        legend(figure, handles)
        return figure


def _maps_of_area(results: Results, maps: Sequence[Average], axes: np.ndarray) -> None:
    trials = results.cut.trials_of(maps[0].area)
    assert trials is not None
    span_ms = shown_span_ms(results)
    limit = max(float(np.abs(each.mean[:, _inside(each, span_ms)]).max()) for each in maps)
    for average, ax in zip(maps, axes, strict=True):
        draw_depth_map(
            ax,
            average,
            chosen(results.rows["sinks"], area=average.area, condition=average.condition),
            contacts=trials.contacts,
            layers=trials.layers,
            limit=limit or 1.0,
        )


def _inside(average: Average, span_ms: tuple[float, float]) -> np.ndarray:
    time_ms = 1000 * average.time_s
    return (time_ms >= span_ms[0]) & (time_ms <= span_ms[1])


def _colour_bar(figure: Figure, axes: np.ndarray) -> None:
    mesh = next(ax.collections[0] for ax in axes if ax.collections)
    bar = figure.colorbar(mesh, ax=list(axes), aspect=12, pad=0.02)
    bar.set_label("CSD (uA/mm^3)")
    bar.outline.set_linewidth(0.4)
    bar.ax.set_title("source")
    bar.ax.text(0.5, -0.04, "sink", transform=bar.ax.transAxes, ha="center", va="top",
                fontsize=SETTINGS["axes.titlesize"])  # fmt: skip


def firing_sheet(results: Results) -> Figure | None:
    """Draw the firing rate of each area and, below it, the raster of one of its units."""
    areas = list(dict.fromkeys(each.area for each in results.rates))
    if not areas:
        return None
    n_rows = n_rows_of(1, len(areas))
    with page_figure(3.6 * n_rows + 0.5) as figure:
        # One group a row of areas: rates, then rasters.
        n_columns = -(-len(areas) // n_rows)
        axes = panels(figure, 2 * n_rows, n_columns, sharex=True,
                      height_ratios=[1.0, 1.3] * n_rows)  # fmt: skip
        axes[0, 0].set_xlim(shown_span_ms(results))
        for index, area in enumerate(areas):
            row, column = divmod(index, n_columns)
            pair = axes[2 * row : 2 * row + 2, column]
            _one_firing(results, area, *pair)
            if column:
                for ax in pair:
                    ax.set_ylabel("")
        for spare in range(len(areas), n_rows * n_columns):
            for ax in axes[-2:, spare % n_columns]:
                ax.set_axis_off()
        fit_titles(axes)
        legend(figure, [*_conditions(results), shade_handle("window", SHADES[0])])
        return figure


def _one_firing(results: Results, area: str, upper: Axes, lower: Axes) -> None:
    curves = [each for each in results.rates if each.area == area]
    spans_ms = _spans_ms(results, area)
    draw_rates(upper, curves, looks=_looks(results), spans_ms=spans_ms)
    unit = shown_unit(results, area)
    assert unit is not None
    assert results.cut.spikes is not None
    draw_raster(
        lower,
        {each.condition: spike_raster(results.cut, unit, each.condition) for each in curves},
        unit=results.cut.spikes.unit[unit],
        looks=_looks(results),
        n_trials={each.condition: each.n_trials for each in curves},
        spans_ms=spans_ms,
    )
    lower.tick_params(labelbottom=True)


def lag_sheet(results: Results) -> Figure | None:
    """Draw the lags between areas, a panel a window."""
    by_window = _by_window(results.rows["lags"])
    if not by_window:
        return None
    n_lines = max(len(rows) for rows in by_window) / 2
    longest = max(len(row_label(row)) for rows in by_window for row in rows)
    most = 2 if longest <= _SIDE_BY_SIDE else 1
    n_rows = n_rows_of(1, len(by_window), most=most)
    with page_figure(n_rows * (0.32 * n_lines + 0.9) + 0.4) as figure:
        axes = panels(figure, 1, len(by_window), most=most)
        for index, (ax, rows) in enumerate(zip(axes[0], by_window, strict=True)):
            draw_lags(ax, rows, looks=_looks(results))
            if not is_first_column(index, len(by_window), most=most):
                ax.set_ylabel("")
        marks = [mark_handle("trough or peak", filled=True), mark_handle("onset", filled=False)]
        legend(figure, [*condition_handles(_looks(results)), *marks])
        return figure


def lead_sheet(results: Results) -> Figure | None:
    """Draw the net lead of each pair of areas with the verdict in words, a panel a window."""
    by_window = _by_window(results.rows["verdicts"])
    if not by_window:
        return None
    heights = [0.26 * len(rows) + 0.75 for rows in by_window]
    with page_figure(sum(heights) + 0.4) as figure:
        axes = panels(figure, len(by_window), 1, height_ratios=heights, sharex=True)[:, 0]
        for ax, rows in zip(axes, by_window, strict=True):
            draw_leads(ax, rows, looks=_looks(results))
            ax.tick_params(labelbottom=True)
        for ax in axes[:-1]:
            ax.set_xlabel("")
        marks: list[Artist] = [
            mark_handle("claimed", filled=True),
            mark_handle("not claimed", filled=False),
            shade_handle("too small to be seen", PALE),
        ]
        legend(figure, [*condition_handles(_looks(results)), *marks])
        return figure


def contact_sheet(results: Results) -> Figure | None:
    """Draw the latency of every contact by depth: a window a row, an area a column."""
    rows = chosen(results.rows["latencies"], role="contact")
    areas, windows = _areas(results), results.choices.window
    if not rows or not windows:
        return None
    with page_figure(2.2 * n_rows_of(len(windows), len(areas)) + 0.5) as figure:
        axes = panels(figure, len(windows), len(areas))
        for row, window in enumerate(windows):
            for column, area in enumerate(areas):
                ax = axes[row, column]
                mine = chosen(rows, area=area, window=window.name)
                if not mine:
                    ax.set_axis_off()
                    continue
                draw_contacts(ax, mine, looks=_looks(results))
                if not is_first_column(column, len(areas)):
                    ax.set_ylabel("")
        fit_titles(axes)
        marks = [
            mark_handle("trough or peak, with interval", filled=True),
            mark_handle("not reliable", filled=False),
        ]
        legend(figure, [*condition_handles(_looks(results)), *marks])
        return figure


#: Every figure of a session, in the order of the report.
SHEETS: dict[str, Callable[[Results], Figure | None]] = {
    "averages": averages_sheet,
    "waves": waves_sheet,
    "lags": lag_sheet,
    "depth": depth_sheet,
    "contacts": contact_sheet,
    "firing": firing_sheet,
    "lead": lead_sheet,
}


def _areas(results: Results) -> list[str]:
    return list(dict.fromkeys(each.area for each in results.signal_averages))


def _looks(results: Results) -> dict[str, Look]:
    return looks(results.cut.table.conditions)


def _conditions(results: Results) -> list[Artist]:
    """Return legend handles of the conditions with their counts of accepted trials."""
    accepted = results.cut.condition
    names = results.cut.table.conditions
    counts = {name: int(np.count_nonzero(accepted == name)) for name in names}
    return condition_handles(_looks(results), counts)


def _ms(span_s: tuple[float, float]) -> tuple[float, float]:
    return 1000 * span_s[0], 1000 * span_s[1]


def _spans_ms(results: Results, area: str) -> Spans:
    return {
        window.name: _ms(window.span_s(area))
        for window in results.choices.window
        if window.holds(area)
    }


def _by_window(rows: Sequence[Row]) -> list[list[Row]]:
    return [chosen(rows, window=name) for name in dict.fromkeys(str(row["window"]) for row in rows)]
