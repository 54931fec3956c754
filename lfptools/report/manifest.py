"""Results and the files they came from in, a plain account of how they were made out."""

import hashlib
import json
import platform
from collections.abc import Iterable, Mapping
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import numpy as np

from lfptools.analysis.results import Results
from lfptools.choices import as_plain
from lfptools.errors import ReaderError

#: Version of the layout of the manifest.
LAYOUT = 1
_PACKAGES = ("lfptools", "numpy", "scipy", "mne", "neo", "h5py", "pandas", "matplotlib")
#: How a signal was chosen whose depth the user gave.
GIVEN = "as given by signal_depth_um"
#: Settings that hold paths: only what lies below the session's root may stand in them.
_PATH_KEYS = ("root", "path", "file", "contacts_file")


def manifest(
    results: Results,
    files: Iterable[Path] = (),
    *,
    root: Path | None = None,
    subject: str | None = None,
    when: Mapping[str, Any] | None = None,
) -> dict[str, Any]:
    """Return what a run was made of; the first key tells a manifest from other files.

    Parameters
    ----------
    results : Results
        Of one session.
    files : iterable of Path
        The inputs; each is read once for its hash.
    root : Path
        Folder to which their names are relative. A file outside is named with its folder
        alone: no absolute path is written.
    subject : str
        Who was recorded, where it is known.
    when : mapping
        Run times, kept apart from all that must be the same in every run.

    Raises
    ------
    ReaderError
        If an input cannot be read.
    """
    return {
        "manifest": LAYOUT,
        "session": results.session,
        "subject": subject,
        "inputs": [_input(Path(each), root) for each in files],
        "settings": _without_absolute_paths(as_plain(results.choices)),
        "windows": [
            {"name": each.name, "span_ms": list(each.span_ms), "chosen": each.chosen}
            for each in results.choices.window
        ],
        "smoothing_sd_ms": {name: round(1000 * sd_s, 6) for name, sd_s in results.smooth_s.items()},
        "signals": signals(results),
        "bad_contacts": bad_contacts(results),
        "trials": trial_counts(results),
        "not_recorded": dict(results.not_recorded),
        "seed": results.choices.resample.seed,
        "versions": versions(),
        "when": dict(when or {}),
    }


def manifest_bytes(account: Mapping[str, Any]) -> bytes:
    """Return a manifest as UTF-8 JSON, in its own order."""
    return (json.dumps(account, indent=2, ensure_ascii=False, allow_nan=False) + "\n").encode()


def signals(results: Results) -> list[dict[str, Any]]:
    """Return the signal that stands for each area."""
    found: dict[str, dict[str, Any]] = {}
    for each in results.signal_averages:
        found.setdefault(
            each.area,
            {
                "area": each.area,
                "signal": each.kind,
                "channel": int(each.channel[0]),
                "depth_um": float(each.depth_um[0]),
                "unit": each.unit,
                "chosen": _how_chosen(results, each.area),
            },
        )
    return list(found.values())


def _how_chosen(results: Results, area: str) -> str:
    trials = results.cut.trials_of(area)
    if trials is not None and trials.signal_depth_um is not None:
        return f"{GIVEN} ({trials.signal_depth_um:g} um)"
    return "from the average over all conditions and windows"


def bad_contacts(results: Results) -> list[dict[str, Any]]:
    """Return the bad contacts of all areas with the reasons."""
    return [
        {
            "area": area,
            "channel": int(contacts.channel[index]),
            "depth_um": float(contacts.depth_um[index]),
            "why": contacts.why[index],
        }
        for area, contacts in results.contacts.items()
        for index in np.flatnonzero(contacts.bad)
    ]


def trial_counts(results: Results) -> dict[str, Any]:
    """Return how many trials there are, accepted by condition, rejected by reason."""
    table = results.cut.table
    return {
        "events": len(table.time_s),
        "accepted": int(table.accepted.sum()),
        "accepted_by_condition": {
            name: int(np.count_nonzero(table.accepted_condition() == name))
            for name in table.conditions
        },
        "events_by_condition": {
            name: int(np.count_nonzero(table.condition == name)) for name in table.conditions
        },
        "rejected_by_reason": table.rejected_by_reason(),
    }


def versions() -> dict[str, str]:
    """Return the versions of Python and of the packages that bear on the numbers."""
    return {"python": platform.python_version()} | {each: _version(each) for each in _PACKAGES}


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:  # run from its source folder
        return "not installed"


def _input(path: Path, root: Path | None) -> dict[str, Any]:
    try:
        with path.open("rb") as file:
            digest = hashlib.file_digest(file, "sha256").hexdigest()
        return {"name": _relative(path, root), "bytes": path.stat().st_size, "sha256": digest}
    except OSError as cause:
        raise ReaderError(f"{path}: cannot be read for its hash ({cause})") from cause


def _relative(path: Path, root: Path | None) -> str:
    real = path.resolve()
    if root is not None and real.is_relative_to(root.resolve()):
        return real.relative_to(root.resolve()).as_posix()
    return Path(*real.relative_to(real.anchor).parts[-2:]).as_posix()


def _without_absolute_paths(settings: Any, key: str = "") -> Any:
    if isinstance(settings, dict):
        return {name: _without_absolute_paths(each, name) for name, each in settings.items()}
    if isinstance(settings, list):
        return [_without_absolute_paths(each) for each in settings]
    if key in _PATH_KEYS and isinstance(settings, str) and Path(settings).is_absolute():
        return Path(settings).name
    return settings
