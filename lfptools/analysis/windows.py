"""Averages in, proposed windows out, for sessions whose file names none."""

from itertools import pairwise

import numpy as np
from scipy.ndimage import gaussian_filter1d
from scipy.signal import find_peaks, peak_prominences, peak_widths

from lfptools.choices import WindowChoice
from lfptools.model import Signals
from lfptools.trials import window_mask

#: The areas' common deflection must exceed the baseline's by this factor to be proposed.
_LEAST_HEIGHT = 4.0
#: A peak must rise by this share of its height from what parts it from a higher one.
_LEAST_PROMINENCE = 0.3
_LEAST_WIDTH_MS = 10.0
_SMOOTH_S = 0.004
MOST_WINDOWS = 3


def propose_windows(
    signals: list[Signals],
    condition: np.ndarray,
    names: list[str],
    span_s: tuple[float, float],
) -> list[WindowChoice]:
    """Propose windows around the largest common deflections of the areas' averages.

    The averages of all areas and conditions, each over the SD of its own baseline, are pooled
    as a root mean square. A window reaches to a quarter of its peak's height above the floor of
    the pooled course, or to the lowest point between two peaks where that is nearer, and is at
    least 10 ms long where its neighbours leave room. They are chosen on the same trials that
    are then analysed and are marked so.

    Parameters
    ----------
    signals : list of Signals
        One signal an area.
    condition : ndarray of str, shape (n_trials,)
        Condition of each trial.
    names : list of str
        Conditions with enough trials.
    span_s : (float, float)
        Where waves may lie.

    Returns
    -------
    list of WindowChoice
        In the order of time, none reaching into the next.
    """
    if not signals:
        return []
    grid_s = np.arange(span_s[0], span_s[1], 0.001)
    courses = _courses(signals, condition, names, grid_s)
    pooled = np.sqrt(np.mean(np.square(courses), axis=0))
    peaks = _peaks(pooled)
    if not peaks.size:
        return []
    mean_course = np.mean(courses, axis=0)
    return [
        WindowChoice(
            name=f"wave {number + 1}",
            span_ms=span_ms,
            extremum="trough" if mean_course[peak] < 0 else "peak",
            chosen="on these trials",
        )
        for number, (peak, span_ms) in enumerate(
            zip(peaks, _spans_ms(pooled, peaks, grid_s), strict=True)
        )
    ]


def _courses(
    signals: list[Signals], condition: np.ndarray, names: list[str], grid_s: np.ndarray
) -> np.ndarray:
    """Return every area's and condition's average over its baseline's SD, (n, n_grid)."""
    courses = []
    for each in signals:
        for name in names:
            mean = each.data[condition == name, 0].mean(axis=0, dtype=float)
            mean = gaussian_filter1d(mean, _SMOOTH_S * each.rate_hz, mode="nearest")
            before = mean[window_mask(each.time_s, (each.time_s[0], 0.0))]
            courses.append(np.interp(grid_s, each.time_s, mean) / (before.std() or 1.0))
    return np.array(courses)


def _peaks(pooled: np.ndarray) -> np.ndarray:
    """Return the largest peaks of the pooled course that stand out, in the order of time."""
    peaks, _ = find_peaks(pooled, height=_LEAST_HEIGHT, prominence=_LEAST_HEIGHT / 2)
    prominences, _, _ = peak_prominences(pooled, peaks)
    peaks = peaks[prominences >= _LEAST_PROMINENCE * pooled[peaks]]
    return np.sort(peaks[np.argsort(pooled[peaks])[::-1][:MOST_WINDOWS]])


def _spans_ms(
    pooled: np.ndarray, peaks: np.ndarray, grid_s: np.ndarray
) -> list[tuple[float, float]]:
    """Return the window around each peak in whole ms, none reaching into the next."""
    grid_ms = np.round(grid_s * 1000, 6)
    lowest = [first + int(np.argmin(pooled[first:last])) for first, last in pairwise(peaks)]
    borders = np.array([0, *lowest, len(pooled) - 1], dtype=np.intp)
    # Heights above the floor of the whole course: that of a peak above the point that parts it
    # from a higher one would give the lower of two waves a window too narrow.
    floor = [max(pooled[: peak + 1].min(), pooled[peak:].min()) for peak in peaks]
    reach = (pooled[peaks] - floor, borders[:-1], borders[1:])
    _, _, left, right = peak_widths(pooled, peaks, rel_height=0.75, prominence_data=reach)
    first_ms, last_ms = np.interp([left, right], np.arange(len(grid_ms)), grid_ms)
    return [
        _widened(np.floor(first), np.ceil(last), low, high)
        for first, last, (low, high) in zip(
            first_ms, last_ms, pairwise(grid_ms[borders]), strict=True
        )
    ]


def _widened(first: float, last: float, low: float, high: float) -> tuple[float, float]:
    """Return the span, widened on both sides to the least width where [low, high] has room."""
    missing = _LEAST_WIDTH_MS - (last - first)
    if missing > 0:
        first = max(first - np.floor(missing / 2), low)
        last = min(first + _LEAST_WIDTH_MS, high)
        first = max(last - _LEAST_WIDTH_MS, low)
    return float(first), float(last)
