"""A session file (TOML) comes in, checked choices go out; or plain tables in, a file out."""

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.items import AoT, InlineTable, Item

from lfptools.choices import SessionChoices
from lfptools.errors import SessionFileError
from lfptools.io.decode import decode
from lfptools.io.paths import inside
from lfptools.io.session_checks import complaints
from lfptools.io.whole import write_whole

#: Order of the keys in a written file.
_ORDER = (
    "session", "subject", "root", "source", "area", "units", "events", "trials", "window",
    "clean", "latency", "csd", "rates", "coupling", "direction", "resample",
)  # fmt: skip


@dataclass(frozen=True, slots=True, eq=False)
class SessionFile:
    """A session file as read: where it lies, the root of its paths and the choices in it."""

    path: Path
    root: Path
    choices: SessionChoices

    def locate(self, relative: str, key: str) -> Path:
        """Return the real path of a file that `key` names, inside the root.

        Raises
        ------
        SessionFileError
            If it leads outside the root or is missing.
        """
        return inside(self.root, relative, f"{self.path}: {key}")


def read_session_file(path: str | Path) -> SessionFile:
    """Read and check a session file; the recordings it names must exist but are not opened.

    Parameters
    ----------
    path : str or Path
        The TOML file.

    Returns
    -------
    SessionFile
        With `root` resolved against the folder of the file.

    Raises
    ------
    SessionFileError
        If the file is missing or no TOML, a key is unknown or missing, a value is wrong or
        contradicts another, or a path leads outside the root or to nothing.
    """
    path = Path(path)
    return parse_session_file(session_bytes(path), path)


def parse_session_file(content: bytes, path: Path) -> SessionFile:
    """Check the content of a session file as `read_session_file` does, wherever it comes from.

    Parameters
    ----------
    content : bytes
        The TOML, UTF-8.
    path : Path
        Where it lies or will lie: its folder is where the root starts.

    Raises
    ------
    SessionFileError
        As `read_session_file`.
    """
    choices = decode(_toml(content, path), str(path))
    for complaint in complaints(choices):
        raise SessionFileError(f"{path}: {complaint}")
    root = (path.parent / choices.root).resolve()
    if not root.is_dir():
        raise SessionFileError(f"{path}: root is {choices.root!r}; there is no folder {root}")
    found = SessionFile(path=path, root=root, choices=choices)
    for index, source in enumerate(choices.source):
        found.locate(source.path, f"source[{index}].path ({source.name})")
    found.locate(choices.events.file, "events.file")
    return found


def session_bytes(path: Path) -> bytes:
    """Return what stands in a session file, unread.

    Raises
    ------
    SessionFileError
        If it is missing or cannot be read.
    """
    if path.is_dir():
        raise SessionFileError(f"{path}: is a folder; needed is the session file (TOML) in it")
    try:
        return path.read_bytes()
    except FileNotFoundError:
        raise SessionFileError(f"{path}: there is no such session file") from None
    except OSError as cause:
        raise SessionFileError(f"{path}: cannot be read ({cause})") from cause


def _toml(content: bytes, path: Path) -> dict:
    try:
        return tomllib.loads(content.decode("utf-8"))
    except UnicodeDecodeError as cause:
        raise SessionFileError(f"{path}: is no text in UTF-8 ({cause})") from None
    except tomllib.TOMLDecodeError as cause:  # its text ends with line and column
        hint = _bare_word(content.decode("utf-8"), str(cause))
        raise SessionFileError(f"{path}: is not valid TOML: {cause}{hint}") from None


def _bare_word(text: str, cause: str) -> str:
    """Return a hint where a word without quotes stands for a value."""
    at = re.match(r"Invalid value \(at line (\d+), column (\d+)\)", cause)
    if at is None:
        return ""
    rest = text.split("\n")[int(at[1]) - 1][int(at[2]) - 1 :]
    word = re.match(r"[^\W\d][^\s,\]}#]*", rest)
    if word is None:
        return ""
    if word[0].lower() in ("true", "false", "inf", "nan"):
        return f"; needed is {word[0].lower()}"
    return f'; text needs quotes: "{word[0]}"'


def write_session_file(
    path: str | Path,
    tables: Mapping[str, Any],
    header_comment: str = "",
    *,
    comments: Mapping[str, str] | None = None,
) -> Path:
    """Write a session file, whole or not at all.

    Parameters
    ----------
    path : str or Path
        The TOML file to write.
    tables : mapping
        Keys and tables as in the file, plain dicts and lists; they are checked first.
    header_comment : str
        Lines of comment at the top.
    comments : mapping, optional
        Comment behind a key, by "key" or "table.key"; with several tables of a name it stands
        in the first of them.

    Returns
    -------
    Path
        The file written.

    Raises
    ------
    SessionFileError
        If the tables are no valid session file.
    OutputError
        If the file system refuses.
    """
    choices = decode(dict(tables), str(path))
    for complaint in complaints(choices):
        raise SessionFileError(f"{path}: {complaint}")
    document = tomlkit.document()
    for line in header_comment.splitlines():
        document.add(tomlkit.comment(line))
    if header_comment:
        document.add(tomlkit.nl())
    notes = dict(comments or {})
    for key in (each for each in _ORDER if each in tables):
        value = tables[key]
        document.add(key, _commented(_item(value), key, notes))
    return write_whole(path, tomlkit.dumps(document).encode("utf-8"))


def _item(value: Any) -> Item:
    """Return a value as TOML: tables at the top, inline tables within them."""
    if isinstance(value, Mapping):
        table = tomlkit.table()
        for key, inner in value.items():
            table.add(key, _inline(inner))
        return table
    if isinstance(value, list) and value and isinstance(value[0], Mapping):
        many: AoT = tomlkit.aot()
        for each in value:
            many.append(_item(each))
        return many
    return tomlkit.item(value)


def _inline(value: Any) -> Item:
    if not isinstance(value, Mapping):
        return tomlkit.item(value)
    table: InlineTable = tomlkit.inline_table()
    for key, inner in value.items():
        table.append(key, _inline(inner))
    return table


def _commented(item: Item, key: str, notes: dict[str, str]) -> Item:
    first = item[0] if isinstance(item, AoT) else item
    if key in notes:
        first.comment(notes[key])
    if isinstance(first, tomlkit.items.Table):
        for inner, value in first.items():
            note = notes.get(f"{key}.{inner}")
            if note:
                value.comment(note)
    return item
