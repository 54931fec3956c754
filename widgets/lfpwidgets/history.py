"""Moments come in, one after the other; the ones before and after go out again."""

from collections import deque
from typing import Generic, TypeVar

Moment = TypeVar("Moment")

#: So many steps can be taken back.
MOST_STEPS = 500


class History(Generic[Moment]):
    """What can be taken back and done again; a gesture of many moves is one step."""

    def __init__(self) -> None:
        self._back: deque[Moment] = deque(maxlen=MOST_STEPS)
        self._forth: list[Moment] = []
        self._start: Moment | None = None

    @property
    def can_undo(self) -> bool:
        """Whether a step can be taken back."""
        return bool(self._back)

    @property
    def can_redo(self) -> bool:
        """Whether a step that was taken back can be done again."""
        return bool(self._forth)

    @property
    def gesture_start(self) -> Moment | None:
        """The moment at which the gesture that is under way began."""
        return self._start

    def begin_gesture(self, now: Moment) -> None:
        """Take what follows as one step."""
        self._start = now

    def end_gesture(self, *, changed: bool) -> None:
        """Make the gesture a step where it changed anything."""
        start, self._start = self._start, None
        if changed and start is not None:
            self.step(start)

    def step(self, before: Moment) -> None:
        """Note the moment before a change; nothing remains to be done again."""
        if self._start is None:
            self._back.append(before)
            self._forth.clear()

    def undo(self, now: Moment) -> Moment | None:
        """Return the moment before the last step, or None where there is none."""
        if not self._back:
            return None
        self._forth.append(now)
        return self._back.pop()

    def redo(self, now: Moment) -> Moment | None:
        """Return the moment after the step last taken back, or None where there is none."""
        if not self._forth:
            return None
        self._back.append(now)
        return self._forth.pop()
