"""A session file comes in; a Session goes out, its recordings open and not yet read."""

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

from lfptools.choices import AreaChoice, SourceChoice
from lfptools.errors import ReaderError, SessionFileError
from lfptools.io.channels import contact_depths_um, parse_channels
from lfptools.io.formats import FORMATS
from lfptools.io.session_file import SessionFile, read_session_file
from lfptools.io.stored_units import StoredUnit, pick_units
from lfptools.io.tables import read_events_csv
from lfptools.model import Area, Contacts, Events, Recording, Session, SpikeTrains
from lfptools.units import s_from_ms

_LISTED_BAD = "listed in the session file"


def open_session(session: str | Path | SessionFile) -> Session:
    """Open all that a session file names.

    Parameters
    ----------
    session : str, Path or SessionFile
        The TOML file, or the file already read.

    Returns
    -------
    Session
        Signals, spikes and events on one clock with the known delays applied: a source's
        `delay_ms` is taken off its times, that of the events is added to theirs.

    Raises
    ------
    SessionFileError
        If the session file is wrong or does not fit the recordings.
    ReaderError
        If a recording or table cannot be read rightly.
    """
    found = session if isinstance(session, SessionFile) else read_session_file(session)
    choices = found.choices
    recordings = _recordings(found)
    areas = tuple(
        _area(found, index, area, recordings.get(area.source or ""))
        for index, area in enumerate(choices.area)
    )
    spikes, unit_files = _spikes(found)
    events_path = found.locate(choices.events.file, "events.file")
    events = _events(found, events_path)
    _need_events_inside(events_path, events, list(recordings.values()), spikes)
    files = [found.path, events_path, *unit_files]
    files += [each for recording in recordings.values() for each in recording.files]
    return Session(
        name=choices.session,
        areas=areas,
        events=events,
        choices=choices,
        spikes=spikes,
        subject=choices.subject,
        files=tuple(dict.fromkeys(files)),
    )


def _recordings(found: SessionFile) -> dict[str, Recording]:
    """Open the signals of every source that an area uses, each once."""
    used = {area.source for area in found.choices.area if area.source}
    opened = {}
    for index, source in enumerate(found.choices.source):
        if source.name in used:
            path = found.locate(source.path, f"source[{index}].path ({source.name})")
            recording = FORMATS[source.format].reader("signals")(source, path)
            opened[source.name] = _without_delay(recording, source)
    return opened


def _without_delay(recording: Recording, source: SourceChoice) -> Recording:
    delay_s = s_from_ms(source.delay_ms)
    runs = tuple(replace(run, start_s=run.start_s - delay_s) for run in recording.runs)
    return replace(recording, runs=runs)


def _area(found: SessionFile, index: int, area: AreaChoice, recording: Recording | None) -> Area:
    if recording is None:
        return Area(area.name, layers=dict(area.layers))
    where = f"{found.path}: area[{index}].channels ({area.name})"
    contacts = _contacts(area, recording, where)
    _need_order(found, area, recording, contacts, where)
    return Area(area.name, recording, contacts, dict(area.layers), area.signal_depth_um)


def _contacts(area: AreaChoice, recording: Recording, where: str) -> Contacts:
    channels = np.array(parse_channels(area.channels or ""))
    outside = channels[channels >= recording.n_channels]
    if outside.size:
        raise SessionFileError(
            f"{where} names channel {outside[0]}; source {recording.source!r} holds "
            f"{recording.n_channels} channels, 0 to {recording.n_channels - 1}"
        )
    depth_um = contact_depths_um(area, len(channels))
    bad = np.isin(channels, area.bad)
    return Contacts(channels, depth_um, bad, tuple(_LISTED_BAD if each else "" for each in bad))


def _need_order(
    found: SessionFile, area: AreaChoice, recording: Recording, contacts: Contacts, where: str
) -> None:
    """Refuse channels listed from the tip up where the recording's own geometry says so.

    Only SpikeGLX says which end is the tip; `rel_y` of NWB has no agreed direction.
    """
    source = next(each for each in found.choices.source if each.name == area.source)
    if source.format != "spikeglx" or recording.depth_um is None or len(contacts) < 2:
        return
    if np.all(np.diff(recording.depth_um[contacts.channel]) < 0):
        raise SessionFileError(
            f"{where} is {area.channels!r}; by the recording's geometry this runs from the tip "
            "up; needed are channels from the surface down"
        )


def _spikes(found: SessionFile) -> tuple[SpikeTrains | None, list[Path]]:
    """Read the units of every [[units]], each file once."""
    choices = found.choices
    if not choices.units:
        return None, []
    sources = {each.name: (index, each) for index, each in enumerate(choices.source)}
    stored: dict[str, tuple[Path, list[StoredUnit]]] = {}
    picked: list[tuple[str, StoredUnit, float]] = []
    for units in choices.units:
        index, source = sources[units.source]
        if units.source not in stored:
            path = found.locate(source.path, f"source[{index}].path ({source.name})")
            stored[units.source] = (path, FORMATS[source.format].reader("units")(path))
        path, all_units = stored[units.source]
        shared = sum(each.source == units.source for each in choices.units) > 1
        mine = pick_units(all_units, area=units.area, keep=units.keep, shared=shared, path=path)
        picked += [(units.area, unit, s_from_ms(source.delay_ms)) for unit in mine]
    trains = SpikeTrains(
        unit=tuple(unit.name for _, unit, _ in picked),
        area=tuple(area for area, _, _ in picked),
        depth_um=np.array([unit.depth_um for _, unit, _ in picked]),
        time_s=tuple(unit.time_s - delay_s for _, unit, delay_s in picked),
    )
    return trains, [path for path, _ in stored.values()]


def _events(found: SessionFile, path: Path) -> Events:
    """Read the events, add their delay and mark those left out by hand."""
    choice = found.choices.events
    events = read_events_csv(path)
    dropped = np.zeros(len(events), dtype=bool)
    for row in choice.drop:
        if row >= len(events):
            raise SessionFileError(
                f"{found.path}: events.drop names event {row}; {path} holds {len(events)}, "
                f"counted from 0 to {len(events) - 1}"
            )
        dropped[row] = True
    return replace(events, time_s=events.time_s + s_from_ms(choice.delay_ms), dropped=dropped)


def inside_spans(time_s: np.ndarray, spans_s: Sequence[tuple[float, float]]) -> np.ndarray:
    """Return which times lie in one of the spans, ends included, shape (n_times,)."""
    inside = np.zeros(len(time_s), dtype=bool)
    for first, last in spans_s:
        inside |= (time_s >= first) & (time_s <= last)
    return inside


def _need_events_inside(
    path: Path, events: Events, recordings: list[Recording], spikes: SpikeTrains | None
) -> None:
    """Refuse a table whose events all lie outside what was recorded: its clock is another."""
    spans = [span for recording in recordings for span in recording.spans_s]
    if not recordings and spikes is not None:
        times = np.concatenate([*spikes.time_s, np.empty(0)])
        spans = [(times.min(), times.max())] if times.size else []
    if not inside_spans(events.time_s, spans).any():
        low, high = np.min(spans or np.nan), np.max(spans or np.nan)
        in_ms = inside_spans(s_from_ms(1) * events.time_s, spans).all()
        raise ReaderError(
            f"{path}: all {len(events)} events, {events.time_s.min():g} to "
            f"{events.time_s.max():g} s, lie outside what was recorded, {low:g} to {high:g} s; "
            "needed are times on the clock of the recordings, in s"
            + ("; are they in ms?" if in_ms else "")
        )
