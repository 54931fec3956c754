"""The NWB reader against files of an independent writer (pynwb), and hostile ones."""

import datetime

import h5py
import numpy as np
import pytest
from pynwb import NWBHDF5IO, NWBFile
from pynwb.ecephys import LFP, ElectricalSeries

from lfptools.choices import SourceChoice
from lfptools.errors import ReaderError
from lfptools.io.nwb import open_nwb
from lfptools.io.nwb_tables import read_nwb_trials, read_nwb_units

N_CHANNELS = 4
REL_Y_UM = np.array([0.0, 100.0, 200.0, 300.0])


def source(stream=None):
    return SourceChoice(name="lfp", format="nwb", path="x.nwb", stream=stream)


def counts(n_samples=400, n_channels=N_CHANNELS):
    return np.random.default_rng(3).integers(-3000, 3000, (n_samples, n_channels), dtype=np.int16)


def empty_file():
    """Return a pynwb file with one array of contacts and its table region."""
    nwb = NWBFile("invented", "id", datetime.datetime(2024, 1, 1, tzinfo=datetime.UTC))
    device = nwb.create_device(name="array")
    group = nwb.create_electrode_group("array", "linear", "S1", device)
    for depth_um in REL_Y_UM:
        nwb.add_electrode(location="S1", group=group, rel_y=depth_um)
    return nwb, nwb.create_electrode_table_region(list(range(N_CHANNELS)), "all")


def written(tmp_path, nwb):
    path = tmp_path / "other.nwb"
    with NWBHDF5IO(path, "w") as io:
        io.write(nwb)
    return path


def series(region, **fields):
    data = {"name": "lfp", "data": counts(), "electrodes": region}
    return ElectricalSeries(**{**data, **fields})


def read_all_uv(found):
    return found.read_uv(0, found.n_samples, np.arange(found.n_channels)).T


def test_series_in_acquisition_with_rate(tmp_path):
    nwb, region = empty_file()
    nwb.add_acquisition(series(region, rate=1250.0, starting_time=3.5, conversion=2e-7))
    found = open_nwb(source(), written(tmp_path, nwb))
    assert (found.rate_hz, found.time_of(0)) == (1250.0, 3.5)
    # conversion is in volts a count (NWB 2 schema, ElectricalSeries.data)
    assert read_all_uv(found) == pytest.approx(counts() * 0.2, abs=1e-9)
    assert np.array_equal(found.depth_um, REL_Y_UM)


def test_conversion_channel_conversion_and_offset(tmp_path):
    nwb, region = empty_file()
    factor = np.array([1.0, 0.5, 2.0, -1.0])
    nwb.add_acquisition(
        series(region, rate=1000.0, conversion=1e-6, channel_conversion=factor, offset=25e-6)
    )
    found = open_nwb(source(), written(tmp_path, nwb))
    # volts = data * conversion * channel_conversion + offset (NWB 2 schema)
    assert read_all_uv(found) == pytest.approx(counts() * factor + 25.0, abs=1e-9)


def test_lfp_in_processing_is_found_and_can_be_named(tmp_path):
    nwb, region = empty_file()
    module = nwb.create_processing_module("ecephys", "filtered")
    lfp = LFP()
    module.add(lfp)
    lfp.add_electrical_series(series(region, rate=1000.0))
    path = written(tmp_path, nwb)
    assert open_nwb(source(), path).n_samples == 400
    assert open_nwb(source("processing/ecephys/LFP/lfp"), path).n_samples == 400
    with pytest.raises(ReaderError, match="the file holds processing/ecephys/LFP/lfp"):
        open_nwb(source("acquisition/lfp"), path)


def test_several_series_must_be_told_apart(tmp_path):
    nwb, region = empty_file()
    nwb.add_acquisition(series(region, rate=1000.0))
    nwb.add_acquisition(series(region, name="wide", data=counts(100), rate=20_000.0))
    path = written(tmp_path, nwb)
    with pytest.raises(ReaderError, match=r"`stream` must name .* acquisition/lfp, acquisition/w"):
        open_nwb(source(), path)
    assert open_nwb(source("/acquisition/wide/"), path).rate_hz == 20_000.0


@pytest.mark.parametrize("rate_hz", [1000 / 3, 2500.0123, 30_000.0, 0.1])
def test_rate_survives_its_single_precision(rate_hz, tmp_path):
    nwb, region = empty_file()
    nwb.add_acquisition(series(region, rate=rate_hz))
    found = open_nwb(source(), written(tmp_path, nwb))
    # half of the last bit of a 24-bit mantissa, and the text's rounding of as much
    assert found.rate_hz == pytest.approx(rate_hz, rel=2**-23)


def test_timestamps_with_one_gap_are_two_runs(tmp_path):
    nwb, region = empty_file()
    stamps = 7.0 + np.arange(400) / 1250
    stamps[150:] += 0.0333  # 41.6 samples
    nwb.add_acquisition(series(region, timestamps=stamps))
    found = open_nwb(source(), written(tmp_path, nwb))
    assert found.rate_hz == pytest.approx(1250.0, rel=1e-8)
    assert [(run.first, run.n_samples) for run in found.runs] == [(0, 150), (150, 250)]
    assert [run.start_s for run in found.runs] == [stamps[0], stamps[150]]
    assert found.locate(stamps[200], before=50, after=50) == 200
    assert found.locate(stamps[200], before=51, after=50) is None  # reaches over the gap


def test_timestamps_of_another_length_are_refused(tmp_path):
    nwb, region = empty_file()
    nwb.add_acquisition(series(region, timestamps=np.arange(400) / 1250))
    path = written(tmp_path, nwb)
    replace_dataset(path, "acquisition/lfp/timestamps", np.arange(399) / 1250)
    with pytest.raises(ReaderError, match=r"timestamps has shape \(399,\).*400 samples"):
        open_nwb(source(), path)


def replace_dataset(path, place, values):
    with h5py.File(path, "r+") as file:
        kept = dict(file[place].attrs)
        del file[place]
        file[place] = values
        file[place].attrs.update(kept)


def plain(tmp_path):
    nwb, region = empty_file()
    nwb.add_acquisition(series(region, rate=1000.0))
    return written(tmp_path, nwb)


@pytest.mark.parametrize(
    ("place", "name", "value", "words"),
    [
        ("acquisition/lfp/data", "unit", "mV", "has unit 'mV'; needed is 'volts'"),
        ("acquisition/lfp/data", "conversion", 0.0, "gain of channel 0 is 0"),
        ("acquisition/lfp/data", "conversion", np.nan, "gain of channel 0 is nan"),
        ("acquisition/lfp/data", "offset", np.inf, "an offset is not finite"),
        ("acquisition/lfp/starting_time", "rate", np.float32(0), "sampling rate is 0.0 Hz"),
        ("acquisition/lfp/starting_time", "rate", np.float32(np.nan), "sampling rate is nan Hz"),
    ],
)
def test_headers_that_cannot_be(place, name, value, words, tmp_path):
    path = plain(tmp_path)
    with h5py.File(path, "r+") as file:
        file[place].attrs[name] = value
    with pytest.raises(ReaderError, match=words):
        open_nwb(source(), path)


@pytest.mark.parametrize(
    ("place", "values", "words"),
    [
        ("acquisition/lfp/data", counts(400, 5), "lists 4 electrodes; the data hold 5 channels"),
        ("acquisition/lfp/data", np.zeros((2, 2, 2)), r"shape \(2, 2, 2\)"),
        ("acquisition/lfp/data", np.zeros((0, 4)), "0 samples"),
        ("acquisition/lfp/starting_time", np.inf, "first sample is said to lie at inf"),
    ],
)
def test_contents_that_cannot_be(place, values, words, tmp_path):
    path = plain(tmp_path)
    replace_dataset(path, place, values)
    with pytest.raises(ReaderError, match=words):
        open_nwb(source(), path)


def test_a_series_without_a_clock_is_refused(tmp_path):
    path = plain(tmp_path)
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/starting_time"]
    with pytest.raises(ReaderError, match="neither starting_time nor timestamps"):
        open_nwb(source(), path)


def with_units(tmp_path):
    """Return a file of three units, with electrodes, text and number columns, and intervals."""
    nwb, _ = empty_file()
    nwb.add_unit_column("quality", "label")
    nwb.add_unit_column("snr", "signal over noise")
    for spikes, electrodes, quality in (
        ([0.5, 0.25, 1.5], [1], "good"), ([], [2, 3], "mua"), ([2.0], [0], "good"),
    ):  # fmt: skip
        nwb.add_unit(
            spike_times=spikes, electrodes=electrodes, quality=quality, snr=3.5,
            obs_intervals=[[0.0, 3.0]],
        )  # fmt: skip
    return written(tmp_path, nwb)


def test_units(tmp_path):
    first, second, third = read_nwb_units(with_units(tmp_path))
    assert [unit.name for unit in (first, second, third)] == ["0", "1", "2"]
    assert first.time_s.tolist() == [0.25, 0.5, 1.5]
    assert second.time_s.tolist() == []
    assert third.time_s.tolist() == [2.0]
    assert [unit.depth_um for unit in (first, second, third)] == [100.0, 250.0, 0.0]
    assert first.columns["quality"] == "good"
    assert first.columns["snr"] == 3.5
    assert first.columns["location"] == "S1"


@pytest.mark.parametrize(
    ("place", "values", "words"),
    [
        ("units/spike_times_index", np.array([3, 3, 9]), "the index ends at"),
        ("units/spike_times_index", np.array([3, 1, 4]), "the index ends at"),
        ("units/spike_times", np.array([0.0, np.nan, 1.0, 2.0]), "spike time is not finite"),
        ("units/quality", np.array([1.0, 2.0]), "needed are 3 rows"),
    ],
)
def test_units_that_cannot_be(place, values, words, tmp_path):
    path = with_units(tmp_path)
    replace_dataset(path, place, values)
    with pytest.raises(ReaderError, match=words):
        read_nwb_units(path)


def test_a_file_without_units_or_trials_is_refused(tmp_path):
    path = plain(tmp_path)
    with pytest.raises(ReaderError, match="no units table"):
        read_nwb_units(path)
    with pytest.raises(ReaderError, match="no table of trials"):
        read_nwb_trials(path)


def test_trials(tmp_path):
    nwb, _ = empty_file()
    nwb.add_trial_column("condition", "stimulus")
    nwb.add_trial(start_time=1.0, stop_time=1.5, condition="single")
    nwb.add_trial(start_time=2.0, stop_time=2.5, condition="pad")
    trials = read_nwb_trials(written(tmp_path, nwb))
    assert trials["start_time"].tolist() == [1.0, 2.0]
    assert trials["stop_time"].tolist() == [1.5, 2.5]
    assert trials["condition"].tolist() == ["single", "pad"]


def outside_file(tmp_path):
    folder = tmp_path / "outside"
    folder.mkdir()
    with h5py.File(folder / "secret.h5", "w") as file:
        file["data"] = counts()
    counts().tofile(folder / "secret.bin")
    return folder


def test_external_links_are_refused(tmp_path):
    path, outside = plain(tmp_path), outside_file(tmp_path)
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/data"]
        file["acquisition/lfp/data"] = h5py.ExternalLink(str(outside / "secret.h5"), "/data")
    with pytest.raises(ReaderError, match="link to another file"):
        open_nwb(source(), path)


def test_external_links_behind_soft_links_are_refused(tmp_path):
    path, outside = plain(tmp_path), outside_file(tmp_path)
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/data"]
        file["hidden"] = h5py.ExternalLink(str(outside / "secret.h5"), "/data")
        file["acquisition/lfp/data"] = h5py.SoftLink("/hidden")
    with pytest.raises(ReaderError, match="link to another file"):
        open_nwb(source(), path)


def test_soft_links_within_the_file_are_followed_but_not_in_a_circle(tmp_path):
    path = plain(tmp_path)
    with h5py.File(path, "r+") as file:
        file["named"] = h5py.SoftLink("acquisition/lfp")
        file["circle"] = h5py.SoftLink("/circle")
    assert open_nwb(source("named"), path).n_samples == 400
    with pytest.raises(ReaderError, match="no ElectricalSeries 'circle'"):
        open_nwb(source("circle"), path)


def test_external_storage_is_refused(tmp_path):
    path, outside = plain(tmp_path), outside_file(tmp_path)
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/data"]
        file["acquisition/lfp"].create_dataset(
            "data", (400, 4), "i2", external=[(str(outside / "secret.bin"), 0, 3200)]
        )
        file["acquisition/lfp/data"].attrs["unit"] = "volts"
    with pytest.raises(ReaderError, match="keeps its data in another file"):
        open_nwb(source(), path)


def test_virtual_datasets_are_refused(tmp_path):
    path, outside = plain(tmp_path), outside_file(tmp_path)
    layout = h5py.VirtualLayout((400, 4), "i2")
    layout[:] = h5py.VirtualSource(str(outside / "secret.h5"), "data", (400, 4))
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/data"]
        file["acquisition/lfp"].create_virtual_dataset("data", layout)
        file["acquisition/lfp/data"].attrs["unit"] = "volts"
    with pytest.raises(ReaderError, match="keeps its data in another file"):
        open_nwb(source(), path)


def test_a_small_file_that_claims_terabytes_is_refused(tmp_path):
    path = plain(tmp_path)
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/data"]
        file["acquisition/lfp"].create_dataset("data", (1 << 38, 4), "i2", chunks=(1 << 12, 4))
        file["acquisition/lfp/data"].attrs["unit"] = "volts"
    assert path.stat().st_size < 1e6
    with pytest.raises(ReaderError, match="claims 2199023255552 bytes"):
        open_nwb(source(), path)


def test_packed_data_are_read(tmp_path):
    path = plain(tmp_path)
    with h5py.File(path, "r+") as file:
        del file["acquisition/lfp/data"]
        file["acquisition/lfp"].create_dataset(
            "data", data=np.zeros((100_000, 4), "i2"), chunks=(10_000, 4), compression=9,
            shuffle=True,
        )  # fmt: skip
        file["acquisition/lfp/data"].attrs["unit"] = "volts"
    assert not open_nwb(source(), path).fetch(5, 99_999, np.arange(4)).any()
