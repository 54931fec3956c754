"""A SpikeGLX stream (.bin with its .meta) comes in; a lazy Recording goes out.

The time of the first sample is firstSample / rate on the card's clock; the synchronisation
channel is left out; contact positions come from the meta (`~snsGeomMap`), which counts heights
from the tip up, and go out as depth below the highest contact.
"""

import re
from pathlib import Path

import numpy as np
from neo.rawio.spikeglxrawio import SpikeGLXRawIO, read_meta_file

from lfptools.choices import SourceChoice
from lfptools.errors import ReaderError
from lfptools.io.guard import checked, guarded_fetch, reading, whole_frames
from lfptools.model import Recording, Run

_UV = {"uV": 1.0, "mV": 1e3, "V": 1e6}
_RATE_KEYS = ("imSampRate", "niSampRate", "obSampRate")


def open_spikeglx(source: SourceChoice, path: Path) -> Recording:
    """Open one stream of a SpikeGLX run.

    Parameters
    ----------
    source : SourceChoice
        `stream` (such as "imec0.lf") is needed only where `path` is a folder with several.
    path : Path
        The stream's .bin file, or the folder of the run: then the triggers of the stream
        follow one another as runs.

    Returns
    -------
    Recording
        Nothing is read before it is asked for.

    Raises
    ------
    ReaderError
        If header and samples contradict each other, or anything needed is missing.
    """
    with reading(path, "spikeglx"):
        folder = path if path.is_dir() else path.parent
        _refuse_links_out(folder)
        if not path.is_dir():
            _check_meta(path)
        stream = SpikeGLXRawIO(dirname=str(folder))
        try:
            stream.parse_header()
        except Exception:
            for meta in sorted(folder.rglob("*.meta")):
                _check_meta(meta.with_suffix(".bin"))  # says what is wrong in plain words
            raise
        parts = _parts(stream, source, path)
        for part in parts:
            _check_meta(Path(part["bin_file"]))
        return checked(_recording(stream, source, parts, path), path)


def _refuse_links_out(folder: Path) -> None:
    """Refuse symbolic links that lead out of the folder: the library reads all it finds there."""
    real = folder.resolve()
    for each in (*folder.rglob("*.meta"), *folder.rglob("*.bin")):
        if not each.resolve().is_relative_to(real):
            raise ReaderError(f"{each}: leads out of {real}; needed is the file itself")


def _check_meta(bin_path: Path) -> None:
    """Compare header and samples: rate, first sample, channel count, size."""
    meta_path = bin_path.with_suffix(".meta")
    if bin_path.suffix != ".bin":
        raise ReaderError(f"{bin_path}: needed is the .bin file of a stream, or the run's folder")
    for each in (bin_path, meta_path):
        if not each.is_file():
            raise ReaderError(f"{each}: is missing; a stream is a .bin with its .meta beside it")
    meta = read_meta_file(meta_path)
    if not any(_number(meta, key, meta_path) > 0 for key in _RATE_KEYS if key in meta):
        raise ReaderError(f"{meta_path}: names no sampling rate above 0 ({', '.join(_RATE_KEYS)})")
    _number(meta, "firstSample", meta_path)
    n_channels = int(_number(meta, "nSavedChans", meta_path))
    listed = len(meta.get("snsChanMap", ()))
    saved = [int(each) for each in meta.get("snsApLfSy", str(n_channels)).split(",")]
    if n_channels < 1 or listed != n_channels or sum(saved) != n_channels:
        raise ReaderError(
            f"{meta_path}: nSavedChans is {n_channels}, snsChanMap lists {listed} and snsApLfSy "
            f"adds up to {sum(saved)}; they must agree"
        )
    whole_frames(bin_path, 2 * n_channels, f"{n_channels} channels of int16")
    size, told = bin_path.stat().st_size, int(_number(meta, "fileSizeBytes", meta_path))
    if size != told:
        raise ReaderError(
            f"{bin_path}: holds {size} bytes; its meta says fileSizeBytes={told}; the file was cut "
            "or the meta belongs to another"
        )


def _number(meta: dict, key: str, meta_path: Path) -> float:
    try:
        value = float(meta[key])
    except (KeyError, ValueError, TypeError):
        found = repr(meta[key]) if key in meta else "missing"
        raise ReaderError(f"{meta_path}: {key} is {found}; needed is a number") from None
    if not np.isfinite(value):
        raise ReaderError(f"{meta_path}: {key} is {value}; needed is a finite number")
    return value


def _parts(stream: SpikeGLXRawIO, source: SourceChoice, path: Path) -> list[dict]:
    """Return the file pairs of the one stream that is meant, in the order of recording."""
    pairs = sorted(stream.signals_info_list, key=lambda each: each["seg_index"])
    if not path.is_dir():
        pairs = [each for each in pairs if Path(each["bin_file"]).resolve() == path.resolve()]
    names = sorted({each["stream_name"] for each in pairs})
    wanted = source.stream or (names[0] if len(names) == 1 else None)
    if wanted not in names:
        found = f"{wanted!r} is not there" if wanted else "several are there"
        raise ReaderError(
            f"{path}: stream of source {source.name!r}: {found}; needed is one of "
            + ", ".join(names)
        )
    return [each for each in pairs if each["stream_name"] == wanted]


def _recording(
    stream: SpikeGLXRawIO, source: SourceChoice, parts: list[dict], path: Path
) -> Recording:
    name = parts[0]["stream_name"]
    index = list(stream.header["signal_streams"]["name"]).index(name)
    channels = stream.header["signal_channels"]
    channels = channels[channels["stream_id"] == name]
    names = tuple(str(each) for each in channels["name"])
    for part in parts:
        _same_channels(part, parts[0])
        _one_gain_or_all_saved(part["meta"], names, path)
    to_uv = np.array([_UV[str(each)] for each in channels["units"]])
    runs = _runs(parts)
    n_samples = sum(run.n_samples for run in runs)

    def read(first: int, last: int, wanted: np.ndarray) -> np.ndarray:
        pieces = []
        for part, run in zip(parts, runs, strict=True):
            low, high = max(first - run.first, 0), min(last - run.first, run.n_samples)
            if low < high:
                pieces.append(
                    stream.get_analogsignal_chunk(
                        seg_index=part["seg_index"],
                        i_start=low,
                        i_stop=high,
                        stream_index=index,
                        channel_indexes=wanted,
                    )
                )
        return pieces[0] if len(pieces) == 1 else np.concatenate(pieces)

    return Recording(
        source=source.name,
        clock=source.clock_name,
        rate_hz=float(parts[0]["sampling_rate"]),
        channel_names=names,
        runs=runs,
        gain_uv=channels["gain"] * to_uv,
        offset_uv=channels["offset"] * to_uv,
        fetch=guarded_fetch(path, "spikeglx", n_samples, len(names), read),
        files=tuple(Path(part[key]) for part in parts for key in ("bin_file", "meta_file")),
        depth_um=_depth_um(parts[0]["meta"], len(names)),
        amplifier_hz=source.amplifier_hz,
    )


def _runs(parts: list[dict]) -> tuple[Run, ...]:
    runs: list[Run] = []
    first = 0
    for part in parts:
        n_samples = part["sample_length"]
        runs.append(Run(first, n_samples, part["first_sample"] / part["sampling_rate"]))
        first += n_samples
    return tuple(runs)


def _same_channels(part: dict, first: dict) -> None:
    for key in ("sampling_rate", "channel_names"):
        if part[key] != first[key]:
            raise ReaderError(
                f"{part['meta_file']}: {key} differs from {first['meta_file']}; runs of one "
                "stream must agree"
            )


def _one_gain_or_all_saved(meta: dict, names: tuple[str, ...], path: Path) -> None:
    """Refuse a saved subset of channels with unequal gains.

    The library takes the gain of the k-th saved channel from the k-th row of the gain table,
    which is right only where the saved channels are the first ones.
    """
    numbers = [int(match[1]) if (match := re.search(r"(\d+)$", each)) else -1 for each in names]
    rows = [row.split() for row in meta.get("imroTbl", ())]
    # rows of probes with two gains a site; other generations have one fixed gain
    n_fields = 5 if "imProbeOpt" in meta else 6
    gains = {tuple(row[3:5]) for row in rows if len(row) == n_fields}
    if len(gains) > 1 and numbers != list(range(len(names))):
        raise ReaderError(
            f"{path}: holds a subset of the channels with unequal gains; needed are equal gains "
            "or all channels"
        )


def _depth_um(meta: dict, n_channels: int) -> np.ndarray | None:
    """Depth below the highest contact, where the meta gives the heights of one shank."""
    rows = [row.split(":") for row in meta.get("snsGeomMap", ())]
    if len(rows) != n_channels or any(len(row) != 4 for row in rows):
        return None
    if len({row[0] for row in rows}) != 1:
        return None
    height_um = np.array([float(row[2]) for row in rows])
    return height_um.max() - height_um
