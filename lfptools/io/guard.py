"""What a reader found comes in; it goes out checked, or an error names the file and the cause."""

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np

from lfptools.checks import read_only
from lfptools.errors import InputError, LfptoolsError, ReaderError
from lfptools.model import Recording

#: A start so late that a double no longer tells times apart to this is a broken header.
_TIME_RESOLUTION_S = 1e-6

Fetch = Callable[[int, int, np.ndarray], np.ndarray]


@contextmanager
def reading(path: Path, format_name: str) -> Iterator[None]:
    """Turn every error of a reader's library inside the block into a ReaderError.

    The libraries share no root error: ValueError, KeyError, struct.error, OSError,
    ZeroDivisionError, MemoryError and more are raised for broken files.

    Raises
    ------
    ReaderError
        Naming the file and the cause.
    """
    try:
        yield
    except LfptoolsError:
        raise
    except Exception as cause:
        raise ReaderError(
            f"{path}: cannot be read as {format_name} ({type(cause).__name__}: {cause})"
        ) from cause


def guarded_fetch(
    path: Path, format_name: str, n_samples: int, n_channels: int, read: Fetch
) -> Fetch:
    """Return `read` with its bounds checked, its errors named and its result read-only.

    Parameters
    ----------
    path, format_name
        For the messages.
    n_samples, n_channels : int
        What the stream holds.
    read : callable
        Takes first, last (first < last) and channel indices, returns raw counts
        (last - first, n_channels asked for).

    Returns
    -------
    callable
        For `Recording.fetch`.
    """

    def fetch(first: int, last: int, channels: np.ndarray) -> np.ndarray:
        channels = np.atleast_1d(np.asarray(channels, dtype=int))
        if not 0 <= first <= last <= n_samples:
            raise InputError(
                f"{path}: samples [{first}, {last}) were asked for; it holds [0, {n_samples})"
            )
        if channels.size and not (channels.min() >= 0 and channels.max() < n_channels):
            raise InputError(
                f"{path}: channels {channels.tolist()} were asked for; it holds 0 to "
                f"{n_channels - 1}"
            )
        if first == last or not channels.size:
            return read_only(np.empty((last - first, channels.size), dtype=np.int16))
        with reading(path, format_name):
            return read_only(read(first, last, channels))

    return fetch


def checked(recording: Recording, path: Path) -> Recording:
    """Return `recording`, whose rate, gains, length and start times must make sense.

    Raises
    ------
    ReaderError
        If the rate is not a finite number above 0, a gain is 0 or not finite, there are no
        samples or channels, or a start time is not finite or too large to be one.
    """
    rate = recording.rate_hz
    if not (np.isfinite(rate) and rate > 0):
        raise ReaderError(f"{path}: the sampling rate is {rate} Hz; needed is a number above 0")
    if not recording.n_channels or not recording.n_samples:
        raise ReaderError(
            f"{path}: holds {recording.n_channels} channels and {recording.n_samples} samples; "
            "needed is at least one of each"
        )
    wrong = ~np.isfinite(recording.gain_uv) | (recording.gain_uv == 0)
    if wrong.any():
        at = int(np.argmax(wrong))
        raise ReaderError(
            f"{path}: the gain of channel {at} is {recording.gain_uv[at]} uV per count; needed "
            "is a finite number other than 0"
        )
    if not np.all(np.isfinite(recording.offset_uv)):
        raise ReaderError(f"{path}: an offset is not finite; needed is a number")
    for run in recording.runs:
        start = run.start_s
        if not np.isfinite(start) or np.spacing(abs(start)) > _TIME_RESOLUTION_S:
            raise ReaderError(
                f"{path}: the first sample is said to lie at {start:g} s; "
                "needed is a time on the recording's clock"
            )
    return recording


def whole_frames(path: Path, n_bytes_frame: int, layout: str) -> int:
    """Return how many frames a file of fixed frames holds.

    Parameters
    ----------
    path : Path
        The file.
    n_bytes_frame : int
        Bytes of one frame: channels times bytes a sample.
    layout : str
        The layout in words, for the message.

    Raises
    ------
    ReaderError
        If its size is no whole number of frames, or none.
    """
    size = path.stat().st_size
    if not size or size % n_bytes_frame:
        raise ReaderError(
            f"{path}: holds {size} bytes, which is no whole number of frames of {n_bytes_frame} "
            f"bytes ({layout}); the channel count is wrong or the file was cut"
        )
    return size // n_bytes_frame
