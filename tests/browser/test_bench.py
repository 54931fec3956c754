"""The bench in a real Chromium, in JupyterLab and as a page of its own, without a network.

Every check reads what the page shows and compares it with what Python computes.
"""

import csv
import shutil
from dataclasses import replace

import pytest

from lfptools import analyse, open_session
from lfptools.cli import main
from lfptools.plot.words import cell, verdict_words
from lfptools.trials import cut_trials
from lfpwidgets.state import BenchState
from tests.browser import servers

ROOT = ".lfp-bench"
EARLY_LAST = '[data-window="early"] .lfp-handle[data-edge="last"]'
EARLY_FIRST = '[data-window="early"] .lfp-handle[data-edge="first"]'


@pytest.fixture(scope="module", params=["page", "lab"])
def bench(request, small_session, tmp_path_factory):
    """Yield (where, address, session file) of a running bench on a session of its own."""
    folder = tmp_path_factory.mktemp(request.param)
    session = shutil.copytree(small_session, folder / "recording") / "session.toml"
    if request.param == "page":
        with servers.page(folder, session) as address:
            yield "page", address, session
    else:
        source = f"import lfpwidgets\nlfpwidgets.Bench({str(session)!r})"
        with servers.lab(folder, source) as address:
            yield "lab", address, session


@pytest.fixture
def shown(bench, page):
    """Open the bench anew on the session as it was written; yield page and session file."""
    where, address, session = bench
    session.with_name("session.bench.json").unlink(missing_ok=True)
    visit(page, where, address)
    yield page, session
    assert page.locator(".lfp-alarm").text_content() == ""


def visit(page, where, address):
    """Load the page; in JupyterLab, run the notebook's cell."""
    page.goto(address)
    if where == "lab":
        page.wait_for_function("window.jupyterapp && window.jupyterapp.shell.currentWidget")
        page.wait_for_selector(".jp-Notebook .jp-Cell")
        page.wait_for_function(
            "async () => { const panel = window.jupyterapp.shell.currentWidget;"
            " await panel.context?.sessionContext?.ready; return !!panel.context; }"
        )
        page.evaluate("window.jupyterapp.commands.execute('notebook:run-all-cells')")
    settled(page)


def settled(page):
    page.wait_for_selector(f'{ROOT}[data-ready="true"]', timeout=90_000)
    page.wait_for_selector(f'{ROOT}[data-full="true"]', timeout=60_000)


def changed(page, do):
    """Do something that starts a new full answer and wait for it."""
    page.evaluate(f"document.querySelector('{ROOT}').dataset.full = 'waiting'")
    do()
    page.wait_for_selector(f'{ROOT}[data-full="true"]', timeout=60_000)


def table(page, caption):
    """Read an answer's table as lists of texts."""
    return page.evaluate(
        """(caption) => {
          const all = [...document.querySelectorAll('.lfp-answers table')];
          const found = all.find((t) => t.caption.textContent.startsWith(caption));
          const rows = found ? [...found.tBodies[0].rows] : [];
          return rows.filter((r) => r.className !== 'lfp-note').map((r) =>
            [...r.cells].map((c) => c.querySelector('summary')?.textContent ?? c.textContent));
        }""",
        caption,
    )


def spans(page):
    return page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll('.lfp-window-table tbody tr')]
          .map((r) => [r.dataset.window, [...r.querySelectorAll('input[type=number]')]
            .map((i) => Number(i.value))]))"""
    )


def expected(session, view_of):
    """Return the rows of `analyse` for the windows that `view_of` leaves a state with."""
    state = BenchState(cut_trials(open_session(session)))
    view_of(state)
    results = analyse(replace(state.cut, choices=state.as_choices()))
    return state.view, results.rows


def same_answers(page, view, rows, window="early"):
    """Compare the page's tables with rows of `analyse`, text by text."""
    here = {"window": window, "condition": view.condition}
    waves = [
        row
        for row in rows["latencies"]
        if row["role"] == "area" and all(row[key] == value for key, value in here.items())
    ]
    assert [line[:3] for line in table(page, "When the wave arrives")] == [
        [
            f"{row['area']} ({row['signal']} {row['depth_um']:g} um)",
            cell(row, "time_ms", "time_lo_ms", "time_hi_ms"),
            cell(row, "onset_ms", "onset_lo_ms", "onset_hi_ms"),
        ]
        for row in waves
    ]
    verdicts = [
        row for row in rows["verdicts"] if all(row[key] == value for key, value in here.items())
    ]
    assert [line[:3] for line in table(page, "Which area leads")] == [
        [f"{row['area_a']}, {row['area_b']}", verdict_words(row), cell(row, "net", "lo", "hi")]
        for row in verdicts
    ]
    assert waves
    assert verdicts


def test_the_first_answer_is_that_of_a_run(shown):
    page, session = shown
    same_answers(page, *expected(session, lambda state: None))
    assert spans(page) == {"early": [5, 40], "late": [100, 200]}


def test_arrow_keys_move_an_edge_by_samples(shown):
    page, session = shown
    step = expected_step = 0.8  # ms: M1 is recorded at 1250 Hz
    page.locator(EARLY_LAST).focus()

    def press():
        for key in ("ArrowLeft", "ArrowLeft", "PageDown", "ArrowRight"):
            page.keyboard.press(key)

    changed(page, press)
    assert spans(page)["early"] == pytest.approx([5, 40 - 11 * step])
    label = page.locator(EARLY_LAST).get_attribute("aria-valuetext")
    assert label == f"early: last edge at {40 - 11 * expected_step:g} ms"
    same_answers(page, *expected(session, lambda s: s.nudge("early", "last", -11)))
    # A burst of keys is one step of undo.
    changed(page, lambda: page.get_by_role("button", name="undo the last change").click())
    assert spans(page)["early"] == [5, 40]


def test_a_window_follows_the_mouse_and_the_answer_is_that_of_its_last_position(shown):
    page, session = shown
    box = page.locator(EARLY_FIRST).bounding_box()
    x, y = box["x"] + box["width"] / 2, box["y"] + 30

    def drag():
        page.mouse.move(x, y)
        page.mouse.down()
        page.mouse.move(x + 8, y, steps=5)
        page.mouse.up()

    changed(page, drag)
    first, last = spans(page)["early"]
    assert first > 5
    assert last == 40
    same_answers(page, *expected(session, lambda s: s.move("early", first, last)))


def test_typed_numbers_condition_and_undo(shown):
    page, session = shown
    field = page.get_by_label("early, last edge in ms")

    def type_it():
        field.fill("32")
        field.press("Enter")

    changed(page, type_it)
    assert spans(page)["early"] == [5, 32]
    changed(page, lambda: page.get_by_label("condition", exact=True).select_option("single"))

    def there(state):
        state.move("early", 5, 32)
        state.show(condition="single")

    same_answers(page, *expected(session, there))
    changed(page, lambda: page.get_by_role("button", name="undo the last change").click())
    assert spans(page)["early"] == [5, 40]


def test_a_typed_text_or_a_span_outside_is_refused_with_a_plain_message(shown):
    page, _ = shown
    field = page.get_by_label("late, last edge in ms")
    field.fill("400")
    field.press("Enter")
    alarm = page.locator(".lfp-alarm")
    page.wait_for_function("document.querySelector('.lfp-alarm').textContent.includes('late')")
    assert "400" in alarm.text_content()
    assert "300" in alarm.text_content()
    assert spans(page)["late"] == [100, 200]
    changed(page, lambda: page.get_by_label("take late in hand").click())


def test_save_reopen_and_run_give_the_numbers_of_the_page(shown, bench, tmp_path):
    page, session = shown
    before = session.read_bytes()
    try:
        field = page.get_by_label("early, last edge in ms")

        def type_it():
            field.fill("30.4")
            field.press("Enter")

        changed(page, type_it)
        page.get_by_role("button", name="write the windows into session.toml").click()
        page.wait_for_function(
            "document.querySelector('.lfp-status').textContent.startsWith('saved: session.toml')"
        )
        text = session.read_text()
        assert "span_ms = [5, 30.4]" in text.replace("5.0,", "5,")
        assert "# after the stimulus; the trough is looked for here" in text
        waves, verdicts = table(page, "When the wave arrives"), table(page, "Which area leads")
        out = tmp_path / "results"
        assert main(["run", str(session), "--out", str(out), "--quiet"]) == 0
        here = {"window": "early", "condition": "pad"}
        found = written(out, "latencies", role="area", **here)
        assert [line[1] for line in waves] == [
            cell(row, "time_ms", "time_lo_ms", "time_hi_ms") for row in found
        ]
        assert all("window chosen on these trials" in row["note"] for row in found)
        assert [line[1:3] for line in verdicts] == [
            [verdict_words(row), cell(row, "net", "lo", "hi")]
            for row in written(out, "verdicts", **here)
        ]
        visit(page, *bench[:2])
        assert spans(page)["early"] == [5, 30.4]
    finally:
        session.write_bytes(before)


def test_windows_are_added_named_snapped_and_removed(shown):
    page, _ = shown
    changed(page, lambda: page.get_by_role("button", name="add a window").click())
    assert "window 3" in spans(page)
    name = page.get_by_label("name of window 3")

    def rename():
        name.fill("<b>rebound</b>")
        name.press("Enter")

    changed(page, rename)
    assert "<b>rebound</b>" in spans(page)
    assert page.locator(f"{ROOT} b").count() == 0  # text, never markup
    changed(page, lambda: page.get_by_label("take early in hand").click())
    changed(page, lambda: page.get_by_role("button", name="set the window in hand").click())
    first, last = spans(page)["early"]
    assert 0 <= first < 14
    assert 24 < last < 80
    changed(page, lambda: page.get_by_role("button", name="remove <b>rebound</b>").click())
    assert list(spans(page)) == ["early", "late"]


def written(folder, name, **wanted):
    """Rows of a table on disk, numbers as numbers."""
    with (folder / f"{name}.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    return [
        {key: float(value) if _is_number(value) else value for key, value in row.items()}
        for row in rows
        if all(row[key] == value for key, value in wanted.items())
    ]


def _is_number(text):
    try:
        float(text)
    except ValueError:
        return False
    return True


def test_nobody_without_the_token_gets_the_page(bench, browser):
    _, address, _ = bench
    context = browser.new_context()
    opened = context.new_page()
    answer = opened.goto(address.split("?")[0])
    assert answer.status in {200, 302, 403}
    assert opened.locator(ROOT).count() == 0
    assert "login" in opened.url or answer.status == 403
    context.close()
