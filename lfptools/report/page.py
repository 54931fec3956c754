"""Results and their manifest in, one self-contained page (HTML) out that opens offline.

Every text goes through jinja2 with autoescape on; figures stand in the page as PNG data.
"""

import base64
import io
import warnings
from collections.abc import Mapping
from typing import Any

import numpy as np
from jinja2 import Environment, PackageLoader, StrictUndefined
from matplotlib.figure import Figure

from lfptools.analysis.results import Results
from lfptools.plot.marks import Row, chosen
from lfptools.plot.sheets import SHEETS
from lfptools.plot.style import DPI
from lfptools.report.page_tables import PageTable, page_table
from lfptools.report.sentences import SMALLEST, in_short
from lfptools.report.texts import CAUTIONS, CHOSEN_HERE, SECTIONS, SectionText
from lfptools.units import ms_from_s


def page(results: Results, account: Mapping[str, Any]) -> str:
    """Return the report of one session.

    Parameters
    ----------
    results : Results
        Of the session.
    account : mapping
        Its manifest: settings, versions and inputs are printed from there.
    """
    environment = Environment(
        loader=PackageLoader("lfptools.report", "."),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    said = in_short(results)
    return environment.get_template("page.html.j2").render(
        results=results,
        account=account,
        areas=_areas(results, account),
        conditions=_conditions(account),
        windows=windows_table(results),
        chosen_here=_chosen_here(results),
        said=said,
        smallest_said=any(SMALLEST in sentence for each in said for sentence in each.sentences),
        sections=[each for text in SECTIONS if (each := _section(results, text))],
        settings=_flat(account["settings"]),
        cautions=CAUTIONS,
    )


def png_data(figure: Figure) -> str:
    """Return a figure as the data of a PNG for `src`."""
    buffer = io.BytesIO()
    with warnings.catch_warnings():
        # Names may hold characters that the font lacks; the tables print them all.
        warnings.filterwarnings("ignore", message="Glyph .* missing from font")
        figure.savefig(buffer, format="png", dpi=DPI, metadata={"Software": None})
    return "data:image/png;base64," + base64.b64encode(buffer.getvalue()).decode()


def _section(results: Results, text: SectionText) -> dict[str, Any] | None:
    """Return what a section holds, or None where the session recorded nothing for it."""
    tables = [page_table(name, rows) for name in text.tables if (rows := _rows(results, name))]
    if not tables:
        return None
    figures = [
        {"data": png_data(figure), "alt": alt}
        for name, alt in text.figures
        if (figure := SHEETS[name](results)) is not None
    ]
    return {"text": text, "figures": figures, "tables": tables}


def _rows(results: Results, name: str) -> list[Row]:
    if name == "contacts":
        return chosen(results.rows["latencies"], role="contact")
    if name == "latencies":
        return chosen(results.rows["latencies"], role="area")
    return list(results.rows[name])


def _areas(results: Results, account: Mapping[str, Any]) -> PageTable:
    """Return what was recorded in each area."""
    signals = {each["area"]: each for each in account["signals"]}
    spikes = results.cut.spikes
    rows = []
    for area in results.cut.area_names:
        contacts = results.contacts.get(area)
        of_area = signals.get(area)
        bad = [each for each in account["bad_contacts"] if each["area"] == area]
        rows.append(
            (
                area,
                str(len(contacts)) if contacts is not None else "",
                "; ".join(
                    f"channel {each['channel']} at {each['depth_um']:g} um ({each['why']})"
                    for each in bad
                )
                or ("none" if contacts is not None else ""),
                f"{of_area['signal'].upper()} at {of_area['depth_um']:g} um" if of_area else "",
                str(spikes.area.count(area)) if spikes is not None else "",
            )
        )
    headings = ("area", "contacts", "bad contacts", "signal that stands for it", "units")
    return PageTable("Areas, in the order of the pathway", headings, tuple(rows), folded=False)


def _conditions(account: Mapping[str, Any]) -> PageTable:
    """Return the trials by condition."""
    counts = account["trials"]
    rows = tuple(
        (name, str(n_events), str(counts["accepted_by_condition"][name]))
        for name, n_events in counts["events_by_condition"].items()
    )
    why = tuple(
        f"rejected: {count} ({reason})" for reason, count in counts["rejected_by_reason"].items()
    )
    headings = ("condition", "stimuli", "accepted trials")
    return PageTable("Trials", headings, rows, folded=False, notes=why or ("rejected: none",))


def windows_table(results: Results) -> PageTable | None:
    """Return the windows, an area with a span or sign of its own in a line of its own."""
    rows = []
    for window in results.choices.window:
        held = [area for area in results.cut.area_names if window.holds(area)]
        plain = [area for area in held if area not in window.for_]
        groups = [plain] if plain else []
        for areas in groups + [[area] for area in held if area in window.for_]:
            rows.append(
                (
                    window.name,
                    ", ".join(areas),
                    _span_ms(window.span_s(areas[0])),
                    window.extremum_in(areas[0]),
                    _span_ms(window.direction_span_s),
                    window.chosen,
                )
            )
    headings = (
        "window", "areas", "span (ms)", "wave", "span for coupling and direction (ms)",
        "chosen",
    )  # fmt: skip
    return PageTable("Windows", headings, tuple(rows), folded=False) if rows else None


def _span_ms(span_s: tuple[float, float]) -> str:
    return f"{ms_from_s(span_s[0]):g} to {ms_from_s(span_s[1]):g}"


def _chosen_here(results: Results) -> str:
    names = [each.name for each in results.choices.window if each.chosen != "before"]
    return CHOSEN_HERE.format(names=", ".join(names)) if names else ""


def _flat(settings: Mapping[str, Any], before: str = "") -> list[tuple[str, str]]:
    """Return settings as (key, value), nested keys joined by points; what is not set is left out.

    The records of a list are numbered from 1.
    """
    found: list[tuple[str, str]] = []
    for key, value in settings.items():
        name = f"{before}{key}"
        if isinstance(value, Mapping):
            found += _flat(value, f"{name}.")
        elif isinstance(value, list) and value and isinstance(value[0], Mapping):
            for number, each in enumerate(value, start=1):
                found += _flat(each, f"{name} {number}.")
        elif value is not None and not (isinstance(value, list) and not np.size(value)):
            found.append((name, _plain(value)))
    return found


def _plain(value: Any) -> str:
    if isinstance(value, list | tuple):
        return ", ".join(_plain(each) for each in value)
    return f"{value:g}" if isinstance(value, float) else str(value)
