"""A scenario and what was drawn for it come in; the truth, as plain dicts and lists, goes out.

Latencies are landmarks of the expected average: the noise-free signal averaged over very many
draws of gain and shift and passed through the amplifier alone. Nothing here is shared with
the estimators that are compared with it.
"""

from collections.abc import Iterator
from dataclasses import asdict, dataclass

import numpy as np

from lfptools.simulate import waves
from lfptools.simulate.scenario import AreaScenario, Condition, Scenario, Window
from lfptools.simulate.spikes import Unit
from lfptools.simulate.stage import Stage
from lfptools.units import MS_PER_S, ms_from_s, s_from_ms

#: A trough shallower than this share of the deepest one of the array is none: there the
#: profile passes through 0 and only the amplifier's undershoot is left.
SMALLEST_SHARE = 0.1


@dataclass(frozen=True, slots=True)
class Landmarks:
    """Trough of a curve in a window and half its height on the way down; None where there is none.

    `value` is the curve at the trough.
    """

    trough_ms: float | None = None
    onset_ms: float | None = None
    value: float | None = None


def describe(
    stage: Stage,
    *,
    units: list[Unit],
    draws: dict[str, dict[str, waves.Draws]],
    rng: np.random.Generator,
) -> dict:
    """Say what is true of a simulated session.

    Parameters
    ----------
    stage : Stage
        Settings, bad contacts and artefacts.
    units : list of Unit
        As drawn.
    draws : dict
        Gain and shift of each trial by area and wave.
    rng : np.random.Generator
        For the draws behind the expected averages.

    Returns
    -------
    dict
        `settings`, `latencies` (one row an area, window, condition, signal and contact),
        `sinks`, `orders`, `coupling`, `bad_contacts`, `artefact_events`, `units`, `trials`.
    """
    scenario = stage.scenario
    averages = {
        area.name: {
            name: waves.expected_average(wave, scenario, rng=rng)
            for name, wave in area.waves.items()
        }
        for area in scenario.areas
    }
    sinks = list(_sinks(scenario, averages))
    return {
        "settings": scenario.as_plain(),
        "latencies": list(_latencies(scenario, averages)),
        "sinks": sinks,
        "orders": _orders(scenario, sinks),
        "coupling": _coupling(scenario),
        "bad_contacts": [asdict(each) for each in stage.bad],
        "artefact_events": stage.artefact_events.tolist(),
        "units": [_unit(unit, scenario) for unit in units],
        "trials": _trials(draws),
    }


def landmarks(
    curve: np.ndarray, time_s: np.ndarray, span_ms: tuple[float, float], smallest: float = 0.0
) -> Landmarks:
    """Find the trough of a noise-free curve in a window, and the half-height before it.

    Parameters
    ----------
    curve, time_s : np.ndarray, shape (n_times,)
        The curve on a fine grid, times in s.
    span_ms : (first, last)
        The window, half-open.
    smallest : float
        The trough must lie below minus this.

    Returns
    -------
    Landmarks
        Times in ms. The trough must be a minimum inside the window, not at its edge; the
        onset is the last time before it at which the curve reaches half of the trough, by
        linear interpolation, and is None where that lies before the window.
    """
    first_s, last_s = (s_from_ms(edge_ms) for edge_ms in span_ms)
    # The grid holds the edges only up to rounding: a thousandth of a step decides.
    slack_s = 1e-3 * (time_s[1] - time_s[0])
    inside = np.flatnonzero((time_s >= first_s - slack_s) & (time_s < last_s - slack_s))
    lowest = inside[np.argmin(curve[inside])]
    if lowest in (inside[0], inside[-1]) or not curve[lowest] < -smallest:
        return Landmarks()
    half = curve[lowest] / 2
    before = np.flatnonzero(curve[:lowest] > half)[-1]
    share = (curve[before] - half) / (curve[before] - curve[before + 1])
    onset_s = time_s[before] + share * (time_s[before + 1] - time_s[before])
    onset_ms = float(ms_from_s(onset_s)) if onset_s >= first_s else None
    return Landmarks(float(ms_from_s(time_s[lowest])), onset_ms, float(curve[lowest]))


def _curves(
    area: AreaScenario,
    condition: Condition,
    scenario: Scenario,
    averages: dict[str, waves.Expected],
    depth_um: np.ndarray,
) -> Iterator[tuple[str, str, np.ndarray]]:
    """Yield signal, unit and expected averages, shape (n_depths, n_times)."""
    for signal, unit, at_peak in (
        ("csd", "uA/mm^3", waves.evoked_density),
        ("lfp", "uV", waves.evoked_uv),
    ):
        peaks = [at_peak(area, name, condition, scenario, depth_um) for name in averages]
        courses = [average.value for average in averages.values()]
        yield signal, unit, np.transpose(peaks) @ np.array(courses)


def _cases(scenario: Scenario) -> Iterator[tuple[AreaScenario, Condition]]:
    for area in scenario.areas:
        for condition in scenario.conditions:
            yield area, condition


def _latencies(
    scenario: Scenario, averages: dict[str, dict[str, waves.Expected]]
) -> Iterator[dict]:
    """Yield one row for each area, condition, signal, window and contact."""
    depth_um = np.array(scenario.contact_depth_um)
    for area, condition in _cases(scenario):
        own = averages[area.name]
        time_s = next(iter(own.values())).time_s
        for signal, unit, curves in _curves(area, condition, scenario, own, depth_um):
            for window in scenario.windows:
                found = _of_contacts(curves, time_s, window)
                for channel, each in enumerate(found):
                    yield {
                        "area": area.name,
                        "window": window.name,
                        "condition": condition.name,
                        "signal": signal,
                        "channel": channel,
                        "depth_um": float(depth_um[channel]),
                        "trough_ms": _rounded(each.trough_ms),
                        "onset_ms": _rounded(each.onset_ms),
                        "value": _rounded(each.value),
                        "unit": unit,
                    }


def _of_contacts(curves: np.ndarray, time_s: np.ndarray, window: Window) -> list[Landmarks]:
    first_s, last_s = (s_from_ms(edge_ms) for edge_ms in window.span_ms)
    inside = (time_s >= first_s) & (time_s < last_s)
    smallest = SMALLEST_SHARE * max(-float(np.min(curves[:, inside])), 0.0)
    return [landmarks(curve, time_s, window.span_ms, smallest) for curve in curves]


def _sinks(scenario: Scenario, averages: dict[str, dict[str, waves.Expected]]) -> Iterator[dict]:
    """Yield the main sink of each area, window and condition."""
    cells_um = waves.cell_depth_um(scenario)
    contacts_um = np.array(scenario.contact_depth_um)
    for area, condition in _cases(scenario):
        own = averages[area.name]
        time_s = next(iter(own.values())).time_s
        for window in scenario.windows:
            density = waves.evoked_density(area, window.name, condition, scenario, cells_um)
            # Two cells share the minimum where it falls between them.
            depth_um = float(np.mean(cells_um[density <= np.min(density) * (1 - 1e-9)]))
            at_sink = next(_curves(area, condition, scenario, own, np.array([depth_um])))[2][0]
            found = landmarks(at_sink, time_s, window.span_ms)
            yield {
                "area": area.name,
                "window": window.name,
                "condition": condition.name,
                "depth_um": depth_um,
                "channel": int(np.argmin(np.abs(contacts_um - depth_um))),
                "trough_ms": _rounded(found.trough_ms),
                "onset_ms": _rounded(found.onset_ms),
                "density_ua_mm3": _rounded(found.value),
            }


def _orders(scenario: Scenario, sinks: list[dict]) -> list[dict]:
    """Order of the areas by the trough of their main sink, for each window and condition."""
    return [
        {
            "window": window.name,
            "condition": condition.name,
            "areas": [
                sink["area"]
                for sink in sorted(
                    (
                        sink
                        for sink in sinks
                        if (sink["window"], sink["condition"]) == (window.name, condition.name)
                        and sink["trough_ms"] is not None
                    ),
                    key=lambda sink: sink["trough_ms"],
                )
            ],
        }
        for window in scenario.windows
        for condition in scenario.conditions
    ]


def _coupling(scenario: Scenario) -> list[dict]:
    """Say who leads in each pair and window; null where nobody does."""
    names = [area.name for area in scenario.areas]
    pairs = [(a, b) for index, a in enumerate(names) for b in names[index + 1 :]]
    rows = []
    for area_a, area_b in pairs:
        for window in scenario.windows:
            links = [
                link
                for link in scenario.links
                if link.window == window.name and {link.leader, link.follower} == {area_a, area_b}
            ]
            on = links if scenario.coupling else []
            rows.append(
                {
                    "area_a": area_a,
                    "area_b": area_b,
                    "window": window.name,
                    "leader": on[0].leader if len(on) == 1 else None,
                    "both_ways": len(on) > 1,
                    "coupling": scenario.coupling if on else 0.0,
                    "delay_ms": on[0].delay_ms if on else None,
                }
            )
    return rows


def _unit(unit: Unit, scenario: Scenario) -> dict:
    """Say what a unit does in each window: up with the first wave, down around the last."""
    first, *_, last = (window.name for window in scenario.windows)
    plan = scenario.units
    calls = {window.name: "none" for window in scenario.windows}
    calls[last] = _call(plan.fall)
    calls[first] = _call(plan.rise)
    return {
        "unit": unit.name,
        "area": unit.area,
        "depth_um": unit.depth_um,
        "baseline_hz": _rounded(unit.baseline_hz),
        "calls": calls,
        "locked": unit.locked and plan.locking > 0,
        "preferred_deg": _rounded(float(np.degrees(unit.preferred_rad))) if unit.locked else None,
    }


def _call(factor: float) -> str:
    if factor == 1:
        return "none"
    return "rise" if factor > 1 else "fall"


def _trials(draws: dict[str, dict[str, waves.Draws]]) -> dict:
    """Gain and shift of every trial by area and window."""
    return {
        area: {
            name: {
                "gain": np.round(each.gain, 4).tolist(),
                "shift_ms": np.round(each.shift_s * MS_PER_S, 4).tolist(),
            }
            for name, each in of_area.items()
        }
        for area, of_area in draws.items()
    }


def _rounded(value: float | None) -> float | None:
    return None if value is None else round(value, 4)
