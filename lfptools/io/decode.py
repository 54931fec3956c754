"""The plain tables of a session file come in; typed choices go out, or an error in plain words."""

import copy
import datetime
import math
import re
from collections.abc import Iterator
from typing import Any

import msgspec
from msgspec import inspect

from lfptools.choices import SessionChoices
from lfptools.errors import SessionFileError

Step = str | int | None
_STEP = re.compile(r"\.([^.\[\]]+)|\[(\d+)\]|\[(\.\.\.)\]")
_TYPE = inspect.type_info(SessionChoices)


def decode(raw: dict, where: str) -> SessionChoices:
    """Return `raw` as choices.

    Parameters
    ----------
    raw : dict
        The file's tables as plain dicts and lists.
    where : str
        The file's name, for the message.

    Raises
    ------
    SessionFileError
        If a key is unknown or missing, or a value has the wrong type or is impossible; the
        message names file, key, what was found and what is needed.
    """
    for steps, value in _numbers(raw, []):
        if not math.isfinite(value):
            raise SessionFileError(
                f"{where}: {key_text(raw, steps)} is {value}; needed is a finite number"
            )
    try:
        return msgspec.convert(raw, SessionChoices)
    except msgspec.ValidationError as error:
        raise SessionFileError(f"{where}: {_explain(raw, str(error))}") from None


def key_text(raw: dict, steps: list) -> str:
    """Return a place in the file as a user reads it: `area[0].pitch_um (S1)`."""
    text = ""
    for step in steps:
        text += f"[{step}]" if isinstance(step, int) else f".{step}" if text else str(step)
    if len(steps) >= 2 and isinstance(steps[1], int):
        record = _value_at(raw, steps[:2])
        name = record.get("name", record.get("area")) if isinstance(record, dict) else None
        text += f" ({name})" if isinstance(name, str) and name else ""
    return text


def _numbers(here: Any, steps: list) -> Iterator[tuple[list, float]]:
    if isinstance(here, float):
        yield steps, here
    elif isinstance(here, dict | list):
        for step, value in here.items() if isinstance(here, dict) else enumerate(here):
            yield from _numbers(value, [*steps, step])


def _explain(raw: dict, message: str) -> str:
    """Put the decoder's message into the user's words."""
    reason, _, place = message.partition(" - at `$")
    steps = _named_steps(raw, _steps(place.rstrip("`")), message)
    unknown = re.fullmatch(r"Object contains unknown field `(.*)`", reason)
    missing = re.fullmatch(r"Object missing required field `(.*)`", reason)
    if unknown:
        table = _table_name(steps)
        keys = ", ".join(_keys(_type_at(steps)))
        return f"{key_text(raw, [*steps, unknown[1]])} is no key of {table}; its keys are {keys}"
    if missing:
        key = [*steps, missing[1]]
        return f"{key_text(raw, key)} is missing; needed is {needed(_type_at(key))}"
    found = found_text(_value_at(raw, steps))
    return f"{key_text(raw, steps)} is {found}; needed is {needed(_type_at(steps))}"


def _steps(place: str) -> list[Step]:
    steps: list[Step] = []
    for name, index, any_key in _STEP.findall(place):
        steps.append(None if any_key else int(index) if index else name)
    return steps


def _named_steps(raw: dict, steps: list[Step], message: str) -> list:
    """Replace the decoder's `[...]` by the key it hides: the one that alone brings the message."""
    if None not in steps:
        return steps
    at = steps.index(None)
    for key in _value_at(raw, steps[:at]):
        alone = copy.deepcopy(raw)
        table = _value_at(alone, steps[:at])
        for other in [each for each in table if each != key]:
            del table[other]
        try:
            msgspec.convert(alone, SessionChoices)
        except msgspec.ValidationError as error:
            if str(error) == message:
                return [*steps[:at], key, *steps[at + 1 :]]
    return [step for step in steps if step is not None]


def _value_at(raw: Any, steps: list) -> Any:
    for step in steps:
        raw = raw[step]
    return raw


def _members(kind: inspect.Type) -> tuple[inspect.Type, ...]:
    return kind.types if isinstance(kind, inspect.UnionType) else (kind,)


def _type_at(steps: list) -> inspect.Type:
    here: inspect.Type = _TYPE
    for step in steps:
        here = next(inner for each in _members(here) if (inner := _inner(each, step)) is not None)
    return here


def _inner(kind: inspect.Type, step: str | int) -> inspect.Type | None:
    """Type of the part `step` of a value of type `kind`; None where it has no such part."""
    if isinstance(kind, inspect.StructType):
        return next((each.type for each in kind.fields if each.encode_name == step), None)
    if isinstance(kind, inspect.DictType):
        return kind.value_type
    if isinstance(kind, inspect.ListType):
        return kind.item_type
    if isinstance(kind, inspect.TupleType) and isinstance(step, int):
        return kind.item_types[step]
    return None


def _keys(kind: inspect.Type) -> list[str]:
    records = (each for each in _members(kind) if isinstance(each, inspect.StructType))
    return [each.encode_name for record in records for each in record.fields]


def _table_name(steps: list) -> str:
    if not steps:
        return "a session file"
    name = ".".join(step for step in steps if isinstance(step, str))
    return f"[[{name}]]" if isinstance(steps[-1], int) else f"[{name}]"


def needed(kind: inspect.Type) -> str:
    """Return what a type of the session file needs, in plain words."""
    words = [_needed_one(each) for each in _members(kind) if not isinstance(each, inspect.NoneType)]
    return " or ".join(words)


def _needed_one(kind: inspect.Type) -> str:
    if isinstance(kind, inspect.LiteralType):
        allowed = ", ".join(repr(each) for each in kind.values)
        return f"one of {allowed}" if len(kind.values) > 1 else allowed
    if isinstance(kind, inspect.StrType):
        limit = f" of at most {kind.max_length} characters" if kind.max_length else ""
        return f"a text{limit}, not empty" if kind.min_length else f"a text{limit}"
    if isinstance(kind, inspect.IntType):
        return "a whole number" + _bounds(kind)
    if isinstance(kind, inspect.FloatType):
        return "a number" + _bounds(kind)
    if isinstance(kind, inspect.TupleType):
        return f"a list of {len(kind.item_types)} numbers"
    if isinstance(kind, inspect.ListType):
        if isinstance(kind.item_type, inspect.StructType):
            few = f", at least {kind.min_length}" if kind.min_length else ""
            return f"a list of tables (each begins with its name in double brackets){few}"
        return f"a list, each part {needed(kind.item_type)}"
    return "a table"


def _bounds(kind: inspect.IntType | inspect.FloatType) -> str:
    words = {"gt": "above", "ge": "at least", "lt": "below", "le": "at most"}
    found = [
        f"{word} {value:g}"
        for name, word in words.items()
        if (value := getattr(kind, name)) is not None
    ]
    return " " + " and ".join(found) if found else ""


def found_text(value: Any) -> str:
    """Return what was found, in plain words."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f"the text {value!r}"
    if isinstance(value, int | float):
        return f"the number {value}"
    if isinstance(value, datetime.date | datetime.time):
        return f"the date {value}"
    if isinstance(value, list) and value and isinstance(value[0], dict):
        return f"a list of {len(value)} tables"
    if isinstance(value, list):
        return f"the list {value}" if len(str(value)) < 60 else f"a list of {len(value)}"
    return "a table"
