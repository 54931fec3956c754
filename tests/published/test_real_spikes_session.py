"""Real spikes, written out as a spikes-only session and run through `lfptools run`.

Source: data set `neuro` of R's package boot (see data/SOURCES.md), 469 stimuli to a human motor
neurone pool. The figures were derived from the data with R and NumPy: Poisson criterion in bins
[a, b) of 1 ms, times rounded to 1 us, baseline -250 to 0 ms: onset 25 ms; 927 spikes in the
baseline (7.906 a second); 10 spikes in 30-50 ms where 74 are expected.
"""

import csv
import json
from pathlib import Path

import numpy as np
import pytest

from lfptools.cli import main

DATA = Path(__file__).parent / "data" / "boot_neuro.csv"
SESSION = """\
session = "stimulated-unit"

[[source]]
name = "spikes"
format = "table"
path = "spikes.csv"

[[area]]
name = "M1"

[[units]]
area = "M1"
source = "spikes"

[events]
file = "events.csv"

[trials]
window_ms = [-250, 250]
baseline_ms = [-250, 0]

[[window]]
name = "response"
span_ms = [20, 30]

[[window]]
name = "silence"
span_ms = [30, 50]

[[window]]
name = "rebound"
span_ms = [60, 80]
"""


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    folder = tmp_path_factory.mktemp("real")
    with DATA.open(newline="") as file:
        trials = [
            [float(cell) for cell in row if cell != "NA"] for row in list(csv.reader(file))[1:]
        ]
    stimuli_s = 1.0 + np.arange(len(trials))
    (folder / "events.csv").write_text(
        "time_s,condition\n" + "".join(f"{time:.1f},stimulus\n" for time in stimuli_s)
    )
    spikes = [
        f"unit 1,{stimulus + ms / 1000:.7f}\n"
        for stimulus, row in zip(stimuli_s, trials, strict=True)
        for ms in row
    ]
    (folder / "spikes.csv").write_text("unit,time_s\n" + "".join(spikes))
    (folder / "session.toml").write_text(SESSION)
    out = folder / "results"
    assert main(["run", str(folder / "session.toml"), "--out", str(out), "--quiet"]) == 0
    with (out / "firing.csv").open(newline="") as file:
        return {row["window"]: row for row in csv.DictReader(file)}, out


def test_the_response_starts_at_25_ms(results):
    row = results[0]["response"]
    assert row["call"] == "rise"
    assert float(row["latency_ms"]) == 25
    assert float(row["latency_lo_ms"]) >= 24
    assert float(row["latency_hi_ms"]) <= 26
    assert int(row["n_spikes"]) == 163
    assert int(row["n_trials"]) == 469


def test_the_silence_is_a_fall(results):
    row = results[0]["silence"]
    assert row["call"] == "fall"
    assert int(row["n_spikes"]) == 10
    # 10 spikes in 469 windows of 20 ms against 927 in 469 of 250 ms.
    assert float(row["window_hz"]) == pytest.approx(10 / 469 / 0.020, rel=1e-5)
    assert float(row["baseline_hz"]) == pytest.approx(7.906, abs=5e-4)


def test_the_rebound_is_a_rise(results):
    assert results[0]["rebound"]["call"] == "rise"
    assert int(results[0]["rebound"]["n_spikes"]) == 149


def test_what_was_not_recorded_is_named(results):
    said = json.loads((results[1] / "manifest.json").read_text())["not_recorded"]
    assert set(said) == {"latencies", "sinks", "lags", "direction", "verdicts", "coupling"}
    for table in said:
        lines = (results[1] / f"{table}.csv").read_text().splitlines()
        assert len(lines) == 1  # the header alone
