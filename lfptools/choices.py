"""What the user chooses, as it stands in the session file: plain frozen records, no behaviour.

The field names are the keys of the file and carry its units (ms, um, Hz). The records reject
unknown keys and wrong types when they are decoded; values that contradict one another are
found by `lfptools.io.session_file`. Every default of the tool stands here and nowhere else.
"""

from typing import Annotated, Literal

import msgspec
from msgspec import Meta, Struct

Span = tuple[float, float]
Positive = Annotated[float, Meta(gt=0)]
NotNegative = Annotated[float, Meta(ge=0)]
Count = Annotated[int, Meta(ge=1)]
Name = Annotated[str, Meta(min_length=1, max_length=100)]
Extremum = Literal["trough", "peak"]


def _default_bands() -> dict[str, Span]:
    return {"theta": (4.0, 8.0), "beta": (13.0, 30.0), "gamma": (30.0, 90.0)}


def _in_s(span_ms: Span) -> Span:
    return span_ms[0] / 1000, span_ms[1] / 1000


class _Record(Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A table of the session file: frozen, keyword-only, no key beyond those declared."""


class SourceChoice(_Record, frozen=True, kw_only=True):
    """One stream of one recording (`[[source]]`)."""

    name: Name
    format: str
    path: str
    stream: str | None = None
    clock: str | None = None
    delay_ms: float = 0.0
    amplifier_hz: Span | None = None
    rate_hz: Positive | None = None
    n_channels: Count | None = None
    gain_uv: float | None = None
    dtype: str | None = None

    @property
    def clock_name(self) -> str:
        """The clock this source runs on: its own where none is named."""
        return self.clock or self.name


class AreaChoice(_Record, frozen=True, kw_only=True):
    """One recorded area (`[[area]]`), in the order of the pathway."""

    name: Name
    source: str | None = None
    channels: str | list[int] | None = None
    pitch_um: Positive | None = None
    depths_um: list[float] | None = None
    contacts_file: str | None = None
    first_depth_um: float = 0.0
    bad: list[int] = []
    layers: dict[str, Span] = {}
    #: Depth of the contact that stands for the area; None: the one with the strongest sink.
    signal_depth_um: float | None = None


class UnitsChoice(_Record, frozen=True, kw_only=True):
    """Sorted units of one area (`[[units]]`)."""

    area: str
    source: str
    keep: list[str] | None = None


class EventsChoice(_Record, frozen=True, kw_only=True):
    """The table of stimuli (`[events]`)."""

    file: str
    clock: str | None = None
    delay_ms: float = 0.0
    drop: list[int] = []


class TrialsChoice(_Record, frozen=True, kw_only=True):
    """How trials are cut (`[trials]`)."""

    window_ms: Span
    baseline_ms: Span

    @property
    def span_s(self) -> Span:
        """Window of a trial in s, 0 at the stimulus."""
        return _in_s(self.window_ms)

    @property
    def baseline_s(self) -> Span:
        """Baseline in s."""
        return _in_s(self.baseline_ms)


class WindowFor(_Record, frozen=True, kw_only=True):
    """Another span or sign of a window for one area (`[window.for.AREA]`)."""

    span_ms: Span | None = None
    extremum: Extremum | None = None


class WindowChoice(_Record, frozen=True, kw_only=True):
    """One window after the stimulus in which a wave is looked for (`[[window]]`)."""

    name: Name
    span_ms: Span
    extremum: Extremum = "trough"
    areas: list[str] | None = None
    for_: dict[str, WindowFor] = msgspec.field(default={}, name="for")
    direction_ms: Span | None = None
    chosen: Literal["before", "on these trials"] = "before"

    def holds(self, area: str) -> bool:
        """Say whether the window applies to `area`."""
        return self.areas is None or area in self.areas

    def span_s(self, area: str) -> Span:
        """Span of the window in `area`, in s, half-open on the sample grid."""
        own = self.for_.get(area)
        return _in_s(own.span_ms if own and own.span_ms else self.span_ms)

    def extremum_in(self, area: str) -> Extremum:
        """Sign of the wave looked for in `area`."""
        own = self.for_.get(area)
        return own.extremum if own and own.extremum else self.extremum

    @property
    def direction_span_s(self) -> Span:
        """Span used for coupling and direction, in s."""
        return _in_s(self.direction_ms or self.span_ms)


class CleanChoice(_Record, frozen=True, kw_only=True):
    """Rules of rejection (`[clean]`)."""

    #: A trial is rejected when its log peak-to-peak amplitude lies this many robust SDs
    #: above the median of its channel's trials.
    amplitude_sd: Positive = 6.0
    #: A contact is bad when its noise differs from the array's by this factor in SD.
    contact_factor: Annotated[float, Meta(gt=1)] = 4.0


class LatencyChoice(_Record, frozen=True, kw_only=True):
    """How waves are measured (`[latency]`)."""

    smooth_ms: Literal["auto"] | NotNegative = "auto"
    onset: Literal["auto", "half", "quarter"] = "auto"


class CsdChoice(_Record, frozen=True, kw_only=True):
    """Current source density (`[csd]`)."""

    method: Literal["second_derivative"] = "second_derivative"
    conductivity_s_m: Positive = 0.3


class RatesChoice(_Record, frozen=True, kw_only=True):
    """Firing (`[rates]`)."""

    bin_ms: Positive = 1.0
    latency: Literal["poisson"] = "poisson"


class CouplingChoice(_Record, frozen=True, kw_only=True):
    """Spikes against the field (`[coupling]`)."""

    field: str = "neighbour"
    bands_hz: dict[str, Span] = msgspec.field(default_factory=_default_bands)
    n_shuffles: Count = 999


class DirectionChoice(_Record, frozen=True, kw_only=True):
    """Which area leads (`[direction]`)."""

    signal: Literal["csd", "lfp"] = "csd"
    primary: Literal["granger"] = "granger"
    rate_hz: Positive | None = None
    order: Count | None = None
    single_trial: Literal["auto", "project", "keep"] = "auto"
    bands_hz: dict[str, Span] = msgspec.field(default_factory=_default_bands)


class ResampleChoice(_Record, frozen=True, kw_only=True):
    """Resampling (`[resample]`)."""

    n: Annotated[int, Meta(ge=99, le=100_000)] = 2000
    level: Annotated[float, Meta(gt=0.5, lt=1)] = 0.95
    seed: Annotated[int, Meta(ge=0)] = 1


class AnalysisChoices(_Record, frozen=True, kw_only=True):
    """Every choice that bears on the numbers and none that says where files are."""

    trials: TrialsChoice
    window: list[WindowChoice] = []
    clean: CleanChoice = CleanChoice()
    latency: LatencyChoice = LatencyChoice()
    csd: CsdChoice = CsdChoice()
    rates: RatesChoice = RatesChoice()
    coupling: CouplingChoice = CouplingChoice()
    direction: DirectionChoice = DirectionChoice()
    resample: ResampleChoice = ResampleChoice()


class SessionChoices(AnalysisChoices, frozen=True, kw_only=True):
    """The whole session file."""

    session: Name
    events: EventsChoice
    area: Annotated[list[AreaChoice], Meta(min_length=1)]
    subject: str | None = None
    root: str = "."
    source: list[SourceChoice] = []
    units: list[UnitsChoice] = []


def as_plain(choices: Struct) -> dict:
    """Return a record and all it holds as plain dicts and lists, keys as in the file."""
    return msgspec.to_builtins(choices)
