"""The results of a session in, one figure a question out, laid out for a printed page.

No pyplot: figures belong to nobody but the caller. What a session did not record has no
figure (None).
"""

from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from typing import Any

import numpy as np
from matplotlib import rc_context
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch

from lfptools.analysis.results import Results
from lfptools.evoked import Average
from lfptools.plot.averages import draw_averages
from lfptools.plot.contacts import draw_contacts
from lfptools.plot.depth_map import draw_depth_map
from lfptools.plot.firing import draw_raster, draw_rates
from lfptools.plot.lags import draw_lags
from lfptools.plot.lead import draw_leads
from lfptools.plot.marks import Row, Spans, chosen, number
from lfptools.plot.style import INK, PALE, SETTINGS, SHADES, WIDTH_IN, Look, looks, short
from lfptools.rates import spike_raster

#: What is shown around the windows.
_MARGIN_MS = 50.0
_MOST_COLUMNS = 3
_TIME = "time after the stimulus (ms)"


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
    counts = np.zeros(len(spikes))
    for row in chosen(results.rows["firing"], area=area):
        counts[_unit_number(results, row)] += number(row, "n_spikes")
    mine = [index for index, where in enumerate(spikes.area) if where == area]
    return max(mine, key=lambda index: (counts[index], -index))


def _unit_number(results: Results, row: Row) -> int:
    assert results.cut.spikes is not None
    names = zip(results.cut.spikes.area, results.cut.spikes.unit, strict=True)
    return list(names).index((row["area"], row["unit"]))


def averages_sheet(results: Results) -> Figure | None:
    """Draw the areas' averages one below the other, in the order of the pathway."""
    areas = _areas(results)
    if not areas:
        return None
    with _figure(1.55 * len(areas) + 0.7) as figure:
        axes = _grid(figure, len(areas), 1, sharex=True)[:, 0]
        for index, (ax, area) in enumerate(zip(axes, areas, strict=True)):
            _one_average(results, ax, area, _spans_ms(results, area), name_windows=index == 0)
        axes[0].set_xlim(shown_span_ms(results))
        axes[-1].set_xlabel(_TIME)
        _legend(figure, [*_condition_handles(results), _shade("window", SHADES[0])], 3)
        return figure


def waves_sheet(results: Results) -> Figure | None:
    """Draw each window's wave close up: an area a row, a window a column."""
    areas, windows = _areas(results), results.choices.window
    if not areas or not windows:
        return None
    with _figure(1.55 * len(areas) + 0.7) as figure:
        axes = _grid(figure, len(areas), len(windows), sharex="col")
        for row, area in enumerate(areas):
            for column, window in enumerate(windows):
                ax = axes[row, column]
                spans = {window.name: _ms(window.span_s(area))} if window.holds(area) else {}
                _one_average(results, ax, area, spans, name_windows=False)
                if column:
                    ax.set_ylabel("")
                ax.set_title(f"{short(area)}, {short(window.name)}", loc="left")
        for column, window in enumerate(windows):
            spans_ms = [_ms(window.span_s(area)) for area in areas]
            first, last = min(s[0] for s in spans_ms), max(s[1] for s in spans_ms)
            axes[-1, column].set_xlim(first - 0.15 * (last - first), last + 0.15 * (last - first))
            axes[-1, column].set_xlabel(_TIME)
        marks: list[Artist] = [
            _mark("trough or peak, with interval", filled=True),
            _mark("onset, with interval", filled=False),
            _shade("window", SHADES[0]),
        ]
        _legend(figure, [*_condition_handles(results), *marks], 3)
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
    with _figure(2.15 * len(areas) + 0.5) as figure:
        axes = _grid(figure, len(areas), len(conditions), sharex=True, sharey="row")
        span_ms = shown_span_ms(results)
        axes[0, 0].set_xlim(span_ms)
        for row, area in enumerate(areas):
            maps = [each for each in results.maps if each.area == area]
            limit = max(float(np.abs(each.mean[:, _inside(each, span_ms)]).max()) for each in maps)
            for average in maps:
                ax = axes[row, conditions.index(average.condition)]
                trials = results.cut.trials_of(area)
                assert trials is not None
                draw_depth_map(
                    ax,
                    average,
                    chosen(results.rows["sinks"], area=area, condition=average.condition),
                    contacts=trials.contacts,
                    layers=trials.layers,
                    limit=limit or 1.0,
                )
            _inner_labels_off(axes[row], last=row == len(areas) - 1)
            _colour_bar(figure, axes[row])
        handles = [
            Line2D([], [], marker="o", color=INK, mfc="white", label="strongest sink of a window"),
            Line2D([], [], marker="x", ls="none", color=INK, label="bad contact, filled in"),
        ]
        if any(each.layers for each in results.cut.areas):
            handles.append(Line2D([], [], color=INK, ls=":", lw=0.7, label="border of a layer"))
        _legend(figure, handles, 3)
        return figure


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
    n_columns = min(len(areas), _MOST_COLUMNS)
    n_blocks = -(-len(areas) // n_columns)
    with _figure(3.6 * n_blocks + 0.5) as figure:
        axes = _grid(
            figure, 2 * n_blocks, n_columns, sharex=True, height_ratios=[1.0, 1.3] * n_blocks
        )
        axes[0, 0].set_xlim(shown_span_ms(results))
        for index, area in enumerate(areas):
            block, column = divmod(index, n_columns)
            _one_firing(results, area, axes[2 * block, column], axes[2 * block + 1, column])
            if column:
                axes[2 * block, column].set_ylabel("")
                axes[2 * block + 1, column].set_ylabel("")
        for spare in range(len(areas), n_blocks * n_columns):
            block, column = divmod(spare, n_columns)
            axes[2 * block, column].set_axis_off()
            axes[2 * block + 1, column].set_axis_off()
        _legend(figure, [*_condition_handles(results), _shade("window", SHADES[0])], 3)
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
    n_columns = min(len(by_window), 2)
    n_rows = -(-len(by_window) // n_columns)
    with _figure(n_rows * (0.32 * n_lines + 0.9) + 0.4) as figure:
        axes = _grid(figure, n_rows, n_columns)
        for ax, rows in zip(axes.flat, by_window, strict=False):
            draw_lags(ax, rows, looks=_looks(results))
        for ax in axes.flat[len(by_window) :]:
            ax.set_axis_off()
        for ax in axes[:, 1:].flat:
            ax.set_ylabel("")
        marks = [_mark("trough or peak", filled=True), _mark("onset", filled=False)]
        _legend(figure, [*_condition_handles(results, trials=False), *marks], 4)
        return figure


def lead_sheet(results: Results) -> Figure | None:
    """Draw the net lead of each pair of areas with the verdict in words, a panel a window."""
    by_window = _by_window(results.rows["verdicts"])
    if not by_window:
        return None
    heights = [0.26 * len(rows) + 0.75 for rows in by_window]
    with _figure(sum(heights) + 0.4) as figure:
        axes = _grid(figure, len(by_window), 1, height_ratios=heights, sharex=True)[:, 0]
        for ax, rows in zip(axes, by_window, strict=True):
            draw_leads(ax, rows, looks=_looks(results))
            ax.tick_params(labelbottom=True)
        for ax in axes[:-1]:
            ax.set_xlabel("")
        marks: list[Artist] = [
            _mark("claimed", filled=True),
            _mark("not claimed", filled=False),
            _shade("too small to be seen", PALE),
        ]
        _legend(figure, [*_condition_handles(results, trials=False), *marks], 5)
        return figure


def contact_sheet(results: Results) -> Figure | None:
    """Draw the latency of every contact by depth: a window a row, an area a column."""
    rows = chosen(results.rows["latencies"], role="contact")
    areas, windows = _areas(results), results.choices.window
    if not rows or not windows:
        return None
    n_columns = len(areas)
    with _figure(2.2 * len(windows) + 0.5) as figure:
        axes = _grid(figure, len(windows), n_columns, sharey="col")
        for row, window in enumerate(windows):
            for column, area in enumerate(areas):
                ax = axes[row, column]
                mine = chosen(rows, area=area, window=window.name)
                if not mine:
                    ax.set_axis_off()
                    continue
                draw_contacts(ax, mine, looks=_looks(results))
                if column:
                    ax.set_ylabel("")
        marks = [_mark("trough or peak, with interval", filled=True),
                 _mark("not reliable", filled=False)]  # fmt: skip
        _legend(figure, [*_condition_handles(results, trials=False), *marks], 4)
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


@contextmanager
def _figure(height_in: float) -> Iterator[Figure]:
    """Yield a figure; what is drawn inside the block has the sizes of `style`."""
    with rc_context(SETTINGS):
        figure = Figure(figsize=(WIDTH_IN, height_in))
        figure.set_layout_engine("constrained", w_pad=0.1, h_pad=0.05)
        yield figure


def _grid(figure: Figure, n_rows: int, n_columns: int, **options: Any) -> np.ndarray:
    return figure.subplots(n_rows, n_columns, squeeze=False, **options)


def _areas(results: Results) -> list[str]:
    return list(dict.fromkeys(each.area for each in results.signal_averages))


def _looks(results: Results) -> dict[str, Look]:
    return looks(results.cut.table.conditions)


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


def _inner_labels_off(axes: np.ndarray, *, last: bool) -> None:
    for index, ax in enumerate(axes):
        if index:
            ax.set_ylabel("")
        if not last:
            ax.set_xlabel("")


def _condition_handles(results: Results, *, trials: bool = True) -> list[Artist]:
    accepted = results.cut.condition
    handles: list[Artist] = []
    for name, look in _looks(results).items():
        count = f" ({np.count_nonzero(accepted == name)} trials)" if trials else ""
        handles.append(
            Line2D([], [], color=look.colour, ls=look.line, marker=look.marker,
                   label=f"{short(name)}{count}")
        )  # fmt: skip
    return handles


def _mark(label: str, *, filled: bool) -> Line2D:
    face = INK if filled else "white"
    return Line2D([], [], ls="none", marker="o", color=INK, mfc=face, label=label)


def _shade(label: str, colour: str) -> Patch:
    return Patch(color=colour, label=label)


def _legend(figure: Figure, handles: Sequence[Artist], most: int) -> None:
    figure.legend(
        handles=handles, loc="outside upper left", ncols=min(most, len(handles)), frameon=False
    )
