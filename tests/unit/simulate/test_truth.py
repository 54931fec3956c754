"""The truth of a session against closed forms and against its own noise-free recording."""

import json
from dataclasses import replace

import numpy as np
import pytest

from lfptools.simulate import Scenario, Simulated, simulate
from lfptools.simulate.truth import Landmarks, landmarks

TIME_S = np.arange(0, 0.3, 1e-4)


def test_half_height_of_a_gaussian_and_a_triangle() -> None:
    # Closed forms: mean .15 s, sd .02 s: 50 % at .15 - .02 sqrt(2 ln 2) = .12645 s; triangle of
    # half-width .05 s: .125 s.
    bell = -3 * np.exp(-0.5 * ((TIME_S - 0.15) / 0.02) ** 2)
    found = landmarks(bell, TIME_S, (100.0, 200.0))
    assert found.trough_ms == pytest.approx(150)
    assert found.onset_ms == pytest.approx(126.45, abs=0.005)
    assert found.value == pytest.approx(-3)
    triangle = -np.maximum(1 - np.abs(TIME_S - 0.15) / 0.05, 0)
    assert landmarks(triangle, TIME_S, (100.0, 200.0)).onset_ms == pytest.approx(125)


@pytest.mark.parametrize(
    "curve",
    [
        pytest.param(-TIME_S, id="falls through the window"),
        pytest.param(TIME_S - 1, id="rises through the window"),
        pytest.param(np.exp(-0.5 * ((TIME_S - 0.15) / 0.02) ** 2), id="a peak"),
        pytest.param(1 - np.exp(-0.5 * ((TIME_S - 0.15) / 0.02) ** 2), id="trough above 0"),
    ],
)
def test_where_there_is_no_trough_there_is_no_landmark(curve: np.ndarray) -> None:
    assert landmarks(curve, TIME_S, (100.0, 200.0)) == Landmarks()


def test_an_onset_before_the_window_is_none() -> None:
    bell = -np.exp(-0.5 * ((TIME_S - 0.12) / 0.02) ** 2)
    found = landmarks(bell, TIME_S, (100.0, 200.0))
    assert found.trough_ms == pytest.approx(120)
    assert found.onset_ms is None


def _average(
    session: Simulated, area: int, chosen: np.ndarray, channels: list[int]
) -> tuple[np.ndarray, np.ndarray]:
    """Average every trial on a fine grid around its own time, shape (n_times, n_channels)."""
    data_uv = session.areas[area].data_uv[:, channels]
    fine_s = np.arange(-0.01, 0.25, 1e-4)
    total = np.zeros((len(fine_s), len(channels)))
    for after_s in session.events.time_s[chosen] - session.start_s:
        first = int((after_s - 0.02) * session.rate_hz)
        piece = data_uv[first : first + 800]
        piece_s = (first + np.arange(800)) / session.rate_hz - after_s
        total += np.transpose([np.interp(fine_s, piece_s, channel) for channel in piece.T])
    return fine_s, total / np.count_nonzero(chosen)


def test_true_troughs_equal_those_of_a_noise_free_recording(alike: Scenario) -> None:
    session = simulate(alike, rng=np.random.default_rng(3))
    condition = np.array(session.events.condition)
    rows = [row for row in session.truth["latencies"] if row["signal"] == "lfp"]
    n_checked = 0
    for index, area in enumerate(session.areas):
        for name in ("single", "pad"):
            fine_s, curves = _average(session, index, condition == name, list(range(16)))
            for row in rows:
                if (row["area"], row["condition"]) != (area.name, name):
                    continue
                if row["trough_ms"] is None:
                    continue
                span_ms = (5, 40) if row["window"] == "early" else (100, 200)
                inside = (fine_s * 1000 >= span_ms[0]) & (fine_s * 1000 < span_ms[1])
                curve = curves[inside, row["channel"]]
                assert fine_s[inside][curve.argmin()] * 1000 == pytest.approx(
                    row["trough_ms"], abs=0.3
                )
                # Earlier trials have left up to 1 % behind in the high-pass.
                assert curve.min() == pytest.approx(row["value"], rel=0.03, abs=1.0)
                n_checked += 1
    assert n_checked > 50


def test_true_troughs_of_many_varying_trials(noise_free: Scenario) -> None:
    session = simulate(replace(noise_free, n_trials=40), rng=np.random.default_rng(4))
    sinks = {
        (row["area"], row["window"]): row
        for row in session.truth["sinks"]
        if row["condition"] == "pad"
    }
    chosen = np.array(session.events.condition) == "pad"
    for index, area in enumerate(session.areas):
        channels = [sinks[area.name, window]["channel"] for window in ("early", "late")]
        fine_s, curves = _average(session, index, chosen, channels)
        cases = (("early", (5, 40), 1.5), ("late", (100, 200), 4.0))
        for column, (window, span_ms, shift_sd_ms) in enumerate(cases):
            row = sinks[area.name, window]
            inside = (fine_s * 1000 >= span_ms[0]) & (fine_s * 1000 < span_ms[1])
            curve = curves[inside, column]
            trough_ms = fine_s[inside][curve.argmin()] * 1000
            drawn = session.truth["trials"][area.name][window]
            gain, shift_ms = (np.array(drawn[what])[chosen] for what in ("gain", "shift_ms"))
            # Their spread differs a little from that of 10 000 trials, and so does the shape.
            moved_ms = np.average(shift_ms, weights=gain)
            assert shift_ms.std() == pytest.approx(shift_sd_ms, rel=0.4)
            assert trough_ms == pytest.approx(row["trough_ms"] + moved_ms, abs=0.5)


def test_sinks_order_and_densities_of_the_default_scene(session: Simulated) -> None:
    truth = session.truth
    orders = {(row["window"], row["condition"]): row["areas"] for row in truth["orders"]}
    for condition in ("single", "pad"):
        assert orders["early", condition] == ["S1", "S2", "M1"]
        assert orders["late", condition] == ["M1", "S2", "S1"]
    near_ms = {
        ("S1", "early"): 13, ("S2", "early"): 18, ("M1", "early"): 24,
        ("M1", "late"): 118, ("S2", "late"): 132, ("S1", "late"): 146,
    }  # fmt: skip
    for row in truth["sinks"]:
        assert row["trough_ms"] == pytest.approx(near_ms[row["area"], row["window"]], abs=1)
        # Sharper onsets stand closer to their trough.
        assert 2 < row["trough_ms"] - row["onset_ms"] < 15
        assert abs(row["depth_um"] - 100 * row["channel"]) <= 50
        layer4_um = 500 if row["area"] == "M1" else 600
        away_um = abs(row["depth_um"] - layer4_um)
        assert away_um <= 10 if row["window"] == "early" else away_um >= 200
    single, pad = (
        [row["density_ua_mm3"] for row in truth["sinks"] if row["condition"] == name]
        for name in ("single", "pad")
    )
    np.testing.assert_allclose(np.divide(pad, single), 1.3, rtol=1e-3)
    assert all(-1.2 < density < -0.8 for density in single)


def test_the_layer_4_contact_has_a_trough_in_both_windows(session: Simulated) -> None:
    layer4 = {"S1": 6, "S2": 6, "M1": 5}
    rows = [
        row
        for row in session.truth["latencies"]
        if row["signal"] == "csd" and row["channel"] == layer4[row["area"]]
    ]
    assert len(rows) == 3 * 2 * 2
    assert all(row["trough_ms"] is not None and row["onset_ms"] is not None for row in rows)


def test_contacts_in_a_source_have_no_trough(session: Simulated) -> None:
    below = [
        row
        for row in session.truth["latencies"]
        if row["area"] == "S1" and row["signal"] == "csd" and row["depth_um"] == 1000
    ]
    assert len(below) == 4
    assert all(row["trough_ms"] is None and row["value"] is None for row in below)


def test_coupling_is_told_for_each_pair_and_window(session: Simulated) -> None:
    leaders = {
        (row["area_a"], row["area_b"], row["window"]): row["leader"]
        for row in session.truth["coupling"]
    }
    assert leaders == {
        ("S1", "S2", "early"): None, ("S1", "S2", "late"): None,
        ("S1", "M1", "early"): "S1", ("S1", "M1", "late"): "M1",
        ("S2", "M1", "early"): None, ("S2", "M1", "late"): None,
    }  # fmt: skip
    off = simulate(Scenario(n_trials=2, coupling=0.0), rng=np.random.default_rng(1)).truth
    assert all(row["leader"] is None and row["coupling"] == 0 for row in off["coupling"])


def test_the_truth_is_plain_and_holds_every_setting(session: Simulated) -> None:
    back = json.loads(json.dumps(session.truth, allow_nan=False))
    assert back["settings"]["n_trials"] == 13
    assert back["settings"]["coupling"] == 0.4
    assert sum(row["locked"] for row in back["units"]) == 9
    assert len(back["trials"]["S2"]["late"]["gain"]) == 26


def test_units_that_do_not_change_are_told_so() -> None:
    scenario = Scenario(n_trials=2)
    flat = replace(scenario, units=replace(scenario.units, rise=1.0, fall=1.0, locking=0.0))
    units = simulate(flat, rng=np.random.default_rng(1)).truth["units"]
    assert all(row["calls"] == {"early": "none", "late": "none"} for row in units)
    assert not any(row["locked"] for row in units)
