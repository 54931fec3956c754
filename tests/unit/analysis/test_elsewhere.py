"""One contact stands for an area in all windows; where a window's sink lies elsewhere, it is said.

A rat whose whiskers are deflected: the early wave of S1 has its sink at 300 um, the late one at a
depth that the test chooses. Nothing is shared with the code but the session's shape.
"""

from dataclasses import replace

import msgspec
import numpy as np
import pytest

from lfptools.analysis.arrival import latency_rows, measure_areas
from lfptools.analysis.depth import NO_DENSITY, NO_EXTREMUM, _why_not_found, sink_rows
from lfptools.analysis.elsewhere import elsewhere
from lfptools.analysis.prepared import prepare
from lfptools.choices import DirectionChoice, WindowChoice
from lfptools.errors import InputError
from lfptools.layers import SinkEstimate
from lfptools.resample import Interval
from tests.spike_sessions import choices, lfp, session

TIME_S = -0.2 + np.arange(500) / 1000
DEPTH_UM = 100.0 * np.arange(12)
CONDITION = ["single"] * 10 + ["pad"] * 10
WINDOWS = {"early": (5.0, 60.0), "late": (100.0, 180.0)}


def current(depth_um, time_s, size=1.0):
    """Potential of a sink: negative there, so narrow that its second derivative peaks there."""
    profile = -np.exp(-0.5 * ((DEPTH_UM - depth_um) / 90) ** 2)
    return size * profile[:, None] * np.exp(-0.5 * ((TIME_S - time_s) / 0.008) ** 2)


def trials(late_um=800.0, late=60.0, n_contacts=12, depth_um=None):
    rng = np.random.default_rng(4)
    wave = current(300.0, 0.03, 100.0) + current(late_um, 0.14, late)
    data = wave + rng.normal(0, 5, (len(CONDITION), 12, len(TIME_S)))
    found = lfp(data[:, :n_contacts], rate_hz=1000.0, first_s=-0.2)
    return replace(found, signal_depth_um=depth_um)


def prepared(*, signal="csd", extremum="trough", **of_trials):
    plain = choices(windows=WINDOWS, n=99)
    late = WindowChoice(name="late", span_ms=WINDOWS["late"], extremum=extremum)
    chosen = msgspec.structs.replace(
        plain, window=[plain.window[0], late], direction=DirectionChoice(signal=signal)
    )
    return prepare(session(chosen, condition=CONDITION, areas=(trials(**of_trials),)))


def remark(found, window):
    return elsewhere(found, "S1", found.choices.window[window])


def test_a_window_whose_sink_lies_elsewhere_says_where():
    found = prepared()
    assert found.signals["S1"].depth_um.tolist() == [300.0]
    assert remark(found, 0) == ""
    assert remark(found, 1) == "this window's strongest sink is at 800 um"


@pytest.mark.parametrize("late_um", [200.0, 300.0, 400.0])
def test_a_direct_neighbour_is_no_other_place(late_um):
    assert remark(prepared(late_um=late_um), 1) == ""


def test_two_contacts_away_is_another_place():
    assert remark(prepared(late_um=500.0), 1) == "this window's strongest sink is at 500 um"


def test_nothing_is_read_off_noise():
    assert remark(prepared(late=0.0), 1) == ""


def test_a_window_of_peaks_is_held_against_its_source():
    assert remark(prepared(late=-60.0, extremum="peak"), 1) == (
        "this window's strongest source is at 800 um"
    )


def test_the_potential_has_no_sink_to_be_held_against():
    assert remark(prepared(signal="lfp"), 1) == ""


def test_the_remark_stands_behind_the_judgement_of_the_row():
    found = prepared(late=30.0)
    rows = [
        row
        for row in latency_rows(found, measure_areas(found))
        if row["role"] == "area" and row["window"] == "late"
    ]
    assert [row["condition"] for row in rows] == ["single", "pad"]
    for row in rows:
        # At 300 um there is no late wave: the judgement of noise, and the remark after it.
        assert row["note"].startswith(("not found (p = ", "not reliable: "))
        assert row["note"].endswith("; this window's strongest sink is at 800 um")
    contacts = [row for row in latency_rows(found, measure_areas(found)) if row["role"] != "area"]
    assert not any("strongest sink" in row["note"] for row in contacts)


def test_the_depth_that_stands_for_an_area_can_be_given():
    found = prepared(depth_um=830.0)  # the nearest contact is taken
    assert found.signals["S1"].kind == "csd"
    assert found.signals["S1"].depth_um.tolist() == [800.0]
    assert remark(found, 0) == "this window's strongest sink is at 300 um"
    assert remark(found, 1) == ""
    assert prepared(depth_um=0.0, signal="lfp").signals["S1"].depth_um.tolist() == [0.0]


@pytest.mark.parametrize(
    ("depth_um", "words"),
    [
        (1160.0, "where the array has no contact"),
        (-60.0, "where the array has no contact"),
        (20.0, "where the contact at 0 um is an outermost one"),
        (1149.0, "where the contact at 1100 um is an outermost one"),
    ],
)
def test_a_depth_at_which_nothing_can_stand_for_the_area_is_refused(depth_um, words):
    with pytest.raises(InputError) as caught:
        prepared(depth_um=depth_um)
    message = str(caught.value)
    assert f"signal_depth_um of area S1 is {depth_um:g} um" in message
    assert words in message
    assert "100, 200, 300, 400, 500, 600, 700, 800, 900, 1000 um" in message


def test_a_contact_that_proved_bad_cannot_stand_for_the_area():
    area = trials(depth_um=400.0)
    bad = replace(area, contacts=area.contacts.mark(4, "dead: steps of 0.1 uV"))
    with pytest.raises(InputError, match=r"the contact at 400 um is bad \(dead: steps of 0.1 uV"):
        prepare(session(choices(windows=WINDOWS, n=99), condition=CONDITION, areas=(bad,)))


def test_an_area_without_current_source_density_has_sink_rows_that_say_why():
    found = prepared(n_contacts=4)
    rows = sink_rows(found)
    assert [(row["window"], row["condition"], row["kind"]) for row in rows] == [
        (window, condition, kind)
        for window in WINDOWS
        for condition in ("single", "pad")
        for kind in ("sink", "source")
    ]
    assert {row["note"] for row in rows} == {NO_DENSITY}
    assert NO_DENSITY == "fewer than 5 good contacts: no current source density"
    assert {row["n_trials"] for row in rows} == {10}
    assert not any("depth_um" in row or row["method"] for row in rows)


def _sink(p, peak_s):
    none = Interval(np.nan, np.nan, np.array(1.0))
    return SinkEstimate("sink", 300.0, none, 1.0, peak_s, none, peak_s, none, -1.0, p, 20)


@pytest.mark.parametrize(
    ("p", "peak_s", "said"),
    [
        (0.4, 0.03, "not found (p = 0.4)"),
        (0.4, np.nan, "not found (p = 0.4)"),
        (0.0005, np.nan, NO_EXTREMUM),
        (0.0005, 0.03, ""),
    ],
)
def test_a_sink_is_not_found_for_one_reason(p, peak_s, said):
    assert _why_not_found(_sink(p, peak_s)) == said


def test_a_current_that_only_rises_in_the_window_has_no_extremum_there():
    area = trials()
    ramp = np.clip((TIME_S - 0.09) / 0.1, 0, 1)  # to its end at 190 ms, after the window
    profile = -np.exp(-0.5 * ((DEPTH_UM - 500) / 90) ** 2)
    data = area.data_uv * 1e-3 + 100 * profile[:, None] * ramp
    made = replace(area, data_uv=data.astype(np.float32))
    plain = choices(windows={"late": WINDOWS["late"]}, n=99)
    found = prepare(session(plain, condition=CONDITION, areas=(made,)))
    rows = [row for row in sink_rows(found) if row["kind"] == "sink"]
    assert {row["note"] for row in rows} == {"not found: no local extremum inside the window"}
    assert all(row["p"] <= 0.05 for row in rows)
