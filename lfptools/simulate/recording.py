"""A scenario and a random generator come in; a whole session in memory goes out."""

from dataclasses import dataclass

import numpy as np
from scipy.signal import sosfilt

from lfptools.checks import read_only
from lfptools.forward import forward_matrix
from lfptools.model import Events, SpikeTrains
from lfptools.simulate import ongoing, spikes, waves
from lfptools.simulate.scenario import AreaScenario, Layered, Scenario, Wave
from lfptools.simulate.stage import Stage, set_stage
from lfptools.simulate.truth import describe


@dataclass(frozen=True, slots=True, eq=False)
class SimulatedArea:
    """The local field potential of one array."""

    name: str
    data_uv: np.ndarray  # (n_samples, n_channels) float32
    depth_um: np.ndarray  # (n_channels,)

    def __post_init__(self) -> None:
        object.__setattr__(self, "data_uv", read_only(self.data_uv))
        object.__setattr__(self, "depth_um", read_only(self.depth_um))


@dataclass(frozen=True, slots=True, eq=False)
class Simulated:
    """A session with known truth; all times are in s on one clock."""

    scenario: Scenario
    rate_hz: float
    start_s: float  # time of the first sample
    areas: tuple[SimulatedArea, ...]
    events: Events
    spikes: SpikeTrains
    truth: dict  # plain: what truth.json holds


def simulate(scenario: Scenario | None = None, *, rng: np.random.Generator) -> Simulated:
    """Simulate a session: potentials, stimuli, spikes, and the truth about them.

    Each part draws from a stream of its own, so that switching one part off leaves the
    others as they were.

    Parameters
    ----------
    scenario : Scenario, optional
        Every setting; the demo by default.
    rng : np.random.Generator
        A generator of which nothing was drawn yet: the truth names the seed it began with.

    Returns
    -------
    Simulated
        Potentials in uV, sinks and what they make negative.

    Raises
    ------
    InputError
        If an array leaves no contact that may be bad.
    """
    scenario = scenario or Scenario()
    for_stage, for_waves, for_ongoing, for_noise, for_spikes, for_truth = rng.spawn(6)
    stage, events = set_stage(scenario, rng=for_stage)
    draws = _draw_waves(scenario, len(events), rng=for_waves)
    sources = _ongoing(stage, rng=for_ongoing)
    areas, trains = [], []
    for area in scenario.areas:
        courses = _courses(stage, area, draws[area.name])
        own = sources.pop(area.name)
        areas.append(_area(stage, area, courses, own, rng=for_noise))
        trains.extend(_spikes(stage, area, courses, own, rng=for_spikes))
    units = [unit for unit, _ in trains]
    truth = {"seed": _seed_of(rng), **describe(stage, units=units, draws=draws, rng=for_truth)}
    spike_trains = _trains(trains, scenario.start_s)
    return Simulated(
        scenario, scenario.rate_hz, scenario.start_s, tuple(areas), events, spike_trains, truth
    )


def _seed_of(rng: np.random.Generator) -> int | list[int] | None:
    """Return the number that the generator was seeded with."""
    entropy = getattr(rng.bit_generator.seed_seq, "entropy", None)
    if entropy is None or isinstance(entropy, (int, np.integer)):
        return None if entropy is None else int(entropy)
    return [int(each) for each in entropy]


def _draw_waves(
    scenario: Scenario, n_events: int, *, rng: np.random.Generator
) -> dict[str, dict[str, waves.Draws]]:
    """Draw gain and shift of every wave of every area in every trial."""
    common = {window.name: rng.standard_normal((2, n_events)) for window in scenario.windows}
    return {
        area.name: {
            name: waves.draw_trials(
                wave,
                n_events,
                gain_sd=scenario.gain_sd,
                rng=rng,
                shared=scenario.shared,
                common=common[name],
            )
            for name, wave in area.waves.items()
        }
        for area in scenario.areas
    }


def _ongoing(stage: Stage, *, rng: np.random.Generator) -> dict[str, np.ndarray]:
    """Ongoing sources by area, shape (n_sources, n_samples); the first one takes coupling."""
    scenario = stage.scenario
    made = {
        area.name: [
            ongoing.pink(
                stage.n_samples,
                rate_hz=scenario.rate_hz,
                corner_hz=scenario.ongoing_corner_hz,
                rng=rng,
            )
            for _ in range(1 + len(area.ongoing))
        ]
        for area in scenario.areas
    }
    first = {name: sources[0] for name, sources in made.items()}
    for name, coupled in ongoing.couple(first, scenario, stage.at_s).items():
        made[name][0] = coupled
    return {name: np.array(made.pop(name), dtype=np.float32) for name in list(made)}


def _courses(
    stage: Stage, area: AreaScenario, draws: dict[str, waves.Draws]
) -> dict[str, list[np.ndarray]]:
    """Course of each wave through the session, one series a condition, before its strength."""
    return {
        name: [
            _course(stage, wave, draws[name], stage.condition == index)
            for index in range(len(stage.scenario.conditions))
        ]
        for name, wave in area.waves.items()
    }


def _course(stage: Stage, wave: Wave, draws: waves.Draws, chosen: np.ndarray) -> np.ndarray:
    return waves.place(
        lambda time_s: waves.pulse(wave, time_s),
        waves.pulse_span_s(wave),
        at_s=(stage.at_s + draws.shift_s)[chosen],
        weight=draws.gain[chosen],
        n_samples=stage.n_samples,
        rate_hz=stage.scenario.rate_hz,
    )


def ongoing_density(area: AreaScenario, scenario: Scenario, depth_um: np.ndarray) -> np.ndarray:
    """Density of the ongoing sources of unit variance, shape (n_sources, n_depths), uA/mm^3.

    One factor for all makes their sum have the scenario's sd at the contact of layer 4.
    """
    plans = (_first_profile(area), *area.ongoing)
    at_layer4 = [waves.profile(plan, np.array([area.layer4_um]), scenario)[0] for plan in plans]
    factor = scenario.ongoing_density_ua_mm3 / np.sqrt(np.sum(np.square(at_layer4)))
    return factor * np.array([waves.profile(plan, depth_um, scenario) for plan in plans])


def _first_profile(area: AreaScenario) -> Layered:
    return next(iter(area.waves.values())).profile


def _ongoing_uv(area: AreaScenario, scenario: Scenario, depth_um: np.ndarray) -> np.ndarray:
    """Potential of each ongoing source of unit variance, shape (n_depths, n_sources), in uV."""
    cells_um = waves.cell_depth_um(scenario)
    lead = forward_matrix(
        depth_um,
        cells_um,
        radius_um=scenario.ongoing_radius_um,
        conductivity_s_m=scenario.conductivity_s_m,
        step_um=scenario.step_um,
    )
    return lead @ ongoing_density(area, scenario, cells_um).T


def _area(
    stage: Stage,
    area: AreaScenario,
    courses: dict[str, list[np.ndarray]],
    sources: np.ndarray,
    *,
    rng: np.random.Generator,
) -> SimulatedArea:
    """Sum up one array, channel by channel, and pass it through the amplifier."""
    scenario = stage.scenario
    depth_um = np.array(scenario.contact_depth_um)
    bad = {each.channel: each for each in stage.bad if each.area == area.name}
    evoked = [series for of_wave in courses.values() for series in of_wave]
    series = np.array([*evoked, *sources], dtype=np.float32)
    mixing = _mixing(area, scenario, depth_um).astype(np.float32)
    sos = waves.amplifier_sos(scenario)
    data_uv = np.empty((stage.n_samples, len(depth_um)), dtype=np.float32)
    for channel, weights in enumerate(mixing):
        noise = rng.standard_normal(stage.n_samples, dtype=np.float32)
        if channel not in bad:
            noise *= scenario.sensor_uv
            data_uv[:, channel] = sosfilt(sos, weights @ series + stage.common_uv + noise)
        else:  # its own noise arises behind the amplifier
            data_uv[:, channel] = bad[channel].noise_uv * noise
            if bad[channel].kind == "noisy":
                data_uv[:, channel] += sosfilt(sos, weights @ series + stage.common_uv)
    return SimulatedArea(area.name, data_uv, depth_um)


def _mixing(area: AreaScenario, scenario: Scenario, depth_um: np.ndarray) -> np.ndarray:
    """Potential of each evoked course and each ongoing source, (n_depths, n_series), in uV."""
    evoked = [
        waves.evoked_uv(area, name, condition, scenario, depth_um)
        for name in area.waves
        for condition in scenario.conditions
    ]
    return np.column_stack([*evoked, _ongoing_uv(area, scenario, depth_um)])


def _spikes(
    stage: Stage,
    area: AreaScenario,
    courses: dict[str, list[np.ndarray]],
    sources: np.ndarray,
    *,
    rng: np.random.Generator,
) -> list[tuple[spikes.Unit, np.ndarray]]:
    """Draw the units of one area and their spikes."""
    plan, rate_hz = stage.scenario.units, stage.scenario.rate_hz
    first_wave = np.sum(next(iter(courses.values())), axis=0)
    last = list(area.waves.values())[-1]
    relative_rate = spikes.response(first_wave, last, plan, at_s=stage.at_s, rate_hz=rate_hz)
    fired = []
    for unit in spikes.draw_units(area.name, stage.scenario, rng=rng):
        lead = _ongoing_uv(area, stage.scenario, np.array([unit.depth_um]))[0]
        field_uv = lead @ sources
        fired.append(
            (
                unit,
                spikes.fire(relative_rate, unit, plan, field_uv=field_uv, rate_hz=rate_hz, rng=rng),
            )
        )
    return fired


def _trains(trains: list[tuple[spikes.Unit, np.ndarray]], start_s: float) -> SpikeTrains:
    units = [unit for unit, _ in trains]
    return SpikeTrains(
        unit=tuple(unit.name for unit in units),
        area=tuple(unit.area for unit in units),
        depth_um=np.array([unit.depth_um for unit in units]),
        time_s=tuple(start_s + time_s for _, time_s in trains),
    )
