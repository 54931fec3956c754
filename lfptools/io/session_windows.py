"""The content of a session file and windows come in; the content with these windows goes out."""

import re
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any, Literal

import msgspec
import tomlkit

from lfptools.choices import WindowChoice, as_plain
from lfptools.errors import SessionFileError
from lfptools.io.session_blocks import Block, split_blocks
from lfptools.io.session_file import parse_session_file

SignalKind = Literal["csd", "lfp"]
Plain = dict[str, Any]

#: Keys that a new window always states.
_STATED = ("name", "span_ms", "extremum")


def with_windows(
    content: bytes,
    path: Path,
    windows: Sequence[WindowChoice],
    *,
    direction_signal: SignalKind | None = None,
    was: Mapping[str, str] | None = None,
) -> bytes:
    """Return the content of a session file with other windows in it.

    Keys that do not change keep their text, windows that do not change all of it. A new window
    stands behind the one before it; so does, written anew, one that changed its place or its
    areas' own spans (`for`). A removed one takes along its lines from the header to the last
    key and comments directly below; every other line stays.

    Parameters
    ----------
    content : bytes
        A valid session file.
    path : Path
        Where the new one will lie.
    windows : sequence of WindowChoice
        All windows, in order.
    direction_signal : "csd" or "lfp", optional
        `[direction] signal`; None leaves it as it is.
    was : mapping, optional
        Name of a window in the file by its present name, where it was renamed.

    Raises
    ------
    SessionFileError
        If the old or the new content is no valid session file; it names the window at fault.
    """
    old = parse_session_file(content, path).choices
    text = content.decode("utf-8")
    newline = "\r\n" if "\r\n" in text else "\n"
    had = [_plain(each) for each in old.window]
    wanted = [_plain(each) for each in windows]
    places = _places(had, wanted, was or {})
    blocks = split_blocks(text)
    write = _inline if "window" in tomllib.loads(blocks[0].body) else _tables
    blocks = write(blocks, had, wanted, places, newline)
    if direction_signal is not None and direction_signal != old.direction.signal:
        blocks = _with_signal(blocks, direction_signal, newline)
    new = _encoded("".join(block.body + block.rest for block in blocks), path)
    found = parse_session_file(new, path).choices
    signal = direction_signal or old.direction.signal
    expected = msgspec.structs.replace(
        old,
        window=msgspec.convert(wanted, list[WindowChoice]),
        direction=msgspec.structs.replace(old.direction, signal=signal),
    )
    if found != expected:  # a way of writing TOML that the editing above does not know
        raise SessionFileError(
            f"{path}: the windows cannot be written into it without changing something else; "
            "needed is one [[window]] table for each"
        )
    return new


def _plain(window: WindowChoice) -> Plain:
    return {key: _tidy(value) for key, value in as_plain(window).items()}


def _tidy(value: Any) -> Any:
    """Return lists for tuples and whole numbers without a point, as one writes them."""
    if isinstance(value, dict):
        return {key: tidy for key, each in value.items() if (tidy := _tidy(each)) is not None}
    if isinstance(value, list | tuple):
        return [_tidy(each) for each in value]
    return int(value) if isinstance(value, float) and value.is_integer() else value


def _places(had: list[Plain], wanted: list[Plain], was: Mapping[str, str]) -> list[int | None]:
    """Return, for each window wanted, which one of the file it is; None for a new one."""
    index = {window["name"]: at for at, window in enumerate(had)}
    renamed = set(was.values())
    places: list[int | None] = []
    last = -1
    for window in wanted:
        name = window["name"]
        at = index.get(was.get(name, "" if name in renamed else name))
        if at is None or at <= last or had[at]["for"] != window["for"]:
            places.append(None)
        else:
            places.append(at)
            last = at
    return places


def _tables(
    blocks: list[Block],
    had: list[Plain],
    wanted: list[Plain],
    places: list[int | None],
    newline: str,
) -> list[Block]:
    """Write windows that stand, or will stand, as [[window]] tables."""
    owners = _owners(blocks)
    target = dict(zip(places, wanted, strict=True))
    new = []
    for block, owner in zip(blocks, owners, strict=True):
        if owner is not None and owner not in target:
            block = replace(block, body="", rest=re.sub(r"\A[ \t]*\r?\n", "", block.rest))
        elif owner is not None and block.many:
            table: Any = tomlkit.parse(block.body)
            _edit(table["window"][0], had[owner], target[owner])
            block = replace(block, body=_with_newlines(table.as_string(), newline, block.body))
        new.append(block)
    if not had:
        return _appended(new, [_fresh(window) for window in wanted], newline)
    anchor = owners.index(0) - 1
    for window, at in zip(wanted, places, strict=True):
        if at is None:
            new[anchor] = _behind(new[anchor], _fresh(window), newline)
        else:
            anchor = max(index for index, owner in enumerate(owners) if owner == at)
    return new


def _owners(blocks: list[Block]) -> list[int | None]:
    """Return the window that each block is part of: [window.for.X] is of the last [[window]]."""
    owners: list[int | None] = []
    last = -1
    for block in blocks:
        last += block.many and block.keys == ("window",)
        owners.append(last if block.keys[:1] == ("window",) else None)
    return owners


def _inline(
    blocks: list[Block],
    had: list[Plain],
    wanted: list[Plain],
    places: list[int | None],
    newline: str,
) -> list[Block]:
    """Write windows that stand in one list, `window = [{...}, ...]`."""
    table: Any = tomlkit.parse(blocks[0].body)
    array = table["window"]
    for at in sorted(set(range(len(had))) - set(places), reverse=True):
        del array[at]
    for index, (window, place) in enumerate(zip(wanted, places, strict=True)):
        if place is None:
            array.insert(index, _stated(window))
        else:
            _edit(array[index], had[place], window)
    body = _with_newlines(table.as_string(), newline, blocks[0].body)
    return [replace(blocks[0], body=body), *blocks[1:]]


def _with_signal(blocks: list[Block], signal: str, newline: str) -> list[Block]:
    """Write `[direction] signal`, wherever and however that table stands."""
    at = next((i for i, block in enumerate(blocks) if block.keys == ("direction",)), None)
    if at is None and "direction" in tomllib.loads(blocks[0].body):
        at = 0
    if at is None:
        return _appended(blocks, [tomlkit.dumps({"direction": {"signal": signal}})], newline)
    table: Any = tomlkit.parse(blocks[at].body)
    table["direction"]["signal"] = signal
    body = _with_newlines(table.as_string(), newline, blocks[at].body)
    return [*blocks[:at], replace(blocks[at], body=body), *blocks[at + 1 :]]


def _edit(table: Any, had: Plain, window: Plain) -> None:
    """Change the keys that differ, in place."""
    for key, value in window.items():
        if value != had[key]:
            if value is None:
                del table[key]
            else:
                table[key] = value


def _fresh(window: Plain) -> str:
    return tomlkit.dumps({"window": [_stated(window)]})


def _stated(window: Plain) -> Plain:
    """Leave out what is at its default and goes without saying."""
    default = _plain(WindowChoice(name="", span_ms=(0.0, 0.0)))
    return {key: value for key, value in window.items() if key in _STATED or value != default[key]}


def _behind(block: Block, text: str, newline: str) -> Block:
    """Add tables behind the keys of a block, a blank line between."""
    body = _ended(block.body, newline)
    gap = newline if body else ""
    return replace(block, body=body + gap + text.replace("\n", newline))


def _appended(blocks: list[Block], texts: list[str], newline: str) -> list[Block]:
    """Add tables at the end of the file."""
    last = replace(blocks[-1], body=blocks[-1].body + blocks[-1].rest, rest="")
    for text in texts:
        last = _behind(last, text, newline)
    return [*blocks[:-1], last]


def _ended(text: str, newline: str) -> str:
    return text if not text or text.endswith("\n") else text + newline


def _with_newlines(text: str, newline: str, before: str) -> str:
    """Give added lines the line ends of the file; a text that stayed is not touched."""
    if text == before or newline == "\n":
        return text
    return re.sub(r"(?<!\r)\n", newline, text)


def _encoded(text: str, path: Path) -> bytes:
    try:
        return text.encode("utf-8")
    except UnicodeEncodeError as cause:
        raise SessionFileError(f"{path}: a window's name cannot be written ({cause})") from None
