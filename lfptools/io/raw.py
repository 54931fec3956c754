"""A raw binary file and its description in the session file come in; a lazy Recording goes out."""

from pathlib import Path

import numpy as np
from neo.rawio.rawbinarysignalrawio import RawBinarySignalRawIO

from lfptools.choices import SourceChoice
from lfptools.io.guard import checked, guarded_fetch, reading, whole_frames
from lfptools.model import Recording, Run


def open_raw(source: SourceChoice, path: Path) -> Recording:
    """Open frames of interleaved channels, described by the source alone.

    Parameters
    ----------
    source : SourceChoice
        With `rate_hz`, `n_channels`, `gain_uv` (uV per count) and `dtype`.
    path : Path
        The file. Its first sample lies at 0 s of the source's clock.

    Returns
    -------
    Recording
        One run; nothing is read before it is asked for.

    Raises
    ------
    ReaderError
        If the file is missing or holds no whole number of frames.
    """
    rate_hz, n_channels = source.rate_hz or 0.0, source.n_channels or 0
    gain_uv, dtype = source.gain_uv or 0.0, np.dtype(source.dtype or "V")
    with reading(path, "raw"):
        n_samples = whole_frames(
            path, n_channels * dtype.itemsize, f"{n_channels} channels of {dtype.name}"
        )
        stream = RawBinarySignalRawIO(
            str(path),
            dtype=dtype.str,
            sampling_rate=rate_hz,
            nb_channel=n_channels,
            signal_gain=gain_uv,
        )
        stream.parse_header()

    def read(first: int, last: int, channels: np.ndarray) -> np.ndarray:
        return stream.get_analogsignal_chunk(
            i_start=first, i_stop=last, stream_index=0, channel_indexes=channels
        )

    found = Recording(
        source=source.name,
        clock=source.clock_name,
        rate_hz=rate_hz,
        channel_names=tuple(f"ch{index}" for index in range(n_channels)),
        runs=(Run(0, n_samples, 0.0),),
        gain_uv=np.full(n_channels, gain_uv),
        offset_uv=np.zeros(n_channels),
        fetch=guarded_fetch(path, "raw", n_samples, n_channels, read),
        files=(path,),
        amplifier_hz=source.amplifier_hz,
    )
    return checked(found, path)
