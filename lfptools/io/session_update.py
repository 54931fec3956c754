"""A session file and windows come in; the file goes out with them, all else byte for byte."""

import hashlib
import shutil
from collections.abc import Mapping, Sequence
from pathlib import Path

from lfptools.choices import WindowChoice
from lfptools.errors import OutputError, SessionFileError
from lfptools.io.session_file import session_bytes
from lfptools.io.session_windows import SignalKind, with_windows
from lfptools.io.whole import whole


def file_digest(path: str | Path) -> str:
    """Return the SHA-256 of a session file, in hexadecimal digits.

    Raises
    ------
    SessionFileError
        If it is missing or cannot be read.
    """
    return content_digest(session_bytes(Path(path)))


def content_digest(content: bytes) -> str:
    """Return the SHA-256 of the content of a session file, in hexadecimal digits."""
    return hashlib.sha256(content).hexdigest()


def update_session_file(
    path: str | Path,
    windows: Sequence[WindowChoice],
    *,
    seen: str,
    direction_signal: SignalKind | None = None,
    was: Mapping[str, str] | None = None,
) -> str:
    """Write windows into a session file, whole or not at all.

    Parameters
    ----------
    path : str or Path
        The session file; a link is followed.
    windows : sequence of WindowChoice
        All windows, in order; see `with_windows`.
    seen : str
        `file_digest` of the file as it was opened. A file that says something else by now is
        left alone.
    direction_signal : "csd" or "lfp", optional
        `[direction] signal`; None leaves it as it is.
    was : mapping, optional
        Name of a window in the file by its present name, where it was renamed.

    Returns
    -------
    str
        Digest of the file as written.

    Raises
    ------
    SessionFileError
        If the file changed since, or would be no valid session file.
    OutputError
        If the file system refuses.
    """
    path = Path(path)
    content = session_bytes(path)
    _need_seen(path, content, seen)
    new = with_windows(content, path, windows, direction_signal=direction_signal, was=was)
    if new == content:
        return seen
    real = path.resolve()
    with whole(real) as part:
        part.write_bytes(new)
        shutil.copymode(real, part)
        _need_seen(path, session_bytes(path), seen)
    return content_digest(new)


def _need_seen(path: Path, content: bytes, seen: str) -> None:
    if content_digest(content) != seen:
        raise SessionFileError(
            f"{path}: changed on disk since it was opened, and nothing was written; open it "
            "again to see what changed, or save under another name"
        )


def save_session_as(
    path: str | Path,
    new_path: str | Path,
    windows: Sequence[WindowChoice],
    *,
    content: bytes | None = None,
    direction_signal: SignalKind | None = None,
    was: Mapping[str, str] | None = None,
) -> Path:
    """Write a session file with other windows beside the one it comes from.

    Parameters
    ----------
    path : str or Path
        The session file it comes from.
    new_path : str or Path
        The file to write, in the same folder, so that its relative paths hold; a bare name
        means that folder. It must not exist.
    windows, direction_signal, was
        As in `update_session_file`.
    content : bytes, optional
        The file as it was opened; by default as it is now. With it, a file that was changed
        or lost meanwhile can still be saved.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    SessionFileError
        If it lies in another folder, or would be no valid session file.
    OutputError
        If it exists, or the file system refuses.
    """
    path, new_path = Path(path), Path(new_path)
    if new_path.parent == Path():
        new_path = path.parent / new_path
    if new_path.parent.resolve() != path.parent.resolve():
        raise SessionFileError(
            f"{new_path}: lies in another folder than {path}; needed is the same folder, for "
            "the paths in it are relative"
        )
    content = session_bytes(path) if content is None else content
    new = with_windows(content, new_path, windows, direction_signal=direction_signal, was=was)
    _need_new(new_path)
    with whole(new_path) as part:
        part.write_bytes(new)
        _need_new(new_path)
    return new_path


def _need_new(path: Path) -> None:
    if path.exists() or path.is_symlink():
        raise OutputError(f"{path}: exists already; needed is a name that is not taken")
