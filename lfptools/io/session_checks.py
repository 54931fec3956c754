"""The choices of a session file come in; what contradicts in them goes out, in words.

Types and single values are checked when the file is decoded; here stands what only two keys
together can get wrong. Every complaint names the key, what was found and what is needed.
"""

from collections.abc import Iterator

import numpy as np

from lfptools.choices import SessionChoices, SourceChoice, Span, UnitsChoice, WindowChoice
from lfptools.io.area_checks import area_complaints, shared_channel_complaints
from lfptools.io.complaint_words import listed, rising, say, source_of
from lfptools.io.formats import FORMATS, SAMPLE_KEYS

_FIELD_WORDS = ("neighbour", "same")


def complaints(choices: SessionChoices) -> Iterator[str]:
    """Yield what contradicts in `choices`, the deepest causes first.

    Parameters
    ----------
    choices : SessionChoices
        As decoded.

    Yields
    ------
    str
        One complaint: key, found, needed. Later ones may follow from earlier ones.
    """
    yield from _names(choices)
    yield from _sources(choices)
    yield from area_complaints(choices)
    yield from shared_channel_complaints(choices)
    yield from _units(choices)
    yield from _clocks(choices)
    yield from _trials(choices)
    yield from _windows(choices)
    yield from _bands(choices)
    yield from _field(choices)


def _names(choices: SessionChoices) -> Iterator[str]:
    tables = {
        "source": [each.name for each in choices.source],
        "area": [each.name for each in choices.area],
        "window": [each.name for each in choices.window],
    }
    for table, names in tables.items():
        for index, name in enumerate(names):
            if name in names[:index]:
                key = f"{table}[{index}].name ({name})"
                yield say(key, name, f"a name that {table}[{names.index(name)}] does not have yet")
    for index, area in enumerate(choices.area):
        if area.name in _FIELD_WORDS:
            yield say(
                f"area[{index}].name",
                area.name,
                f"another name: {' and '.join(_FIELD_WORDS)} are words of coupling.field",
            )


def _sources(choices: SessionChoices) -> Iterator[str]:
    for index, source in enumerate(choices.source):
        where = f"source[{index}]"
        if source.format not in FORMATS:
            yield say(
                f"{where}.format ({source.name})", source.format, f"one of {', '.join(FORMATS)}"
            )
            continue
        yield from _sample_keys(where, source)
        if source.amplifier_hz is not None:
            yield from _band(f"{where}.amplifier_hz ({source.name})", source.amplifier_hz, low=0)


def _sample_keys(where: str, source: SourceChoice) -> Iterator[str]:
    needs = FORMATS[source.format].needs
    for key in SAMPLE_KEYS:
        given = getattr(source, key)
        if key in needs and given is None:
            yield (
                f"{where}.{key} ({source.name}) is missing; format {source.format!r} does not "
                f"carry it: needed are {', '.join(needs)}"
            )
        if key not in needs and given is not None:
            yield say(
                f"{where}.{key} ({source.name})",
                given,
                f"nothing: files of format {source.format!r} carry it",
            )
    if source.gain_uv == 0:
        yield say(f"{where}.gain_uv ({source.name})", source.gain_uv, "a number other than 0")
    if source.dtype is not None and not _is_number_type(source.dtype):
        yield say(
            f"{where}.dtype ({source.name})",
            source.dtype,
            "a type of number such as 'int16', '>i2' or 'float32'",
        )


def _is_number_type(name: str) -> bool:
    try:
        return np.dtype(name).kind in "iuf"
    except (TypeError, ValueError, SyntaxError):
        return False


def _units(choices: SessionChoices) -> Iterator[str]:
    areas = [area.name for area in choices.area]
    seen: list[UnitsChoice] = []
    for index, units in enumerate(choices.units):
        where = f"units[{index}]"
        if units.area not in areas:
            yield say(f"{where}.area", units.area, f"the name of an [[area]]: {listed(areas)}")
        yield from source_of(f"{where}.source ({units.area})", units.source, "units", choices)
        if any((each.area, each.source) == (units.area, units.source) for each in seen):
            yield say(
                f"{where}.source ({units.area})",
                units.source,
                "another source: these units are already listed for this area",
            )
        if units.keep is not None and not units.keep:
            yield say(
                f"{where}.keep ({units.area})", units.keep, "at least one label, or no such key"
            )
        seen.append(units)
    if not choices.units and all(area.source is None for area in choices.area):
        yield (
            "area[0].source is missing and there is no [[units]]; needed is a recording or "
            "units of at least one area"
        )


def _clocks(choices: SessionChoices) -> Iterator[str]:
    used = {
        area.source: f"area[{index}].source ({area.name})"
        for index, area in enumerate(choices.area)
        if area.source
    }
    for index, units in enumerate(choices.units):
        used.setdefault(units.source, f"units[{index}].source ({units.area})")
    clock_of = {each.name: each.clock_name for each in choices.source}
    places = {clock_of[name]: key for name, key in reversed(used.items()) if name in clock_of}
    first, *others = [clock_of[name] for name in used if name in clock_of] or [""]
    for other in others:
        if other != first:
            yield (
                f"{places[other]} is on clock {other!r} and {places[first]} on clock "
                f"{first!r}, and nothing joins them; needed is the same `clock` for both "
                "sources, where they share one"
            )
            return
    yield from _event_clock(choices, first)


def _event_clock(choices: SessionChoices, first: str) -> Iterator[str]:
    clocks = list(dict.fromkeys(each.clock_name for each in choices.source))
    clock = choices.events.clock
    if clock is None:
        if len(clocks) > 1:
            yield (
                "events.clock is missing; there are several clocks, so needed is one of "
                f"{', '.join(clocks)}"
            )
    elif clock not in clocks:
        yield say("events.clock", clock, f"a clock of a [[source]]: {listed(clocks)}")
    elif first and clock != first:
        yield (
            f"events.clock is {clock!r} and the recordings are on clock {first!r}, and nothing "
            f"joins them; needed is {first!r}"
        )


def _trials(choices: SessionChoices) -> Iterator[str]:
    trials = choices.trials
    yield from rising("trials.window_ms", trials.window_ms, "ms")
    yield from rising("trials.baseline_ms", trials.baseline_ms, "ms")
    yield from _within("trials.baseline_ms", trials.baseline_ms, trials.window_ms)
    for row in choices.events.drop:
        if row < 0:
            yield say("events.drop", choices.events.drop, "rows of the table, counted from 0")


def _windows(choices: SessionChoices) -> Iterator[str]:
    areas = [area.name for area in choices.area]
    outer = choices.trials.window_ms
    for index, window in enumerate(choices.window):
        for key, span in _spans(f"window[{index}]", window):
            yield from rising(f"{key} ({window.name})", span, "ms")
            yield from _within(f"{key} ({window.name})", span, outer)
        for name in window.areas or ():
            if name not in areas:
                yield say(
                    f"window[{index}].areas ({window.name})",
                    name,
                    f"the name of an [[area]]: {listed(areas)}",
                )
        for name in window.for_:
            allowed = [each for each in areas if window.holds(each)]
            if name not in allowed:
                yield (
                    f"window[{index}].for.{name} ({window.name}) names no area of this window; "
                    f"needed is one of: {listed(allowed)}"
                )


def _spans(where: str, window: WindowChoice) -> Iterator[tuple[str, Span]]:
    yield f"{where}.span_ms", window.span_ms
    if window.direction_ms is not None:
        yield f"{where}.direction_ms", window.direction_ms
    for area, own in window.for_.items():
        if own.span_ms is not None:
            yield f"{where}.for.{area}.span_ms", own.span_ms


def _bands(choices: SessionChoices) -> Iterator[str]:
    tables = {"coupling": choices.coupling.bands_hz, "direction": choices.direction.bands_hz}
    for table, bands in tables.items():
        for name, band in bands.items():
            yield from _band(f"{table}.bands_hz.{name}", band, low=None)
            if name == "all":
                yield (
                    f"{table}.bands_hz.all has a name that the tables use for all frequencies; "
                    "needed is another name"
                )


def _field(choices: SessionChoices) -> Iterator[str]:
    allowed = [*_FIELD_WORDS, *(area.name for area in choices.area)]
    if choices.coupling.field not in allowed:
        yield say("coupling.field", choices.coupling.field, f"one of {', '.join(allowed)}")


def _within(key: str, span: Span, outer: Span) -> Iterator[str]:
    if span[0] < outer[0] or span[1] > outer[1]:
        yield say(key, list(span), f"a span inside trials.window_ms, {list(outer)}")


def _band(key: str, band: Span, *, low: float | None) -> Iterator[str]:
    """Complain unless the band rises from `low` (included) or, with None, from above 0."""
    starts = band[0] > 0 if low is None else band[0] >= low
    if not (starts and band[0] < band[1]):
        floor = "above 0" if low is None else f"from {low:g}"
        yield say(key, list(band), f"[low, high] in Hz, {floor}, with low below high")
