"""Coupling rows: the field chosen, the bands refused, shuffles, nulls and planted coupling."""

from dataclasses import replace

import msgspec
import numpy as np
import pytest
from scipy.stats import binom

from lfptools import bands, coupling, spike_field
from lfptools.choices import CouplingChoice, WindowChoice
from lfptools.errors import InputError
from lfptools.model import CutSession, SpikeTrains, Trials
from tests.spike_sessions import choices, lfp, session, trains

RATE_HZ, FIRST_S, LAST_S = 500.0, -0.2, 0.3
TIME_S = np.arange(FIRST_S, LAST_S, 1 / RATE_HZ)
GAMMA = {"gamma": (30.0, 90.0)}
COLUMNS = [
    *("area", "unit", "field_area", "field_channel", "condition", "window"),
    *("band", "band_lo_hz", "band_hi_hz", "measure", "value", "lo", "hi", "null", "p"),
    *("phase_deg", "phase_lo_deg", "phase_hi_deg", "n_spikes", "n_trials", "note"),
]


def whisk(
    field: np.ndarray, spikes: SpikeTrains, *, condition=None, n_shuffles=199, **coupling_keys
) -> CutSession:
    """One area, its field (n_trials, n_times) on two contacts, one window of 0 to 150 ms."""
    keys = {"bands_hz": GAMMA, "n_shuffles": n_shuffles} | coupling_keys
    return session(
        choices(windows={"early": (0.0, 150.0)}, coupling=CouplingChoice(**keys), n=199),
        condition=condition or ["single"] * len(field),
        spikes=spikes,
        areas=(lfp(np.repeat(field[:, None], 2, axis=1), rate_hz=RATE_HZ, first_s=FIRST_S),),
    )


def noise(rng, n_trials=40):
    return rng.standard_normal((n_trials, len(TIME_S)))


def drawn(rng, rate_hz: np.ndarray) -> list[np.ndarray]:
    """Spikes of one unit from a rate per trial and sample, at most one a sample."""
    fired = rng.random(rate_hz.shape) < rate_hz / RATE_HZ
    return [TIME_S[row] for row in fired]


def rows_of(cut, seed=1):
    return coupling.coupling_rows(cut, rng=np.random.default_rng(seed))


@pytest.fixture(scope="module")
def plain():
    rng = np.random.default_rng(2)
    return whisk(noise(rng), trains([drawn(rng, np.full((40, len(TIME_S)), 30.0))] * 2))


# Which field ------------------------------------------------------------------------------


def chosen(cut: CutSession, field: str, unit: int = 0) -> coupling.Field:
    again = replace(cut, choices=_with_field(cut, field))
    return coupling.choose_field(again, unit)


def _with_field(cut, field):
    return choices(windows={"early": (0.0, 150.0)}, coupling=CouplingChoice(field=field))


@pytest.fixture(scope="module")
def probes():
    """S1 with contacts at 0 to 700 um (400 um bad), M1 without LFP, units at several depths."""
    data = np.random.default_rng(3).standard_normal((10, 8, 50))
    good = lfp(data, rate_hz=100.0, first_s=-0.2)
    trials = replace(good, contacts=good.contacts.mark(4, "noise"))
    units = [[np.empty(0)] * 10] * 6
    return session(
        choices(windows={"early": (0.0, 150.0)}),
        condition=["single"] * 10,
        spikes=trains(
            units,
            area=("S1", "S1", "S1", "S1", "S1", "M1"),
            depth_um=[210.0, 190.0, 310.0, 0.0, np.nan, 300.0],
        ),
        areas=(trials,),
        area_names=("S1", "M1"),
    )


@pytest.mark.parametrize(
    ("unit", "contact"),
    [
        (0, 1),  # own 200 um; 100 and 300 equally near: the one farther from the unit
        (1, 3),
        (2, 2),  # own 300 um, 400 bad
        (3, 1),  # the end of the array
    ],
)
def test_neighbour_is_next_to_the_units_own_contact(probes, unit, contact):
    field = chosen(probes, "neighbour", unit)
    assert (field.contact, field.channel) == (contact, 10 + contact)
    own = chosen(probes, "same", unit)
    assert own.contact != field.contact


def test_same_is_the_nearest_contact_and_must_be_good(probes):
    assert chosen(probes, "same", 2).contact == 3
    near_bad = replace(probes, spikes=replace(probes.spikes, depth_um=np.full(6, 420.0)))
    assert chosen(near_bad, "same").why_not == "no good contact in S1 for field 'same'"
    # Own 400 um is bad but still the unit's own: its neighbours are 300 and 500.
    assert chosen(near_bad, "neighbour").contact == 3


def test_an_areas_field_is_that_of_its_middle(probes):
    field = chosen(probes, "S1", 5)  # a unit of M1; middle 350 um, 300 good and 400 bad
    assert (field.area, field.contact) == ("S1", 3)
    assert chosen(probes, "S1", 4).contact == 3  # depth is not needed


def test_why_a_unit_has_no_field(probes):
    assert chosen(probes, "neighbour", 4).why_not == "depth of the unit is unknown"
    assert chosen(probes, "neighbour", 5).why_not == "no LFP recorded in M1"
    alone = probes.areas[0]
    for contact in (0, 1, 2, 3, 5, 6, 7):
        alone = replace(alone, contacts=alone.contacts.mark(contact, "dead"))
    cut = replace(probes, areas=(alone,))
    assert chosen(cut, "neighbour").why_not == "no good contact in S1 for field 'neighbour'"
    assert chosen(cut, "S1").why_not == "no good contact in S1 for field 'S1'"
    assert chosen(cut, "S1").channel == ""
    rows = rows_of(replace(cut, choices=_with_field(cut, "M1")))
    assert {row["note"] for row in rows} == {"no LFP recorded in M1"}


def test_an_unknown_field_is_refused(plain):
    with pytest.raises(InputError, match=r"field is 'S9'; it must be one of neighbour, same, S1"):
        rows_of(replace(plain, choices=_with_field(plain, "S9")))


def test_no_units_or_no_field_give_no_rows(plain):
    assert rows_of(replace(plain, spikes=None)) == []
    assert rows_of(replace(plain, areas=())) == []


# Which rows -------------------------------------------------------------------------------


def test_one_row_a_unit_condition_window_band_and_measure():
    rng = np.random.default_rng(4)
    cut = whisk(
        noise(rng),
        trains([drawn(rng, np.full((40, len(TIME_S)), 30.0))] * 2),
        condition=["single", "pad"] * 20,
        bands_hz=GAMMA | {"theta": (4.0, 8.0)},
    )
    rows = rows_of(cut)
    keys = [tuple(row[each] for each in ("unit", "condition", "band", "measure")) for row in rows]
    assert len(keys) == len(set(keys)) == 2 * 2 * 2 * 2
    assert all(list(row) == COLUMNS for row in rows)
    assert all(type(each) in (str, int, float) for row in rows for each in row.values())
    assert keys[:3] == [
        ("u0", "single", "gamma", "ppc"),
        ("u0", "single", "gamma", "coherence"),
        ("u0", "single", "theta", "ppc"),
    ]


def test_a_window_of_another_area_has_no_row(plain):
    elsewhere = WindowChoice(name="late", span_ms=(0.0, 150.0), areas=["M1"])
    wider = WindowChoice(name="early", span_ms=(0.0, 50.0), direction_ms=(0.0, 150.0))
    chosen_ = choices(windows={}, coupling=plain.choices.coupling, n=199)
    cut = replace(plain, choices=msgspec.structs.replace(chosen_, window=[elsewhere, wider]))
    rows = rows_of(cut)
    assert {row["window"] for row in rows} == {"early"}
    assert [row["value"] for row in rows] == [row["value"] for row in rows_of(plain)]


@pytest.mark.parametrize(
    ("band", "note"),
    [
        ((4.0, 8.0), "span of 150 ms holds 0.6 cycles of 4 Hz; 3 are needed"),
        (
            (30.0, 50.0),
            "tapers over 150 ms reach 13.3 Hz to either side, more than half the band's width "
            "of 20 Hz",
        ),
        ((30.0, 250.0), "band reaches 250 Hz; the field at 500 Hz ends below 250"),
    ],
)
def test_a_band_the_span_cannot_carry_is_empty_and_says_why(plain, band, note):
    narrowed = choices(
        windows={"early": (0.0, 150.0)}, coupling=CouplingChoice(bands_hz={"band": band})
    )
    for row in rows_of(replace(plain, choices=narrowed)):
        assert row["note"] == note
        assert np.isnan([row[each] for each in coupling.ESTIMATES]).all()
        assert row["n_spikes"] > 0


def test_a_trial_too_short_for_the_phase_keeps_its_coherence(plain):
    wide = choices(windows={"all": (-190.0, 290.0)}, coupling=plain.choices.coupling, n=199)
    ppc, coherence = rows_of(replace(plain, choices=wide))[:2]
    assert ppc["note"] == ("trial goes on for 10 ms beside the span; the phase at 60 Hz needs 21")
    assert np.isnan(ppc["value"])
    assert np.isfinite(coherence["value"])


def test_few_spikes_few_trials_and_a_flat_field_are_said():
    rng = np.random.default_rng(5)
    times = [np.array([0.05])] * 19 + [np.empty(0)] * 21
    few = rows_of(whisk(noise(rng), trains([times])))
    assert {row["note"] for row in few} == {"19 spikes; not estimated below 20"}
    assert {row["n_spikes"] for row in few} == {19}
    one = rows_of(whisk(noise(rng), trains([times[:1] + times[-1:] * 39])))
    assert {row["note"] for row in one} == {"1 spike; not estimated below 20"}
    many = [np.array([0.02, 0.05, 0.08])] * 40
    short = whisk(noise(rng), trains([many]), condition=["single"] * 33 + ["pad"] * 7)
    notes = {(row["condition"], row["note"]) for row in rows_of(short)}
    assert notes == {("single", ""), ("pad", "fewer than 8 accepted trials")}
    flat = rows_of(whisk(np.zeros((40, len(TIME_S))), trains([many])))
    assert {row["note"] for row in flat} == {"the field is flat"}


# Values -----------------------------------------------------------------------------------


def test_rows_equal_a_plain_computation(plain):
    """PPC from the kernel laid at each spike by hand, shuffles one by one."""
    rng = np.random.default_rng(6)
    row = rows_of(plain)[0]
    field = plain.areas[0].data_uv[:, 1].astype(float)
    stimulus_s = plain.table.time_s
    sd_s = 1 / (2 * np.pi * 15)
    vectors, of_trial = [], []
    for trial, at in enumerate(stimulus_s):
        relative = plain.spikes.time_s[0] - at
        for spike in relative[(relative >= -1e-9) & (relative < 0.15 - 1e-9)]:
            away = TIME_S - spike
            kernel = np.exp(-0.5 * (away / sd_s) ** 2 - 2j * np.pi * 60 * away)
            kernel[np.abs(away) > np.ceil(3 * sd_s * RATE_HZ) / RATE_HZ + 1e-9] = 0
            vectors.append(field @ kernel)  # for every trial's field
            of_trial.append(trial)
    unit = np.array(vectors) / np.abs(vectors)
    own = unit[np.arange(len(unit)), of_trial]
    phase = np.angle(own)
    expected = (np.abs(own.sum()) ** 2 - len(own)) / (len(own) * (len(own) - 1))
    assert row["n_spikes"] == len(own)
    assert row["value"] == pytest.approx(expected, abs=1e-10)
    assert row["phase_deg"] == pytest.approx(np.degrees(np.angle(np.exp(1j * phase).sum())))
    null = []
    for _ in range(400):
        partner = rng.permutation(40)[of_trial]
        total = np.abs(unit[np.arange(len(unit)), partner].sum())
        null.append((total**2 - len(own)) / (len(own) * (len(own) - 1)))
    error = np.std(null) * np.sqrt(1 / 400 + 1 / 199)
    assert row["null"] == pytest.approx(np.mean(null), abs=4 * error)


def test_shuffled_sums_pick_one_partner_for_each_trial():
    rng = np.random.default_rng(7)
    pairs = rng.standard_normal((5, 5, 2))
    permutations = rng.permuted(np.tile(np.arange(5), (7, 1)), axis=1)
    expected = [sum(pairs[i, each[i]] for i in range(5)) for each in permutations]
    np.testing.assert_allclose(spike_field.shuffled_sums(pairs, permutations), expected)


def test_coherence_null_equals_shuffling_the_field():
    rng = np.random.default_rng(8)
    x, y = rng.standard_normal((2, 20, 100))
    unit, field = (bands.coefficients(each, rate_hz=200.0, band_hz=(20, 50)) for each in (x, y))
    shuffles = spike_field.draw_shuffles(20, n_shuffles=30, n_draws=9, level=0.95, rng=rng)
    found = spike_field.coherence_estimates(unit, field, shuffles)

    def coherence(order):
        cross = np.einsum("nkf,nkf->f", unit.conj(), field[order])
        power = [(np.abs(each) ** 2).sum(axis=(0, 1)) for each in (unit, field)]
        return np.mean(np.abs(cross) ** 2 / (power[0] * power[1]))

    null = [coherence(order) for order in shuffles.permutations]
    assert found["value"] == pytest.approx(coherence(np.arange(20)))
    assert found["null"] == pytest.approx(np.mean(null))
    assert found["p"] == (1 + np.sum(np.array(null) >= found["value"])) / 31
    assert 0 <= found["lo"] <= found["value"] <= found["hi"] <= 1


@pytest.mark.parametrize("expected_deg", [0, 90, 180])
def test_phase_is_0_at_the_peak_and_180_at_the_trough(expected_deg):
    """One spike a cycle, where the field's phase is the expected one (90: falling to 0)."""
    rng = np.random.default_rng(9)
    start = rng.uniform(0, 2 * np.pi, 40)
    field = np.cos(2 * np.pi * 50 * TIME_S + start[:, None])
    cycles = np.arange(-20, 20)
    times = [
        np.mod(np.radians(expected_deg) - each, 2 * np.pi) / (2 * np.pi * 50) for each in start
    ]
    spikes = [each + cycles / 50 for each in times]
    spikes = [each[(each > FIRST_S) & (each < LAST_S)] for each in spikes]
    row = rows_of(whisk(field, trains([spikes])))[0]
    away = np.exp(1j * np.radians(row["phase_deg"] - expected_deg))
    assert np.angle(away, deg=True) == pytest.approx(0, abs=2)
    assert row["phase_lo_deg"] <= row["phase_deg"] <= row["phase_hi_deg"]
    assert row["value"] > 0.9


def test_scale_sign_and_order_of_trials(plain):
    """A scaled field changes nothing; a field turned over moves the phase by 180 degrees."""
    rows = rows_of(plain)
    trials: Trials = plain.areas[0]
    scaled = rows_of(replace(plain, areas=(replace(trials, data_uv=trials.data_uv * 8),)))
    turned = rows_of(replace(plain, areas=(replace(trials, data_uv=-trials.data_uv),)))
    for row, larger, other in zip(rows, scaled, turned, strict=True):
        for each in ("value", "lo", "hi", "null", "p"):
            assert larger[each] == pytest.approx(row[each])
            assert other[each] == pytest.approx(row[each])
    shift = np.exp(1j * np.radians(turned[0]["phase_deg"] - rows[0]["phase_deg"]))
    assert shift == pytest.approx(-1)


def test_same_generator_same_rows(plain):
    assert str(rows_of(plain, seed=3)) == str(rows_of(plain, seed=3))


def test_all_spikes_in_one_trial_have_no_interval():
    rng = np.random.default_rng(10)
    times = [np.arange(0.01, 0.14, 0.005)] + [np.empty(0)] * 39
    ppc, coherence = rows_of(whisk(noise(rng), trains([times])))
    assert np.isfinite([ppc["value"], coherence["value"]]).all()
    assert np.isnan([ppc["lo"], ppc["hi"], coherence["lo"], coherence["hi"]]).all()


# Nulls and power --------------------------------------------------------------------------

BURST = np.exp(-0.5 * ((TIME_S - 0.06) / 0.02) ** 2) * np.cos(2 * np.pi * 55 * (TIME_S - 0.06))


def locked(seed: int, *, coupled: float) -> list[dict]:
    """Field and spikes both locked to the stimulus; `coupled`: spikes also follow the noise."""
    rng = np.random.default_rng(seed)
    own = noise(rng, 30)
    drive = np.clip(60 * (1 + 0.9 * BURST) * (1 + coupled * own), 0, None)
    return rows_of(whisk(2 * BURST + own, trains([drawn(rng, drive)])), seed=seed)


def test_locking_to_the_stimulus_alone_is_no_coupling():
    """Seeds 1 to 100, spikes and field independent given the stimulus.

    PPC itself is far above 0 because both follow the stimulus; p is against the shuffles. The
    bound on the count of p <= .05 is the 99.9 % point of the binomial with .05: 13 of 100.
    """
    rows = [locked(seed, coupled=0.0) for seed in range(1, 101)]
    bound = binom.ppf(0.999, 100, 0.05)
    assert bound == 13
    for number in (0, 1):
        p = np.array([each[number]["p"] for each in rows])
        assert np.count_nonzero(p <= 0.05) <= bound
        assert np.count_nonzero(p <= 0.5) >= binom.ppf(0.001, 100, 0.5)  # nor conservative
    ppc = np.array([each[0]["value"] for each in rows])
    null = np.array([each[0]["null"] for each in rows])
    assert ppc.mean() > 10 * ppc.std() / 10  # 10 standard errors of the mean over 100 seeds
    assert np.mean(ppc - null) == pytest.approx(0, abs=4 * np.std(ppc - null) / 10)


def test_coupling_beyond_the_stimulus_is_found():
    """The same scene with spikes that follow the trial's own field: nearly always seen."""
    rows = [locked(seed, coupled=0.6) for seed in range(1, 11)]
    assert sum(each[0]["p"] <= 0.05 for each in rows) >= 9
    assert sum(each[1]["p"] <= 0.05 for each in rows) >= 9
    assert all(each[0]["value"] > each[0]["null"] for each in rows)
