"""A simulated session: reproducible, bad where it says so, and coupled where it says so."""

from dataclasses import replace

import numpy as np
import pytest

from lfptools.errors import InputError
from lfptools.simulate import Scenario, Simulated, simulate
from lfptools.simulate.recording import ongoing_density


def _cut(session: Simulated, area: int, first_s: float, last_s: float) -> np.ndarray:
    """Trials of an area at the nearest samples, shape (n_events, n_times, n_channels)."""
    n_times = round((last_s - first_s) * session.rate_hz)
    after_s = session.events.time_s - session.start_s + first_s
    starts = np.round(after_s * session.rate_hz).astype(int)
    return session.areas[area].data_uv[starts[:, None] + np.arange(n_times)]


def _csd(session: Simulated, area: int, channel: int) -> np.ndarray:
    data = session.areas[area].data_uv[:, channel - 1 : channel + 2].astype(float)
    return -(data[:, 2] - 2 * data[:, 1] + data[:, 0])


def test_the_same_seed_gives_the_same_session(small: Scenario, session: Simulated) -> None:
    again = simulate(small, rng=np.random.default_rng(7))
    assert again.truth == session.truth
    assert again.truth["seed"] == 7
    assert again.events.condition == session.events.condition
    for one, other in zip(session.areas, again.areas, strict=True):
        np.testing.assert_array_equal(one.data_uv, other.data_uv)
    for one, other in zip(session.spikes.time_s, again.spikes.time_s, strict=True):
        np.testing.assert_array_equal(one, other)


def test_another_seed_gives_another_session(small: Scenario, session: Simulated) -> None:
    other = simulate(small, rng=np.random.default_rng(8))
    assert not np.array_equal(other.events.time_s, session.events.time_s)
    assert other.areas[0].data_uv.shape[1] == 16
    assert np.std(other.areas[1].data_uv[:1000] - session.areas[1].data_uv[:1000]) > 10


def test_shapes_units_and_what_may_be_written_to(session: Simulated, small: Scenario) -> None:
    assert [area.name for area in session.areas] == ["S1", "S2", "M1"]
    for area in session.areas:
        assert area.data_uv.dtype == np.float32
        assert area.data_uv.shape == (session.areas[0].data_uv.shape[0], 16)
        assert np.all(np.isfinite(area.data_uv))
        with pytest.raises(ValueError, match="read-only"):
            area.data_uv[0, 0] = 1
    assert session.start_s == 10
    assert len(session.spikes) == 18


def test_stimuli_are_balanced_in_random_order_and_off_the_sample_grid(session: Simulated) -> None:
    events = session.events
    assert sorted(events.condition) == ["pad"] * 13 + ["single"] * 13
    assert events.condition != tuple(sorted(events.condition))
    gaps_s = np.diff(events.time_s)
    assert gaps_s.min() >= 1.0 - 1e-6
    assert gaps_s.max() <= 1.5 + 1e-6
    phase = events.time_s * session.rate_hz % 1
    assert phase.std() > 0.15
    np.testing.assert_array_equal(events.time_s, np.round(events.time_s, 6))
    whiskers = dict(zip(events.condition, events.factors["whisker"], strict=True))
    assert whiskers["pad"] == "all"
    assert whiskers["single"] in {"C1", "C2"}


def test_bad_contacts_are_as_declared() -> None:
    for seed in range(5):
        session = simulate(
            Scenario(n_trials=3, artefact_share=0.0), rng=np.random.default_rng(seed)
        )
        bad = {row["kind"]: row for row in session.truth["bad_contacts"]}
        assert {kind: row["area"] for kind, row in bad.items()} == {"dead": "S1", "noisy": "S2"}
        for row in bad.values():
            assert 0 < row["channel"] < 15
            assert row["depth_um"] == 100 * row["channel"]
            assert abs(row["depth_um"] - 600) > 200
        dead = session.areas[0].data_uv[:, bad["dead"]["channel"]]
        assert dead.std() == pytest.approx(0.5, rel=0.05)
        assert 40 <= bad["noisy"]["noise_uv"] <= 60
        data = session.areas[1].data_uv.astype(float)
        # Steps of the sum of three neighbours with opposite signs: what they share drops out.
        steps = np.diff(data[:, 2:] - 2 * data[:, 1:-1] + data[:, :-2], axis=0).std(axis=0)
        noisy = bad["noisy"]["channel"]
        assert steps.argmax() + 1 == noisy
        assert steps[noisy - 1] == pytest.approx(
            2 * np.sqrt(2) * bad["noisy"]["noise_uv"], rel=0.05
        )
        far = np.abs(np.arange(1, 15) - noisy) > 1
        assert steps[far].max() < steps[noisy - 1] / 5


def test_an_array_too_small_for_a_bad_contact_is_refused() -> None:
    with pytest.raises(InputError, match="no contact of area S1 may be dead: all inner ones"):
        simulate(Scenario(n_trials=2, spare_um=5000.0), rng=np.random.default_rng(1))


def test_artefacts_hit_all_areas_in_the_trials_named(session: Simulated) -> None:
    named = session.truth["artefact_events"]
    assert len(named) == 1  # 4 % of 26
    for area in range(3):
        trials = _cut(session, area, -0.1, 0.2)[:, :, [0, 15]]
        swing_uv = np.ptp(trials, axis=1).min(axis=1)
        assert set(np.flatnonzero(swing_uv > 2000)) == set(named)


def test_the_reference_is_common_and_hum_is_an_option(noise_free: Scenario) -> None:
    silent = replace(
        noise_free,
        conditions=tuple(replace(condition, strength=0.0) for condition in noise_free.conditions),
    )
    rng = np.random.default_rng
    with_reference = simulate(replace(silent, reference_uv=15.0), rng=rng(1))
    first, *others = [area.data_uv for area in with_reference.areas]
    assert 10 < first[:, 0].std() < 20
    for other in others:
        np.testing.assert_allclose(other, first, atol=1e-3)
    with_hum = simulate(replace(silent, hum_uv=20.0), rng=rng(1)).areas[2].data_uv[5000:, 3]
    assert with_hum.std() == pytest.approx(20 / np.sqrt(2), rel=0.02)
    turns = np.exp(-2j * np.pi * 50 / 2500 * np.arange(len(with_hum)))
    assert 2 * abs(np.mean(with_hum * turns)) == pytest.approx(20, rel=0.02)


def test_switching_one_part_off_leaves_the_others(small: Scenario, session: Simulated) -> None:
    without = simulate(replace(small, coupling=0.0, hum_uv=0.0), rng=np.random.default_rng(7))
    np.testing.assert_array_equal(without.events.time_s, session.events.time_s)
    np.testing.assert_array_equal(without.areas[1].data_uv, session.areas[1].data_uv)
    assert without.truth["trials"] == session.truth["trials"]
    assert not np.array_equal(without.areas[2].data_uv, session.areas[2].data_uv)


def test_ongoing_current_has_its_sd_at_layer_4() -> None:
    scenario = Scenario()
    for area in scenario.areas:
        density = ongoing_density(area, scenario, np.array([area.layer4_um]))
        assert np.sqrt(np.sum(density**2)) == pytest.approx(scenario.ongoing_density_ua_mm3)
        assert abs(density[0, 0]) > 0.9 * scenario.ongoing_density_ua_mm3


@pytest.mark.parametrize(
    ("leader", "follower", "first_s", "last_s"),
    [
        (0, 2, 0.01, 0.1),
        (2, 0, 0.11, 0.22),
    ],
)
def test_coupling_shows_in_the_recorded_currents(
    leader: int, follower: int, first_s: float, last_s: float
) -> None:
    scenario = Scenario(n_trials=60, coupling=0.8, artefact_share=0.0, sensor_uv=0.5)
    silent = replace(
        scenario,
        conditions=tuple(replace(condition, strength=0.0) for condition in scenario.conditions),
    )
    session = simulate(silent, rng=np.random.default_rng(9))
    layer4 = {0: 6, 2: 5}
    sent, got = (np.diff(_csd(session, area, layer4[area])) for area in (leader, follower))
    at_s = session.events.time_s - session.start_s

    def lagged(span_s: tuple[float, float]) -> np.ndarray:
        after = np.arange(round(span_s[0] * 2500), round(span_s[1] * 2500))
        inside = (np.round(at_s * 2500).astype(int)[:, None] + after).ravel()
        return np.array([np.corrcoef(sent[inside - lag], got[inside])[0, 1] for lag in range(31)])

    on, off = lagged((first_s, last_s)), lagged((-0.5, -0.1))
    assert on.argmax() in (14, 15, 16)
    assert on.max() > 0.25
    assert np.abs(off).max() < 0.1


def test_shared_gains_go_together_and_separate_ones_do_not() -> None:
    for shared, low, high in ((0.0, -0.35, 0.35), (1.0, 0.999, 1.001)):
        scenario = Scenario(n_trials=40, shared=shared)
        trials = simulate(scenario, rng=np.random.default_rng(2)).truth["trials"]
        for window in ("early", "late"):
            for what in ("gain", "shift_ms"):
                values = [trials[name][window][what] for name in ("S1", "S2", "M1")]
                both = np.corrcoef(values)[np.triu_indices(3, 1)]
                assert np.all((both > low) & (both < high))
