"""Cut trials and a user's moves come in; windows, and a session file that holds them, go out.

No widget is needed: views call the moves and observe what changes.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

import msgspec

from lfptools.analysis.prepared import prepare
from lfptools.checks import one_of
from lfptools.choices import AnalysisChoices, Extremum, WindowChoice
from lfptools.errors import InputError
from lfptools.model import CutSession
from lfpwidgets.changes import Changes, Observer
from lfpwidgets.grid import SampleGrid, grid_of
from lfpwidgets.history import History
from lfpwidgets.kept import KeptFile
from lfpwidgets.view import (
    SignalKind,
    View,
    chosen_here,
    first_view,
    free_name,
    looked_at,
    moved,
    usable_name,
)

Edge = Literal["first", "last", "both"]

_EXTREMA = ("trough", "peak")


@dataclass(frozen=True, slots=True)
class _Moment:
    """A view and, for each of its windows, the one it was when the session was opened."""

    view: View
    opened: tuple[WindowChoice | None, ...]  # None for a window added here


class BenchState:
    """Windows over the cut trials of one session, and what of them is looked at.

    Windows come from the session's choices; where these name none, from the proposals that a
    run would make. A window that is moved, or whose sign is changed, is marked as chosen on
    these trials; all others keep their mark.

    Undo and redo cover what bears on the numbers: the windows and the signal that stands for
    an area; the window then in hand comes back with them. Condition, area and units are only
    looked at: changing them is no step and leaves redo as it is.

    Parameters
    ----------
    cut : CutSession
        The trials.
    path : Path, optional
        The session file they come from, to be saved to.

    Raises
    ------
    SessionFileError
        If the session file no longer says what these trials were cut by.
    """

    def __init__(self, cut: CutSession, *, path: Path | None = None) -> None:
        self.cut = cut
        self.grid: SampleGrid = grid_of(cut)
        self._file = KeptFile.of(path, cut.choices) if path is not None else None
        windows = tuple(cut.choices.window or prepare(cut).choices.window)
        view = first_view(cut, windows)
        self._now = _Moment(view, windows)
        self._saved = view
        self._history: History[_Moment] = History()
        self._changes = Changes()

    @property
    def view(self) -> View:
        """What the bench shows now."""
        return self._now.view

    @property
    def step_ms(self) -> float:
        """One sample of the slowest area, ms: edges of windows lie on multiples of it."""
        return self.grid.step_ms

    @property
    def path(self) -> Path | None:
        """The session file, where there is one."""
        return self._file.path if self._file else None

    @property
    def unsaved(self) -> bool:
        """Whether windows or signal differ from those opened or last saved."""
        return self.view.numbers != self._saved.numbers

    def as_choices(self) -> AnalysisChoices:
        """Return the session's choices with these windows and this signal, for `analyse`."""
        choices = self.cut.choices
        return msgspec.structs.replace(
            choices,
            window=list(self.view.windows),
            direction=msgspec.structs.replace(choices.direction, signal=self.view.signal),
        )

    def observe(self, callback: Observer) -> Callable[[], None]:
        """Call `callback(before, after)` after each change; return a function that stops it.

        A callback may make moves: all observers learn of them after they have learned of the
        change before.
        """
        return self._changes.observe(callback)

    # Moves of a window.

    def move(self, name: str, first_ms: float, last_ms: float) -> None:
        """Give a window another span, rounded to the sample grid.

        An edge that stays where it is is not rounded. Spans of single areas (`for`) stay;
        `direction_ms` stays while it holds the window and reaches to its edges otherwise.

        Parameters
        ----------
        name : str
            The window.
        first_ms, last_ms : float
            Its edges, ms after the stimulus.

        Raises
        ------
        InputError
            If there is no such window, an edge lies outside the trial, or the edges are less
            than 3 samples apart. Nothing changes then.
        """
        window = self.view.window(name)
        span_ms = self.grid.span(name, first_ms, last_ms, now_ms=window.span_ms)
        if span_ms != window.span_ms:
            opened = self._now.opened[self._index(name)]
            self._change_window(moved(window, span_ms, opened.direction_ms if opened else None))

    def nudge(self, name: str, edge: Edge, n_samples: int) -> None:
        """Move one edge of a window, or both, by samples of the grid.

        From between two samples one step leads to the next one.

        Raises
        ------
        InputError
            As `move`; or if `edge` is none.
        """
        one_of("the edge", edge, ("first", "last", "both"))
        first_ms, last_ms = self.view.window(name).span_ms
        if n_samples == 0:
            return
        if edge != "last":
            first_ms = self.grid.stepped(first_ms, n_samples)
        if edge != "first":
            last_ms = self.grid.stepped(last_ms, n_samples)
        self.move(name, first_ms, last_ms)

    def add(self, first_ms: float, last_ms: float, name: str | None = None) -> str:
        """Add a window, take it in hand and return its name, by default the next free one.

        Raises
        ------
        InputError
            If the name cannot be used, or the edges cannot be (see `move`).
        """
        taken = tuple(each.name for each in self.view.windows)
        name = free_name(taken) if name is None else usable_name(name, taken)
        span_ms = self.grid.span(name, first_ms, last_ms, now_ms=None)
        window = WindowChoice(name=name, span_ms=span_ms, chosen="on these trials")
        view = replace(self.view, windows=(*self.view.windows, window), hand=name)
        self._go(_Moment(view, (*self._now.opened, None)))
        return name

    def rename(self, old: str, new: str) -> None:
        """Give a window another name.

        Raises
        ------
        InputError
            If there is no such window, or the name cannot be used.
        """
        window = self.view.window(old)
        taken = tuple(each.name for each in self.view.windows if each.name != old)
        self._change_window(msgspec.structs.replace(window, name=usable_name(new, taken)), old)

    def remove(self, name: str) -> None:
        """Remove a window; the one in hand gives way to its neighbour.

        Raises
        ------
        InputError
            If there is no such window, or it is the last one.
        """
        at = self._index(name)
        if len(self.view.windows) == 1:
            raise InputError(
                f"window {name!r} is the last one; needed is at least one, for without any a "
                "run proposes windows of its own"
            )
        windows = _without(self.view.windows, at)
        hand = self.view.hand
        if hand == name:
            hand = windows[min(at, len(windows) - 1)].name
        view = replace(self.view, windows=windows, hand=hand)
        self._go(_Moment(view, _without(self._now.opened, at)))

    def set_extremum(self, name: str, extremum: Extremum) -> None:
        """Look for a trough or a peak in a window.

        Raises
        ------
        InputError
            If there is no such window, or the word is another.
        """
        window = self.view.window(name)
        one_of(f"the extremum of window {name!r}", extremum, _EXTREMA)
        if extremum != window.extremum:
            self._change_window(chosen_here(window, extremum=extremum))

    # What is looked at.

    def take(self, name: str) -> None:
        """Take a window in hand.

        Raises
        ------
        InputError
            If there is no such window.
        """
        self._go(replace(self._now, view=replace(self.view, hand=self.view.window(name).name)))

    def show(
        self,
        *,
        condition: str | None = None,
        area: str | None = None,
        signal: SignalKind | None = None,
        units: tuple[str, ...] | None = None,
    ) -> None:
        """Look at another condition, area, signal or other units; None leaves what is shown.

        Another area shows all its units unless `units` says which.

        Raises
        ------
        InputError
            If the session has no such condition, area or unit in the area, or the signal is
            neither "csd" nor "lfp". Nothing changes then.
        """
        view = looked_at(
            self.view, self.cut, condition=condition, area=area, signal=signal, units=units
        )
        self._go(replace(self._now, view=view))

    # Back and forth.

    @property
    def can_undo(self) -> bool:
        """Whether there is a step to take back."""
        return self._history.can_undo or self._in_changed_gesture

    @property
    def can_redo(self) -> bool:
        """Whether there is a step to do again."""
        return self._history.can_redo and not self._in_changed_gesture

    def undo(self) -> None:
        """Take the last step back; a gesture under way ends first. Without a step, nothing."""
        self.end_gesture()
        self._return_to(self._history.undo(self._now))

    def redo(self) -> None:
        """Do the step again that was last taken back. Without one, nothing."""
        self.end_gesture()
        self._return_to(self._history.redo(self._now))

    def begin_gesture(self) -> None:
        """Take the moves from here to `end_gesture` as one step; one under way ends first.

        A drag is many moves and one undo.
        """
        self.end_gesture()
        self._history.begin_gesture(self._now)

    def end_gesture(self) -> None:
        """End a gesture. One that ends where it began leaves no step and no mark."""
        start = self._history.gesture_start
        if start is None:
            return
        came_back = start.view.shape == self.view.shape
        self._history.end_gesture(changed=not came_back)
        if came_back:
            view = replace(self.view, windows=start.view.windows)
            self._set(_Moment(view, start.opened))

    def restore(self, windows: tuple[WindowChoice, ...], signal: SignalKind) -> None:
        """Take over windows and signal kept elsewhere, as one step that undo takes back.

        Raises
        ------
        InputError
            If there is no window, two have one name, or an edge lies outside the trial.
        """
        if not windows or len({window.name for window in windows}) < len(windows):
            raise InputError("the windows kept beside the session are none, or two have one name")
        for window in windows:
            self.grid.span(window.name, *window.span_ms, now_ms=window.span_ms)
        was = dict(zip((each.name for each in self.view.windows), self._now.opened, strict=True))
        names = [window.name for window in windows]
        hand = self.view.hand if self.view.hand in names else names[0]
        view = replace(self.view, windows=windows, signal=signal, hand=hand)
        self._go(_Moment(view, tuple(was.get(name) for name in names)))

    # The session file.

    def save(self) -> Path:
        """Write windows and signal into the session file and return its path.

        Raises
        ------
        InputError
            If these trials come from no session file, or it changed on disk meanwhile.
        OutputError
            If the file system refuses.
        """
        file = self._need_file()
        file.save(self.view, self._now.opened)
        self._saved = self.view
        return file.path

    def save_as(self, new_path: str | Path) -> Path:
        """Write a new session file beside the old one, go on with it and return its path.

        Raises
        ------
        InputError
            If these trials come from no session file, the new one lies in another folder, or
            exists already.
        OutputError
            If the file system refuses.
        """
        file = self._need_file()
        file.save_as(Path(new_path), self.view, self._now.opened)
        self._saved = self.view
        return file.path

    def _need_file(self) -> KeptFile:
        if self._file is None:
            raise InputError(
                "these trials come from no session file, so there is none to write to; needed "
                "is a session opened from its file"
            )
        return self._file

    # How a change is made.

    @property
    def _in_changed_gesture(self) -> bool:
        start = self._history.gesture_start
        return start is not None and start.view.shape != self.view.shape

    def _index(self, name: str) -> int:
        return self.view.windows.index(self.view.window(name))

    def _change_window(self, window: WindowChoice, name: str | None = None) -> None:
        """Put a window in the place of the one called `name`, by default its own name."""
        name = window.name if name is None else name
        at = self._index(name)
        windows = (*self.view.windows[:at], window, *self.view.windows[at + 1 :])
        hand = window.name if self.view.hand == name else self.view.hand
        self._go(replace(self._now, view=replace(self.view, windows=windows, hand=hand)))

    def _go(self, moment: _Moment) -> None:
        if moment.view.numbers != self.view.numbers:
            self._history.step(self._now)
        self._set(moment)

    def _return_to(self, moment: _Moment | None) -> None:
        if moment is not None:
            then = moment.view
            view = replace(self.view, windows=then.windows, signal=then.signal, hand=then.hand)
            self._set(_Moment(view, moment.opened))

    def _set(self, moment: _Moment) -> None:
        before, self._now = self.view, moment
        if before != moment.view:
            self._changes.tell(before, moment.view)


def _without(items: tuple, at: int) -> tuple:
    return items[:at] + items[at + 1 :]
