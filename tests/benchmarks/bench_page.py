"""How fast the bench follows the hand, in a real Chromium: prints medians and 95 % points.

    python tests/benchmarks/bench_page.py [--where page lab] [--presses 60]

The demo's session (3 areas x 16 contacts x 240 trials), already cut. Times are taken in the
browser: from a key press to the next painted frame with the window in its new place, and to the
answer that belongs to that position. No pass mark: run by hand on a quiet machine.
"""

import argparse
import shutil
import time
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
from playwright.sync_api import sync_playwright

from lfptools.simulate import Scenario, simulate, write_demo
from tests.browser import servers
from tests.browser.conftest import FLAGS
from tests.browser.test_bench import EARLY_LAST, visit

PRESS = """async ([selector, presses]) => {
  const root = document.querySelector('.lfp-bench'), handle = document.querySelector(selector);
  handle.focus();
  const frame = () => new Promise((done) => requestAnimationFrame(() => setTimeout(done, 0)));
  const times = { follow: [], answer: [] };
  for (let i = 0; i < presses; i += 1) {
    const key = i % 20 < 10 ? 'ArrowLeft' : 'ArrowRight';
    const start = performance.now();
    handle.dispatchEvent(new KeyboardEvent('keydown', { key, bubbles: true, cancelable: true }));
    const turn = root.dataset.wanted;
    await frame();
    times.follow.push(performance.now() - start);
    while (root.dataset.answered !== turn) await new Promise((done) => setTimeout(done, 1));
    times.answer.push(performance.now() - start);
    await new Promise((done) => setTimeout(done, 40));
  }
  return times;
}"""

STORM = """async (selector) => {
  const root = document.querySelector('.lfp-bench'), handle = document.querySelector(selector);
  handle.focus();
  for (let i = 0; i < 200; i += 1) {
    const key = i % 2 ? 'ArrowRight' : 'ArrowLeft';
    handle.dispatchEvent(new KeyboardEvent('keydown', { key, bubbles: true, cancelable: true }));
    await new Promise((done) => setTimeout(done, 5));
  }
  const ended = performance.now();
  while (root.dataset.answered !== root.dataset.wanted)
    await new Promise((done) => setTimeout(done, 1));
  return performance.now() - ended;
}"""

FULL = """async (selector) => {
  const root = document.querySelector('.lfp-bench'), handle = document.querySelector(selector);
  handle.focus();
  const start = performance.now();
  const press = { key: 'ArrowLeft', bubbles: true, cancelable: true };
  handle.dispatchEvent(new KeyboardEvent('keydown', press));
  root.dataset.full = 'waiting';
  while (root.dataset.full !== 'true') await new Promise((done) => setTimeout(done, 5));
  return performance.now() - start - 400;  // the pause after which a burst of keys has ended
}"""


def main() -> None:
    """Measure and print."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--where", nargs="+", default=["page", "lab"], choices=["page", "lab"])
    parser.add_argument("--presses", type=int, default=60)
    asked = parser.parse_args()
    with TemporaryDirectory() as folder, sync_playwright() as started:
        recording = Path(folder) / "recording"
        write_demo(simulate(Scenario(), rng=np.random.default_rng(1)), recording)
        browser = started.chromium.launch(executable_path=shutil.which("chromium"), args=FLAGS)
        for where in asked.where:
            own = Path(folder) / where
            own.mkdir()
            session = recording / "session.toml"
            source = f"import lfpwidgets\nlfpwidgets.Bench({str(session)!r})"
            server = servers.page(own, session) if where == "page" else servers.lab(own, source)
            with server as address:
                _measure(browser, where, address, asked.presses)
        browser.close()


def _measure(browser, where: str, address: str, presses: int) -> None:
    page = browser.new_page(viewport={"width": 1280, "height": 900})
    visit(page, where, address)  # cuts the trials and fills the cache
    page.close()
    time.sleep(10)  # the next kernel runs the notebook ahead
    page = browser.new_page(viewport={"width": 1280, "height": 900})
    if where == "page":
        page.goto(address)
        page.wait_for_selector('.lfp-bench[data-ready="true"]', timeout=60_000)
        print(f"{where}: first picture {page.evaluate('performance.now()'):.0f} ms after opening")
    visit(page, where, address)
    times = page.evaluate(PRESS, [EARLY_LAST, presses])
    for name, found in times.items():
        median, high = np.percentile(found, [50, 95])
        print(f"{where}: {name} median {median:.0f} ms, p95 {high:.0f} ms, n = {len(found)}")
    page.wait_for_selector('.lfp-bench[data-full="true"]', timeout=60_000)
    print(
        f"{where}: 200 moves in a second, settled {page.evaluate(STORM, EARLY_LAST):.0f} ms after"
    )
    page.wait_for_selector('.lfp-bench[data-full="true"]', timeout=60_000)
    full = [page.evaluate(FULL, EARLY_LAST) for _ in range(5)]
    print(f"{where}: verdict median {np.median(full):.0f} ms, most {max(full):.0f} ms")
    print(f"{where}: memory of the largest kernel {_kernel_mb():.0f} MB")
    page.close()


def _kernel_mb() -> float:
    """Largest resident memory of any kernel on this machine, MB."""
    found = [0.0]
    for status in Path("/proc").glob("[0-9]*/status"):
        try:
            command = (status.parent / "cmdline").read_text()
            if "ipykernel" in command:
                lines = status.read_text().splitlines()
                found += [float(line.split()[1]) / 1000 for line in lines if "VmHWM" in line]
        except OSError:
            continue
    return max(found)


if __name__ == "__main__":
    main()
