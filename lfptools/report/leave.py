"""Results in, a folder with everything a run leaves behind out: all of it, or nothing."""

import os
import shutil
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from lfptools.analysis.results import Results
from lfptools.errors import OutputError
from lfptools.io.arrays import write_arrays
from lfptools.io.whole import write_whole
from lfptools.model import Session
from lfptools.report.arrays import arrays
from lfptools.report.manifest import manifest, manifest_bytes
from lfptools.report.methods import methods
from lfptools.report.page import page
from lfptools.report.tables import write_tables

REPORT = "report.html"


def need_folder(folder: str | Path, *, force: bool = False) -> Path:
    """Return `folder`, which must not hold anything yet, or may with `force`.

    Raises
    ------
    OutputError
        If it is a file, cannot be looked into, or is not empty and `force` is not set.
    """
    folder = Path(folder)
    try:
        if not folder.exists():
            return folder
        if not folder.is_dir():
            raise OutputError(f"{folder}: is a file; needed is a folder that is new or empty")
        full = any(folder.iterdir())
    except OSError as cause:
        raise OutputError(f"{folder}: cannot be looked into ({cause})") from cause
    if full and not force:
        raise OutputError(
            f"{folder}: exists and is not empty; needed is a folder that is new or empty "
            "(--force replaces the files of an earlier run)"
        )
    return folder


def write_results(
    results: Results,
    folder: str | Path,
    *,
    session: Session | None = None,
    root: Path | None = None,
    when: Mapping[str, Any] | None = None,
    force: bool = False,
) -> Path:
    """Write tables, arrays, manifest, methods text and page; return the path of report.html.

    All files are built in a folder of their own and moved to `folder` once every one is done.

    Parameters
    ----------
    results : Results
        Of one session.
    folder : str or Path
        New or empty; made where it is missing.
    session : Session
        Where the results come from: its files are named and hashed in the manifest.
    root : Path
        Folder to which the names of those files are relative.
    when : mapping
        Run times for the manifest; by default the time of writing.
    force : bool
        Replace the files of an earlier run; others in the folder stay.

    Raises
    ------
    OutputError
        If the folder is not as needed or the file system refuses.
    ReaderError
        If an input cannot be read for its hash.
    """
    folder = need_folder(folder, force=force)
    account = manifest(
        results,
        session.files if session else (),
        root=root,
        subject=session.subject if session else None,
        when=when or {"written": datetime.now(UTC).isoformat(timespec="seconds")},
    )
    name = f".{folder.name or 'results'}.{os.getpid()}.part"
    # Inside a folder that exists, which may lie on a disk of its own, else beside it.
    part = folder / name if folder.exists() else folder.with_name(name)
    try:
        part.mkdir(parents=True)
        _build(results, account, part)
        _move(part, folder)
    except OSError as cause:
        raise OutputError(f"{folder}: cannot be written ({cause})") from cause
    finally:
        shutil.rmtree(part, ignore_errors=True)
    return folder / REPORT


def _build(results: Results, account: Mapping[str, Any], folder: Path) -> None:
    write_tables(results, folder)
    write_arrays(folder / "arrays.h5", arrays(results))
    write_whole(folder / "manifest.json", manifest_bytes(account))
    write_whole(folder / "methods.md", methods(results).encode())
    write_whole(folder / REPORT, page(results, account).encode())


def _move(part: Path, folder: Path) -> None:
    """Put the finished files in their place: at once where the folder is new."""
    if not folder.exists():
        part.rename(folder)
        return
    for file in sorted(part.iterdir(), key=lambda each: each.name == REPORT):  # the page last
        os.replace(file, folder / file.name)
