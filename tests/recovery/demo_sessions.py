"""How the demo's answers compare with its known truth, pooled over seeds.

Run as a program for the full size (one file a seed, a run that was stopped goes on):

    python tests/recovery/demo_sessions.py --seeds 20 --cells DIR

or through `test_demo_sessions.py` for the small version.
"""

import argparse
import json
from collections import Counter
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np

from lfptools.analysis import Results, analyse
from lfptools.io.opening import open_session
from lfptools.simulate import Scenario, simulate, write_demo


def one_session(seed: int) -> dict[str, int]:
    """Simulate, write, open and analyse one session; return counts of what came out right."""
    with TemporaryDirectory() as folder:
        path = Path(folder) / "recording"
        write_demo(simulate(Scenario(), rng=np.random.default_rng(seed)), path)
        truth = json.loads((path / "truth.json").read_text())
        results = analyse(open_session(path / "session.toml"))
    return dict(counts(results, truth))


def counts(results: Results, truth: dict) -> Counter:
    """Count rows by what is right in them."""
    found: Counter = Counter()
    _latencies(results, truth, found)
    _orders(results, truth, found)
    _verdicts(results, truth, found)
    _firing(results, truth, found)
    _contacts(results, truth, found)
    return found


def _latencies(results: Results, truth: dict, found: Counter) -> None:
    known = {
        (each["area"], each["window"], each["condition"], each["signal"], each["channel"]): each
        for each in truth["latencies"]
    }
    table = results.table("latencies")
    for row in table[table["role"] == "area"].itertuples():
        true = known[row.area, row.window, row.condition, row.signal, row.channel]
        found["troughs"] += 1
        found["troughs not found"] += np.isnan(row.time_ms)
        found["troughs within 2 ms"] += abs(row.time_ms - true["trough_ms"]) <= 2
        found["trough intervals that hold the truth"] += (
            row.time_lo_ms <= true["trough_ms"] <= row.time_hi_ms
        )
        found["onset intervals that hold the truth"] += (
            row.onset_lo_ms <= true["onset_ms"] <= row.onset_hi_ms
        )
        error_us = round(1000 * (row.time_ms - true["trough_ms"]))
        found[f"sum of trough errors, {row.window} (us)"] += error_us
        width_us = round(1000 * (row.time_hi_ms - row.time_lo_ms))
        found[f"sum of trough interval widths, {row.window} (us)"] += width_us


def _orders(results: Results, truth: dict, found: Counter) -> None:
    table = results.table("latencies")
    table = table[table["role"] == "area"]
    for true in truth["orders"]:
        rows = table[
            (table["window"] == true["window"]) & (table["condition"] == true["condition"])
        ]
        found["orders"] += 1
        found["orders right"] += list(rows.sort_values("time_ms")["area"]) == true["areas"]


def _verdicts(results: Results, truth: dict, found: Counter) -> None:
    leader = {
        (each["area_a"], each["area_b"], each["window"]): each["leader"]
        for each in truth["coupling"]
    }
    for row in results.table("verdicts").itertuples():
        true = leader[row.area_a, row.area_b, row.window]
        found["verdicts"] += 1
        found[f"verdict: {row.verdict}"] += 1
        if true is None:
            found["uncoupled rows"] += 1
            found["uncoupled rows with a lead"] += row.verdict == "leads"
            found["verdicts right"] += row.verdict == "no lead shown"
        else:
            found["coupled rows"] += 1
            found["coupled rows with the true leader"] += row.leader == true
            found["coupled rows with the wrong leader"] += (
                row.verdict == "leads" and row.leader != true
            )
            found["verdicts right"] += row.verdict == "leads" and row.leader == true


def _firing(results: Results, truth: dict, found: Counter) -> None:
    calls = {each["unit"]: each["calls"] for each in truth["units"]}
    for row in results.table("firing").itertuples():
        found[f"calls {row.window}"] += 1
        found[f"calls {row.window} right"] += row.call == calls[row.unit][row.window]


def _contacts(results: Results, truth: dict, found: Counter) -> None:
    true = {(each["area"], each["channel"]): each["kind"] for each in truth["bad_contacts"]}
    for area, contacts in results.contacts.items():
        for channel, bad in zip(contacts.channel, contacts.bad, strict=True):
            kind = true.get((area, int(channel)), "good")
            found[f"{kind} contacts"] += 1
            found[f"{kind} contacts marked bad"] += bool(bad)
    rejected = set(np.flatnonzero(~results.cut.table.accepted).tolist())
    artefacts = set(truth["artefact_events"])
    found["artefact trials"] += len(artefacts)
    found["artefact trials rejected"] += len(artefacts & rejected)
    found["clean trials"] += len(results.cut.table.time_s) - len(artefacts)
    found["clean trials rejected"] += len(rejected - artefacts)


def pooled(n_seeds: int, cells: Path) -> Counter:
    """Return the counts over seeds 1 to n, computing what is not there yet."""
    cells.mkdir(parents=True, exist_ok=True)
    total: Counter = Counter()
    for seed in range(1, n_seeds + 1):
        cell = cells / f"seed-{seed}.json"
        if not cell.exists():
            part = cell.with_suffix(".part")
            part.write_text(json.dumps({k: int(v) for k, v in one_session(seed).items()}))
            part.replace(cell)
        total.update(json.loads(cell.read_text()))
    return total


def show(total: Counter, n_seeds: int) -> str:
    """Return the counts in words, shares with their Monte Carlo error."""
    lines = [f"seeds 1 to {n_seeds}, none left out"]
    for name, whole in (
        ("troughs within 2 ms", "troughs"),
        ("trough intervals that hold the truth", "troughs"),
        ("onset intervals that hold the truth", "troughs"),
        ("orders right", "orders"),
        ("verdicts right", "verdicts"),
        ("uncoupled rows with a lead", "uncoupled rows"),
        ("coupled rows with the true leader", "coupled rows"),
        ("coupled rows with the wrong leader", "coupled rows"),
        ("verdict: withheld", "verdicts"),
        ("calls early right", "calls early"),
        ("calls late right", "calls late"),
        ("dead contacts marked bad", "dead contacts"),
        ("noisy contacts marked bad", "noisy contacts"),
        ("good contacts marked bad", "good contacts"),
        ("artefact trials rejected", "artefact trials"),
        ("clean trials rejected", "clean trials"),
    ):
        share = total[name] / total[whole]
        error = np.sqrt(share * (1 - share) / total[whole])
        lines.append(f"{name}: {total[name]} of {total[whole]} ({share:.3f} +- {error:.3f})")
    for window in ("early", "late"):
        half = total["troughs"] / 2
        bias = total[f"sum of trough errors, {window} (us)"] / half / 1000
        width = total[f"sum of trough interval widths, {window} (us)"] / half / 1000
        lines.append(f"{window} troughs: mean error {bias:+.2f} ms, mean interval {width:.2f} ms")
    return "\n".join(lines)


def main() -> None:
    """Run the full size and print it."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--seeds", type=int, default=20)
    parser.add_argument("--cells", type=Path, required=True, help="folder for one file a seed")
    asked = parser.parse_args()
    print(show(pooled(asked.seeds, asked.cells), asked.seeds))


if __name__ == "__main__":
    main()
