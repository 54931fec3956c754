"""Our writers of recordings, read by others: pynwb and its validator, neo."""

import time

import numpy as np
import pynwb
import pytest
from neo.rawio import SpikeGLXRawIO

from lfptools.errors import InputError
from lfptools.io.nwb_tables import read_nwb_units
from lfptools.io.write_nwb import write_nwb
from lfptools.io.write_spikeglx import write_spikeglx
from lfptools.model import SpikeTrains

DEPTH_UM = np.arange(3) * 100.0
UNITS = SpikeTrains(
    unit=("S1-1", "M1-1", "M1-2"),
    area=("S1", "M1", "M1"),
    depth_um=np.array([150.0, np.nan, 250.0]),
    time_s=(np.array([0.5, 0.75]), np.empty(0), np.array([1.0])),
)


def data_uv(n_samples=300, n_channels=3):
    return np.random.default_rng(4).normal(0, 100, (n_samples, n_channels))


def nwb(path, **changes):
    given = {
        "data_uv": data_uv(), "rate_hz": 1250.0, "starting_time_s": 2.5, "depth_um": DEPTH_UM,
        "area": "M1", "units": UNITS, "quality": ["good", "mua", "good"],
    }  # fmt: skip
    return write_nwb(path, **{**given, **changes})


def test_nwb_is_valid_by_the_standards_own_validator(tmp_path):
    path = nwb(tmp_path / "a.nwb")
    with pynwb.NWBHDF5IO(str(path), "r", load_namespaces=False) as io:
        assert pynwb.validate(io=io) == []


def test_nwb_read_by_pynwb(tmp_path):
    path = nwb(
        tmp_path / "a.nwb", identifier="id-1", session_start_time="2024-05-01T10:00:00+00:00"
    )
    with pynwb.NWBHDF5IO(str(path), "r", load_namespaces=False) as io:
        file = io.read()
        series = file.acquisition["lfp"]
        gain_uv = np.abs(data_uv()).max() / 32000
        read_uv = series.data[:] * series.conversion * 1e6
        assert np.abs(read_uv - data_uv()).max() <= gain_uv / 2 * (1 + 1e-9)
        assert (series.rate, series.starting_time, series.unit) == (1250.0, 2.5, "volts")
        electrodes = series.electrodes.to_dataframe()
        assert electrodes["rel_y"].tolist() == DEPTH_UM.tolist()
        assert electrodes["location"].tolist() == ["M1"] * 3
        assert electrodes["group"].iloc[0] is file.electrode_groups["array"]
        units = file.units.to_dataframe()
        assert units["unit_name"].tolist() == list(UNITS.unit)
        assert units["area"].tolist() == list(UNITS.area)
        assert units["quality"].tolist() == ["good", "mua", "good"]
        assert [each.tolist() for each in units["spike_times"]] == [[0.5, 0.75], [], [1.0]]
        assert file.identifier == "id-1"
        assert file.session_start_time.isoformat() == "2024-05-01T10:00:00+00:00"


def test_nwb_units_read_by_our_reader(tmp_path):
    found = read_nwb_units(nwb(tmp_path / "a.nwb"))
    assert tuple(unit.name for unit in found) == UNITS.unit
    assert [unit.columns["area"] for unit in found] == list(UNITS.area)
    assert np.array_equal([unit.depth_um for unit in found], UNITS.depth_um, equal_nan=True)


def test_nwb_without_units_and_without_signal(tmp_path):
    path = nwb(tmp_path / "a.nwb", units=None, data_uv=np.zeros((10, 3)))
    with pynwb.NWBHDF5IO(str(path), "r", load_namespaces=False) as io:
        assert io.read().units is None
        assert pynwb.validate(io=io) == []


def test_same_input_same_bytes_at_another_time(tmp_path):
    first = nwb(tmp_path / "1.nwb").read_bytes()
    lf = write_spikeglx(tmp_path / "1", "run", data_uv(), 2500.0)
    time.sleep(1.1)  # HDF5 keeps times in whole seconds
    assert nwb(tmp_path / "2.nwb").read_bytes() == first
    again = write_spikeglx(tmp_path / "2", "run", data_uv(), 2500.0)
    for suffix in (".bin", ".meta"):
        assert lf.with_suffix(suffix).read_bytes() == again.with_suffix(suffix).read_bytes()


@pytest.mark.parametrize(
    "changes",
    [
        {"depth_um": DEPTH_UM[:2]}, {"data_uv": np.zeros(10)}, {"data_uv": np.zeros((0, 3))},
        {"quality": ["good"]},
    ],
)  # fmt: skip
def test_nwb_shapes_that_do_not_fit(changes, tmp_path):
    with pytest.raises(InputError):
        nwb(tmp_path / "a.nwb", **changes)
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize("gain", [250, 1500])
def test_spikeglx_read_by_neo(gain, tmp_path):
    path = write_spikeglx(tmp_path, "run", data_uv(), 2500.0, first_sample=5000, gain=gain, probe=1)
    assert path.name == "run_g0_t0.imec1.lf.bin"
    stream = SpikeGLXRawIO(str(tmp_path))
    stream.parse_header()
    names = stream.header["signal_streams"]["name"].tolist()
    assert names == ["imec1.lf", "imec1.lf-SYNC"]
    counts = stream.get_analogsignal_chunk(stream_index=0)
    read_uv = stream.rescale_signal_raw_to_float(counts, dtype="float64", stream_index=0)
    # 10 bits over +-0.6 V before the gain (Neuropixels 1.0, value from memory)
    count_uv = 1.2 / 1024 / gain * 1e6
    assert np.abs(read_uv - data_uv()).max() <= count_uv / 2 * (1 + 1e-9)
    assert stream.get_signal_t_start(0, 0, 0) == 2.0
    assert stream.get_signal_sampling_rate(0) == 2500.0
    assert not stream.get_analogsignal_chunk(stream_index=1).any()


def test_spikeglx_saturates_like_the_converter(tmp_path):
    path = write_spikeglx(tmp_path, "run", np.array([[1e9, -1e9], [0, 3.0]]), 2500.0)
    counts = np.fromfile(path, "<i2").reshape(2, 3)
    assert counts.tolist() == [[511, -512, 0], [0, 1, 0]]


@pytest.mark.parametrize("shape", [(10,), (10, 385), (10, 0)])
def test_spikeglx_shapes_that_do_not_fit(shape, tmp_path):
    with pytest.raises(InputError, match="data_uv has shape"):
        write_spikeglx(tmp_path / "x", "run", np.zeros(shape), 2500.0)
    assert not (tmp_path / "x").exists()
