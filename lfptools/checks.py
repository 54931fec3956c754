"""Checks at the door: each takes a name and a value, returns the cleaned value or raises."""

from collections.abc import Sequence

import numpy as np

from lfptools.errors import InputError


def positive(name: str, value: float, unit: str = "") -> float:
    """Return `value`, which must be finite and above 0.

    Raises
    ------
    InputError
        If it is not.
    """
    if not (np.isfinite(value) and value > 0):
        raise InputError(f"{name} is {value:g} {unit}".rstrip() + "; it must be a number above 0")
    return float(value)


def span(name: str, value: Sequence[float], unit: str = "") -> tuple[float, float]:
    """Return a span (first, last), which must hold two finite numbers in rising order.

    Raises
    ------
    InputError
        If it does not.
    """
    if len(value) != 2 or not np.all(np.isfinite(value)) or not value[0] < value[1]:
        raise InputError(
            f"{name} is {list(value)} {unit}".rstrip() + "; it must be [first, last] "
            "with first below last"
        )
    return float(value[0]), float(value[1])


def array(name: str, value: object, shape: tuple[int | None, ...]) -> np.ndarray:
    """Return `value` as a float array of the given shape (None: any length), without NaN.

    Raises
    ------
    InputError
        If its shape differs or it holds a value that is not finite.
    """
    found = np.asarray(value, dtype=float)
    fits = found.ndim == len(shape) and all(
        want is None or want == have for want, have in zip(shape, found.shape, strict=True)
    )
    if not fits:
        wanted = tuple("any" if want is None else want for want in shape)
        raise InputError(f"{name} has shape {found.shape}; needed is {wanted}")
    bad = int(np.size(found) - np.count_nonzero(np.isfinite(found)))
    if bad:
        raise InputError(f"{name} holds {bad} values that are not finite; all must be numbers")
    return found


def one_of(name: str, value: str, allowed: Sequence[str]) -> str:
    """Return `value`, which must be one of `allowed`.

    Raises
    ------
    InputError
        If it is not.
    """
    if value not in allowed:
        raise InputError(f"{name} is {value!r}; it must be one of {', '.join(allowed)}")
    return value


def read_only(value: np.ndarray) -> np.ndarray:
    """Return a read-only view of `value`."""
    view = np.asarray(value).view()
    view.flags.writeable = False
    return view
