"""A cut session in, what all analyses share out: signals, smoothing, conditions, resamples.

One signal stands for each area, and one smoothing a window serves all areas and conditions,
which are compared within it. Resamples and random signs are drawn once per condition and used
by every analysis, so that differences between areas are paired on the same trials.
"""

from dataclasses import dataclass, replace

import msgspec
import numpy as np

from lfptools.analysis.windows import propose_windows
from lfptools.choices import AnalysisChoices, WindowChoice
from lfptools.csd import MIN_CONTACTS, CsdOperator, csd_operator, csd_signals
from lfptools.evoked import SMOOTHING_GRID_MS, least_risk_smoothing, smooth
from lfptools.layers import area_signal
from lfptools.model import CutSession, Signals
from lfptools.resample import bootstrap_weights, sign_flips
from lfptools.trials import MIN_TRIALS
from lfptools.waves import Search, landmarks

CHOSEN_HERE = "window chosen on these trials"


@dataclass(frozen=True, slots=True, eq=False)
class Prepared:
    """What every analysis of a session starts from."""

    cut: CutSession
    choices: AnalysisChoices
    conditions: tuple[str, ...]  # all, in order of appearance
    estimated: tuple[str, ...]  # those with enough trials
    weights: dict[str, np.ndarray]  # bootstrap, by estimated condition
    signs: dict[str, np.ndarray]  # random signs, by estimated condition
    operators: dict[str, CsdOperator]  # by area, where there are enough contacts
    csd: dict[str, Signals]  # by area, every depth
    signals: dict[str, Signals]  # by area, the one that stands for it
    smooth_s: dict[str, float]  # SD of the Gaussian, by window

    def rows(self, condition: str) -> np.ndarray:
        """Bool per accepted trial."""
        return self.cut.condition == condition

    @property
    def finest_s(self) -> float:
        """Least smoothing of any window, for curves that show all of them."""
        return min(self.smooth_s.values(), default=0.0)

    def search(self, window: WindowChoice, area: str, extremum: str = "") -> Search:
        """Return where a wave is looked for in one area."""
        return Search(
            span_s=window.span_s(area),
            extremum=extremum or window.extremum_in(area),
            onset=self.choices.latency.onset,
        )

    def windows_of(self, area: str) -> list[WindowChoice]:
        """Return the windows that apply to `area`."""
        return [window for window in self.choices.window if window.holds(area)]


def prepare(cut: CutSession) -> Prepared:
    """Choose signals, windows and smoothing, and draw the resamples."""
    choices = cut.choices
    conditions = cut.table.conditions
    counts = {name: int(np.count_nonzero(cut.condition == name)) for name in conditions}
    estimated = tuple(name for name in conditions if counts[name] >= MIN_TRIALS)
    operators, csd = {}, {}
    for trials in cut.areas:
        if np.count_nonzero(~trials.contacts.bad) >= MIN_CONTACTS:
            operators[trials.area] = csd_operator(
                trials.contacts,
                conductivity_s_m=choices.csd.conductivity_s_m,
                method=choices.csd.method,
            )
            csd[trials.area] = csd_signals(trials, operators[trials.area])
    if not choices.window:
        whole = (0.0, choices.trials.window_ms[1] / 1000)
        signals = _area_signals(cut, csd, estimated, choices, {a.area: [whole] for a in cut.areas})
        windows = propose_windows(list(signals.values()), cut.condition, list(estimated), whole)
        choices = msgspec.structs.replace(choices, window=windows)
        cut = replace(cut, choices=choices)
    spans = {
        area.area: [
            window.span_s(area.area) for window in choices.window if window.holds(area.area)
        ]
        or [(0.0, choices.trials.window_ms[1] / 1000)]
        for area in cut.areas
    }
    signals = _area_signals(cut, csd, estimated, choices, spans)
    seed = choices.resample.seed
    return Prepared(
        cut=cut,
        choices=choices,
        conditions=conditions,
        estimated=estimated,
        weights={
            name: bootstrap_weights(counts[name], choices.resample.n, _rng(seed, 1, number))
            for number, name in enumerate(estimated)
        },
        signs={
            name: sign_flips(counts[name], choices.resample.n, _rng(seed, 2, number))
            for number, name in enumerate(estimated)
        },
        operators=operators,
        csd=csd,
        signals=signals,
        smooth_s={
            window.name: _smoothing(signals, cut, estimated, choices, window)
            for window in choices.window
        },
    )


def _rng(*seed: int) -> np.random.Generator:
    return np.random.default_rng(list(seed))


def _area_signals(
    cut: CutSession,
    csd: dict[str, Signals],
    estimated: tuple[str, ...],
    choices: AnalysisChoices,
    spans_s: dict[str, list[tuple[float, float]]],
) -> dict[str, Signals]:
    rows = [cut.condition == name for name in estimated]
    return {
        trials.area: area_signal(
            trials,
            csd.get(trials.area),
            kind=choices.direction.signal,
            conditions=rows,
            spans_s=spans_s[trials.area],
        )
        for trials in cut.areas
    }


def _smoothing(
    signals: dict[str, Signals],
    cut: CutSession,
    estimated: tuple[str, ...],
    choices: AnalysisChoices,
    window: WindowChoice,
) -> float:
    """Return a window's frozen SD in s: as given, or of least risk and at most half its waves."""
    given = choices.latency.smooth_ms
    if given != "auto":
        return float(given) / 1000
    held = {area: signal for area, signal in signals.items() if window.holds(area)}
    if not held:
        return 0.0
    searches = {
        area: Search(window.span_s(area), window.extremum_in(area), "half") for area in held
    }
    span_s = (
        min(search.flank_span_s[0] for search in searches.values()),
        max(search.prominence_span_s[1] for search in searches.values()),
    )
    sd_s = least_risk_smoothing(list(held.values()), cut.condition, list(estimated), span_s)
    widths = []
    for area, signal in held.items():
        smoothed = smooth(signal, sd_s)
        for name in estimated:
            mean = smoothed.data[cut.condition == name].mean(axis=0, dtype=float)
            widths.append(_half_width(mean, smoothed.time_s, searches[area]))
    narrowest = np.nanmin([*widths, np.inf])
    allowed = [ms / 1000 for ms in SMOOTHING_GRID_MS if ms / 1000 <= min(sd_s, narrowest / 2)]
    return allowed[-1]


def _half_width(mean: np.ndarray, time_s: np.ndarray, search: Search) -> float:
    """Full width at half height of an average wave, as twice its rise from half height, s."""
    found = landmarks(mean, time_s, search)
    return float(2 * (found.time_s - found.onset_s)[0])
