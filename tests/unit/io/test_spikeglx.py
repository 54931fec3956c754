"""SpikeGLX: which stream is meant, several triggers, geometry, links, unequal gains."""

import numpy as np
import pytest

from lfptools.choices import SourceChoice
from lfptools.errors import ReaderError
from lfptools.io.spikeglx import open_spikeglx
from lfptools.io.write_spikeglx import write_spikeglx


def source(stream=None):
    return SourceChoice(name="lfp", format="spikeglx", path="x", stream=stream)


def ramp(n_samples=100, n_channels=2, start=0):
    """Whole counts at gain 1000 (1.171875 uV), every sample another."""
    counts = start + np.arange(n_samples * n_channels).reshape(n_samples, n_channels) % 200
    return counts * 1.171875


def write(folder, **changes):
    given = {"first_sample": 0, "gain": 1000}
    return write_spikeglx(
        folder, "run", changes.pop("data", ramp()), 1000.0, **{**given, **changes}
    )


def edit(path, **fields):
    meta = path.with_suffix(".meta")
    lines = [line for line in meta.read_text().splitlines() if line.split("=")[0] not in fields]
    meta.write_text("\n".join([*lines, *(f"{key}={value}" for key, value in fields.items())]))


def test_the_file_decides_among_several_probes(tmp_path):
    first, second = write(tmp_path), write(tmp_path, probe=1, data=ramp(50))
    assert open_spikeglx(source(), first).n_samples == 100
    assert open_spikeglx(source(), second).n_samples == 50
    assert open_spikeglx(source("imec1.lf"), second).n_samples == 50
    with pytest.raises(ReaderError, match=r"'imec0\.lf' is not there; needed is .* imec1\.lf"):
        open_spikeglx(source("imec0.lf"), second)


def test_a_folder_needs_the_stream_where_it_holds_several(tmp_path):
    write(tmp_path)
    assert open_spikeglx(source(), tmp_path).n_samples == 100
    write(tmp_path, probe=1, data=ramp(50))
    assert open_spikeglx(source("imec1.lf"), tmp_path).n_samples == 50
    with pytest.raises(ReaderError, match=r"several are there; .* imec0\.lf, imec1\.lf"):
        open_spikeglx(source(), tmp_path)


def second_trigger(tmp_path, **changes):
    """Write triggers t0 (100 samples from 0 s) and t1 (60 samples from 5 s) of one stream."""
    write(tmp_path)
    aside = write(tmp_path / "aside", data=ramp(60, start=50), first_sample=5000, **changes)
    edit(aside, fileName="run_g0_t1.imec0.lf.bin")
    for suffix in (".bin", ".meta"):
        aside.with_suffix(suffix).rename(tmp_path / f"run_g0_t1.imec0.lf{suffix}")
    aside.parent.rmdir()


def test_triggers_of_a_folder_follow_as_runs(tmp_path):
    second_trigger(tmp_path)
    found = open_spikeglx(source(), tmp_path)
    assert [(run.first, run.n_samples, run.start_s) for run in found.runs] == [
        (0, 100, 0.0), (100, 60, 5.0),
    ]  # fmt: skip
    expected = np.concatenate([ramp(), ramp(60, start=50)])
    both = np.arange(2)
    for first, last in [(0, 160), (90, 110), (100, 160), (99, 100), (100, 101)]:
        assert found.read_uv(first, last, both) == pytest.approx(expected[first:last].T)
    assert found.time_of(100) == 5.0
    assert len(found.files) == 4


def test_triggers_that_differ_are_refused(tmp_path):
    second_trigger(tmp_path)
    edit(tmp_path / "run_g0_t1.imec0.lf.bin", imSampRate=999)
    with pytest.raises(ReaderError, match="sampling_rate differs"):
        open_spikeglx(source(), tmp_path)


def test_a_cut_trigger_is_refused(tmp_path):
    second_trigger(tmp_path)
    path = tmp_path / "run_g0_t1.imec0.lf.bin"
    path.write_bytes(path.read_bytes()[:-6])
    with pytest.raises(ReaderError, match=r"t1\.imec0\.lf\.bin: holds .* its meta says"):
        open_spikeglx(source(), tmp_path)


def test_geometry_becomes_depth_below_the_highest_contact(tmp_path):
    """`~snsGeomMap` counts heights from the tip up (SpikeGLX meta, from memory)."""
    path = write(tmp_path)
    assert open_spikeglx(source(), path).depth_um is None
    edit(path, **{"~snsGeomMap": "(NP1000,1,0,70)(0:27:20:1)(0:59:120:1)"})
    assert open_spikeglx(source(), path).depth_um.tolist() == [100.0, 0.0]
    edit(path, **{"~snsGeomMap": "(NP1000,2,0,70)(0:27:20:1)(1:59:120:1)"})  # two shanks
    assert open_spikeglx(source(), path).depth_um is None


def test_a_subset_with_unequal_gains_is_refused(tmp_path):
    """A row of the gain table belongs to a site, not to the place in the saved frame."""
    path = write(tmp_path)
    rows = "".join(f"({site} 0 0 500 {250 if site else 500} 1)" for site in range(384))
    edit(path, **{"~imroTbl": f"(0,384){rows}"})
    # all saved channels are the first ones: right as it stands, 0.6 V / 512 / gain
    gain_uv = open_spikeglx(source(), path).gain_uv
    assert gain_uv == pytest.approx([2.34375, 4.6875], rel=1e-12)
    edit(path, **{"~snsChanMap": "(384,384,1)(LF5;389:5)(LF0;384:0)(SY0;768:2)"})
    with pytest.raises(ReaderError, match="subset of the channels with unequal gains"):
        open_spikeglx(source(), path)


def test_links_out_of_the_folder_are_refused(tmp_path):
    path = write(tmp_path / "run")
    other = write(tmp_path / "elsewhere", probe=1)
    (path.parent / other.name).symlink_to(other)
    with pytest.raises(ReaderError, match=r"imec1\.lf\.bin: leads out of"):
        open_spikeglx(source(), path)


def test_only_the_samples_are_a_stream(tmp_path):
    path = write(tmp_path)
    with pytest.raises(ReaderError, match=r"needed is the \.bin file"):
        open_spikeglx(source(), path.with_suffix(".meta"))
    (tmp_path / "empty").mkdir()
    with pytest.raises(ReaderError, match="cannot be read as spikeglx"):
        open_spikeglx(source(), tmp_path / "empty")


def test_a_broken_neighbour_is_named(tmp_path):
    path = write(tmp_path)
    other = write(tmp_path, probe=1)
    edit(other, imSampRate=0)
    with pytest.raises(ReaderError, match=r"imec1\.lf\.meta: names no sampling rate"):
        open_spikeglx(source(), path)
