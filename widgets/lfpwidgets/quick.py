"""Prepared trials and the window in hand in, answers that follow the hand out.

Values are those of `lfptools run`; only what surrounds them is quicker. Intervals and p-values
rest on the first few of the resamples and random signs of a run; the interval of a net lead
rests on what each trial adds to it, to first order, in place of leaving each out. Near p = .05
a run may judge otherwise.
"""

from dataclasses import dataclass
from itertools import combinations

import numpy as np

from lfptools.analysis.arrival import chosen_note, difference
from lfptools.analysis.elsewhere import elsewhere
from lfptools.analysis.prepared import Prepared
from lfptools.analysis.results import note
from lfptools.choices import WindowChoice
from lfptools.direction.net_lead import NetLead, net_lead
from lfptools.rate_change import MIN_SPIKES, Counts, count_spikes, tested_changes
from lfptools.rates import call
from lfptools.trials import FEW_TRIALS
from lfptools.units import s_from_ms
from lfptools.waves import ALPHA, WaveEstimate, measure

#: Resamples and random signs behind a quick interval or p; the least p is 1 / 401.
N_DRAWS = 400


@dataclass(frozen=True, slots=True)
class QuickWave:
    """The wave of one area: times in s, amplitudes in `unit`; NaN where it was not found."""

    area: str
    signal: str
    unit: str
    extremum: str
    time_s: float
    time_lo_s: float
    time_hi_s: float
    onset_s: float
    onset_lo_s: float
    onset_hi_s: float
    amplitude: float
    amplitude_lo: float
    amplitude_hi: float
    found: bool
    p: float
    note: str


@dataclass(frozen=True, slots=True)
class QuickLag:
    """How much later the wave of area b comes than that of area a; NaN where one is missing."""

    area_a: str
    area_b: str
    feature: str  # "time" or "onset"
    difference_s: float
    lo_s: float
    hi_s: float
    p: float


@dataclass(frozen=True, slots=True)
class QuickRate:
    """Change in rate from the baseline to the window: of one unit, or the mean of an area's."""

    area: str
    unit: str  # empty for the mean of the area
    n_units: int  # units with spikes enough, of those meant
    baseline_hz: float
    window_hz: float
    change_hz: float
    lo_hz: float
    hi_hz: float
    p: float
    call: str  # rise, fall or none at p <= .05; empty where nothing was estimated
    note: str


@dataclass(frozen=True, slots=True)
class QuickAnswer:
    """What the window in hand says of one condition, at once and with quick intervals."""

    window: str
    condition: str
    n_trials: int
    n_draws: int
    waves: tuple[QuickWave, ...] = ()
    lags: tuple[QuickLag, ...] = ()
    rates: tuple[QuickRate, ...] = ()  # one an area with units
    unit_rates: tuple[QuickRate, ...] = ()
    leads: tuple[NetLead, ...] = ()
    note: str = ""


def quick_answer(
    prepared: Prepared, window: WindowChoice, condition: str, *, n_draws: int = N_DRAWS
) -> QuickAnswer:
    """Answer for one window and condition.

    Raises
    ------
    InputError
        If the window holds fewer than 3 samples of the trials.
    """
    n_trials = int(np.count_nonzero(prepared.rows(condition)))
    if condition not in prepared.estimated:
        return QuickAnswer(window.name, condition, n_trials, 0, note=FEW_TRIALS)
    waves = {
        area: _wave(prepared, area, condition, window, n_draws)
        for area in prepared.signals
        if window.holds(area)
    }
    rates, unit_rates = _rates(prepared, condition, window, n_draws)
    return QuickAnswer(
        window=window.name,
        condition=condition,
        n_trials=n_trials,
        n_draws=min(n_draws, len(prepared.weights[condition])),
        waves=tuple(_shown(prepared, window, area, wave) for area, wave in waves.items()),
        lags=_lags(waves, prepared.choices.resample.level),
        rates=rates,
        unit_rates=unit_rates,
        leads=_leads(prepared, condition, window),
    )


def _wave(
    prepared: Prepared, area: str, condition: str, window: WindowChoice, n_draws: int
) -> WaveEstimate:
    return measure(
        prepared.basis.smoothed(prepared.signals[area], prepared.smooth_s[window.name]),
        prepared.rows(condition),
        prepared.search(window, area),
        weights=prepared.weights[condition][:n_draws],
        signs=prepared.signs[condition][: n_draws + 1],
        level=prepared.choices.resample.level,
    )


def _shown(prepared: Prepared, window: WindowChoice, area: str, wave: WaveEstimate) -> QuickWave:
    signal = prepared.signals[area]
    values = {
        name: float(getattr(wave, name)[0])
        for name in (
            "time_s", "time_lo_s", "time_hi_s", "onset_s", "onset_lo_s", "onset_hi_s",
            "amplitude", "amplitude_lo", "amplitude_hi", "p",
        )
    }  # fmt: skip
    return QuickWave(
        area=area,
        signal=signal.label,
        unit=signal.unit,
        extremum=window.extremum_in(area),
        found=values["p"] <= ALPHA,
        note=note(
            wave.note[0], signal.note, elsewhere(prepared, area, window), chosen_note(window)
        ),
        **values,
    )


def _lags(waves: dict[str, WaveEstimate], level: float) -> tuple[QuickLag, ...]:
    return tuple(
        _lag(first, second, feature, difference(waves[first], waves[second], feature, level))
        for first, second in combinations(waves, 2)
        for feature in ("time", "onset")
    )


def _lag(first: str, second: str, feature: str, row: dict[str, float]) -> QuickLag:
    lag_s, lo_s, hi_s = (
        s_from_ms(row.get(name, np.nan)) for name in ("difference_ms", "lo_ms", "hi_ms")
    )
    return QuickLag(first, second, feature, lag_s, lo_s, hi_s, row.get("p", np.nan))


def _rates(
    prepared: Prepared, condition: str, window: WindowChoice, n_draws: int
) -> tuple[tuple[QuickRate, ...], tuple[QuickRate, ...]]:
    """Return the changes of the areas and those of the units."""
    cut = prepared.cut
    if cut.spikes is None:
        return (), ()
    counts = count_spikes(prepared.basis.spikes(condition), window)
    areas = [cut.spikes.area[unit] for unit in counts.unit]
    known = [area for area in cut.area_names if area in areas]
    of_area = np.array([[area == each for each in areas] for area in known], dtype=bool)
    of_unit = np.eye(len(areas), dtype=bool)
    names = [(area, "") for area in known] + [
        (area, cut.spikes.unit[unit]) for area, unit in zip(areas, counts.unit, strict=True)
    ]
    if not names:
        return (), ()
    changes = _changes(prepared, condition, counts, names, np.vstack([of_area, of_unit]), n_draws)
    return changes[: len(known)], changes[len(known) :]


def _changes(
    prepared: Prepared,
    condition: str,
    counts: Counts,
    names: list[tuple[str, str]],
    meant: np.ndarray,
    n_draws: int,
) -> tuple[QuickRate, ...]:
    """Return the mean change of the units each row of `meant` names, (n_names, n_units) bool."""
    used = meant & counts.enough
    n_units = used.sum(axis=1)
    share = used / np.maximum(n_units, 1)[:, None]
    tested = tested_changes(
        counts.change_hz @ share.T,
        weights=prepared.weights[condition][:n_draws],
        signs=prepared.basis.firing_signs[condition][: n_draws + 1],
        level=prepared.choices.resample.level,
    )
    baseline_hz, window_hz = share @ counts.baseline_hz, share @ counts.window_hz
    return tuple(
        QuickRate(
            area=area,
            unit=unit,
            n_units=int(n_units[place]),
            baseline_hz=float(baseline_hz[place]),
            window_hz=float(window_hz[place]),
            change_hz=float(window_hz[place] - baseline_hz[place]),
            lo_hz=float(tested.lo_hz[place]),
            hi_hz=float(tested.hi_hz[place]),
            p=float(tested.p[place]),
            call=call(window_hz[place] - baseline_hz[place], tested.p[place]),
            note="",
        )
        if n_units[place]
        else _silent(area, unit)
        for place, (area, unit) in enumerate(names)
    )


def _silent(area: str, unit: str) -> QuickRate:
    nothing = (float("nan"),) * 6
    note = f"fewer than {MIN_SPIKES} spikes in baseline and window"
    return QuickRate(area, unit, 0, *nothing, call="", note=note)


def _leads(prepared: Prepared, condition: str, window: WindowChoice) -> tuple[NetLead, ...]:
    signals = prepared.signals
    return tuple(
        net_lead(
            signals[first],
            signals[second],
            prepared.rows(condition),
            prepared.cut.table.accepted_time_s(),
            window,
            choices=prepared.choices.direction,
            level=prepared.choices.resample.level,
            at_rate=prepared.basis.at_rate,
        )
        for first, second in combinations(signals, 2)
        if window.holds(first) and window.holds(second)
    )
