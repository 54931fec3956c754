"""A scenario comes in; what all areas share goes out: stimuli, common pick-up, bad contacts."""

from dataclasses import dataclass

import numpy as np

from lfptools.errors import InputError
from lfptools.model import Events
from lfptools.simulate import ongoing, waves
from lfptools.simulate.scenario import Scenario
from lfptools.units import MS_PER_S

#: An artefact is over this long before and after its centre.
_ARTEFACT_S = (-0.1, 0.1)
_ARTEFACT_SD_S = 0.015


@dataclass(frozen=True, slots=True)
class BadContact:
    """A contact that does not record what is there."""

    area: str
    channel: int
    depth_um: float
    kind: str  # dead or noisy
    noise_uv: float  # sd of its own white noise, as recorded


@dataclass(frozen=True, slots=True, eq=False)
class Stage:
    """What all areas share."""

    scenario: Scenario
    n_samples: int
    at_s: np.ndarray  # (n_events,) stimuli, after the first sample
    condition: np.ndarray  # (n_events,) index of the condition
    common_uv: np.ndarray  # (n_samples,) what every channel of every area picks up
    bad: tuple[BadContact, ...]
    artefact_events: np.ndarray  # (n_artefacts,) indices, rising


def set_stage(scenario: Scenario, *, rng: np.random.Generator) -> tuple[Stage, Events]:
    """Draw what all areas share.

    Parameters
    ----------
    scenario : Scenario
        Every setting.
    rng : np.random.Generator
        Each part draws from a stream of its own.

    Returns
    -------
    Stage, Events
        Times in `Events` are on the clock, those of the stage after the first sample.

    Raises
    ------
    InputError
        If an array leaves no contact that may be bad.
    """
    for_events, for_artefacts, for_common, for_bad = rng.spawn(4)
    events, condition = draw_events(scenario, rng=for_events)
    at_s = events.time_s - scenario.start_s
    n_samples = int(np.ceil((at_s[-1] + scenario.lead_s) * scenario.rate_hz))
    artefacts = draw_artefacts(scenario, len(at_s), rng=for_artefacts)
    common = common_uv(scenario, n_samples, at_s[artefacts], rng=for_common)
    bad = tuple(draw_bad(scenario, rng=for_bad))
    return Stage(scenario, n_samples, at_s, condition, common, bad, artefacts), events


def draw_events(scenario: Scenario, *, rng: np.random.Generator) -> tuple[Events, np.ndarray]:
    """Draw times, rounded to 1 us as tables write them, and a random order of conditions."""
    n_events = scenario.n_trials * len(scenario.conditions)
    condition = rng.permutation(np.repeat(np.arange(len(scenario.conditions)), scenario.n_trials))
    gaps_s = rng.uniform(*scenario.interval_s, n_events)
    time_s = scenario.start_s + scenario.lead_s + np.cumsum(gaps_s) - scenario.interval_s[0]
    plans = [scenario.conditions[index] for index in condition]
    whisker = tuple(str(rng.choice(plan.whiskers)) for plan in plans)
    names = tuple(plan.name for plan in plans)
    return Events(np.round(time_s, 6), names, {"whisker": whisker}), condition


def draw_artefacts(scenario: Scenario, n_events: int, *, rng: np.random.Generator) -> np.ndarray:
    """Return the indices of the events with an artefact, rising."""
    n_artefacts = round(scenario.artefact_share * n_events)
    return np.sort(rng.choice(n_events, n_artefacts, replace=False))


def common_uv(
    scenario: Scenario,
    n_samples: int,
    artefact_at_s: np.ndarray,
    *,
    rng: np.random.Generator,
) -> np.ndarray:
    """Return what all channels of all areas share: reference noise, hum and artefacts, in uV."""
    noise = ongoing.pink(
        n_samples, rate_hz=scenario.rate_hz, corner_hz=scenario.ongoing_corner_hz, rng=rng
    )
    turns = scenario.hum_hz / scenario.rate_hz * np.arange(n_samples)
    hum = scenario.hum_uv * np.sin(2 * np.pi * turns)
    size_uv = rng.uniform(*scenario.artefact_uv, len(artefact_at_s))
    size_uv *= rng.choice([-1.0, 1.0], len(artefact_at_s))
    after_ms = rng.uniform(*scenario.artefact_ms, len(artefact_at_s))
    transients = waves.place(
        _swing,
        _ARTEFACT_S,
        at_s=artefact_at_s + after_ms / MS_PER_S,
        weight=size_uv,
        n_samples=n_samples,
        rate_hz=scenario.rate_hz,
    )
    return scenario.reference_uv * noise + hum + transients


def _swing(time_s: np.ndarray) -> np.ndarray:
    """Swing to both sides, 1 at its greatest, some tens of ms long, without a net area."""
    turn = time_s / _ARTEFACT_SD_S
    return turn * np.exp(0.5 * (1 - turn**2))


def draw_bad(scenario: Scenario, *, rng: np.random.Generator) -> list[BadContact]:
    """Choose the bad contacts: neither an end of the array nor near to layer 4."""
    chosen: list[BadContact] = []
    kinds = [("dead", name) for name in scenario.dead]
    kinds += [("noisy", name) for name in scenario.noisy]
    for kind, name in kinds:
        depth_um = np.array(scenario.contact_depth_um)
        far = np.abs(depth_um - scenario.area(name).layer4_um) > scenario.spare_um
        far[[0, -1]] = False
        far[[bad.channel for bad in chosen if bad.area == name]] = False
        if not far.any():
            raise InputError(
                f"no contact of area {name} may be {kind}: all inner ones are within "
                f"{scenario.spare_um:g} um of layer 4; needed are more contacts"
            )
        channel = int(rng.choice(np.flatnonzero(far)))
        spread = (scenario.dead_uv,) * 2 if kind == "dead" else scenario.noisy_uv
        chosen.append(
            BadContact(name, channel, float(depth_um[channel]), kind, float(rng.uniform(*spread)))
        )
    return chosen
