"""What a simulated session is made of: frozen records with every setting and its default.

The scene: a rat, one whisker deflected ("single") or an air puff on the whole pad ("pad"),
and one linear array each in S1, S2 and M1. Every record is plain numbers, names and tuples,
so that a scenario can be written beside the recording it made.
"""

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field

from lfptools import checks
from lfptools.errors import InputError

Span = tuple[float, float]


@dataclass(frozen=True, slots=True)
class Bump:
    """A Gaussian in depth; `weight` is its height relative to the others."""

    depth_um: float
    sd_um: float
    weight: float = 1.0


@dataclass(frozen=True, slots=True)
class Layered:
    """A current profile over depth: sinks, and sources scaled so that no net current is left."""

    sinks: tuple[Bump, ...]
    sources: tuple[Bump, ...]


@dataclass(frozen=True, slots=True)
class Wave:
    """An evoked wave of one area; its sink is greatest `peak_ms` after the stimulus."""

    peak_ms: float
    rise_ms: float  # from its start to its greatest sink
    sharpness: float  # exponent k of the pulse: the larger, the narrower
    shift_sd_ms: float  # of single trials
    density_ua_mm3: float  # size of its greatest sink in a trial of gain 1
    profile: Layered


@dataclass(frozen=True, slots=True)
class AreaScenario:
    """One area: the waves by window, the layers, and what goes on there without a stimulus.

    `ongoing` lists the further layered sources of the ongoing activity; the first source
    always has the profile of the first wave, and only that one takes part in coupling.
    """

    name: str
    layer4_um: float  # depth of the first wave's main sink
    waves: Mapping[str, Wave]
    ongoing: tuple[Layered, ...]
    layers: Mapping[str, Span]
    starts_late_s: float = 0.0  # its file starts this much later than the first


@dataclass(frozen=True, slots=True)
class Condition:
    """A kind of stimulus: how wide the responding tissue is and how strong its currents."""

    name: str
    radius_um: float
    strength: float
    whiskers: tuple[str, ...]  # drawn at random, trial by trial; no bearing on the response


@dataclass(frozen=True, slots=True)
class Window:
    """A window of the analysis that holds one wave of each area."""

    name: str
    span_ms: Span
    direction_ms: Span


@dataclass(frozen=True, slots=True)
class Link:
    """Directed coupling: the follower receives the leader's ongoing source of earlier."""

    leader: str
    follower: str
    window: str
    gate_ms: Span  # after each stimulus
    delay_ms: float = 6.0


@dataclass(frozen=True, slots=True)
class UnitsScenario:
    """The sorted units of every area."""

    n_units: int = 6
    n_locked: int = 3
    baseline_hz: Span = (8.0, 15.0)
    rise: float = 4.0  # rate at the peak of the first wave, relative to baseline
    fall: float = 0.3  # rate around the last wave, relative to baseline
    fall_ms: Span = (-40.0, 55.0)  # around the peak of the last wave
    locking: float = 0.6  # m of 1 + m cos(phase - preferred)
    band_hz: Span = (30.0, 90.0)
    refractory_ms: float = 2.0


def _early(peak_ms: float, sink_um: float, above_um: float, below_um: float) -> Wave:
    return Wave(
        peak_ms=peak_ms,
        rise_ms=8.0,
        sharpness=4.0,
        shift_sd_ms=1.5,
        density_ua_mm3=1.15,
        profile=Layered((Bump(sink_um, 110.0),), (Bump(above_um, 110.0), Bump(below_um, 160.0))),
    )


def _late(peak_ms: float, main_um: float, layer4_um: float, sources: tuple[Bump, ...]) -> Wave:
    """Return a wave whose main sink lies elsewhere and whose shoulder reaches layer 4."""
    return Wave(
        peak_ms=peak_ms,
        rise_ms=34.0,
        sharpness=11.0,
        shift_sd_ms=4.0,
        density_ua_mm3=0.95,
        profile=Layered((Bump(main_um, 130.0), Bump(layer4_um, 110.0, 0.7)), sources),
    )


def _sensory(
    name: str, early_ms: float, late_ms: float, offset_um: float, **more: float
) -> AreaScenario:
    """Return a six-layered area with its layer 4 around 600 um; `offset_um` moves the rest."""
    return AreaScenario(
        name=name,
        layer4_um=600.0,
        waves={
            "early": _early(early_ms, 600.0, 280.0 + offset_um, 1000.0 + offset_um),
            "late": _late(
                late_ms, 330.0, 600.0, (Bump(20.0, 80.0), Bump(1050.0 + offset_um, 160.0))
            ),
        },
        ongoing=(
            Layered((Bump(220.0 + offset_um, 90.0),), (Bump(20.0, 70.0), Bump(420.0, 80.0))),
            Layered((Bump(1020.0 - offset_um, 130.0),), (Bump(760.0, 90.0), Bump(1330.0, 130.0))),
        ),
        layers={
            "L1": (0.0, 150.0),
            "L23": (150.0, 450.0),
            "L4": (450.0, 750.0),
            "L5": (750.0, 1150.0),
            "L6": (1150.0, 1500.0),
        },
        **more,
    )


def _motor() -> AreaScenario:
    return AreaScenario(
        name="M1",
        layer4_um=500.0,
        waves={
            "early": _early(24.0, 500.0, 170.0, 880.0),
            "late": _late(118.0, 770.0, 500.0, (Bump(140.0, 100.0), Bump(1200.0, 150.0))),
        },
        ongoing=(
            Layered((Bump(170.0, 80.0),), (Bump(20.0, 60.0), Bump(340.0, 80.0))),
            Layered((Bump(900.0, 120.0),), (Bump(660.0, 80.0), Bump(1200.0, 120.0))),
        ),
        layers={
            "L1": (0.0, 150.0),
            "L23": (150.0, 400.0),
            "L4": (400.0, 600.0),
            "L5": (600.0, 1100.0),
            "L6": (1100.0, 1500.0),
        },
        starts_late_s=0.3,
    )


def _areas() -> tuple[AreaScenario, ...]:
    return (
        _sensory("S1", 13.0, 146.0, 0.0),
        _sensory("S2", 18.0, 132.0, 30.0, starts_late_s=0.5),
        _motor(),
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class Scenario:
    """A whole session; `Scenario()` is the demo.

    Raises
    ------
    InputError
        On values that contradict one another or that no recording can have.
    """

    areas: tuple[AreaScenario, ...] = field(default_factory=_areas)
    conditions: tuple[Condition, ...] = (
        Condition("single", radius_um=400.0, strength=1.0, whiskers=("C1", "C2")),
        Condition("pad", radius_um=1000.0, strength=1.3, whiskers=("all",)),
    )
    windows: tuple[Window, ...] = (
        Window("early", span_ms=(5.0, 40.0), direction_ms=(0.0, 100.0)),
        Window("late", span_ms=(100.0, 200.0), direction_ms=(100.0, 220.0)),
    )
    n_trials: int = 120  # of each condition
    interval_s: Span = (1.0, 1.5)  # between stimuli, uniform
    lead_s: float = 2.0  # recorded before the first and after the last stimulus
    gain_sd: float = 0.2  # of single trials
    shared: float = 0.0  # share of the variance of gain and shift common to all areas

    rate_hz: float = 2500.0
    first_sample: int = 25_000  # of the clock, where the recording starts
    n_contacts: int = 16
    pitch_um: float = 100.0
    amplifier_hz: Span = (0.5, 500.0)

    conductivity_s_m: float = 0.27
    cortex_um: float = 1800.0  # sources lie between the surface and here
    step_um: float = 10.0

    ongoing_density_ua_mm3: float = 0.42  # sd at the contact of layer 4
    ongoing_radius_um: float = 500.0
    ongoing_corner_hz: float = 1.0  # power flat below, 1/f above
    coupling: float = 0.4  # c of every link, of sources of equal variance; 0 switches it off
    links: tuple[Link, ...] = (
        Link("S1", "M1", window="early", gate_ms=(0.0, 100.0)),
        Link("M1", "S1", window="late", gate_ms=(100.0, 220.0)),
    )

    sensor_uv: float = 2.0  # sd, white, each contact its own
    reference_uv: float = 15.0  # sd, 1/f, the same on every channel of every area
    hum_uv: float = 0.0  # amplitude
    hum_hz: float = 50.0
    dead: tuple[str, ...] = ("S1",)  # areas with a dead contact
    dead_uv: float = 0.5  # sd of what is left of it
    noisy: tuple[str, ...] = ("S2",)  # areas with a noisy contact
    noisy_uv: Span = (40.0, 60.0)  # sd of its noise
    spare_um: float = 300.0  # no bad contact so near to the sink of layer 4
    artefact_share: float = 0.04  # of all trials
    artefact_uv: Span = (3000.0, 6000.0)
    artefact_ms: Span = (-60.0, 150.0)  # its centre after the stimulus

    units: UnitsScenario = UnitsScenario()

    def __post_init__(self) -> None:
        for name in ("rate_hz", "pitch_um", "conductivity_s_m", "step_um", "cortex_um"):
            checks.positive(name, getattr(self, name))
        for name in ("n_trials", "n_contacts"):
            _at_least(name, getattr(self, name), 1)
        for name in _NOT_NEGATIVE:
            _at_least(name, getattr(self, name), 0)
        for name in ("shared", "artefact_share"):
            _share(name, getattr(self, name))
        _share("units.locking", self.units.locking)
        if self.units.n_locked > self.units.n_units:
            raise InputError(
                f"units.n_locked is {self.units.n_locked}; there are {self.units.n_units} units"
            )
        checks.span("interval_s", self.interval_s, "s")
        _long_enough(self)
        _names_fit(self)

    @property
    def contact_depth_um(self) -> tuple[float, ...]:
        """Depths of the contacts of every array, in um."""
        return tuple(index * self.pitch_um for index in range(self.n_contacts))

    @property
    def start_s(self) -> float:
        """Time of the first sample on the clock, in s."""
        return self.first_sample / self.rate_hz

    def area(self, name: str) -> AreaScenario:
        """Return the area called `name`."""
        return next(area for area in self.areas if area.name == name)

    def as_plain(self) -> dict:
        """Return every setting as plain dicts and lists."""
        return asdict(self)


_NOT_NEGATIVE = (
    "first_sample",
    "lead_s",
    "gain_sd",
    "ongoing_density_ua_mm3",
    "sensor_uv",
    "reference_uv",
    "hum_uv",
    "dead_uv",
)

_LONGEST_RESPONSE_S = 0.3


def _at_least(name: str, value: float, lowest: float) -> None:
    if not value >= lowest:
        raise InputError(f"{name} is {value:g}; it must be at least {lowest:g}")


def _share(name: str, value: float) -> None:
    if not 0 <= value <= 1:
        raise InputError(f"{name} is {value:g}; it must lie between 0 and 1")


def _long_enough(scenario: Scenario) -> None:
    """Refuse stimuli that follow one another before the response is over."""
    if scenario.interval_s[0] < _LONGEST_RESPONSE_S:
        raise InputError(
            f"interval_s begins at {scenario.interval_s[0]:g} s; responses last up to "
            f"{_LONGEST_RESPONSE_S:g} s, so it must begin there or later"
        )


def _names_fit(scenario: Scenario) -> None:
    """Refuse links, waves and bad contacts that do not fit the areas and windows there are."""
    areas = [area.name for area in scenario.areas]
    windows = [window.name for window in scenario.windows]
    for link in scenario.links:
        checks.one_of("the leader of a link", link.leader, areas)
        checks.one_of("the follower of a link", link.follower, areas)
        checks.one_of("the window of a link", link.window, windows)
    for name in (*scenario.dead, *scenario.noisy):
        checks.one_of("an area with a bad contact", name, areas)
    for area in scenario.areas:
        if not 0 <= area.starts_late_s <= scenario.lead_s / 2:
            raise InputError(
                f"area {area.name} starts {area.starts_late_s:g} s late; it must lie between 0 "
                f"and half of lead_s, {scenario.lead_s / 2:g} s"
            )
        if list(area.waves) != windows:
            raise InputError(
                f"area {area.name} has waves for {', '.join(area.waves)}; needed is one for "
                f"each window, in their order: {', '.join(windows)}"
            )
