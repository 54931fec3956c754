"""Current source density by depth in, sinks with intervals and each area's signal out."""

from dataclasses import dataclass, replace

import numpy as np

from lfptools.csd import MIN_CONTACTS
from lfptools.errors import InputError
from lfptools.model import Contacts, Signals, Trials
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
    every, good = _all_contacts(trials), ~trials.contacts.bad
    if good.all():
        return every
    return replace(
        every,
        channel=every.channel[good],
        depth_um=every.depth_um[good],
        data=every.data[:, good],
    )


def _all_contacts(trials: Trials) -> Signals:
    return Signals(
        area=trials.area,
        kind="lfp",
        channel=trials.contacts.channel,
        depth_um=trials.contacts.depth_um,
        data=trials.data_uv,
        time_s=trials.time_s,
        rate_hz=trials.rate_hz,
    )


def usable_contacts(trials: Trials) -> np.ndarray:
    """Return which contacts may carry a sink: good, and not the first or last of the array.

    At the ends the second derivative rests on a duplicated contact.
    """
    return _may_stand(trials.contacts, density=True)


def _may_stand(contacts: Contacts, *, density: bool) -> np.ndarray:
    usable = ~contacts.bad
    if density:
        usable[[0, -1]] = False
    return usable


@dataclass(frozen=True, slots=True, eq=False)
class Candidates:
    """The signals of which one will stand for an area."""

    signals: Signals
    usable: np.ndarray  # (n_signals,) bool
    note: str = ""
    given: int | None = None  # index of the one that the user named


def candidates(trials: Trials, csd: Signals | None, kind: str) -> Candidates:
    """Return the signals of which one will stand for the area.

    By default the current source density at the contacts that may carry a sink, which keeps
    volume conduction and the common reference out. With too few contacts, or on request, the
    LFP of the good contacts, marked "volume conduction not excluded".

    Raises
    ------
    InputError
        If the trials name a depth (`signal_depth_um`) at which no contact may stand for it.
    """
    usable = usable_contacts(trials)
    if kind == "csd" and csd is not None and usable.any():
        return Candidates(csd, usable, given=_given(trials, density=True))
    few = f"fewer than {MIN_CONTACTS} good contacts; " if kind == "csd" else ""
    good = ~trials.contacts.bad
    return Candidates(_all_contacts(trials), good, few + ONE_CONTACT, _given(trials, density=False))


def _given(trials: Trials, *, density: bool) -> int | None:
    if trials.signal_depth_um is None:
        return None
    return given_contact(trials.area, trials.contacts, trials.signal_depth_um, density=density)


def given_contact(area: str, contacts: Contacts, depth_um: float, *, density: bool) -> int:
    """Return the index of the contact that the user chose to stand for an area.

    Parameters
    ----------
    area : str
        For the message.
    contacts : Contacts
        Of the area, bad ones marked.
    depth_um : float
        `signal_depth_um` of the session file.
    density : bool
        Whether current source density stands for the area, or the LFP.

    Raises
    ------
    InputError
        If no contact can stand for the area there; it names those that can.
    """
    usable = _may_stand(contacts, density=density)
    at = contacts.nearest(depth_um)
    if at is not None and usable[at]:
        return at
    listed = ", ".join(f"{depth:g}" for depth in contacts.depth_um[usable])
    raise InputError(
        f"signal_depth_um of area {area} is {depth_um:g} um, {_why_not(contacts, at)}; "
        f"needed is the depth of a contact that can stand for the area: {listed} um"
    )


def _why_not(contacts: Contacts, at: int | None) -> str:
    if at is None:
        return "where the array has no contact"
    where = f"where the contact at {contacts.depth_um[at]:g} um"
    if contacts.bad[at]:
        return f"{where} is bad ({contacts.why[at]})"
    return f"{where} is an outermost one, which carries no current source density"


def grand_mean(signals: Signals, conditions: list[np.ndarray]) -> np.ndarray:
    """Return the average over trials in which each condition weighs the same.

    Parameters
    ----------
    signals : Signals
        data of shape (n_trials, n_signals, n_times).
    conditions : list of ndarray of bool, shape (n_trials,)
        Trials of each condition that is estimated.

    Returns
    -------
    ndarray, shape (n_signals, n_times)
    """
    return np.mean([signals.data[rows].mean(axis=0, dtype=float) for rows in conditions], axis=0)


def strongest(found: Candidates, mean: np.ndarray, spans_s: list[tuple[float, float]]) -> int:
    """Return the index of the signal that stands for the area.

    The one that the user named, or else the most negative average current, or the largest
    average deflection of the LFP, over all windows together: taken once per area, never per
    window or resample.

    Parameters
    ----------
    found : Candidates
        What may stand for the area.
    mean : ndarray, shape (n_signals, n_times)
        Their `grand_mean`.
    spans_s : list of (float, float)
        Windows of the area.
    """
    if found.given is not None:
        return found.given
    inside = np.any([window_mask(found.signals.time_s, span) for span in spans_s], axis=0)
    part = mean[:, inside]
    strength = -part.min(axis=1) if found.signals.kind == "csd" else np.ptp(part, axis=1)
    return int(np.argmax(np.where(found.usable, strength, -np.inf)))


def chosen(found: Candidates, index: int) -> Signals:
    """Return one of the candidates, in a block of memory of its own."""
    signals, place = found.signals, slice(index, index + 1)
    return replace(
        signals,
        channel=signals.channel[place],
        depth_um=signals.depth_um[place],
        data=np.ascontiguousarray(signals.data[:, place]),
        note=found.note,
    )


def layer_at(depth_um: float, layers: dict[str, tuple[float, float]]) -> str:
    """Return the name of the layer that holds `depth_um`, or an empty text."""
    return next((name for name, (top, end) in layers.items() if top <= depth_um < end), "")


def measure_sinks(
    csd: Signals,
    usable: np.ndarray,
    rows: np.ndarray,
    searches: tuple[Search, ...],
    *,
    weights: np.ndarray,
    signs: np.ndarray,
    level: float,
) -> tuple[SinkEstimate, ...]:
    """Measure the strongest sink (search "trough") or source ("peak") of one window.

    p says only that there is one: the largest average current over depth and time, each depth
    over its SD, against random signs of the trials. Depth, times and their intervals come from
    the resampled maps, which all searches share.

    Parameters
    ----------
    csd : Signals
        All depths of one area, smoothed, baseline taken off.
    usable : ndarray of bool, shape (n_contacts,)
        Contacts that may carry the sink.
    rows : ndarray of bool
        Trials of the condition.
    searches : tuple of Search
        One window, each with the sign of what is looked for; one estimate comes out for each.
    weights, signs : ndarray, shape (n_draws, n_trials), (n_flips + 1, n_trials)
        Shared by all areas.
    level : float
        Coverage of the intervals.
    """
    flank = window_mask(csd.time_s, searches[0].flank_span_s)
    time_s = csd.time_s[flank]
    inside = window_mask(time_s, searches[0].span_s)
    data = csd.data[rows][:, :, flank].astype(float)
    places = [_Place(csd.depth_um, usable, time_s, inside, search) for search in searches]
    draws = _resampled_sinks(data, places, weights)
    p = _sink_p(data[:, usable][..., inside], searches, signs)
    mean = data.mean(axis=0)[None]
    return tuple(
        _estimate(_sink_of(mean, place), drawn, place, each_p, len(data), level)
        for place, drawn, each_p in zip(places, draws, p, strict=True)
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Place:
    """Where one sink is looked for."""

    depth_um: np.ndarray  # (n_contacts,)
    usable: np.ndarray  # (n_contacts,) bool
    time_s: np.ndarray  # (n_times,)
    inside: np.ndarray  # (n_times,) bool, in the window
    search: Search


@dataclass(frozen=True, slots=True, eq=False)
class _Sinks:
    """The sink of each map of a stack."""

    depth_um: np.ndarray
    onset_s: np.ndarray
    peak_s: np.ndarray
    density: np.ndarray
    profile: np.ndarray  # (n_maps, n_contacts) at the peak, the wave turned upwards
    contact: np.ndarray


def _estimate(
    mean: _Sinks, draws: list[np.ndarray], place: _Place, p: float, n_trials: int, level: float
) -> SinkEstimate:
    depth, onset, peak = (
        percentile_interval(each, level=level, n_trials=n_trials) for each in draws
    )
    return SinkEstimate(
        kind="sink" if place.search.extremum == "trough" else "source",
        depth_um=float(mean.depth_um[0]),
        depth=depth,
        extent_um=_half_extent(mean.profile[0], int(mean.contact[0]), place.depth_um),
        onset_s=float(mean.onset_s[0]),
        onset=onset,
        peak_s=float(mean.peak_s[0]),
        peak=peak,
        density_ua_mm3=float(mean.density[0]),
        p=p,
        n_trials=n_trials,
    )


def _resampled_sinks(
    data: np.ndarray, places: list[_Place], weights: np.ndarray
) -> list[list[np.ndarray]]:
    """Return depth, onset and peak time of each resample, by place."""
    shape = data.shape[1:]
    flat = data.reshape(len(data), -1)
    block = max(1, _BLOCK_VALUES // flat.shape[1])
    parts: list[list[_Sinks]] = [[] for _ in places]
    for i in range(0, len(weights), block):
        maps = (weights[i : i + block] @ flat).reshape(-1, *shape)
        for place, part in zip(places, parts, strict=True):
            part.append(_sink_of(maps, place))
    return [
        [np.concatenate([getattr(each, name) for each in part])
         for name in ("depth_um", "onset_s", "peak_s")]
        for part in parts
    ]  # fmt: skip


def _sink_of(maps: np.ndarray, place: _Place) -> _Sinks:
    sign, time_s, inside = place.search.sign, place.time_s, place.inside
    first, last = np.flatnonzero(inside)[[0, -1]]
    part = maps[..., first : last + 1]
    strength = part.max(axis=-1) if sign > 0 else -part.min(axis=-1)
    contact = np.argmax(np.where(place.usable, strength, -np.inf), axis=1)
    courses = np.take_along_axis(maps, contact[:, None, None], axis=1)[:, 0]
    found = landmarks(courses, time_s, place.search)
    times = np.where(np.isfinite(found.time_s), found.time_s, time_s[first])
    sample = np.clip(np.rint((times - time_s[0]) / (time_s[1] - time_s[0])), 0, len(time_s) - 1)
    at = sample.astype(int)[:, None, None]
    profile = sign * np.take_along_axis(maps, at, axis=2)[..., 0]
    depth = _refined_depth(profile, contact, place.depth_um)
    nan = np.where(np.isfinite(found.time_s), 0.0, np.nan)
    return _Sinks(
        depth_um=depth + nan,
        onset_s=found.onset_s,
        peak_s=found.time_s,
        density=found.amplitude,
        profile=profile,
        contact=contact,
    )


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


def _sink_p(data: np.ndarray, searches: tuple[Search, ...], signs: np.ndarray) -> list[float]:
    n_trials = len(data)
    scale = np.sqrt((data**2).mean(axis=(0, 2), keepdims=True)) + np.finfo(float).tiny
    flat = (data / scale).reshape(n_trials, -1)
    block = max(1, _BLOCK_VALUES // flat.shape[1])
    largest = np.empty((len(searches), len(signs)))
    for i in range(0, len(signs), block):
        sums = signs[i : i + block] @ flat
        for each, search in zip(largest, searches, strict=True):
            up = sums.max(axis=1) if search.sign > 0 else -sums.min(axis=1)
            each[i : i + block] = up
    return [float(exceedance_p(each[0], each[1:])) for each in largest]
