"""A session or cut trials in, the interactive bench out, in any notebook or on its own page."""

import os
from pathlib import Path
from typing import Any

from lfptools.cut_cache import cached_cut
from lfptools.errors import InputError, LfptoolsError
from lfptools.io.opening import open_session
from lfptools.model import CutSession, Session
from lfpwidgets.answers import Answers
from lfpwidgets.full import FullAnswer
from lfpwidgets.keepsake import keep, keepsake_path, take_over
from lfpwidgets.leaving import Leaving
from lfpwidgets.newest import Background, Newest
from lfpwidgets.quick import QuickAnswer
from lfpwidgets.scene import Scene
from lfpwidgets.snap import around_waves
from lfpwidgets.state import BenchState
from lfpwidgets.surface import Surface
from lfpwidgets.view import View
from lfpwidgets.words import full_words, quick_words

#: Set by `lfptools bench`, whose page needs no picture for a saved notebook.
_PAGE_VARIABLE = "LFPTOOLS_BENCH_PAGE"
_RESTORED = (
    "windows that were not saved last time are back; undo returns to those of the session file"
)


class Bench:
    """Scrub the windows of a session and watch latency, firing and direction answer.

    Shown at the end of a notebook cell. Windows are dragged over the averages, nudged with the
    arrow keys (Page keys: ten samples), typed, added, named and removed; "save session" writes
    them back, and `lfptools run` on the saved file gives the same numbers.

    Parameters
    ----------
    session : str, Path, Session or CutSession
        A session file, a session opened from one, or trials already cut.

    Raises
    ------
    InputError
        If the session cannot be opened or holds no LFP.
    """

    def __init__(self, session: str | Path | Session | CutSession) -> None:
        self._session = session
        self._newest: Newest[dict[str, Any]] = Newest(self._move, self._failed)
        self._background = Background(self._failed)
        self._writing = Background(self._failed)
        self._picture: Any = None
        self._open()
        self.surface = Surface(self._heard, **self._scene.traits())

    def _open(self) -> None:
        """Open the session and whatever was kept of it, as it is now."""
        path = _path_of(self._session)
        # Looked at before it is opened: what is saved meanwhile is noticed by the next page.
        self._opened = _on_disk(path)
        cut = _cut(self._session)
        if not cut.areas:
            raise InputError("the session holds no LFP; the bench shows averages of the field")
        self.state = BenchState(cut, path=path)
        self._restored = take_over(self.state)
        self.answers = Answers(cut)
        self._scene = Scene(self.state, self.answers)
        self._leaving = Leaving(self.state, self._scene)
        self._full: dict[str, Any] | None = None
        self._gripped = False
        self._touched = False
        self.state.observe(self._changed)

    @property
    def value(self) -> View:
        """What the bench shows now."""
        return self.state.view

    def _repr_mimebundle_(self, **_options: Any) -> Any:
        return self.surface._repr_mimebundle_()

    def _ipython_display_(self) -> None:
        from IPython.display import Image, display

        display(self.surface)
        if not os.environ.get(_PAGE_VARIABLE):
            # Kept in a saved notebook, where a widget alone shows nothing without its kernel.
            self._picture = display(Image(self._leaving.still()), display_id=True)

    # What the hand does.

    def _heard(self, message: dict[str, Any]) -> None:
        """Take a message of the browser; errors reach the user as a message."""
        try:
            self._touched = self._touched or message.get("do") != "hello"
            if message.get("do") == "move":
                self._newest.put(message)
            else:
                self._newest.flush()
                self._act(message)
        except Exception as error:
            self._failed(error)

    def _act(self, message: dict[str, Any]) -> None:
        state, do = self.state, message.get("do")
        if do == "hello":
            self._hello()
        elif do == "take":
            state.take(message["name"])
        elif do == "grip":
            self._gripped = True
            state.take(message["name"])
            state.begin_gesture()
        elif do == "settle":
            self._gripped = False
            state.end_gesture()
            self._settled()
        elif do == "type":
            self._typed(message)
        elif do == "rename":
            state.rename(message["name"], message["to"])
        elif do == "extremum":
            state.set_extremum(message["name"], message["value"])
        elif do == "add":
            state.add(*self._scene.room_for_window())
        elif do == "remove":
            state.remove(message["name"])
        elif do == "snap":
            state.move(state.view.hand, *around_waves(self._quick(), state.grid.ends_ms))
        elif do == "show":
            self._show(message["key"], message["value"])
        elif do == "undo":
            state.undo()
        elif do == "redo":
            state.redo()
        elif do == "save":
            self.surface.say(f"saved: {state.save().name}. `lfptools run` gives these numbers.")
            keep(state)
            self._redraw()
        elif do in ("tables", "figure"):
            self._leave(do)
        else:
            raise LfptoolsError(f"the page asked for {do!r}, which the bench does not know")

    def _hello(self) -> None:
        """Greet a page; one whose kernel ran ahead of it may find other files by now."""
        self._gripped = False  # a page that is loaded anew holds nothing
        self.state.end_gesture()
        if not self._touched and _on_disk(self.state.path) != self._opened:
            self._open()
            self._redraw()
        self._answer()
        if self._restored:
            self.surface.say(_RESTORED)

    def _move(self, message: dict[str, Any]) -> None:
        """Follow the hand: the newest position only."""
        self._background.stop()
        self.state.move(message["name"], float(message["first"]), float(message["last"]))
        self.surface.answer(self._quick_words(), message["turn"])

    def _typed(self, message: dict[str, Any]) -> None:
        window = self.state.view.window(message["name"])
        first, last = window.span_ms
        try:
            value = float(message["value"])
        except ValueError:
            raise LfptoolsError(
                f"the {message['edge']} edge of {window.name!r} is {message['value']!r}; it must "
                "be a number of ms"
            ) from None
        edges = (value, last) if message["edge"] == "first" else (first, value)
        self.state.move(window.name, *edges)
        self.state.take(window.name)

    def _show(self, key: str, value: str) -> None:
        if key == "unit":
            self.state.show(units=(value,))
        else:
            self.state.show(**{key: value})

    # What follows a change.

    def _changed(self, before: View, after: View) -> None:
        if not self._gripped:
            self._settled()

    def _redraw(self) -> None:
        for name, value in self._scene.traits().items():
            setattr(self.surface, name, value)

    def _settled(self) -> None:
        """Show where things stand, the quick answer, and start the full one."""
        keep(self.state)
        self._redraw()
        self._answer()

    def _answer(self) -> None:
        self.surface.answer(self._quick_words())
        choices, view = self.state.as_choices(), self.value
        self._background.start(
            lambda stop: self.answers.full(choices, view.hand, view.condition, stop=stop),
            self._answered,
        )

    def _answered(self, full: FullAnswer) -> None:
        window = self.value.window(full.window)
        n_trials = int((self.state.cut.condition == full.condition).sum())
        self._full = full_words(full, window, n_trials)
        self.surface.answer(self._full)
        if self._picture is not None:
            self._background.start(lambda _stop: self._leaving.still(full), self._pictured)

    def _pictured(self, png: bytes) -> None:
        from IPython.display import Image

        self._picture.update(Image(png))

    def _quick_words(self) -> dict[str, Any]:
        return quick_words(self._quick(), self.value.window(self.value.hand), self._full)

    def _quick(self) -> QuickAnswer:
        view = self.value
        return self.answers.quick(view.windows, view.hand, view.condition, view.signal)

    def _leave(self, what: str) -> None:
        leaving, choices = self._leaving, self.state.as_choices()
        self.surface.say("writing ...")
        self._writing.queue(
            lambda: leaving.write(what, choices),
            lambda folder: self.surface.say(f"written: {folder}"),
        )

    def _failed(self, error: Exception) -> None:
        kind = "" if isinstance(error, LfptoolsError) else f"{type(error).__name__}: "
        self.surface.complain(f"{kind}{error}")


def _path_of(session: str | Path | Session | CutSession) -> Path | None:
    """Return the session file that the session comes from, where there is one."""
    if isinstance(session, str | Path):
        return Path(session)
    return next(iter(session.files), None) if isinstance(session, Session) else None


def _cut(session: str | Path | Session | CutSession) -> CutSession:
    if isinstance(session, CutSession):
        return session
    return cached_cut(session if isinstance(session, Session) else open_session(session))


def _on_disk(path: Path | None) -> tuple[bytes, bytes]:
    """Return the session file and what is kept beside it, as they are on disk."""
    if path is None or not path.exists():
        return b"", b""
    kept = keepsake_path(path)
    return path.read_bytes(), kept.read_bytes() if kept.exists() else b""
