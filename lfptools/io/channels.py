"""The keys of an area that describe its array come in; channel indices and depths go out."""

import re
from collections.abc import Sequence

import numpy as np

from lfptools.choices import AreaChoice
from lfptools.errors import InputError

_PART = re.compile(r"(\d{1,6})(?:-(\d{1,6}))?")


def parse_channels(text: str | Sequence[int]) -> list[int]:
    """Return channel indices from "0-15", "15-0", "0-7,9-15" or a list.

    Parameters
    ----------
    text : str or sequence of int
        Ranges include both ends and count down where the first end is the larger.

    Returns
    -------
    list of int
        In the order given: from the surface down.

    Raises
    ------
    InputError
        If it is empty, not of this form, or names a channel twice.
    """
    found = _expand(text) if isinstance(text, str) else list(text)
    if not found:
        raise InputError(f"{text!r} names no channel; needed is at least one")
    negative = [channel for channel in found if channel < 0]
    if negative:
        raise InputError(f"{text!r} names channel {negative[0]}; channels count from 0")
    twice = [channel for channel in dict.fromkeys(found) if found.count(channel) > 1]
    if twice:
        raise InputError(f"{text!r} names channel {twice[0]} twice; needed is each channel once")
    return found


def contact_depths_um(area: AreaChoice, n_channels: int) -> np.ndarray:
    """Return the depths of an area's contacts in um, shape (n_channels,), as its keys give them."""
    if area.depths_um is not None:
        return np.array(area.depths_um, dtype=float)
    return area.first_depth_um + (area.pitch_um or 0.0) * np.arange(n_channels)


def _expand(text: str) -> list[int]:
    found: list[int] = []
    for part in text.split(","):
        match = _PART.fullmatch(part.strip())
        if not match:
            raise InputError(
                f"{text!r} holds {part.strip()!r}; needed are channels such as '0-15', '15-0' "
                "or '0-7,9-15'"
            )
        first = int(match[1])
        last = int(match[2]) if match[2] else first
        step = 1 if last >= first else -1
        found.extend(range(first, last + step, step))
    return found
