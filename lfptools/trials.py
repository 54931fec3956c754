"""Recordings and stimulus times in, trials and averages out; each window is read by itself.

Two passes over the windows of all stimuli: `survey` reads what is needed to find bad contacts
and bad trials and keeps a few numbers a trial; `cut_trials` reads the accepted ones. Nothing here
depends on the length of the recording.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from lfptools import clean
from lfptools.checks import read_only
from lfptools.errors import InputError
from lfptools.model import Area, Contacts, CutSession, Recording, Session, Trials, TrialTable

#: A condition with fewer accepted trials is not estimated.
MIN_TRIALS = 8
FEW_TRIALS = f"fewer than {MIN_TRIALS} accepted trials"

OUTSIDE = "not whole inside the recording"
BY_HAND = "left out by hand"

Progress = Callable[[str, float], None]


def no_progress(_stage: str, _share: float) -> None:
    """Take a progress report and do nothing with it."""


def sample_span(span_s: tuple[float, float], rate_hz: float) -> tuple[int, int]:
    """Return the half-open sample span [first, last) of a span in s, 0 at the stimulus."""
    first, last = (int(np.ceil(edge * rate_hz - 1e-6)) for edge in span_s)
    return first, last


def window_mask(time_s: np.ndarray, span_s: tuple[float, float]) -> np.ndarray:
    """Return which of `time_s` lie in the half-open span, shape (n_times,)."""
    return (time_s >= span_s[0] - 1e-9) & (time_s < span_s[1] - 1e-9)


@dataclass(frozen=True, slots=True, eq=False)
class AreaSurvey:
    """What the first pass found in one area."""

    amplitude_uv: np.ndarray  # (n_events, n_contacts) peak to peak, NaN where not read
    step_uv: np.ndarray  # (n_events, n_contacts) SD of the steps from one sample to the next
    local_uv: np.ndarray  # (n_events, n_contacts) the same, the most similar neighbour taken off
    sd_uv: np.ndarray  # (n_events, n_contacts) SD over the window


def windows_of(
    recording: Recording, channels: np.ndarray, time_s: np.ndarray, span_s: tuple[float, float]
) -> Iterator[tuple[int, float, np.ndarray]]:
    """Yield (event, offset_s, window) for each event whose window is whole inside one run.

    `window` is (n_channels, n_times) in uV; `offset_s` is the time of the sample that stands
    for the stimulus, minus the stimulus time: at most half a sample.
    """
    first, last = sample_span(span_s, recording.rate_hz)
    for event, time in enumerate(time_s):
        sample = recording.locate(time, -first, last)
        if sample is not None:
            offset = recording.time_of(sample) - time
            yield event, offset, recording.read_uv(sample + first, sample + last, channels)


def survey(area: Area, time_s: np.ndarray, span_s: tuple[float, float]) -> AreaSurvey:
    """Read every window of `area` once and keep its amplitude and noise per contact."""
    assert area.recording is not None
    assert area.contacts is not None
    shape = (len(time_s), len(area.contacts))
    amplitude, step, local, sd = (np.full(shape, np.nan) for _ in range(4))
    for event, _, window in windows_of(area.recording, area.contacts.channel, time_s, span_s):
        amplitude[event] = np.ptp(window, axis=1)
        sd[event] = window.std(axis=1)
        step[event], local[event] = clean.step_noise(np.diff(window, axis=1))
    return AreaSurvey(amplitude_uv=amplitude, step_uv=step, local_uv=local, sd_uv=sd)


def cut_trials(session: Session, *, progress: Progress = no_progress) -> CutSession:
    """Find bad contacts and bad trials, then cut the accepted trials of every area.

    Raises
    ------
    InputError
        If no condition keeps 8 accepted trials.
    """
    choices = session.choices
    span_s = choices.trials.span_s
    time_s = session.events.time_s
    condition = np.array(session.events.condition)
    reason = np.full(len(time_s), "", dtype=object)
    if session.events.dropped is not None:
        reason[session.events.dropped] = BY_HAND
    recorded = [area for area in session.areas if area.recording is not None]
    contacts: dict[str, Contacts] = {}
    for number, area in enumerate(recorded):
        progress("looking for bad contacts and trials", number / len(recorded))
        found = survey(area, time_s, span_s)
        assert area.contacts is not None
        missing = ~np.isfinite(found.amplitude_uv).all(axis=1)
        _give_reason(reason, missing, OUTSIDE)
        contacts[area.name] = clean.find_bad_contacts(
            area.contacts,
            found.step_uv[~missing],
            found.local_uv[~missing],
            factor=choices.clean.contact_factor,
        )
        large = clean.large_trials(
            found.amplitude_uv[:, ~contacts[area.name].bad],
            condition,
            robust_sd=choices.clean.amplitude_sd,
        )
        _give_reason(reason, large, f"amplitude in {area.name}")
    table = TrialTable(
        time_s=time_s,
        condition=condition,
        reason=reason.astype(str),
        factors=session.events.factors,
    )
    _enough(table)
    areas = []
    for number, area in enumerate(recorded):
        progress("cutting trials", number / len(recorded))
        areas.append(_cut_area(area, contacts[area.name], table, session))
    return CutSession(
        name=session.name,
        table=table,
        areas=tuple(areas),
        area_names=tuple(area.name for area in session.areas),
        choices=choices,
        spikes=session.spikes,
    )


def _cut_area(area: Area, contacts: Contacts, table: TrialTable, session: Session) -> Trials:
    recording = area.recording
    assert recording is not None
    trials = session.choices.trials
    first, last = sample_span(trials.span_s, recording.rate_hz)
    span_s = (first / recording.rate_hz, last / recording.rate_hz)
    times = table.accepted_time_s()
    data = np.empty((len(times), len(contacts), last - first), dtype=np.float32)
    offsets = np.empty(len(times))
    for trial, offset, window in windows_of(recording, contacts.channel, times, span_s):
        data[trial] = window
        offsets[trial] = offset
    time_s = np.arange(first, last) / recording.rate_hz + offsets.mean()
    whole = Trials(
        area=area.name,
        data_uv=data,
        time_s=time_s,
        rate_hz=recording.rate_hz,
        contacts=contacts,
        amplifier_hz=recording.amplifier_hz,
        layers=area.layers,
        signal_depth_um=area.signal_depth_um,
    )
    return without_baseline(whole, trials.baseline_s)


def without_baseline(trials: Trials, span_s: tuple[float, float]) -> Trials:
    """Return trials with the mean over `span_s` taken off each channel of each trial.

    Raises
    ------
    InputError
        If the span holds no sample.
    """
    inside = window_mask(trials.time_s, span_s)
    if not inside.any():
        raise InputError(f"the baseline {span_s} s holds no sample of the trials")
    data = trials.data_uv
    level = data[..., inside].mean(axis=-1, dtype=float).astype(data.dtype)
    return replace(trials, data_uv=read_only(data - level[..., None]))


def _give_reason(reason: np.ndarray, where: np.ndarray, text: str) -> None:
    """Write a reason where none stands yet, in place: the first one found counts."""
    reason[where & (reason == "")] = text


def _enough(table: TrialTable) -> None:
    accepted = table.accepted_condition()
    counts = {each: int(np.count_nonzero(accepted == each)) for each in table.conditions}
    if max(counts.values(), default=0) < MIN_TRIALS:
        found = ", ".join(f"{name}: {count}" for name, count in counts.items())
        why = ", ".join(f"{name}: {count}" for name, count in table.rejected_by_reason().items())
        raise InputError(
            f"no condition keeps {MIN_TRIALS} accepted trials (accepted: {found}; rejected: "
            f"{why or 'none'}); needed are at least {MIN_TRIALS} in one condition"
        )


@dataclass(frozen=True, slots=True, eq=False)
class StreamedAverage:
    """Mean and spread over trials, read window by window."""

    mean_uv: np.ndarray  # (n_channels, n_times)
    sd_uv: np.ndarray  # (n_channels, n_times) SD over trials
    time_s: np.ndarray  # (n_times,)
    n_trials: int


def stream_average(
    recording: Recording,
    channels: np.ndarray,
    time_s: np.ndarray,
    *,
    span_s: tuple[float, float],
    baseline_s: tuple[float, float],
) -> StreamedAverage:
    """Average the windows around `time_s` without holding more than one of them.

    Parameters
    ----------
    recording : Recording
        Where to read.
    channels : ndarray of int, shape (n_channels,)
        Channels of the recording.
    time_s : ndarray, shape (n_events,)
        Stimulus times on the recording's clock; those not whole inside a run are left out.
    span_s, baseline_s : (float, float)
        Window and baseline in s, 0 at the stimulus, half-open.

    Raises
    ------
    InputError
        If fewer than 2 windows are whole inside the recording.
    """
    first, last = sample_span(span_s, recording.rate_hz)
    axis_s = np.arange(first, last) / recording.rate_hz
    inside = window_mask(axis_s, baseline_s)
    mean = np.zeros((len(channels), last - first))
    squares = np.zeros_like(mean)
    n_trials, offsets = 0, 0.0
    for _, offset, window in windows_of(recording, channels, time_s, span_s):
        n_trials += 1
        offsets += offset
        window = window - window[:, inside].mean(axis=1, keepdims=True)
        step = window - mean  # Welford: no difference of two large sums
        mean += step / n_trials
        squares += step * (window - mean)
    if n_trials < 2:
        raise InputError(
            f"{n_trials} of {len(time_s)} windows lie whole inside the recording of source "
            f"{recording.source!r}; an average needs at least 2"
        )
    sd = np.sqrt(squares / (n_trials - 1))
    return StreamedAverage(mean, sd, axis_s + offsets / n_trials, n_trials)
