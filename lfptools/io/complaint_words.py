"""A key, what was found and what is needed in; a complaint in words out."""

from collections.abc import Iterator, Sequence

from lfptools.choices import SessionChoices, Span
from lfptools.io.formats import FORMATS, holding


def say(key: str, found: object, needed: str) -> str:
    """Return a complaint: key, found, needed."""
    return f"{key} is {found!r}; needed is {needed}"


def listed(names: Sequence[str]) -> str:
    """Return names joined by commas."""
    return ", ".join(names) if names else "none is there"


def rising(key: str, span: Span, unit: str) -> Iterator[str]:
    """Complain unless a span rises."""
    if not span[0] < span[1]:
        yield say(key, list(span), f"[first, last] in {unit} with first below last")


def source_of(key: str, name: str, of: str, choices: SessionChoices) -> Iterator[str]:
    """Complain unless `name` is a source that holds `of`, "signals" or "units"."""
    found = next((each for each in choices.source if each.name == name), None)
    if found is None:
        names = [each.name for each in choices.source]
        yield say(key, name, f"the name of a [[source]]: {listed(names)}")
    elif found.format in FORMATS and of not in FORMATS[found.format].carries:
        yield (
            f"{key} is {name!r}, which has format {found.format!r} and holds no {of}; needed is "
            f"a source of format {' or '.join(holding(of))}"
        )
