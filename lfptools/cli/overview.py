"""A session file in, what it opens and what would be used of it out, on the terminal."""

from pathlib import Path

import numpy as np
from rich.console import Console
from rich.markup import escape
from rich.table import Table

from lfptools.clean import find_bad_contacts
from lfptools.cli.doubts import doubts, recordings_of, unit_rates_hz
from lfptools.io.formats import FORMATS
from lfptools.io.opening import open_session
from lfptools.layers import given_contact
from lfptools.model import MIN_CONTACTS, Area, Contacts, Session
from lfptools.trials import sample_span, survey

#: Windows read to look for bad contacts; a full run reads all.
_WINDOWS_LOOKED_AT = 40
#: What a run needs beyond its trials, MB.
_BASE_MB = 350


def show_overview(path: Path) -> None:
    """Print what a session file opens: sources, areas, units, events, bad contacts, memory."""
    session = open_session(path)
    console = Console()
    subject = f", {session.subject}" if session.subject else ""
    console.print(f"session {session.name}{subject}", markup=False)
    for table in (_sources(session), _areas(session), _units(session), _events(session)):
        if table.row_count:
            console.print(table)
    console.print(_interval(session))
    for doubt in doubts(session):
        console.print(f"warning: {doubt}", style="bold", markup=False)
    console.print(f"memory of a run: about {memory_mb(session):.0f} MB")
    console.print("nothing was analysed; `lfptools run` does that")


def memory_mb(session: Session) -> float:
    """Estimate the memory of a run: trials and their currents as 4-byte floats, and work space."""
    values = 0
    for area in session.areas:
        if area.recording is not None and area.contacts is not None:
            first, last = sample_span(session.choices.trials.span_s, area.recording.rate_hz)
            values += len(session.events) * len(area.contacts) * (last - first)
    return _BASE_MB + 3 * 4 * values / 1e6


def show_formats() -> None:
    """Print the recording formats, what each carries and what the user must add."""
    table = Table("format", "what", "carries", escape("needs in [[source]]"))
    for each in FORMATS.values():
        _row(table, each.name, each.what, ", ".join(each.carries), ", ".join(each.needs) or "-")
    Console().print(table)


def _row(table: Table, *cells: str) -> None:
    """Add a row of texts: a name from a file is shown as it is, never read as markup."""
    table.add_row(*map(escape, cells))


def _sources(session: Session) -> Table:
    table = Table("source", "clock", "rate", "channels", "duration", "runs", "amplifier")
    for recording in recordings_of(session):
        corners = recording.amplifier_hz
        _row(
            table,
            recording.source,
            recording.clock,
            f"{recording.rate_hz:g} Hz",
            str(recording.n_channels),
            f"{recording.duration_s:.1f} s",
            str(len(recording.runs)),
            f"{corners[0]:g}-{corners[1]:g} Hz" if corners else "unknown",
        )
    return table


def _areas(session: Session) -> Table:
    table = Table("area", "contacts", "depths", "median SD", "bad contacts")
    for area in session.areas:
        if area.contacts is None:
            _row(table, area.name, "no LFP", "-", "-", "-")
            continue
        depth = area.contacts.depth_um
        contacts, sd_uv = look_at(session, area)
        _need_signal(session, area, contacts)
        _row(
            table,
            area.name,
            str(len(contacts)),
            f"{depth[0]:g} to {depth[-1]:g} um",
            f"{sd_uv:.3g} uV" if np.isfinite(sd_uv) else "unknown",
            _bad(contacts),
        )
    return table


def look_at(session: Session, area: Area) -> tuple[Contacts, float]:
    """Look at a few windows over the recording of an area.

    Returns
    -------
    contacts : Contacts
        Those of the area, bad ones marked.
    sd_uv : float
        Median SD of the windows of good contacts, NaN where no window is whole inside the
        recording. It shows a wrong gain.
    """
    assert area.contacts is not None
    times = session.events.time_s
    some = times[:: max(1, len(times) // _WINDOWS_LOOKED_AT)]
    found = survey(area, some, session.choices.trials.span_s)
    read = np.isfinite(found.step_uv).all(axis=1)
    if not read.any():
        return area.contacts, float("nan")
    contacts = find_bad_contacts(
        area.contacts,
        found.step_uv[read],
        found.local_uv[read],
        factor=session.choices.clean.contact_factor,
    )
    good = ~contacts.bad
    return contacts, float(np.median(found.sd_uv[read][:, good])) if good.any() else float("nan")


def _need_signal(session: Session, area: Area, contacts: Contacts) -> None:
    """Refuse, as a run would, a depth at which no contact can stand for the area."""
    if area.signal_depth_um is not None:
        enough = np.count_nonzero(~contacts.bad) >= MIN_CONTACTS
        density = session.choices.direction.signal == "csd" and bool(enough)
        given_contact(area.name, contacts, area.signal_depth_um, density=density)


def _bad(contacts: Contacts) -> str:
    bad = [
        f"{channel} ({why})"
        for channel, why, is_bad in zip(contacts.channel, contacts.why, contacts.bad, strict=True)
        if is_bad
    ]
    return "; ".join(bad) or "none"


def _units(session: Session) -> Table:
    table = Table("area", "units", "spikes", "depths", "mean rate")
    spikes = session.spikes
    if spikes is None:
        return table
    rate_hz = unit_rates_hz(session)
    for area in dict.fromkeys(spikes.area):
        mine = np.array([where == area for where in spikes.area])
        n_spikes = sum(len(spikes.time_s[unit]) for unit in np.flatnonzero(mine))
        _row(
            table,
            area,
            str(mine.sum()),
            str(n_spikes),
            _depths(spikes.depth_um[mine]),
            f"{rate_hz[mine].mean():.3g} Hz",
        )
    return table


def _depths(depth_um: np.ndarray) -> str:
    known = depth_um[np.isfinite(depth_um)]
    if not known.size:
        return "unknown"
    some = f", {len(depth_um) - len(known)} unknown" if len(known) < len(depth_um) else ""
    return f"{known.min():g} to {known.max():g} um{some}"


def _interval(session: Session) -> str:
    """Return the line on all events: in a table in ms the interval shows it."""
    times = np.sort(session.events.time_s)
    if len(times) < 2:
        return "1 event"
    return f"{len(times)} events, median interval {np.median(np.diff(times)):.3g} s"


def _events(session: Session) -> Table:
    table = Table("condition", "events", "left out by hand", "first", "last")
    condition = np.array(session.events.condition)
    dropped = session.events.dropped
    for name in session.events.conditions:
        rows = condition == name
        times = session.events.time_s[rows]
        out = int(np.count_nonzero(dropped[rows])) if dropped is not None else 0
        _row(table, name, str(len(times)), str(out), f"{times.min():.3f} s", f"{times.max():.3f} s")
    return table
