"""An opened session in, what is legal in it but hardly meant out, in sentences."""

from collections.abc import Iterator, Sequence

import numpy as np

from lfptools.io.opening import inside_spans
from lfptools.model import Recording, Session

#: Sources whose durations differ by more than this share were hardly recorded together.
_UNEQUAL = 0.10
#: A unit that fires less has hardly the times that it seems to have.
_LEAST_RATE_HZ = 0.01
#: Units named in one sentence.
_MOST_NAMED = 3


def doubts(session: Session) -> list[str]:
    """Return what the user should look at before a run, each in one sentence."""
    return [*_durations(session), *_events(session), *_units(session)]


def recordings_of(session: Session) -> list[Recording]:
    """Return the recordings of a session, each once, in the order of the areas."""
    found = {area.recording.source: area.recording for area in session.areas if area.recording}
    return list(found.values())


def unit_rates_hz(session: Session) -> np.ndarray:
    """Return the mean rate of each unit over all that was recorded, (n_units,).

    A unit whose spikes reach beyond the recordings, or that has none beside it, is taken over
    the time from its first to its last spike too: times in ms make it long.
    """
    if session.spikes is None:
        return np.empty(0)
    spans = [span for each in recordings_of(session) for span in each.spans_s]
    edges = [edge for span in spans for edge in span]
    if not edges:  # spikes alone: the time between the first and the last of all
        edges = [edge for each in session.spikes.time_s if len(each) for edge in each[[0, -1]]]
    rates = []
    for times in session.spikes.time_s:
        all_edges = [*edges, *(times[[0, -1]] if len(times) else ())]
        length_s = max(all_edges) - min(all_edges) if all_edges else 0.0
        rates.append(len(times) / length_s if length_s > 0 else 0.0)
    return np.array(rates)


def _durations(session: Session) -> Iterator[str]:
    lengths_s = {each.source: each.duration_s for each in recordings_of(session)}
    if lengths_s and min(lengths_s.values()) < (1 - _UNEQUAL) * max(lengths_s.values()):
        listed = ", ".join(f"{name} {length:.1f} s" for name, length in lengths_s.items())
        yield f"the sources differ in duration ({listed}): was one cut short?"


def _events(session: Session) -> Iterator[str]:
    times = session.events.time_s
    for recording in recordings_of(session):
        outside = int(np.count_nonzero(~inside_spans(times, recording.spans_s)))
        if outside:
            first, last = recording.spans_s[0][0], recording.spans_s[-1][1]
            verb = "lies" if outside == 1 else "lie"
            yield (
                f"{outside} of {len(times)} events {verb} outside what source "
                f"{recording.source} recorded, {first:g} to {last:g} s"
            )


def _units(session: Session) -> Iterator[str]:
    spikes, rate_hz = session.spikes, unit_rates_hz(session)
    if spikes is None:
        return
    before_s, after_s = session.choices.trials.span_s
    events_s = session.events.time_s
    span_s = (events_s.min() + before_s, events_s.max() + after_s)
    silent = np.array([not inside_spans(each, [span_s]).any() for each in spikes.time_s], bool)
    for area in dict.fromkeys(spikes.area):
        mine = np.array([where == area for where in spikes.area])
        names = np.array(spikes.unit)
        outside, slow = mine & silent, mine & ~silent & (rate_hz < _LEAST_RATE_HZ)
        if outside.any():
            yield (
                f"{area}: {outside.sum()} of {mine.sum()} units ({_named(names[outside])}) have "
                f"no spike between the first and the last event, {span_s[0]:g} to "
                f"{span_s[1]:g} s; are their times in ms?"
            )
        if slow.any():
            yield (
                f"{area}: {slow.sum()} of {mine.sum()} units ({_named(names[slow])}) fire below "
                f"{_LEAST_RATE_HZ:g} Hz; are their times in ms?"
            )


def _named(names: Sequence[str]) -> str:
    more = ", ..." if len(names) > _MOST_NAMED else ""
    return ", ".join(names[:_MOST_NAMED]) + more
