"""Averages in, proposed windows out, for sessions whose file names none."""

import numpy as np
from scipy.ndimage import gaussian_filter1d
from scipy.signal import find_peaks, peak_widths

from lfptools.choices import WindowChoice
from lfptools.model import Signals
from lfptools.trials import window_mask

#: The areas' common deflection must exceed the baseline's by this factor to be proposed.
_LEAST_HEIGHT = 4.0
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
    as a root mean square; windows reach to a quarter of each of its peaks. They are chosen on
    the same trials that are then analysed and are marked so.

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
    """
    if not signals:
        return []
    grid_s = np.arange(span_s[0], span_s[1], 0.001)
    courses = []
    for each in signals:
        for name in names:
            mean = each.data[condition == name, 0].mean(axis=0, dtype=float)
            mean = gaussian_filter1d(mean, _SMOOTH_S * each.rate_hz, mode="nearest")
            before = mean[window_mask(each.time_s, (each.time_s[0], 0.0))]
            courses.append(np.interp(grid_s, each.time_s, mean) / (before.std() or 1.0))
    pooled = np.sqrt(np.mean(np.square(courses), axis=0))
    peaks, found = find_peaks(pooled, height=_LEAST_HEIGHT, prominence=_LEAST_HEIGHT / 2)
    peaks = np.sort(peaks[np.argsort(found["peak_heights"])[::-1][:MOST_WINDOWS]])
    _, _, left, right = peak_widths(pooled, peaks, rel_height=0.75)
    mean_course = np.mean(courses, axis=0)
    return [
        WindowChoice(
            name=f"wave {number + 1}",
            span_ms=_rounded_ms(grid_s, left[number], right[number]),
            extremum="trough" if mean_course[peak] < 0 else "peak",
            chosen="on these trials",
        )
        for number, peak in enumerate(peaks)
    ]


def _rounded_ms(grid_s: np.ndarray, left: float, right: float) -> tuple[float, float]:
    first, last = np.interp([left, right], np.arange(len(grid_s)), grid_s * 1000)
    return float(np.floor(first)), float(np.ceil(last))
