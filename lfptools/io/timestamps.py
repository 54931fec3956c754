"""One time stamp a sample comes in; the sampling rate and the runs without a gap go out."""

import numpy as np

from lfptools.errors import ReaderError
from lfptools.model import Run

_CHUNK = 1 << 20
_FOR_MEDIAN = 100_000


def runs_of(
    stamps: np.ndarray, where: str, *, chunk: int = _CHUNK
) -> tuple[float, tuple[Run, ...]]:
    """Return the rate and the runs of a stream that stores a time for each sample.

    Parameters
    ----------
    stamps : array or h5py.Dataset, shape (n_samples,)
        Times in s; read in chunks.
    where : str
        The file, for the messages.
    chunk : int
        Samples read at a time.

    Returns
    -------
    rate_hz : float
        From the ends of the longest run, so that rounding of single stamps does not matter.
    runs : tuple of Run
        Split where a step differs from the median step by more than half of it.

    Raises
    ------
    ReaderError
        If there are fewer than two stamps, one is not finite, or they do not rise.
    """
    n_samples = len(stamps)
    if n_samples < 2:
        raise ReaderError(f"{where}: holds {n_samples} time stamps; needed are at least 2")
    step_s = float(np.median(np.diff(stamps[: min(n_samples, _FOR_MEDIAN)])))
    if not step_s > 0:
        raise ReaderError(
            f"{where}: the time stamps have a median step of {step_s} s; they must "
            "be finite and rise"
        )
    firsts = [0]
    for low in range(0, n_samples - 1, chunk):
        steps = np.diff(stamps[low : min(low + chunk, n_samples - 1) + 1])
        rises = (steps > 0) & np.isfinite(steps)
        if not np.all(rises):
            at = low + int(np.argmin(rises)) + 1
            raise ReaderError(
                f"{where}: time stamp {at} does not rise over the one before; "
                "they must be finite and rise"
            )
        firsts.extend((low + 1 + np.flatnonzero(np.abs(steps - step_s) > step_s / 2)).tolist())
    return _rate_and_runs(stamps, firsts, n_samples, step_s)


def _rate_and_runs(
    stamps: np.ndarray, firsts: list[int], n_samples: int, step_s: float
) -> tuple[float, tuple[Run, ...]]:
    lasts = [*firsts[1:], n_samples]
    runs = tuple(
        Run(first, last - first, float(stamps[first]))
        for first, last in zip(firsts, lasts, strict=True)
    )
    longest = max(runs, key=lambda run: run.n_samples)
    if longest.n_samples > 1:
        end_s = float(stamps[longest.first + longest.n_samples - 1])
        step_s = (end_s - longest.start_s) / (longest.n_samples - 1)
    return float(f"{1 / step_s:.9g}"), runs
