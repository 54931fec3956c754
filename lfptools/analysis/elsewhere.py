"""The signal that stands for an area and one window in, a remark out where the two disagree.

One contact stands for an area in all windows. Where the current of a window enters at another
depth, that contact may miss it: its latency row and the row of the sink then tell of two places,
and the latency row must say so.
"""

from dataclasses import replace

import numpy as np

from lfptools.analysis.prepared import Prepared
from lfptools.choices import WindowChoice
from lfptools.evoked import smooth
from lfptools.model import Signals
from lfptools.trials import window_mask
from lfptools.waves import MIN_SNR, ONSET_FRACTION, Search, trial_noise

#: How the remark begins, for readers of the tables.
ELSEWHERE = "this window's strongest"


def elsewhere(prepared: Prepared, area: str, window: WindowChoice) -> str:
    """Say at which depth a window's own current enters, where another contact stands for the area.

    The place is that of the strongest sink (in a window of peaks: source) of the average over
    all estimated conditions, smoothed as the window is, among the contacts that may carry one.
    Nothing is said where that contact or its direct neighbour stands for the area, nor where the
    average there is too noisy for a landmark to be reliable: a place read off noise tells nothing.

    Returns
    -------
    str
        "this window's strongest sink is at 400 um", or an empty text.
    """
    signal = prepared.signals[area]
    if signal.kind != "csd" or not prepared.estimated:
        return ""
    there = strongest_contact(prepared, area, window)
    csd = prepared.csd[area]
    here = int(np.flatnonzero(csd.channel == signal.channel[0])[0])
    if there is None or abs(there - here) <= 1:
        return ""
    kind = "sink" if window.extremum_in(area) == "trough" else "source"
    return f"{ELSEWHERE} {kind} is at {csd.depth_um[there]:g} um"


def strongest_contact(prepared: Prepared, area: str, window: WindowChoice) -> int | None:
    """Return the contact with the strongest average current of one window, or recall it.

    None where its signal-to-noise ratio is too low. The area must have current source density.
    """
    search, sd_s = prepared.search(window, area), prepared.smooth_s[window.name]
    return prepared.basis.estimates.get(
        ("strongest", area, search, sd_s), lambda: _strongest(prepared, area, search, sd_s)
    )


def _strongest(prepared: Prepared, area: str, search: Search, sd_s: float) -> int | None:
    found, mean = prepared.basis.candidates(area, "csd")
    average = smooth(replace(found.signals, data=mean[None]), sd_s, search.reading_span_s)
    inside = window_mask(average.time_s, search.span_s)
    strength = (search.sign * average.data[0][:, inside]).max(axis=1, initial=-np.inf)
    at = int(np.argmax(np.where(found.usable, strength, -np.inf)))
    one = replace(found.signals, data=found.signals.data[:, at : at + 1])
    error = _standard_error(prepared, smooth(one, sd_s, search.reading_span_s), search)
    return at if strength[at] >= MIN_SNR[ONSET_FRACTION[search.onset]] * error else None


def _standard_error(prepared: Prepared, signal: Signals, search: Search) -> float:
    """Return the standard error in the window of an average in which conditions weigh the same."""
    rows = [prepared.rows(name) for name in prepared.estimated]
    errors = [
        trial_noise(signal.data[each], signal.time_s, search)[0] / np.sqrt(each.sum())
        for each in rows
    ]
    return float(np.sqrt(np.square(errors).sum()) / len(errors))
