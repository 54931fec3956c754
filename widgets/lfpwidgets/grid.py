"""Edges of a window as a hand gives them come in; edges on the sample grid go out."""

import math
from dataclasses import dataclass

from lfptools.choices import Span
from lfptools.errors import InputError
from lfptools.model import CutSession
from lfptools.units import ms_from_s

#: A window holds at least this many steps of the grid.
LEAST_STEPS = 3

#: Sliders and sums of floats miss a grid point by less; finer than any sample, ms.
_NEAR_MS = 1e-6


@dataclass(frozen=True, slots=True)
class SampleGrid:
    """Where the edges of windows may lie: multiples of a step, inside the trial."""

    step_ms: float
    trial_ms: Span

    @property
    def ends_ms(self) -> Span:
        """First and last point of the grid."""
        first, last = self._ends()
        return self._at(first), self._at(last)

    def span(self, name: str, first_ms: float, last_ms: float, *, now_ms: Span | None) -> Span:
        """Return the span of a window, each edge on the grid.

        Parameters
        ----------
        name : str
            The window, for the message.
        first_ms, last_ms : float
            Where the edges shall be, ms.
        now_ms : (float, float) or None
            Where they are: an edge that stays there need not lie on the grid.

        Raises
        ------
        InputError
            If an edge is no number or outside the trial, or the edges are less than 3 samples
            apart.
        """
        edges = []
        for at, (edge, value) in enumerate((("first", first_ms), ("last", last_ms))):
            stays = now_ms is not None and abs(value - now_ms[at]) <= _NEAR_MS
            edges.append(now_ms[at] if stays and now_ms else self._edge(name, edge, value))
        first, last = edges
        least_ms = LEAST_STEPS * self.step_ms
        if last - first < least_ms - _NEAR_MS:
            raise InputError(
                f"window {name!r} would run from {first:g} to {last:g} ms; needed is a last edge "
                f"at least {least_ms:g} ms ({LEAST_STEPS} samples) after the first"
            )
        return first, last

    def stepped(self, value_ms: float, n_steps: int) -> float:
        """Return the grid point `n_steps` on; one step from between two points is to the next.

        It may lie outside the trial: `span` refuses it.
        """
        here = value_ms / self.step_ms
        near = _NEAR_MS / self.step_ms
        start = math.floor(here + near) if n_steps > 0 else math.ceil(here - near)
        return self._at(start + n_steps)

    def _edge(self, name: str, edge: str, value_ms: float) -> float:
        low, high = self.trial_ms
        if not low - _NEAR_MS <= value_ms <= high + _NEAR_MS:  # not a number lands here, too
            raise InputError(
                f"the {edge} edge of window {name!r} is {value_ms:g} ms; needed is a time inside "
                f"the trial, {low:g} to {high:g} ms"
            )
        first, last = self._ends()
        nearest = math.floor(value_ms / self.step_ms + 0.5)  # halves go up, wherever they lie
        return self._at(min(max(nearest, first), last))

    def _ends(self) -> tuple[int, int]:
        low, high = self.trial_ms
        near = _NEAR_MS / self.step_ms
        return math.ceil(low / self.step_ms - near), math.floor(high / self.step_ms + near)

    def _at(self, n_steps: int) -> float:
        # To 1e-6 ms, which no sample is missed by, so that 0.4 * 3 is written as 1.2.
        return round(n_steps * self.step_ms, 6)


def grid_of(cut: CutSession) -> SampleGrid:
    """Return the grid of the slowest area's samples; 1 ms where no LFP was recorded."""
    rates_hz = [trials.rate_hz for trials in cut.areas]
    step_ms = ms_from_s(1 / min(rates_hz)) if rates_hz else 1.0
    return SampleGrid(step_ms=step_ms, trial_ms=cut.choices.trials.window_ms)
