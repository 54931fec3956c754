"""A path from a session file comes in; the real file inside the session's root goes out."""

from pathlib import Path

from lfptools.errors import SessionFileError


def inside(root: Path, relative: str, what: str) -> Path:
    """Return the real path of `relative`, which must exist inside `root`.

    Parameters
    ----------
    root : Path
        The session's root.
    relative : str
        The path as the session file gives it, relative to `root`.
    what : str
        Where it stands, for the message: file and key.

    Returns
    -------
    Path
        Absolute, every symbolic link resolved.

    Raises
    ------
    SessionFileError
        If it leads outside `root`, also through a symbolic link, or is missing.
    """
    try:
        real_root = root.resolve()
        real = (real_root / relative).resolve()
        exists = real.exists()
    except (OSError, ValueError, RuntimeError) as cause:  # NUL bytes, links in a circle
        raise SessionFileError(f"{what} is {relative!r}; it cannot be resolved ({cause})") from None
    if not real.is_relative_to(real_root):
        raise SessionFileError(
            f"{what} is {relative!r}, which leads outside the session's root {real_root}; "
            "needed is a path inside it"
        )
    if not exists:
        raise SessionFileError(f"{what} is {relative!r}; there is no such file at {real}")
    return real
