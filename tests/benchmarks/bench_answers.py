"""How long the bench's answers take on the demo's session: median and p95, no pass mark.

    python tests/benchmarks/bench_answers.py [--moves 200] [--seed 1]

3 areas x 16 contacts x 240 trials, 2 conditions, 18 units, simulated in a temporary folder.
Timed in this process, without a browser; other work on the machine counts. For one thread of
the linear algebra set OPENBLAS_NUM_THREADS=1 before it starts.
"""

import argparse
import resource
import tempfile
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import msgspec
import numpy as np

from lfptools.choices import AnalysisChoices, WindowChoice
from lfptools.io.opening import open_session
from lfptools.model import CutSession
from lfptools.simulate import Scenario, simulate, write_demo
from lfptools.trials import cut_trials
from lfpwidgets.answers import Answers


def demo(seed: int) -> CutSession:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name) / "recording"
        write_demo(simulate(Scenario(), rng=np.random.default_rng(seed)), folder)
        return cut_trials(open_session(folder / "session.toml"))


def drags(choices: AnalysisChoices, hand: str, moves: int) -> Iterator[AnalysisChoices]:
    """A window dragged to and fro by up to 20 ms, its span for direction widened with it."""
    for move in range(moves):
        shift_ms = round(50 * np.sin(2 * np.pi * move / moves)) * 0.4
        yield msgspec.structs.replace(
            choices,
            window=[
                shifted(each, shift_ms) if each.name == hand else each for each in choices.window
            ],
        )


def shifted(window: WindowChoice, shift_ms: float) -> WindowChoice:
    span_ms, wide_ms = (
        (max(0.0, first + shift_ms), last + shift_ms)
        for first, last in (window.span_ms, window.direction_ms or window.span_ms)
    )
    return msgspec.structs.replace(
        window, span_ms=span_ms, direction_ms=wide_ms, chosen="on these trials"
    )


def report(name: str, work: list[Callable[[], object]]) -> None:
    took_ms = []
    for each in work:
        start = time.perf_counter()
        each()
        took_ms.append((time.perf_counter() - start) * 1000)
    median, p95, most = np.percentile(took_ms, [50, 95, 100])
    print(f"{name:<44} {median:8.1f} {p95:8.1f} {most:8.1f}   {len(work)}")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--moves", type=int, default=200)
    parser.add_argument("--seed", type=int, default=1)
    asked = parser.parse_args()
    cut = demo(asked.seed)
    start = time.perf_counter()
    answers = Answers(cut)
    print(f"{len(cut.condition)} trials; prepared in {time.perf_counter() - start:.2f} s")
    print(f"{'ms':<44} {'median':>8} {'p95':>8} {'most':>8}   n")
    for hand in ("early", "late"):
        for condition in cut.table.conditions:
            moved = drags(cut.choices, hand, asked.moves)
            report(
                f"quick, {hand} dragged, {condition}",
                [
                    lambda each=each, hand=hand, condition=condition: answers.quick(
                        tuple(each.window), hand, condition, "csd"
                    )
                    for each in moved
                ],
            )
    report("full, first", [lambda: answers.full(cut.choices, "late", "single")])
    report("full, nothing changed", [lambda: answers.full(cut.choices, "late", "single")] * 20)
    for hand in ("early", "late"):
        moved = list(drags(cut.choices, hand, 16))[1:]
        report(
            f"full, {hand} moved",
            [lambda each=each, hand=hand: answers.full(each, hand, "single") for each in moved],
        )
    shown = [
        (area.area, condition, signal)
        for area in cut.areas
        for condition in cut.table.conditions
        for signal in ("csd", "lfp")
    ]
    report("map, first", [lambda each=each: answers.map(*each) for each in shown])
    report("map, again", [lambda each=each: answers.map(*each) for each in shown])
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"peak memory {peak_mb:.0f} MB, simulation included")


if __name__ == "__main__":
    main()
