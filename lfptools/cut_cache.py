"""A session comes in, its cut trials go out: read back from a cache where they were cut before.

What stands in the cache is what cutting finds: the samples of the accepted trials, the reason
for every other one, the bad contacts. All else is taken from the session as it is now, so that
other windows, spikes or resamples need no new cut.
"""

import hashlib
import json
import os
import zlib
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import replace
from importlib.metadata import distributions
from pathlib import Path
from typing import Any

import numpy as np

from lfptools import clean, trials
from lfptools.choices import SessionChoices, as_plain
from lfptools.errors import OutputError, ReaderError
from lfptools.io.arrays import Arrays, read_arrays, write_arrays
from lfptools.model import Area, CutSession, Session, Trials, TrialTable
from lfptools.trials import Progress, cut_trials, no_progress

#: The cache keeps at most this much; what was not used for longest goes first.
MOST_BYTES = 2_000_000_000

_LAYOUT = 1


def cached_cut(
    session: Session, *, folder: Path | None = None, progress: Progress = no_progress
) -> CutSession:
    """Return what `cut_trials` returns, to the bit, without cutting the same trials twice.

    A cached cut is found again by a hash of all that bears on it: path, size and time of
    change of every recording's files, how they are read, the contacts, the events, `[trials]`
    and `[clean]`, and the version of the code. Samples are not hashed, for reading gigabytes
    would take as long as cutting: a file that is changed and given its old size and time again
    is not noticed. Sessions that no session file describes are cut anew each time.

    Parameters
    ----------
    session : Session
        As opened.
    folder : Path, optional
        Where the cache lies: one file a cut. By default `cache_folder()`.
    progress : callable
        Called with a stage in words and the share done of it, 0 to 1.

    Raises
    ------
    InputError
        If no condition keeps 8 accepted trials, or a recording cannot be read. A cache that
        is broken or cannot be written is no error: the trials are cut.
    """
    key = _key(session)
    folder = cache_folder() if folder is None else folder
    if key is None or folder is None:
        return cut_trials(session, progress=progress)
    path = folder / f"cut-{key}.h5"
    if path.exists():
        progress("reading trials cut before", 0.0)
        found = _read(path, session)
        if found is not None:
            with suppress(OSError):
                os.utime(path)  # the time of the last use
            return found
    cut = cut_trials(session, progress=progress)
    if _key(session) == key:  # else a file changed while it was read
        _keep(path, cut, progress)
    return cut


def cache_folder() -> Path | None:
    """Return the user's cache folder for lfptools, or None where there is no home.

    It lies in XDG_CACHE_HOME, or else in `.cache` in the home folder.

    References
    ----------
    XDG Base Directory Specification, version 0.8: a path that is not absolute is ignored.
    """
    given = Path(os.environ.get("XDG_CACHE_HOME", ""))
    try:
        base = given if given.is_absolute() else Path.home() / ".cache"
    except RuntimeError:  # no home folder
        return None
    return base / "lfptools"


def _key(session: Session) -> str | None:
    """Return the hash of all that bears on cutting, or None where files do not tell it."""
    if not isinstance(session.choices, SessionChoices):
        return None
    recorded = _recorded(session)
    if not recorded or not all(area.recording and area.recording.files for area in recorded):
        return None
    try:
        account = {
            "layout": _LAYOUT,
            "versions": [
                *(each.version for each in distributions(name="lfptools")),
                np.__version__,
            ],
            "code": _code(),
            "areas": [_area_account(area, session.choices) for area in recorded],
            "events": [
                session.events.time_s.tolist(),
                session.events.condition,
                None if session.events.dropped is None else session.events.dropped.tolist(),
            ],
            "trials": as_plain(session.choices.trials),
            "clean": as_plain(session.choices.clean),
        }
    except OSError:  # a file is gone: cutting says so in plain words
        return None
    return hashlib.sha256(json.dumps(account, sort_keys=True).encode()).hexdigest()[:40]


def _recorded(session: Session) -> list[Area]:
    return [area for area in session.areas if area.recording is not None]


def _area_account(area: Area, choices: SessionChoices) -> dict[str, Any]:
    recording, contacts = area.recording, area.contacts
    assert recording is not None
    assert contacts is not None
    source = next(each for each in choices.source if each.name == recording.source)
    return {
        "area": area.name,
        "source": as_plain(source),
        "files": [_file_account(path) for path in recording.files],
        "rate_hz": recording.rate_hz,
        "runs": [(run.first, run.n_samples, run.start_s) for run in recording.runs],
        "gain_uv": recording.gain_uv.tolist(),
        "offset_uv": recording.offset_uv.tolist(),
        "channel": contacts.channel.tolist(),
        "depth_um": contacts.depth_um.tolist(),
        "bad": contacts.why,
    }


def _file_account(path: Path) -> tuple[str, int, int]:
    state = path.stat()
    return str(path.resolve()), state.st_size, state.st_mtime_ns


def _code() -> str:
    """Hash the modules that cut, so that who changes them from a checkout sees the change."""
    found = hashlib.sha256()
    for module in (clean, trials):
        found.update(Path(str(module.__file__)).read_bytes())
    return found.hexdigest()


def _keep(path: Path, cut: CutSession, progress: Progress) -> None:
    """Write a cut into the cache, or leave it where it does not fit or cannot be written."""
    n_bytes = sum(each.data_uv.nbytes for each in cut.areas)
    if n_bytes > MOST_BYTES:
        return
    progress("keeping the trials for the next time", 0.0)
    try:
        path.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
        _make_room(path.parent, MOST_BYTES - n_bytes)
        write_arrays(path, _arrays(cut))
        _make_room(path.parent, MOST_BYTES)
    except (OSError, OutputError):
        progress("the trials could not be kept for the next time", 1.0)


def _make_room(folder: Path, most_bytes: int) -> None:
    """Remove what was not used for longest until the rest holds at most `most_bytes`."""
    used = 0
    for _, n_bytes, path in sorted(_cached(folder), reverse=True):
        used += n_bytes
        if used > most_bytes:
            with suppress(OSError):
                path.unlink()


def _cached(folder: Path) -> Iterator[tuple[int, int, Path]]:
    """Yield (time of last use, size, path) of every cut, those left half written included."""
    for pattern in ("cut-*.h5", ".cut-*.part"):
        for path in folder.glob(pattern):
            with suppress(OSError):
                state = path.stat()
                yield state.st_mtime_ns, state.st_size, path


def _arrays(cut: CutSession) -> Arrays:
    arrays = {}
    words: dict[str, Any] = {"reason": cut.table.reason.tolist(), "why": []}
    for number, area in enumerate(cut.areas):
        arrays[f"{number}/data_uv"] = area.data_uv
        arrays[f"{number}/time_s"] = area.time_s
        arrays[f"{number}/bad"] = area.contacts.bad
        words["why"].append(area.contacts.why)
    # As bytes: JSON keeps every text as it is, HDF5 stops at a zero.
    arrays["words"] = np.frombuffer(json.dumps(words).encode(), dtype=np.uint8)
    return {name: (values, {"crc32": _crc32(values)}) for name, values in arrays.items()}


def _crc32(values: np.ndarray) -> int:
    return zlib.crc32(np.ascontiguousarray(values).data)


def _read(path: Path, session: Session) -> CutSession | None:
    """Return a cached cut with all else as the session has it, or None where it is broken."""
    try:
        stored = read_arrays(path)
        for values, attributes in stored.values():
            if _crc32(values) != attributes["crc32"]:
                return None
        return _cut_session({name: values for name, (values, _) in stored.items()}, session)
    except (ReaderError, KeyError, ValueError, TypeError, IndexError):
        return None


def _cut_session(stored: dict[str, np.ndarray], session: Session) -> CutSession:
    words = json.loads(stored["words"].tobytes())
    table = TrialTable(
        time_s=session.events.time_s,
        condition=np.array(session.events.condition),
        reason=np.array(words["reason"]),
        factors=session.events.factors,
    )
    areas = []
    for number, area in enumerate(_recorded(session)):
        assert area.recording is not None
        assert area.contacts is not None
        bad, why = stored[f"{number}/bad"], tuple(words["why"][number])
        trials_of_area = Trials(
            area=area.name,
            data_uv=stored[f"{number}/data_uv"],
            time_s=stored[f"{number}/time_s"],
            rate_hz=area.recording.rate_hz,
            contacts=replace(area.contacts, bad=bad, why=why),
            amplifier_hz=area.recording.amplifier_hz,
            layers=area.layers,
            signal_depth_um=area.signal_depth_um,
        )
        areas.append(trials_of_area)
    return CutSession(
        name=session.name,
        table=table,
        areas=tuple(areas),
        area_names=tuple(area.name for area in session.areas),
        choices=session.choices,
        spikes=session.spikes,
    )
