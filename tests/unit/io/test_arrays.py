"""Arrays to HDF5 and back; files appear whole or not at all."""

import time

import h5py
import numpy as np
import pytest

from lfptools.errors import OutputError, ReaderError
from lfptools.io.arrays import read_arrays, write_arrays
from lfptools.io.whole import whole, write_whole

ARRAYS = {
    "S1/average": (np.arange(6, dtype=np.float32).reshape(2, 3), {"unit": "uV", "n_trials": 12}),
    "S1/time_s": (np.linspace(-0.1, 0.2, 5), {"unit": "s"}),
    "bad": (np.array([True, False]), {}),
    "names": (np.array(["early", "späte"]), {"edges": np.array([1.0, 2.0])}),
    "nothing": (np.empty((0, 4)), {}),
}


def test_round_trip(tmp_path):
    found = read_arrays(write_arrays(tmp_path / "a" / "arrays.h5", ARRAYS))
    assert set(found) == set(ARRAYS)
    for name, (values, attributes) in ARRAYS.items():
        read, kept = found[name]
        assert np.array_equal(read, values)
        assert read.shape == values.shape
        assert read.dtype == (object if values.dtype.kind == "U" else values.dtype)
        assert set(kept) == set(attributes)
        assert all(np.array_equal(kept[key], attributes[key]) for key in attributes)


def test_same_arrays_same_bytes_at_another_time(tmp_path):
    first = write_arrays(tmp_path / "1.h5", ARRAYS).read_bytes()
    time.sleep(1.1)  # HDF5 keeps times in whole seconds
    second = write_arrays(tmp_path / "2.h5", dict(reversed(ARRAYS.items()))).read_bytes()
    assert first == second


def test_links_to_other_files_are_not_followed(tmp_path):
    write_arrays(tmp_path / "other.h5", ARRAYS)
    path = write_arrays(tmp_path / "a.h5", ARRAYS)
    with h5py.File(path, "r+") as file:
        file.create_dataset("out", (4,), "u1", external=[(str(tmp_path / "other.h5"), 0, 4)])
    with pytest.raises(ReaderError, match="keeps its data in another file"):
        read_arrays(path)
    with pytest.raises(ReaderError, match="cannot be read as arrays"):
        read_arrays(tmp_path / "none.h5")


def test_a_failed_writing_leaves_the_old_file_and_no_other(tmp_path):
    path = write_whole(tmp_path / "x", b"old")

    def fail():
        with whole(path) as part:
            part.write_bytes(b"ne")
            raise RuntimeError("in the middle")

    with pytest.raises(RuntimeError, match="in the middle"):
        fail()
    assert path.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [path]
    with pytest.raises(TypeError):
        write_arrays(path, {"x": (np.array([object()]), {})})
    assert path.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [path]


def test_writing_where_it_cannot_be(tmp_path):
    (tmp_path / "folder").mkdir()
    with pytest.raises(OutputError, match=r"folder: cannot be written"):
        write_whole(tmp_path / "folder", b"x")
    assert list(tmp_path.iterdir()) == [tmp_path / "folder"]
