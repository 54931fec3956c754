"""Bytes or a writing function come in; a file appears whole or not at all."""

import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from lfptools.errors import OutputError


@contextmanager
def whole(path: str | Path) -> Iterator[Path]:
    """Yield a temporary path beside `path`; move it there once the block has succeeded.

    Parameters
    ----------
    path : str or Path
        The file to write. Its folder is made where it is missing.

    Yields
    ------
    Path
        Where to write. It is removed where the block fails, and `path` stays as it was.

    Raises
    ------
    OutputError
        If the file system refuses.
    """
    path = Path(path)
    part = path.with_name(f".{path.name}.{os.getpid()}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        yield part
        os.replace(part, path)
    except OSError as cause:
        raise OutputError(f"{path}: cannot be written ({cause})") from cause
    finally:
        with suppress(OSError):
            part.unlink(missing_ok=True)


def write_whole(path: str | Path, content: bytes) -> Path:
    """Write `content` to `path`, whole or not at all, and return the path.

    Raises
    ------
    OutputError
        If the file system refuses.
    """
    with whole(path) as part:
        part.write_bytes(content)
    return Path(path)
