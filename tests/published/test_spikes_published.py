"""Firing and spike-field coupling against real spikes, printed values and closed forms.

Sources stand beside each check. Real spikes: data `neuro` of R's package boot, see
data/SOURCES.md; the counts, latencies and peak are simple counts of those data, made once by
separate code. Tolerances: exact for counts and latencies, 12 digits for tapers, 1e-10 against
scipy's own cross-spectra, 4 standard errors where spikes or noise are drawn.
"""

from pathlib import Path

import numpy as np
import pytest
from scipy import signal

from lfptools import bands, coupling, rates, resample, spike_field
from lfptools.choices import CouplingChoice
from lfptools.firing_latency import critical_counts, poisson_latency
from lfptools.model import CutSession
from lfptools.spikes import binned_counts
from tests.spike_sessions import choices, lfp, session, stimuli_s, trains, unfinished_rows

NEURO = Path(__file__).parent / "data" / "boot_neuro.csv"


def neuro(*, bin_ms: float = 1.0, **windows: tuple[float, float]) -> CutSession:
    """The 469 trials as a session of one unit without a field."""
    table_ms = np.genfromtxt(NEURO, delimiter=",", skip_header=1)
    spikes_s = [row[np.isfinite(row)] / 1000 for row in table_ms]
    chosen = choices(
        windows=windows, window_ms=(-250.0, 250.0), baseline_ms=(-250.0, 0.0), bin_ms=bin_ms
    )
    return session(chosen, condition=["stimulus"] * len(spikes_s), spikes=trains([spikes_s]))


def neuro_rows(cut: CutSession) -> dict[str, dict]:
    rng = np.random.default_rng(1)
    weights = {"stimulus": resample.bootstrap_weights(469, 499, rng)}
    signs = {"stimulus": resample.sign_flips(469, cut.choices.resample.n, rng)}
    rows = unfinished_rows(cut, weights=weights, signs=signs)
    q = resample.false_discovery_rate(np.array([row["p"] for row in rows]))
    finished = rates.finish_calls(
        [row | {"q": each} for row, each in zip(rows, q.tolist(), strict=True)]
    )
    return {row["window"]: row for row in finished}


def neuro_counts(edges_ms: np.ndarray) -> np.ndarray:
    cut = neuro()
    assert cut.spikes is not None
    return binned_counts(cut.spikes.time_s[0], stimuli_s(469), edges_s=edges_ms / 1000).sum(axis=0)


def test_real_spikes_are_counted_in_half_open_bins():
    edges_ms = np.arange(-250, 251)
    counts = neuro_counts(edges_ms)
    assert counts[:250].sum() == 927
    assert counts[274:279].tolist() == [8, 10, 28, 58, 21]  # one of the ten lies at 25.0 ms
    assert edges_ms[counts.argmax()] == 27


@pytest.mark.parametrize(("span_ms", "n"), [((20, 30), 163), ((30, 50), 10), ((60, 80), 149)])
def test_real_spikes_in_windows(span_ms, n):
    row = neuro_rows(neuro(only=span_ms))["only"]
    assert row["n_spikes"] == n
    assert row["n_trials"] == 469
    # 7.906 spikes a second and trial before the stimulus.
    assert row["baseline_hz"] == pytest.approx(927 / 469 / 0.25, rel=1e-12)
    assert round(row["baseline_hz"], 3) == 7.906


@pytest.mark.parametrize(("bin_ms", "onset_ms"), [(1.0, 25.0), (2.0, 24.0)])
def test_real_spikes_start_at_25_ms(bin_ms, onset_ms):
    rows = neuro_rows(neuro(bin_ms=bin_ms, rise=(10, 30), silence=(30, 50), rebound=(60, 80)))
    assert [rows[name]["call"] for name in ("rise", "silence", "rebound")] == [
        "rise",
        "fall",
        "rise",
    ]
    assert rows["rise"]["latency_ms"] == pytest.approx(onset_ms, abs=1e-9)
    assert rows["rise"]["latency_lo_ms"] <= onset_ms <= rows["rise"]["latency_hi_ms"]
    assert rows["silence"]["hi_hz"] < 0 < rows["rebound"]["lo_hz"]


def test_a_fall_is_found_only_where_an_empty_bin_is_rare():
    """3.708 spikes a bin of 1 ms: P(0) = .025, never below .01; in 5 ms 18.5, so it can be."""
    narrow = neuro_rows(neuro(silence=(30, 50)))["silence"]
    assert np.isnan(narrow["latency_ms"])
    assert "3.71 spikes in a bin of 1 ms" in narrow["note"]
    wide = neuro_rows(neuro(bin_ms=5.0, silence=(30, 50)))["silence"]
    assert wide["latency_ms"] == pytest.approx(30.0)


def test_poisson_critical_counts():
    """Least counts with P(X >= count) below .01 and .001 (exact Poisson sums)."""
    mean = np.array([0.5, 1, 2, 5, 10])
    assert critical_counts(mean, p=0.01, rise=True).tolist() == [4, 5, 7, 12, 19]
    assert critical_counts(mean, p=0.001, rise=True).tolist() == [5, 6, 9, 14, 22]
    assert critical_counts(np.array([927 / 250]), p=0.01, rise=True).tolist() == [10]


def test_poisson_criterion_needs_two_bins_to_confirm():
    """Maunsell and Gibson (1992): p < .01, p < .01, p < .05 (rule from memory).

    Mean 1: 5 spikes have p < .01, 4 have p = .019.
    """
    left_s = np.arange(6) / 1000
    rows = np.array([[5, 0, 5, 5, 4, 0], [5, 4, 5, 0, 5, 5], [0, 5, 5, 3, 5, 5]])
    found = poisson_latency(rows, np.ones(3), left_s, span_s=(0.0, 0.006), rise=True)
    np.testing.assert_array_equal(found, [0.002, np.nan, np.nan])


def test_ppc_by_hand():
    """Phases 0, 0, 90 degrees: pairs give 1, 0, 0 (by hand); squared locking value 5/9."""
    resultant = np.exp(1j * np.array([0, 0, np.pi / 2])).sum()
    ppc = float(spike_field.pairwise_phase_consistency(resultant, 3))
    squared_plv = abs(resultant / 3) ** 2
    assert ppc == pytest.approx(1 / 3, abs=1e-15)
    assert squared_plv == pytest.approx(5 / 9, abs=1e-15)
    assert ppc == pytest.approx((3 * squared_plv - 1) / 2, abs=1e-15)


def test_ppc_is_the_mean_cosine_over_pairs():
    """The definition in Vinck et al. (2010), NeuroImage 51:112-122."""
    phase = np.random.default_rng(3).vonmises(0.4, 1.0, 50)
    first, second = np.triu_indices(50, k=1)
    by_pairs = np.cos(phase[first] - phase[second]).mean()
    resultant = np.exp(1j * phase).sum()
    assert float(spike_field.pairwise_phase_consistency(resultant, 50)) == pytest.approx(by_pairs)
    plv = abs(resultant) / 50
    assert by_pairs == pytest.approx((50 * plv**2 - 1) / 49)


def test_ppc_does_not_grow_with_few_spikes():
    """von Mises phases with squared resultant .05881: PPC keeps it, PLV^2 gives .247 at N = 5."""
    rng = np.random.default_rng(4)
    # I1(k)/I0(k) = sqrt(.05881) at k = .5.
    resultant = np.exp(1j * rng.vonmises(0, 0.5, (40_000, 5))).sum(axis=1)
    ppc = spike_field.pairwise_phase_consistency(resultant, 5)
    assert ppc.mean() == pytest.approx(0.05881, abs=4 * ppc.std() / 200)
    squared_plv = np.abs(resultant / 5) ** 2
    assert squared_plv.mean() == pytest.approx(0.2470, abs=4 * squared_plv.std() / 200)


def modulated(*, depth: float, seed: int) -> tuple[dict, dict]:
    """Rows of a unit that fires at 100 (1 + depth cos(phase)) Hz on a 10-Hz field."""
    rng = np.random.default_rng(seed)
    n_trials, rate_hz, first_s, last_s = 100, 500.0, -0.4, 1.4
    start = rng.uniform(0, 2 * np.pi, n_trials)
    time_s = np.arange(first_s, last_s, 1 / rate_hz)
    field = 50 * np.cos(2 * np.pi * 10 * time_s + start[:, None])
    spikes = []
    for phase in start:
        at = np.sort(rng.uniform(first_s, last_s, rng.poisson(100 * (1 + depth) * 1.8)))
        keep = rng.uniform(0, 1 + depth, at.size) < 1 + depth * np.cos(2 * np.pi * 10 * at + phase)
        spikes.append(at[keep])
    chosen = choices(
        windows={"all": (0.0, 1000.0)},
        window_ms=(first_s * 1000, last_s * 1000),
        coupling=CouplingChoice(bands_hz={"slow": (8.0, 12.0)}, n_shuffles=199),
    )
    trials = lfp(np.repeat(field[:, None], 2, axis=1), rate_hz=rate_hz, first_s=first_s)
    cut = session(
        chosen,
        condition=["single"] * n_trials,
        spikes=trains([spikes], depth_um=[0.0]),
        areas=(trials,),
    )
    ppc, coherence = coupling.coupling_rows(cut, rng=rng)
    return ppc, coherence


def test_ppc_of_a_modulated_rate():
    """Rate 1 + m cos(phase): PPC = (m/2)^2, mean phase 0 (closed form)."""
    row, coherence = modulated(depth=0.4, seed=5)
    # The resultant R = .2 of N spikes has SE 1/sqrt(2 N), so R^2 has .4/sqrt(2 N).
    assert row["value"] == pytest.approx(0.04, abs=4 * 0.4 / np.sqrt(2 * row["n_spikes"]))
    assert row["lo"] < 0.04 < row["hi"]
    assert row["phase_lo_deg"] < 0 < row["phase_hi_deg"]
    assert row["p"] == coherence["p"] == 1 / 200
    assert abs(row["null"]) < 0.004


@pytest.mark.parametrize("snr", [1 / 3, 1.0, 4.0])
def test_coherence_of_signal_and_noisy_copy(snr):
    """y = x + noise with signal-to-noise ratio s: squared coherence s / (1 + s) (closed form)."""
    rng = np.random.default_rng(6)
    x = rng.standard_normal((2000, 200))
    y = x + rng.standard_normal((2000, 200)) / np.sqrt(snr)
    first, second = (bands.coefficients(each, rate_hz=200.0, band_hz=(20, 40)) for each in (x, y))
    found = float(
        spike_field.band_coherence(
            np.einsum("nkf,nkf->f", first.conj(), second),
            (np.abs(first) ** 2).sum(axis=(0, 1)),
            (np.abs(second) ** 2).sum(axis=(0, 1)),
        )
    )
    expected = snr / (1 + snr)
    # SE of a squared coherence C from L estimates: sqrt(2 C / L) (1 - C); 20 Hz hold about
    # 5 independent bandwidths of 4 Hz.
    error = np.sqrt(2 * expected / (2000 * 3 * 5)) * (1 - expected)
    assert found == pytest.approx(expected, abs=4 * error + (1 - expected) / 6000)


def test_coherence_equals_scipys_cross_spectra():
    """The same sums from scipy.signal.csd, one call a taper, trials as segments."""
    rng = np.random.default_rng(7)
    n_trials, n_times, rate_hz = 30, 250, 500.0
    x = rng.standard_normal((n_trials, n_times))
    y = 0.5 * x + rng.standard_normal((n_trials, n_times))

    def spectrum(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        total = 0.0
        for taper in signal.windows.dpss(n_times, 2.0, Kmax=3):
            frequency, found = signal.csd(
                a.ravel(), b.ravel(), rate_hz, taper, n_times, 0, detrend="constant"
            )
            total = total + found
        return total[(frequency >= 30) & (frequency <= 90)]

    expected = np.mean(np.abs(spectrum(x, y)) ** 2 / (spectrum(x, x) * spectrum(y, y)).real)
    first, second = (bands.coefficients(each, rate_hz=rate_hz, band_hz=(30, 90)) for each in (x, y))
    shuffles = spike_field.draw_shuffles(n_trials, n_shuffles=9, n_draws=9, level=0.95, rng=rng)
    found = spike_field.coherence_estimates(first, second, shuffles)
    assert found["value"] == pytest.approx(expected, abs=1e-10)


@pytest.mark.parametrize(
    ("time_bandwidth", "expected"),
    [
        (
            4.0,
            "0.999999999746 0.999999975397 0.99999889519 0.99996965768 0.999436549707 "
            "0.992710115932 0.937468604926 0.699685077369",
        ),
        (
            2.5,
            "0.999997277435 0.999846548459 0.996266859788 0.952425961501 0.714274791767",
        ),
    ],
)
def test_taper_concentrations(time_bandwidth, expected):
    """Eigenvalues of the Slepian sequences, N = 64, from 30-digit arithmetic (own computation).

    Slepian (1978), Bell Syst. Tech. J. 57:1371-1430, defines them.
    """
    wanted = np.array([float(each) for each in expected.split()])
    _, found = signal.windows.dpss(64, time_bandwidth, Kmax=len(wanted), return_ratios=True)
    np.testing.assert_allclose(found, wanted, atol=1e-11)


def test_tapers_keep_their_energy_inside_the_bandwidth():
    """The share of a taper's energy inside +-NW/N is its eigenvalue; all three above .9.

    By numerical integration of the spectrum, beside scipy's own eigenvalues.
    """
    n_times = 250
    tapers = bands.slepian_tapers(n_times)
    np.testing.assert_allclose(tapers @ tapers.T, np.eye(3), atol=1e-10)
    power = np.abs(np.fft.rfft(tapers, 2**18, axis=1)) ** 2
    frequency = np.fft.rfftfreq(2**18)
    inside = power[:, (frequency <= bands.TIME_BANDWIDTH / n_times)]
    share = (2 * inside.sum(axis=1) - inside[:, 0]) / 2**18
    _, ratios = signal.windows.dpss(n_times, bands.TIME_BANDWIDTH, Kmax=3, return_ratios=True)
    np.testing.assert_allclose(share, ratios, atol=1e-4)
    assert share.min() > 0.9
