"""The text of a session file comes in; it goes out in blocks that can be edited one by one.

Joined again, untouched blocks give back every byte: comments, blank lines, line ends.
"""

import re
import tomllib
from dataclasses import dataclass
from itertools import pairwise

_HEADER = re.compile(r"[ \t]*\[")
_NO_STATEMENT = re.compile(r"[ \t]*(#.*)?\r?\n?\Z")


@dataclass(frozen=True, slots=True)
class Block:
    """A table from its header to the line before the next one; the first block has no header.

    Comments directly below the last key belong to the table; from the next blank line on they
    do not, and neither do those directly above the next header.
    """

    keys: tuple[str, ...]  # path in the header, empty in the first block
    many: bool  # header in double brackets
    body: str  # header and keys
    rest: str  # blank lines and comments that belong to nothing or to what follows


def split_blocks(text: str) -> list[Block]:
    """Return the blocks of a valid TOML text, in order.

    Parameters
    ----------
    text : str
        Valid TOML.

    Returns
    -------
    list of Block
        At least one; `body` and `rest` of all, joined, are `text`.
    """
    # At line feeds alone: TOML knows no other line ends, Python does.
    lines = [line for line in re.split(r"(?<=\n)", text) if line]
    starts = [0, *_headers(lines), len(lines)]
    return [
        _block(lines[first:last], number, is_last=last == len(lines))
        for number, (first, last) in enumerate(pairwise(starts))
    ]


def _headers(lines: list[str]) -> list[int]:
    """Return the lines that are headers.

    Inside an array or a text over several lines what stands before is no whole TOML; that
    tells a header from anything else that begins with a bracket.
    """
    return [
        index
        for index, line in enumerate(lines)
        if _HEADER.match(line) and _is_toml("".join(lines[:index]))
    ]


def _is_toml(text: str) -> bool:
    try:
        tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return False
    return True


def _block(lines: list[str], number: int, *, is_last: bool) -> Block:
    keys, many = _path(lines[0]) if number else ((), False)
    least = 1 if number else 0
    end = len(lines)
    while end > least and _says_nothing(lines, end - 1):
        end -= 1
    if end:
        blank = (at for at in range(end, len(lines)) if not lines[at].strip())
        end = next(blank, len(lines) if is_last else end)
    return Block(keys, many, "".join(lines[:end]), "".join(lines[end:]))


def _says_nothing(lines: list[str], at: int) -> bool:
    """Say whether a line is blank or comment, and not part of a text over several lines."""
    return bool(_NO_STATEMENT.match(lines[at])) and _is_toml("".join(lines[:at]))


def _path(header: str) -> tuple[tuple[str, ...], bool]:
    here, keys = tomllib.loads(header), []
    while isinstance(here, dict) and here:
        ((key, here),) = here.items()
        keys.append(key)
    return tuple(keys), isinstance(here, list)
