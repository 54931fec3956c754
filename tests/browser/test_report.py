"""The report in a real browser with the network cut off."""

import pytest

from lfptools.report.leave import write_results
from tests.report_sessions import results


@pytest.fixture(scope="module")
def report(tmp_path_factory):
    return write_results(results(), tmp_path_factory.mktemp("report") / "results")


def test_the_report_opens_offline_and_whole(page, report):
    errors = []
    page.on("pageerror", lambda error: errors.append(str(error)))
    page.on("console", lambda said: errors.append(said.text) if said.type == "error" else None)
    page.goto(report.as_uri())
    assert page.outside == []
    assert errors == []
    sizes = page.eval_on_selector_all("img", "all => all.map(i => [i.naturalWidth, i.alt.length])")
    assert len(sizes) >= 5
    assert all(width > 300 and words > 20 for width, words in sizes)
    headings = page.eval_on_selector_all("h2", "all => all.map(h => h.textContent)")
    for part in ("What was recorded", "In short", "Direction", "Cautions"):
        assert part in headings


@pytest.mark.parametrize("width", [480, 1280, 1920])
def test_the_page_never_scrolls_sideways(page, report, width):
    page.set_viewport_size({"width": width, "height": 800})
    page.goto(report.as_uri())
    overflow = page.evaluate("document.documentElement.scrollWidth - window.innerWidth")
    assert overflow <= 0


def test_folded_tables_open(page, report):
    page.goto(report.as_uri())
    details = page.locator("details").first
    assert not details.evaluate("d => d.open")
    details.locator("summary").click()
    assert details.evaluate("d => d.open")
    assert details.locator("table tr").count() > 1
