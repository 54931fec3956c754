"""A key and a way to compute in, what was computed for that key out: the last few are kept."""

from collections import OrderedDict
from collections.abc import Callable, Hashable
from threading import Lock
from typing import TypeVar

Value = TypeVar("Value")


class Memo:
    """Keeps the values used last; the one not used for the longest time goes first.

    Safe to share between threads: two that ask for the same new key at once both compute it.

    Parameters
    ----------
    most : int
        How many values are kept.
    """

    def __init__(self, most: int) -> None:
        self._most = most
        self._kept: OrderedDict[Hashable, object] = OrderedDict()
        self._lock = Lock()

    def __len__(self) -> int:
        return len(self._kept)

    def get(self, key: Hashable, make: Callable[[], Value]) -> Value:
        """Return what was made for `key`, or make it."""
        with self._lock:
            if key in self._kept:
                self._kept.move_to_end(key)
                return self._kept[key]  # type: ignore[return-value]
        value = make()
        with self._lock:
            self._kept[key] = value
            while len(self._kept) > self._most:
                self._kept.popitem(last=False)
        return value
