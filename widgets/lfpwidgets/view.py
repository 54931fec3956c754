"""What the bench shows at one moment, as plain records; windows and edits in, windows out."""

from dataclasses import dataclass, replace
from typing import Literal, get_args

import msgspec
import numpy as np

from lfptools.checks import one_of
from lfptools.choices import Extremum, Span, WindowChoice
from lfptools.errors import InputError
from lfptools.model import CutSession
from lfptools.trials import MIN_TRIALS

SignalKind = Literal["csd", "lfp"]

MOST_CHARACTERS = 100


@dataclass(frozen=True, slots=True)  # comparable: it holds no arrays, and equal means unchanged
class View:
    """Windows, and what is looked at."""

    windows: tuple[WindowChoice, ...]
    hand: str  # name of the window in hand, empty where there is none
    condition: str
    area: str
    signal: SignalKind  # what stands for an area
    units: tuple[str, ...] = ()  # names of the units shown; none means all of the area

    @property
    def numbers(self) -> tuple[tuple[WindowChoice, ...], SignalKind]:
        """What bears on the numbers of a run."""
        return self.windows, self.signal

    @property
    def shape(self) -> tuple[tuple[tuple[str, Span, Extremum], ...], SignalKind]:
        """What a hand changes: windows without the marks that moving them leaves."""
        windows = tuple((each.name, each.span_ms, each.extremum) for each in self.windows)
        return windows, self.signal

    def window(self, name: str) -> WindowChoice:
        """Return the window called `name`.

        Raises
        ------
        InputError
            If there is none.
        """
        for each in self.windows:
            if each.name == name:
                return each
        names = ", ".join(repr(each.name) for each in self.windows) or "none is there"
        raise InputError(f"there is no window {name!r}; needed is the name of a window: {names}")


def first_view(cut: CutSession, windows: tuple[WindowChoice, ...]) -> View:
    """Return what the bench shows first: the first window, area and condition that hold data."""
    counts = {name: np.count_nonzero(cut.condition == name) for name in cut.table.conditions}
    return View(
        windows=windows,
        hand=windows[0].name if windows else "",
        condition=next(name for name, count in counts.items() if count >= MIN_TRIALS),
        area=cut.areas[0].area if cut.areas else cut.area_names[0],
        signal=cut.choices.direction.signal,
    )


def units_of(cut: CutSession, area: str) -> tuple[str, ...]:
    """Return the names of an area's units."""
    if cut.spikes is None:
        return ()
    pairs = zip(cut.spikes.unit, cut.spikes.area, strict=True)
    return tuple(unit for unit, where in pairs if where == area)


def looked_at(
    view: View,
    cut: CutSession,
    *,
    condition: str | None,
    area: str | None,
    signal: SignalKind | None,
    units: tuple[str, ...] | None,
) -> View:
    """Return a view of another condition, area, signal or other units; None leaves what is shown.

    Raises
    ------
    InputError
        If the session has no such condition, area or unit in the area, or the signal is
        neither "csd" nor "lfp".
    """
    if condition is not None:
        view = replace(view, condition=one_of("condition", condition, cut.table.conditions))
    if area is not None and area != view.area:
        view = replace(view, area=one_of("area", area, cut.area_names), units=())
    if signal is not None:
        one_of("signal", signal, get_args(SignalKind))
        view = replace(view, signal=signal)
    if units is not None:
        for unit in units:
            one_of(f"the unit of {view.area}", unit, units_of(cut, view.area))
        view = replace(view, units=tuple(dict.fromkeys(units)))
    return view


def moved(window: WindowChoice, span_ms: Span, own_direction_ms: Span | None) -> WindowChoice:
    """Return a window with another span, marked as chosen on these trials.

    Spans of single areas (`for`) stay. The span for coupling and direction stays as it was
    asked for while it holds the window, and reaches to the window's edges where it does not;
    without one of its own it is the window itself.

    Parameters
    ----------
    window : WindowChoice
        As it is.
    span_ms : (float, float)
        Its new span.
    own_direction_ms : (float, float) or None
        `direction_ms` before any window was moved here: it comes back when the window does.
    """
    direction_ms = own_direction_ms
    if own_direction_ms is not None:
        direction_ms = min(own_direction_ms[0], span_ms[0]), max(own_direction_ms[1], span_ms[1])
    return chosen_here(window, span_ms=span_ms, direction_ms=direction_ms)


def chosen_here(window: WindowChoice, **changes: Span | Extremum | None) -> WindowChoice:
    """Return a window with other values, marked as chosen on these trials."""
    return msgspec.structs.replace(window, **changes, chosen="on these trials")


def usable_name(name: str, taken: tuple[str, ...]) -> str:
    """Return a name for a window, without blanks at its ends.

    Raises
    ------
    InputError
        If it is empty, too long, taken, or holds characters that cannot be printed.
    """
    found = name.strip()
    if not found or len(found) > MOST_CHARACTERS or not found.isprintable():
        raise InputError(
            f"the name of the window is {name!r}; needed are 1 to {MOST_CHARACTERS} printable "
            "characters"
        )
    if found in taken:
        raise InputError(f"there is a window {found!r} already; needed is another name")
    return found


def free_name(taken: tuple[str, ...]) -> str:
    """Return the next free name: "window 3" where there are two."""
    number = len(taken) + 1
    while f"window {number}" in taken:
        number += 1
    return f"window {number}"
