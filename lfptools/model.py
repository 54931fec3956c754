"""The records that travel through the tool: recordings, contacts, spikes, events, trials.

All are frozen; their arrays are read-only views. Axis order is (trial, channel, time).
Potentials are in uV, times in s, depths in um (0 at the surface, downwards positive).
"""

from collections.abc import Callable
from dataclasses import dataclass, field, fields, replace
from pathlib import Path

import numpy as np

from lfptools.checks import read_only
from lfptools.choices import AnalysisChoices
from lfptools.errors import InputError
from lfptools.units import SIGNAL_UNITS

#: Fewer good contacts than this give no current source density.
MIN_CONTACTS = 5


class Frozen:
    """Turns every array field of a record into a read-only view once it is built."""

    __slots__ = ()

    def __post_init__(self) -> None:
        for each in fields(self):  # type: ignore[arg-type]
            value = getattr(self, each.name)
            if isinstance(value, np.ndarray):
                object.__setattr__(self, each.name, read_only(value))


@dataclass(frozen=True, slots=True, eq=False)
class Run:
    """A stretch of samples without a gap.

    `first` counts samples in the stored stream, `start_s` is the time of that sample on the
    source's clock.
    """

    first: int
    n_samples: int
    start_s: float


@dataclass(frozen=True, slots=True, eq=False)
class Recording(Frozen):
    """One stream of one recording, read lazily: a list of contiguous runs.

    `fetch(first, last, channels)` returns raw counts, shape (last - first, len(channels));
    uV = counts * gain_uv + offset_uv, per channel.
    """

    source: str
    clock: str
    rate_hz: float
    channel_names: tuple[str, ...]
    runs: tuple[Run, ...]
    gain_uv: np.ndarray  # (n_channels,)
    offset_uv: np.ndarray  # (n_channels,)
    fetch: Callable[[int, int, np.ndarray], np.ndarray]
    files: tuple[Path, ...] = ()
    depth_um: np.ndarray | None = None  # (n_channels,) as the file gives it, where it does
    amplifier_hz: tuple[float, float] | None = None

    @property
    def n_channels(self) -> int:
        """Number of channels in the stream."""
        return len(self.channel_names)

    @property
    def n_samples(self) -> int:
        """Number of samples in all runs."""
        return sum(run.n_samples for run in self.runs)

    @property
    def duration_s(self) -> float:
        """Recorded time, gaps not counted."""
        return self.n_samples / self.rate_hz

    @property
    def spans_s(self) -> tuple[tuple[float, float], ...]:
        """First and last moment of each run on the source's clock, in s."""
        return tuple((run.start_s, run.start_s + run.n_samples / self.rate_hz) for run in self.runs)

    def read_uv(self, first: int, last: int, channels: np.ndarray) -> np.ndarray:
        """Return samples [first, last) of `channels` in uV, shape (n_channels, n_samples)."""
        counts = self.fetch(first, last, channels)
        return counts.T * self.gain_uv[channels, None] + self.offset_uv[channels, None]

    def locate(self, time_s: float, before: int, after: int) -> int | None:
        """Return the stored sample nearest to `time_s`, or None.

        None where [sample - before, sample + after) is not whole inside one run.
        """
        for run in self.runs:
            inside = round((time_s - run.start_s) * self.rate_hz)
            if inside - before >= 0 and inside + after <= run.n_samples:
                return run.first + inside
        return None

    def time_of(self, sample: int) -> float:
        """Return the time of a stored sample on the source's clock, in s."""
        for run in self.runs:
            if run.first <= sample < run.first + run.n_samples:
                return run.start_s + (sample - run.first) / self.rate_hz
        raise InputError(f"sample {sample} is not in the recording of source {self.source!r}")


def nearest_contact(depths_um: np.ndarray, depth_um: float) -> int | None:
    """Return which of rising depths (n,) is nearest to `depth_um`; see `Contacts.nearest`."""
    at = int(np.argmin(np.abs(depths_um - depth_um)))
    gaps_um = np.diff(depths_um)
    ends_um = (gaps_um[0] / 2, gaps_um[-1] / 2) if len(gaps_um) else (0.0, 0.0)
    inside = depths_um[0] - ends_um[0] <= depth_um <= depths_um[-1] + ends_um[1]
    return at if inside else None


@dataclass(frozen=True, slots=True, eq=False)
class Contacts(Frozen):
    """The contacts of one linear array, from the surface down."""

    channel: np.ndarray  # (n,) index in the recording
    depth_um: np.ndarray  # (n,) rising
    bad: np.ndarray  # (n,) bool
    why: tuple[str, ...]  # (n,) reason in words, empty where good

    def __len__(self) -> int:
        return len(self.channel)

    def nearest(self, depth_um: float) -> int | None:
        """Return the index of the contact nearest to a depth; None beyond the array's ends.

        An end reaches half the distance to the next contact further.
        """
        return nearest_contact(self.depth_um, depth_um)

    def mark(self, index: int, why: str) -> "Contacts":
        """Return a copy with contact `index` bad for the reason `why` (the first one stays)."""
        bad = self.bad.copy()
        reasons = list(self.why)
        reasons[index] = reasons[index] if bad[index] else why
        bad[index] = True
        return replace(self, bad=bad, why=tuple(reasons))


@dataclass(frozen=True, slots=True, eq=False)
class SpikeTrains(Frozen):
    """Spike times of sorted units, one array a unit, in s on the session's clock."""

    unit: tuple[str, ...]
    area: tuple[str, ...]
    depth_um: np.ndarray  # (n_units,), NaN where unknown
    time_s: tuple[np.ndarray, ...]

    def __len__(self) -> int:
        return len(self.unit)


@dataclass(frozen=True, slots=True, eq=False)
class Events(Frozen):
    """The stimuli, in the order of the table."""

    time_s: np.ndarray  # (n,) on the session's clock, delays taken off
    condition: tuple[str, ...]
    factors: dict[str, tuple[str, ...]] = field(default_factory=dict)
    dropped: np.ndarray | None = None  # (n,) bool, left out by hand

    def __len__(self) -> int:
        return len(self.time_s)

    @property
    def conditions(self) -> tuple[str, ...]:
        """Conditions in the order of their first appearance."""
        return tuple(dict.fromkeys(self.condition))


@dataclass(frozen=True, slots=True, eq=False)
class Area:
    """One recorded area; `recording` and `contacts` are None where no LFP was recorded."""

    name: str
    recording: Recording | None = None
    contacts: Contacts | None = None
    layers: dict[str, tuple[float, float]] = field(default_factory=dict)
    signal_depth_um: float | None = None  # of the contact that stands for it, where it is given


@dataclass(frozen=True, slots=True, eq=False)
class Session:
    """One session, opened: areas, spikes and events on one clock, and the user's choices."""

    name: str
    areas: tuple[Area, ...]
    events: Events
    choices: AnalysisChoices
    spikes: SpikeTrains | None = None
    subject: str | None = None
    files: tuple[Path, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Trials(Frozen):
    """The accepted trials of one area, baseline taken off each channel of each trial."""

    area: str
    data_uv: np.ndarray  # (n_trials, n_channels, n_times), float32
    time_s: np.ndarray  # (n_times,), 0 at the stimulus
    rate_hz: float
    contacts: Contacts
    amplifier_hz: tuple[float, float] | None = None
    layers: dict[str, tuple[float, float]] = field(default_factory=dict)
    signal_depth_um: float | None = None  # as in `Area`


@dataclass(frozen=True, slots=True, eq=False)
class Signals(Frozen):
    """Time courses of one area, trial by trial: contacts, currents, or the one that stands for it.

    `kind` is "lfp" (uV) or "csd" (uA/mm^3, sinks negative).
    """

    area: str
    kind: str
    channel: np.ndarray  # (n_signals,) index in the recording
    depth_um: np.ndarray  # (n_signals,)
    data: np.ndarray  # (n_trials, n_signals, n_times)
    time_s: np.ndarray  # (n_times,)
    rate_hz: float
    note: str = ""

    @property
    def unit(self) -> str:
        """Unit of `data`."""
        return SIGNAL_UNITS[self.kind]

    @property
    def label(self) -> str:
        """Name of the signal in tables: its kind and, where it is one, its depth."""
        return f"{self.kind} {self.depth_um[0]:g} um" if len(self.depth_um) == 1 else self.kind


@dataclass(frozen=True, slots=True, eq=False)
class TrialTable(Frozen):
    """One row an event: accepted or not and why."""

    time_s: np.ndarray  # (n_events,)
    condition: np.ndarray  # (n_events,) of str
    reason: np.ndarray  # (n_events,) of str, empty where accepted
    factors: dict[str, tuple[str, ...]] = field(default_factory=dict)

    @property
    def accepted(self) -> np.ndarray:
        """Bool per event."""
        return self.reason == ""

    @property
    def conditions(self) -> tuple[str, ...]:
        """Conditions in the order of their first appearance."""
        return tuple(dict.fromkeys(self.condition.tolist()))

    def accepted_condition(self) -> np.ndarray:
        """Condition of each accepted trial, shape (n_trials,)."""
        return self.condition[self.accepted]

    def accepted_time_s(self) -> np.ndarray:
        """Stimulus time of each accepted trial, shape (n_trials,)."""
        return self.time_s[self.accepted]

    def rejected_by_reason(self) -> dict[str, int]:
        """Count of rejected trials by reason."""
        reasons, counts = np.unique(self.reason[~self.accepted], return_counts=True)
        return dict(zip(reasons.tolist(), counts.tolist(), strict=True))


@dataclass(frozen=True, slots=True, eq=False)
class CutSession:
    """A session cut into trials: all that the analyses need and no file behind it."""

    name: str
    table: TrialTable
    areas: tuple[Trials, ...]  # those with LFP, in the order of the pathway
    area_names: tuple[str, ...]  # all, in the order of the pathway
    choices: AnalysisChoices
    spikes: SpikeTrains | None = None

    @property
    def condition(self) -> np.ndarray:
        """Condition of each accepted trial, shape (n_trials,)."""
        return self.table.accepted_condition()

    def trials_of(self, area: str) -> Trials | None:
        """Return the trials of `area`, or None where no LFP was recorded there."""
        return next((each for each in self.areas if each.area == area), None)
