"""The page: self-contained, escaped, complete. Read by the standard library's HTML parser."""

from dataclasses import replace
from functools import lru_cache
from html.parser import HTMLParser

import msgspec
import pytest

from lfptools.choices import WindowFor
from lfptools.report.manifest import manifest
from lfptools.report.page import page, windows_table
from lfptools.report.texts import CAUTIONS
from tests.report_sessions import REJECTED, results

VOID = {"meta", "img", "br", "link", "input"}
HOSTILE = {
    "areas": ("<b>S1</b>", "M1 & \"more\""),
    "conditions": ("<script>alert(1)</script>", "</style><img src=x onerror=alert(2)>"),
    "windows": ("{{ 7 * 7 }}", "late</td>"),
    "unit": "<i>u</i>",
    "name": "</title><script>alert(3)</script>",
}  # fmt: skip


class Reader(HTMLParser):
    """Collects tags, attributes and text; fails where tags do not match."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.attributes: list[tuple[str, str, str]] = []
        self.open: list[str] = []
        self.text = ""

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += [(tag, name, value or "") for name, value in attrs]
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        self.text += f"{data} "


@lru_cache
def _page(**options) -> str:
    found = results(**options)
    return page(found, manifest(found, subject="rat 7"))


def _read(text: str) -> Reader:
    reader = Reader()
    reader.feed(text)
    reader.close()
    assert reader.open == []
    return reader


def test_every_section_has_its_figures_with_alternative_text_and_its_tables():
    read = _read(_page())
    for title in ("Evoked waves", "Lags between areas", "Current by depth", "Firing",
                  "Spikes and field", "Direction", "Cautions", "In short"):  # fmt: skip
        assert title in read.text
    alt = [value for tag, name, value in read.attributes if (tag, name) == ("img", "alt")]
    assert len(alt) == read.tags.count("img") == 7
    assert all(len(each) > 40 for each in alt)
    assert read.tags.count("table") == 12  # with areas, trials, windows and settings


def test_windows_are_listed_with_the_spans_that_areas_have_of_their_own():
    early, late = results().choices.window
    early = msgspec.structs.replace(
        early, for_={"M1": WindowFor(span_ms=(20.0, 70.5)), "S1": WindowFor(extremum="peak")}
    )
    late = msgspec.structs.replace(late, areas=["M1"], chosen="on these trials")
    table = windows_table(_with_windows(early, late))
    assert table.headings[:3] == ("window", "areas", "span (ms)")
    assert table.rows == (
        ("early", "S1", "5 to 60", "peak", "0 to 100", "before"),
        ("early", "M1", "20 to 70.5", "trough", "0 to 100", "before"),
        ("late", "M1", "100 to 180", "trough", "100 to 180", "on these trials"),
    )
    plain = windows_table(results())
    assert [row[:2] for row in plain.rows] == [("early", "S1, M1"), ("late", "S1, M1")]
    assert windows_table(_with_windows()) is None
    assert "span for coupling and direction (ms)" in _read(_page()).text


def _with_windows(*windows):
    found = results()
    choices = msgspec.structs.replace(found.choices, window=list(windows))
    return replace(found, choices=choices)


def test_the_smallest_detectable_net_is_explained_only_where_one_is_said():
    explained = "Smallest detectable net: it would have been seen in 80 % of cases."
    assert explained in _read(_page()).text
    assert explained not in _read(_page(with_lfp=False)).text
    found = results()
    leads = tuple(row | {"verdict": "leads", "leader": "S1"} for row in found.rows["verdicts"])
    led = replace(found, rows=found.rows | {"verdicts": leads})
    assert explained not in _read(page(led, manifest(led))).text


def test_nothing_is_loaded_from_outside():
    read = _read(_page())
    loads = ("src", "href", "srcset", "data", "action", "poster", "background")
    sources = [value for _, name, value in read.attributes if name in loads]
    assert sources
    assert all(value.startswith("data:image/png;base64,") for value in sources)
    assert not {"script", "link", "iframe", "object", "base"} & set(read.tags)
    style = _page().partition("<style>")[2].partition("</style>")[0]
    assert "url(" not in style
    assert "@import" not in style


def test_names_never_reach_the_page_as_markup():
    plain, hostile = _read(_page()), _read(_page(**HOSTILE))
    assert set(hostile.tags) == set(plain.tags)  # no <b>, <i> or <script> has come in
    assert hostile.tags.count("img") == plain.tags.count("img")
    assert {name for _, name, _ in hostile.attributes} == {n for _, n, _ in plain.attributes}
    for name in ("<b>S1</b>", "<script>alert(1)</script>", "<i>u</i>0", "{{ 7 * 7 }}"):
        assert name in hostile.text  # shown as it is


def test_the_session_is_described_as_it_was_recorded():
    text = " ".join(_read(_page()).text.split())
    assert "rat 7" in text
    assert "channel 13 at 300 um (dead: steps of 0.1 uV)" in text
    assert f"rejected: 2 ({REJECTED})" in text
    assert "seed" in text.lower()
    assert "trials.window_ms -200, 300" in text


def test_cautions_stand_on_the_page_word_for_word():
    text = _read(_page()).text
    assert "Research use; no medical device, no basis for a clinical or surgical decision" in text
    assert "A lead in time is not proof of a projection" in text
    assert "Arrival order alone is not direction of influence." in text
    assert all(caution in text for caution in CAUTIONS)


def test_what_was_not_recorded_is_named_and_has_no_section():
    text = _read(_page(with_lfp=False)).text
    assert "no LFP was recorded" in text
    assert "Current by depth" not in text
    assert "Firing" in text


@pytest.mark.parametrize("kept", [True, False])
def test_windows_chosen_on_the_same_trials_are_marked(kept):
    found = results()
    windows = [msgspec.structs.replace(each, chosen="before" if kept else "on these trials")
               for each in found.choices.window]  # fmt: skip
    marked = replace(found, choices=msgspec.structs.replace(found.choices, window=windows))
    text = _read(page(marked, manifest(marked))).text
    assert ("The p-values do not account for it." in " ".join(text.split())) is not kept
