"""Potentials in uV come in; a SpikeGLX LF stream (.lf.bin with its .lf.meta) goes out.

Written as a Neuropixels 1.0 probe writes it: int16 counts of a 10-bit converter over +-0.6 V,
384 rows in the gain table, a synchronisation channel behind the saved ones.
"""

from pathlib import Path

import numpy as np

from lfptools.errors import InputError
from lfptools.io.whole import whole, write_whole

_V_MAX, _I_MAX, _N_SITES = 0.6, 512, 384
_CHUNK = 65536


def write_spikeglx(
    folder: str | Path,
    run_name: str,
    data_uv: np.ndarray,
    rate_hz: float,
    *,
    first_sample: int = 0,
    gain: int = 250,
    depth_um: np.ndarray | None = None,
    probe: int = 0,
) -> Path:
    """Write one LF stream.

    Parameters
    ----------
    folder : str or Path
        Where the two files go; made where it is missing.
    run_name : str
        The run; the files are named RUN_g0_t0.imecN.lf.bin and .meta.
    data_uv : array, shape (n_samples, n_channels)
        Potentials in uV, at most 384 channels. What exceeds the converter's range saturates.
    rate_hz : float
        Sampling rate.
    first_sample : int
        Count of the first sample on the card's clock: the stream begins at
        first_sample / rate_hz.
    gain : int
        Amplifier gain. One count is 0.6 V / 512 / gain: 4.6875 uV at 250, 0.78125 uV at 1500.
    depth_um : array, shape (n_channels,), optional
        Depth of each channel below the surface, for the meta's geometry.
    probe : int
        N of imecN.

    Returns
    -------
    Path
        The .lf.bin file.

    Raises
    ------
    InputError
        If the shape does not fit a probe.
    OutputError
        If the file system refuses.
    """
    if data_uv.ndim != 2 or not 1 <= data_uv.shape[1] <= _N_SITES:
        raise InputError(
            f"data_uv has shape {data_uv.shape}; needed is (n_samples, 1 to {_N_SITES} channels)"
        )
    path = Path(folder) / f"{run_name}_g0_t0.imec{probe}.lf.bin"
    with whole(path) as part, open(part, "wb") as file:
        for first in range(0, len(data_uv), _CHUNK):
            file.write(_counts(data_uv[first : first + _CHUNK], gain).tobytes())
    fields = _meta(path, data_uv.shape, rate_hz, first_sample, gain, depth_um)
    text = "".join(f"{key}={value}\n" for key, value in fields.items())
    write_whole(path.with_suffix(".meta"), text.encode())
    return path


def _counts(block_uv: np.ndarray, gain: int) -> np.ndarray:
    """Frames of int16 with a synchronisation word of 0 at the end of each."""
    uv_per_count = _V_MAX / _I_MAX / gain * 1e6
    frames = np.zeros((len(block_uv), block_uv.shape[1] + 1), dtype="<i2")
    counts = np.rint(block_uv.astype(float) / uv_per_count)
    frames[:, :-1] = np.clip(counts, -_I_MAX, _I_MAX - 1)
    return frames


def _meta(
    path: Path,
    shape: tuple[int, ...],
    rate_hz: float,
    first_sample: int,
    gain: int,
    depth_um: np.ndarray | None,
) -> dict[str, object]:
    n_samples, n_channels = shape
    size = n_samples * (n_channels + 1) * 2
    fields: dict[str, object] = {
        "acqApLfSy": f"{_N_SITES},{_N_SITES},1",
        "appVersion": "20230411",
        "fileCreateTime": "2024-01-01T00:00:00",
        "fileName": path.name,
        "fileSizeBytes": size,
        "fileTimeSecs": f"{n_samples / rate_hz:.6f}",
        "firstSample": first_sample,
        "gateMode": "Immediate",
        "imAiRangeMax": _V_MAX,
        "imAiRangeMin": -_V_MAX,
        "imDatPrb_pn": "NP1000",
        "imDatPrb_type": 0,
        "imMaxInt": _I_MAX,
        "imSampRate": f"{rate_hz:.12g}",
        "nSavedChans": n_channels + 1,
        "snsApLfSy": f"0,{n_channels},1",
        "snsSaveChanSubset": f"{_N_SITES}:{_N_SITES + n_channels - 1},{2 * _N_SITES}",
        "syncImInputSlot": 2,
        "trigMode": "Immediate",
        "typeImEnabled": 1,
        "typeThis": "imec",
        "~imroTbl": f"(0,{_N_SITES})"
        + "".join(f"({site} 0 0 500 {gain} 1)" for site in range(_N_SITES)),
        "~snsChanMap": f"({_N_SITES},{_N_SITES},1)"
        + "".join(f"(LF{site};{_N_SITES + site}:{site})" for site in range(n_channels))
        + f"(SY0;{2 * _N_SITES}:{n_channels})",
    }
    if depth_um is not None:
        height_um = np.max(depth_um) - np.asarray(depth_um, dtype=float)
        sites = "".join(f"(0:27:{each:g}:1)" for each in height_um)
        fields["~snsGeomMap"] = f"(NP1000,1,0,70){sites}"
    return fields
