"""The areas of a session file come in; what contradicts in them goes out, in words."""

from collections.abc import Iterator
from itertools import pairwise

import numpy as np

from lfptools.choices import AreaChoice, SessionChoices
from lfptools.errors import InputError
from lfptools.io.channels import contact_depths_um, parse_channels
from lfptools.io.complaint_words import rising, say, source_of
from lfptools.model import MIN_CONTACTS, nearest_contact


def area_complaints(choices: SessionChoices) -> Iterator[str]:
    """Yield what contradicts in each [[area]] by itself, or beside its source."""
    for index, area in enumerate(choices.area):
        where = f"area[{index}]"
        if area.source is None:
            yield from _without_source(where, area)
        else:
            yield from source_of(f"{where}.source ({area.name})", area.source, "signals", choices)
            yield from _contacts(where, area, choices.direction.signal)
        yield from _layers(where, area)


def shared_channel_complaints(choices: SessionChoices) -> Iterator[str]:
    """Yield the first channel that two areas name."""
    owner: dict[tuple[str, int], str] = {}
    for index, area in enumerate(choices.area):
        for channel in parse_channels(area.channels) if area.source and area.channels else ():
            first = owner.setdefault((area.source or "", channel), area.name)
            if first != area.name:
                yield (
                    f"area[{index}].channels ({area.name}) names channel {channel} of source "
                    f"{area.source!r}, which {first} holds; needed is each channel in one area"
                )
                return


def _without_source(where: str, area: AreaChoice) -> Iterator[str]:
    given = ("channels", "pitch_um", "depths_um", "contacts_file", "bad", "signal_depth_um")
    for key in given:
        if getattr(area, key) not in (None, []):
            yield (
                f"{where}.source ({area.name}) is missing; {key} is given, so needed is the "
                "name of a [[source]] with signals"
            )


def _layers(where: str, area: AreaChoice) -> Iterator[str]:
    for layer, span in area.layers.items():
        yield from rising(f"{where}.layers.{layer} ({area.name})", span, "um")
    by_depth = sorted(area.layers.items(), key=lambda each: each[1])
    for (upper, above), (lower, below) in pairwise(by_depth):
        if below[0] < above[1]:
            yield say(
                f"{where}.layers.{lower} ({area.name})",
                list(below),
                f"a layer that does not overlap {upper}, {list(above)}",
            )


def _contacts(where: str, area: AreaChoice, signal: str) -> Iterator[str]:
    if area.channels is None:
        yield f"{where}.channels ({area.name}) is missing; needed are channels such as '0-15'"
        return
    try:
        channels = parse_channels(area.channels)
    except InputError as error:
        yield f"{where}.channels ({area.name}): {error}"
        return
    wrong = list(_depths(where, area, len(channels)))
    yield from wrong
    if not wrong:
        yield from _signal_depth(where, area, channels, signal)
    for channel in area.bad:
        if channel not in channels:
            yield say(
                f"{where}.bad ({area.name})",
                area.bad,
                f"channels of this area (channel {channel} is not in {area.channels!r})",
            )


def _depths(where: str, area: AreaChoice, n_channels: int) -> Iterator[str]:
    ways = ("pitch_um", "depths_um", "contacts_file")
    given = [key for key in ways if getattr(area, key) is not None]
    if area.contacts_file is not None:
        yield (
            f"{where}.contacts_file ({area.name}) is not available yet; needed is pitch_um or "
            "depths_um"
        )
    elif len(given) != 1:
        found = "are given" if given else "are missing"
        yield (
            f"{where}.pitch_um and {where}.depths_um ({area.name}) {found}; needed is exactly "
            "one of them"
        )
    elif area.depths_um is not None:
        key = f"{where}.depths_um ({area.name})"
        if len(area.depths_um) != n_channels:
            yield (
                f"{key} lists {len(area.depths_um)} depths; needed are {n_channels}, one for "
                "each of the area's channels"
            )
        elif not np.all(np.diff(area.depths_um) > 0):
            yield say(
                key,
                area.depths_um,
                "strictly rising depths: channels are listed from the surface down",
            )
        if area.first_depth_um != 0:
            yield say(
                f"{where}.first_depth_um ({area.name})",
                area.first_depth_um,
                "nothing: depths_um already counts from the surface",
            )


def _signal_depth(where: str, area: AreaChoice, channels: list[int], signal: str) -> Iterator[str]:
    """Complain where no contact can stand for the area at the depth that was asked for.

    Contacts that prove bad in the recording are found when its signal is taken.
    """
    if area.signal_depth_um is None:
        return
    depths_um = contact_depths_um(area, len(channels))
    usable = ~np.isin(channels, area.bad)
    if signal == "csd" and np.count_nonzero(usable) >= MIN_CONTACTS:
        usable[[0, -1]] = False  # the outermost carry no current source density
    at = nearest_contact(depths_um, area.signal_depth_um)
    if at is None or not usable[at]:
        there = ", ".join(f"{depth:g}" for depth in depths_um[usable])
        yield say(
            f"{where}.signal_depth_um ({area.name})",
            area.signal_depth_um,
            f"the depth of a contact that can stand for the area, in um: {there or 'none can'}",
        )
