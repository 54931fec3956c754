"""The waves found in a window in, the span that holds them snugly out."""

import math

from lfptools.choices import Span
from lfptools.errors import InputError
from lfpwidgets.quick import QuickAnswer

#: Room left before the earliest onset and after the latest extremum, in times of the rise.
_BEFORE, _AFTER = 1.5, 2.0
#: Rise where no onset was found, s.
_USUAL_RISE_S = 0.005


def around_waves(answer: QuickAnswer, ends_ms: Span) -> Span:
    """Return a span around the waves that were found, ms.

    From one and a half rises (onset to extremum) before each onset to two rises after each
    extremum, over all areas, cut at the trial's ends.

    Raises
    ------
    InputError
        If no wave was found in the window.
    """
    firsts, lasts = [], []
    for wave in answer.waves:
        if not wave.found:
            continue
        known = math.isfinite(wave.onset_s)
        rise_s = wave.time_s - wave.onset_s if known else _USUAL_RISE_S
        firsts.append(wave.time_s - rise_s - _BEFORE * rise_s)
        lasts.append(wave.time_s + _AFTER * rise_s)
    if not firsts:
        raise InputError(
            f"no wave was found in window {answer.window!r}, so there is nothing to snap to; "
            "move it over a wave first"
        )
    return max(1000 * min(firsts), ends_ms[0]), min(1000 * max(lasts), ends_ms[1])
