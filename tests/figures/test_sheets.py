"""Figures have the right parts: the axes are asked, not the pixels."""

import subprocess
import sys
from itertools import combinations, pairwise

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.collections import QuadMesh
from matplotlib.figure import Figure
from matplotlib.patches import Rectangle
from matplotlib.text import Text
from matplotlib.transforms import Bbox

from lfptools.plot.firing import draw_raster
from lfptools.plot.layout import fit_titles, page_figure, panels
from lfptools.plot.sheets import (
    SHEETS,
    averages_sheet,
    contact_sheet,
    depth_sheet,
    firing_sheet,
    lag_sheet,
    lead_sheet,
    shown_span_ms,
    shown_unit,
    waves_sheet,
)
from lfptools.plot.style import looks
from tests.report_sessions import N_TRIALS, results

UNITS = ("(ms)", "(um)", "(Hz)", "(uA/mm^3)", "(condition)")


def _drawn(name: str, **options) -> Figure:
    figure = SHEETS[name](results(**options))
    assert figure is not None
    FigureCanvasAgg(figure).draw()
    return figure


def _legend(figure: Figure) -> list[str]:
    return [text.get_text() for text in figure.legends[0].get_texts()]


@pytest.mark.parametrize("name", SHEETS)
def test_every_axis_that_is_shown_has_a_name_with_its_unit(name):
    figure = _drawn(name)
    for ax in figure.axes:
        if not ax.axison:
            continue
        for label in (ax.get_xlabel(), ax.get_ylabel()):
            dimensionless = label in ("", "trial") or "Granger" in label
            assert dimensionless or label.endswith(UNITS), label
    rows = {ax.get_subplotspec().rowspan.start for ax in figure.axes if ax.get_subplotspec()}
    for row in rows:
        in_row = [ax for ax in figure.axes if ax.get_subplotspec()
                  and ax.get_subplotspec().rowspan.start == row]  # fmt: skip
        assert any(ax.get_ylabel() for ax in in_row)
    for column in {
        ax.get_subplotspec().colspan.start for ax in figure.axes if ax.get_subplotspec()
    }:
        lowest = [ax for ax in figure.axes if ax.get_subplotspec() and ax.axison
                  and ax.get_subplotspec().colspan.start == column][-1]  # fmt: skip
        assert lowest.get_xlabel()


@pytest.mark.parametrize("name", SHEETS)
def test_text_is_at_least_8_pt_on_a_page_seven_inches_wide(name):
    figure = _drawn(name)
    assert figure.get_figwidth() == 7.0
    sizes = [each.get_fontsize() for each in figure.findobj(Text) if each.get_text().strip()]
    assert sizes
    assert min(sizes) >= 8.0


LONG = {
    "areas": ("primary somatosensory cortex", "primary motor cortex"),
    "conditions": ("single whisker deflected", "air puff on the whole pad"),
}


@pytest.mark.parametrize("names", [{}, LONG], ids=["short", "long"])
@pytest.mark.parametrize("name", SHEETS)
def test_no_two_labels_overlap_or_leave_the_page(name, names):
    figure = _drawn(name, **names)
    boxes = []
    for ax in figure.axes:
        if not ax.axison:
            continue
        texts = [ax.xaxis.label, ax.yaxis.label, ax.title, ax._left_title, *ax.texts]
        texts += [t for t in (*ax.get_xticklabels(), *ax.get_yticklabels()) if _in_view(ax, t)]
        boxes += [(t.get_text(), t.get_window_extent()) for t in texts
                  if t.get_text().strip() and t.get_visible()]  # fmt: skip
    boxes += [("legend", figure.legends[0].get_window_extent())]
    for text, box in boxes:
        assert figure.bbox.padded(1).contains(box.x0, box.y0), f"{text!r} leaves {name}"
        assert figure.bbox.padded(1).contains(box.x1, box.y1), f"{text!r} leaves {name}"
    for (first, a), (second, b) in combinations(boxes, 2):
        common = Bbox.intersection(a, b)
        deep = common is not None and min(common.width, common.height) > 1
        assert not deep, f"{first!r} overlaps {second!r} in {name}"


def _in_view(ax, text: Text) -> bool:
    x, y = text.get_position()
    label_of_x = text in ax.get_xticklabels()
    lo, hi = sorted(ax.get_xlim() if label_of_x else ax.get_ylim())
    shown = ax.xaxis if label_of_x else ax.yaxis
    on = shown.get_tick_params()["labelbottom" if label_of_x else "labelleft"]
    return bool(on) and lo <= (x if label_of_x else y) <= hi


def test_averages_stand_in_the_order_of_the_pathway_with_one_curve_a_condition():
    figure = averages_sheet(results())
    titles = [ax.get_title(loc="left") for ax in figure.axes]
    assert titles == ["S1, at 200 um", "M1, at 200 um"]
    for ax, average in zip(figure.axes, results().signal_averages[::2], strict=True):
        curves = [line for line in ax.lines if len(line.get_xdata()) == len(average.time_s)]
        assert len(curves) == 2
        assert np.allclose(curves[0].get_ydata(), average.mean[0])
        assert len(ax.collections) == 2  # a band a condition
        assert {line.get_linestyle() for line in curves} == {"-", "--"}
    assert _legend(figure) == [
        f"single ({N_TRIALS} trials)", f"pad ({N_TRIALS} trials)", "window",
    ]  # fmt: skip
    shared = figure.axes[0].get_shared_x_axes()
    assert shared.joined(*figure.axes)
    assert figure.axes[0].get_xlim() == shown_span_ms(results()) == (-50.0, 230.0)


def test_windows_are_shaded_and_marks_stand_at_the_times_of_the_table():
    figure = waves_sheet(results())
    early = figure.axes[0]
    shades = [p for p in early.patches if isinstance(p, Rectangle)]
    assert [(p.get_x(), p.get_x() + p.get_width()) for p in shades] == [(5.0, 60.0)]
    table = results().table("latencies")
    rows = table.query("role == 'area' and area == 'S1' and window == 'early'")
    marks = [line for line in early.lines if line.get_marker() in "os"]
    times = sorted(float(line.get_xdata()[0]) for line in marks)
    assert times == pytest.approx(sorted([*rows.time_ms, *rows.onset_ms]))
    bars = sorted(tuple(line.get_xdata()) for line in early.lines if line.get_marker() == "|")
    wanted = [*zip(rows.time_lo_ms, rows.time_hi_ms, strict=True),
              *zip(rows.onset_lo_ms, rows.onset_hi_ms, strict=True)]  # fmt: skip
    assert np.allclose(bars, sorted(wanted))
    assert "onset, with interval" in _legend(figure)


def test_depth_maps_have_the_surface_up_and_one_scale_an_area():
    figure = depth_sheet(results())
    maps = [ax for ax in figure.axes if "trials" in ax.get_title(loc="left")]
    assert len(maps) == 4
    for ax in maps:
        assert isinstance(ax.collections[0], QuadMesh)
        bottom, top = ax.get_ylim()
        assert bottom > top  # depth grows downwards
    limits = [ax.collections[0].get_clim() for ax in maps]
    assert limits[0] == limits[1]
    assert limits[2] == limits[3]
    assert all(low == -high for low, high in limits)
    bars = [ax for ax in figure.axes if ax.get_ylabel() == "CSD (uA/mm^3)"]
    assert len(bars) == 2
    for bar in bars:
        assert bar.get_title() == "source"  # above: positive
        assert [text.get_text() for text in bar.texts] == ["sink"]


def test_depth_maps_mark_bad_contacts_layers_and_sinks():
    figure = depth_sheet(results())
    s1 = next(ax for ax in figure.axes if ax.get_title(loc="left").startswith("S1, single"))
    m1 = next(ax for ax in figure.axes if ax.get_title(loc="left").startswith("M1, single"))
    crosses = [line for line in s1.lines if line.get_marker() == "x"]
    assert [float(line.get_ydata()[0]) for line in crosses] == [300.0]
    assert not [line for line in m1.lines if line.get_marker() == "x"]
    assert [text.get_text() for text in s1.texts] == ["L23", "L4"]
    rows = results().table("sinks").query(
        "area == 'S1' and condition == 'single' and kind == 'sink' and depth_um > 0"
    )  # fmt: skip
    marks = [line for line in s1.lines if line.get_marker() == "o"]
    found = sorted((line.get_xdata()[0], line.get_ydata()[0]) for line in marks)
    assert np.allclose(found, sorted(zip(rows.peak_ms, rows.depth_um, strict=True)))
    assert len([line for line in s1.lines if line.get_marker() in "|_"]) == 2 * len(rows)


def test_lags_stand_at_b_minus_a_with_their_intervals_and_a_zero_line():
    figure = lag_sheet(results())
    early, late = figure.axes
    rows = results().table("lags").query("window == 'early'")
    marks = sorted(float(x.get_xdata()[0]) for x in early.lines if x.get_marker() in "os")
    assert marks == pytest.approx(sorted(rows.difference_ms))
    assert min(marks) > 0  # the early wave reaches M1 after S1 ...
    assert max(float(x.get_xdata()[0]) for x in late.lines if x.get_marker() in "os") < 0
    bars = sorted(tuple(x.get_xdata()) for x in early.lines if x.get_marker() == "|")
    assert np.allclose(bars, sorted(zip(rows.lo_ms, rows.hi_ms, strict=True)))
    zero = [x for x in early.lines if list(x.get_xdata()) == [0.0, 0.0]]
    assert len(zero) == 1
    labels = [text.get_text() for text in early.get_yticklabels()]
    assert labels == ["S1, M1 (single)", "S1, M1 (pad)"]


def test_leads_say_the_verdict_in_words_and_which_sign_means_what():
    figure = lead_sheet(results())
    early = figure.axes[0]
    rows = results().table("verdicts").query("window == 'early'")
    assert len(early.texts) == len(rows) == 2
    for text, verdict in zip(early.texts, rows.verdict, strict=True):
        assert text.get_text().startswith(verdict)
    assert figure.axes[-1].get_xlabel().endswith("positive: first area leads")
    widths = sorted(p.get_width() for p in early.patches)
    assert widths == pytest.approx(sorted(2 * rows.smallest_detectable))
    assert [x for x in early.lines if list(x.get_xdata()) == [0.0, 0.0]]


def test_rasters_show_one_unit_an_area_and_no_more_rows_than_can_be_read():
    figure = firing_sheet(results())
    upper, lower = figure.axes[0], figure.axes[2]
    assert upper.get_title(loc="left") == "S1: 1 unit"
    assert lower.get_title(loc="left") == "unit u0"
    assert upper.get_ylabel() == "rate (Hz)"
    assert lower.get_ylim() == (2 * N_TRIALS, 0)
    heights = np.concatenate([c.get_offsets()[:, 1] for c in lower.collections])
    assert heights.min() > 0
    assert heights.max() < 2 * N_TRIALS


@pytest.mark.parametrize("unit", ["u3", "shank2-unit117-b"])
def test_a_raster_that_leaves_trials_out_says_so_in_a_title_that_is_not_cut(unit):
    # Three areas side by side leave the least room.
    spikes = {"single": (np.arange(60), np.zeros(60)), "pad": (np.arange(30), np.zeros(30))}
    with page_figure(2.0) as figure:
        axes = panels(figure, 1, 3)
        for ax in axes[0]:
            draw_raster(ax, spikes, unit=unit, looks=looks(list(spikes)), spans_ms={},
                        n_trials={"single": 60, "pad": 30})  # fmt: skip
        fit_titles(axes)
    for ax in axes[0]:
        assert ax.get_title(loc="left").endswith(", trials 1-40")
        assert ax.get_ylim() == (70, 0)
        assert max(c.get_offsets()[:, 1].max() for c in ax.collections) < 70
    figure.draw_without_rendering()
    titles = [ax._left_title.get_window_extent() for ax in axes[0]]
    assert all(a.x1 < b.x0 for a, b in pairwise(titles))


def test_the_unit_shown_is_one_of_the_area():
    found = results()
    assert found.cut.spikes.area[shown_unit(found, "M1")] == "M1"
    assert shown_unit(found, "S2") is None


def test_latency_by_depth_leaves_out_what_was_not_found():
    figure = contact_sheet(results())
    rows = results().table("latencies").query(
        "role == 'contact' and area == 'S1' and window == 'early'"
    )  # fmt: skip
    marks = [x for x in figure.axes[0].lines if x.get_marker() in "os"]
    assert len(marks) == rows.time_ms.notna().sum() > 0
    bottom, top = figure.axes[0].get_ylim()
    assert bottom > top


def test_what_was_not_recorded_has_no_figure():
    spikes_only = results(with_lfp=False)
    drawn = {name for name, sheet in SHEETS.items() if sheet(spikes_only) is not None}
    assert drawn == {"firing"}
    one_area = results(areas=("S1",), spikes=False)
    drawn = {name for name, sheet in SHEETS.items() if sheet(one_area) is not None}
    assert drawn == {"averages", "waves", "depth", "contacts"}


@pytest.mark.parametrize("name", SHEETS)
def test_names_are_shown_as_they_are_and_never_read_as_mathematics(name):
    figure = _drawn(name, areas=("$S_1$", "_M1"), conditions=("$x^", "_hidden"))
    assert any("hidden" in text for text in _legend(figure)) or name == "depth"
    if name == "lags":
        labels = [text.get_text() for text in figure.axes[0].get_yticklabels()]
        assert labels[0] == "$S_1$,  _M1 ($x^)"


def test_conditions_are_told_by_more_than_their_colour():
    found = list(looks(["a", "b", "c", "d", "e"]).values())
    assert len({each.colour for each in found}) == 5
    assert len({each.marker for each in found}) == 5
    assert len({each.line for each in found[:4]}) == 4


def test_no_figure_loads_pyplot():
    code = (
        "import sys; from lfptools.plot.sheets import averages_sheet; "
        "from tests.report_sessions import results; averages_sheet(results()).savefig('/dev/null',"
        " format='png'); sys.exit('matplotlib.pyplot' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0
