"""Current source density by depth in, sinks with intervals and each area's signal out."""

from dataclasses import dataclass, replace

import numpy as np

from lfptools.csd import MIN_CONTACTS
from lfptools.model import Signals, Trials
from lfptools.resample import Interval, exceedance_p, percentile_interval
from lfptools.trials import window_mask
from lfptools.waves import Search, landmarks

#: Resampled maps held at a time, in values.
_BLOCK_VALUES = 500_000
ONE_CONTACT = "volume conduction not excluded"


@dataclass(frozen=True, slots=True, eq=False)
class SinkEstimate:
    """The strongest sink (or source) of one window: depths in um, times in s."""

    kind: str  # "sink" or "source"
    depth_um: float
    depth: Interval
    extent_um: float
    onset_s: float
    onset: Interval
    peak_s: float
    peak: Interval
    density_ua_mm3: float
    p: float
    n_trials: int


def lfp_signals(trials: Trials) -> Signals:
    """Return the LFP of the good contacts, (n_trials, n_good, n_times)."""
    good = ~trials.contacts.bad
    data = trials.data_uv if good.all() else trials.data_uv[:, good]
    return Signals(
        area=trials.area,
        kind="lfp",
        channel=trials.contacts.channel[good],
        depth_um=trials.contacts.depth_um[good],
        data=data,
        time_s=trials.time_s,
        rate_hz=trials.rate_hz,
    )


def strongest_sink(
    csd: Signals, usable: np.ndarray, conditions: list[np.ndarray], spans_s: list
) -> int:
    """Return the index of the contact with the most negative average current.

    Taken once per area from the average over all conditions and windows, never per window or
    resample, among the contacts that are `usable` (good, and not the outermost ones).

    Parameters
    ----------
    csd : Signals
        All depths of one area.
    usable : ndarray of bool, shape (n_contacts,)
        Contacts that may stand for the area.
    conditions : list of ndarray of bool
        Trials of each condition that is estimated; each condition weighs the same.
    spans_s : list of (float, float)
        Windows of the area.
    """
    inside = np.any([window_mask(csd.time_s, span) for span in spans_s], axis=0)
    mean = np.mean([csd.data[rows].mean(axis=0, dtype=float) for rows in conditions], axis=0)
    strength = np.where(usable, mean[:, inside].min(axis=1), np.inf)
    return int(np.argmin(strength))


def usable_contacts(trials: Trials) -> np.ndarray:
    """Return which contacts may carry a sink: good, and not the first or last of the array.

    At the ends the second derivative rests on a duplicated contact.
    """
    usable = ~trials.contacts.bad.copy()
    usable[[0, -1]] = False
    return usable


def area_signal(
    trials: Trials,
    csd: Signals | None,
    *,
    kind: str,
    conditions: list[np.ndarray],
    spans_s: list[tuple[float, float]],
) -> Signals:
    """Return the one signal that stands for an area in lags and direction.

    By default the current source density at the strongest sink, which keeps volume conduction
    and the common reference out. With too few contacts, or on request, the LFP of the contact
    with the largest average deflection, marked "volume conduction not excluded".
    """
    if kind == "csd" and csd is not None and usable_contacts(trials).any():
        index = strongest_sink(csd, usable_contacts(trials), conditions, spans_s)
        return _only(csd, index)
    lfp = lfp_signals(trials)
    inside = np.any([window_mask(lfp.time_s, span) for span in spans_s], axis=0)
    mean = np.mean([lfp.data[rows].mean(axis=0, dtype=float) for rows in conditions], axis=0)
    index = int(np.argmax(np.ptp(mean[:, inside], axis=1)))
    few = f"fewer than {MIN_CONTACTS} good contacts; " if kind == "csd" else ""
    return replace(_only(lfp, index), note=few + ONE_CONTACT)


def _only(signals: Signals, index: int) -> Signals:
    return replace(
        signals,
        channel=signals.channel[index : index + 1],
        depth_um=signals.depth_um[index : index + 1],
        data=np.ascontiguousarray(signals.data[:, index : index + 1]),
    )


def layer_at(depth_um: float, layers: dict[str, tuple[float, float]]) -> str:
    """Return the name of the layer that holds `depth_um`, or an empty text."""
    return next((name for name, (top, end) in layers.items() if top <= depth_um < end), "")


def measure_sink(
    csd: Signals,
    usable: np.ndarray,
    rows: np.ndarray,
    search: Search,
    *,
    weights: np.ndarray,
    signs: np.ndarray,
    level: float,
) -> SinkEstimate:
    """Measure the strongest sink (search "trough") or source ("peak") of one window.

    p says only that there is one: the largest average current over depth and time, each depth
    over its SD, against random signs of the trials. Depth, times and their intervals come from
    the resampled maps.

    Parameters
    ----------
    csd : Signals
        All depths of one area, smoothed, baseline taken off.
    usable : ndarray of bool, shape (n_contacts,)
        Contacts that may carry the sink.
    rows : ndarray of bool
        Trials of the condition.
    search : Search
        Window, sign and kind of onset.
    weights, signs : ndarray, shape (n_draws, n_trials), (n_flips + 1, n_trials)
        Shared by all areas.
    level : float
        Coverage of the intervals.
    """
    flank = window_mask(csd.time_s, search.flank_span_s)
    data = csd.data[rows][:, :, flank].astype(float)
    time_s = csd.time_s[flank]
    n_trials = len(data)
    mean = _sink_of(data.mean(axis=0)[None], csd.depth_um, usable, time_s, search)
    draws = _resampled_sinks(data, csd.depth_um, usable, time_s, search, weights)
    intervals = [percentile_interval(each, level=level, n_trials=n_trials) for each in draws[:4]]
    inside = window_mask(time_s, search.span_s)
    return SinkEstimate(
        kind="sink" if search.extremum == "trough" else "source",
        depth_um=float(mean[0][0]),
        depth=intervals[0],
        extent_um=_half_extent(mean[4][0], int(mean[5][0]), csd.depth_um),
        onset_s=float(mean[1][0]),
        onset=intervals[1],
        peak_s=float(mean[2][0]),
        peak=intervals[2],
        density_ua_mm3=float(mean[3][0]),
        p=_sink_p(search.sign * data[:, usable][..., inside], signs),
        n_trials=n_trials,
    )


def _resampled_sinks(
    data: np.ndarray,
    depth_um: np.ndarray,
    usable: np.ndarray,
    time_s: np.ndarray,
    search: Search,
    weights: np.ndarray,
) -> list[np.ndarray]:
    shape = data.shape[1:]
    flat = data.reshape(len(data), -1)
    block = max(1, _BLOCK_VALUES // flat.shape[1])
    parts = [
        _sink_of((weights[i : i + block] @ flat).reshape(-1, *shape), depth_um, usable, time_s,
                 search)
        for i in range(0, len(weights), block)
    ]  # fmt: skip
    return [np.concatenate(each) for each in zip(*parts, strict=True)]


def _sink_of(
    maps: np.ndarray, depth_um: np.ndarray, usable: np.ndarray, time_s: np.ndarray, search: Search
) -> tuple[np.ndarray, ...]:
    """Return depth, onset, peak time, density, depth profile and contact of each map's sink."""
    inside = window_mask(time_s, search.span_s)
    up = search.sign * maps
    strength = np.where(usable[:, None] & inside, up, -np.inf).max(axis=-1)
    contact = np.argmax(strength, axis=1)
    courses = np.take_along_axis(maps, contact[:, None, None], axis=1)[:, 0]
    found = landmarks(courses, time_s, search)
    times = np.where(np.isfinite(found.time_s), found.time_s, time_s[inside][0])
    sample = np.clip(np.rint((times - time_s[0]) / (time_s[1] - time_s[0])), 0, len(time_s) - 1)
    profile = np.take_along_axis(up, sample.astype(int)[:, None, None], axis=2)[..., 0]
    depth = _refined_depth(profile, contact, depth_um)
    nan = np.where(np.isfinite(found.time_s), 0.0, np.nan)
    return depth + nan, found.onset_s, found.time_s, found.amplitude, profile, contact


def _refined_depth(profile: np.ndarray, at: np.ndarray, depth_um: np.ndarray) -> np.ndarray:
    """Depth of the vertex of the parabola through a contact and its two neighbours."""
    rows = np.arange(len(at))
    at = np.clip(at, 1, len(depth_um) - 2)
    x0, x1, x2 = depth_um[at - 1], depth_um[at], depth_um[at + 1]
    y0, y1, y2 = (profile[rows, at + step] for step in (-1, 0, 1))
    left, right = (y1 - y0) / (x1 - x0), (y2 - y1) / (x2 - x1)
    bend = (right - left) / (x2 - x0)
    safe = np.where(bend < 0, bend, -1.0)
    vertex = 0.5 * (x0 + x1) - left / (2 * safe)
    return np.where(bend < 0, np.clip(vertex, 0.5 * (x0 + x1), 0.5 * (x1 + x2)), x1)


def _half_extent(profile: np.ndarray, at: int, depth_um: np.ndarray) -> float:
    """Width along depth at half the peak, linear between contacts, cut at the array's ends."""
    fine = np.linspace(depth_um[0], depth_um[-1], 20 * (len(depth_um) - 1) + 1)
    above = np.interp(fine, depth_um, profile) >= profile[at] / 2
    centre = int(np.searchsorted(fine, depth_um[at]))
    lower = np.flatnonzero(~above[:centre])
    upper = np.flatnonzero(~above[centre:])
    first = fine[lower[-1] + 1] if len(lower) else fine[0]
    last = fine[centre + upper[0] - 1] if len(upper) else fine[-1]
    return float(last - first)


def _sink_p(up: np.ndarray, signs: np.ndarray) -> float:
    n_trials = len(up)
    scale = np.sqrt((up**2).mean(axis=(0, 2), keepdims=True)) + np.finfo(float).tiny
    flat = (up / scale).reshape(n_trials, -1)
    block = max(1, _BLOCK_VALUES // flat.shape[1])
    largest = np.concatenate(
        [(signs[i : i + block] @ flat).max(axis=1) for i in range(0, len(signs), block)]
    )
    return float(exceedance_p(largest[0], largest[1:]))
