"""A folder and a seed in, a simulated session with its results out, compared with its truth."""

import json
from collections import Counter, defaultdict
from pathlib import Path

import numpy as np
from rich.box import SIMPLE_HEAD
from rich.console import Console
from rich.table import Table

from lfptools.analysis import Results
from lfptools.cli.running import write_session
from lfptools.io.opening import open_session
from lfptools.plot.words import cell, probability, verdict_words
from lfptools.report.leave import need_folder
from lfptools.simulate import Scenario, simulate, write_demo

_NAME = "lfptools-demo"


def next_free(folder: Path) -> Path:
    """Return the next free folder of the demo: lfptools-demo, lfptools-demo-2, ..."""
    number, found = 1, folder / _NAME
    while found.exists():
        number += 1
        found = folder / f"{_NAME}-{number}"
    return found


def run_demo(*, out: Path | None, seed: int, quiet: bool) -> Path:
    """Simulate a session, run it, print the main tables beside the truth; return the report.

    Raises
    ------
    OutputError
        If the folder exists and is not empty.
    """
    console = Console()
    folder = next_free(Path.cwd()) if out is None else out
    need_folder(folder, force=False)
    recording = folder / "recording"
    console.print(
        f"simulating a rat whose whiskers are deflected (seed {seed}): S1, S2 and M1", style="bold"
    )
    write_demo(simulate(Scenario(), rng=np.random.default_rng(seed)), recording)
    path = recording / "session.toml"
    page, results = write_session(
        open_session(path), path, folder / "results", force=False, quiet=quiet
    )
    truth = json.loads((recording / "truth.json").read_text())
    for table in (
        latency_table(results, truth),
        lag_table(results, truth),
        firing_table(results, truth),
        verdict_table(results, truth),
    ):
        console.print(table)
    console.print(
        "S2 responds before M1 and yet leads nothing: evoked waves arrive one after the other "
        "without the areas' ongoing activity being coupled. Arrival is not direction."
    )
    console.print(f"recording: {recording}", soft_wrap=True)
    console.print(f"report: {page}", soft_wrap=True)
    return page


def _table(title: str, *columns: str) -> Table:
    """Return an empty table that fits 80 columns without broken lines."""
    shown = Table(title=title, title_justify="left", box=SIMPLE_HEAD, padding=0)
    for name in columns:
        shown.add_column(name, no_wrap=True)
    return shown


def latency_table(results: Results, truth: dict) -> Table:
    """Return troughs of each area's signal beside the planted ones."""
    known = {
        (each["area"], each["window"], each["condition"], each["signal"], each["channel"]): each
        for each in truth["latencies"]
    }
    shown = _table(
        "When each wave arrives, with 95 % intervals",
        "area", "condition", "window", "trials", "trough (ms)", "planted", "depth (um)",
    )  # fmt: skip
    for row in results.rows["latencies"]:
        if row["role"] != "area":
            continue
        true = known[
            tuple(row[key] for key in ("area", "window", "condition", "signal", "channel"))
        ]
        shown.add_row(
            row["area"],
            row["condition"],
            row["window"],
            str(row["n_trials"]),
            cell(row, "time_ms", "time_lo_ms", "time_hi_ms"),
            "-" if true["trough_ms"] is None else f"{true['trough_ms']:.1f}",
            f"{row['depth_um']:g}",
        )
    return shown


def lag_table(results: Results, truth: dict) -> Table:
    """Return lags of the troughs beside the planted order."""
    order = {(each["window"], each["condition"]): each["areas"] for each in truth["orders"]}
    shown = _table(
        "Lag of the second area's trough behind the first's",
        "pair", "condition", "window", "trials", "lag (ms)", "q", "planted order",
    )  # fmt: skip
    for row in results.rows["lags"]:
        if row["feature"] == "time":
            shown.add_row(
                f"{row['area_a']}, {row['area_b']}",
                row["condition"],
                row["window"],
                str(row["n_trials"]),
                cell(row, "difference_ms", "lo_ms", "hi_ms"),
                probability(row["q"]),
                ", ".join(order[row["window"], row["condition"]]),
            )
    return shown


def firing_table(results: Results, truth: dict) -> Table:
    """Return how many units rise and fall, by area and window."""
    calls = {each["unit"]: each["calls"] for each in truth["units"]}
    found: dict[tuple[str, str, str], Counter] = defaultdict(Counter)
    planted: dict[tuple[str, str, str], Counter] = defaultdict(Counter)
    for row in results.rows["firing"]:
        key = (row["area"], row["condition"], row["window"])
        found[key][row["call"]] += 1
        planted[key][calls[row["unit"]][row["window"]]] += 1
    shown = _table(
        "How many units rise or fall (q <= .05)",
        "area", "condition", "window", "rise", "fall", "none", "planted",
    )  # fmt: skip
    for key, counts in found.items():
        said = ", ".join(f"{count} {call}" for call, count in planted[key].items())
        shown.add_row(*key, *(str(counts[call]) for call in ("rise", "fall", "none")), said)
    return shown


def verdict_table(results: Results, truth: dict) -> Table:
    """Return each verdict beside the planted leader."""
    leader = {
        (each["area_a"], each["area_b"], each["window"]): each["leader"]
        for each in truth["coupling"]
    }
    shown = _table(
        "Which area leads (net Granger causality minus that of reversed time)",
        "pair", "condition", "window", "verdict", "net, first leads", "q", "planted",
    )  # fmt: skip
    for row in results.rows["verdicts"]:
        true = leader[row["area_a"], row["area_b"], row["window"]]
        shown.add_row(
            f"{row['area_a']}, {row['area_b']}",
            row["condition"],
            row["window"],
            verdict_words(row),
            cell(row, "net", "lo", "hi"),
            probability(row["q"]),
            f"{true} leads" if true else "none",
        )
    return shown
