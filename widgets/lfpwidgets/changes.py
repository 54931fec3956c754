"""Views before and after a change come in; every observer is told, one change at a time."""

from collections import deque
from collections.abc import Callable

from lfpwidgets.view import View

Observer = Callable[[View, View], None]


class Changes:
    """Tells observers of changes, in the order in which these were made."""

    def __init__(self) -> None:
        self._observers: list[Observer] = []
        self._waiting: deque[tuple[View, View]] = deque()

    def observe(self, callback: Observer) -> Callable[[], None]:
        """Add an observer; return a function that takes it away again."""
        self._observers.append(callback)

        def stop() -> None:
            if callback in self._observers:
                self._observers.remove(callback)

        return stop

    def tell(self, before: View, after: View) -> None:
        """Tell all observers; a change that one of them makes waits until all know of this one.

        An observer that fails keeps nothing from the others: its error is raised at the end.
        """
        is_telling = bool(self._waiting)
        self._waiting.append((before, after))
        if is_telling:
            return
        errors = []
        while self._waiting:
            for callback in tuple(self._observers):
                try:
                    callback(*self._waiting[0])
                except Exception as error:
                    errors.append(error)
            self._waiting.popleft()
        if errors:
            raise errors[0]
