"""Rate and runs from time stamps."""

import numpy as np
import pytest

from lfptools.errors import ReaderError
from lfptools.io.timestamps import runs_of


@pytest.mark.parametrize("chunk", [1, 7, 100, 1 << 20])
def test_gaps_are_found_wherever_a_chunk_ends(chunk):
    stamps = np.arange(1000) / 500
    stamps[100:] += 0.0011  # just over half a sample
    stamps[107:] += 3
    stamps[999:] += 0.1
    rate_hz, runs = runs_of(stamps, "file", chunk=chunk)
    assert rate_hz == pytest.approx(500, rel=1e-9)
    assert [(run.first, run.n_samples) for run in runs] == [
        (0, 100), (100, 7), (107, 892), (999, 1),
    ]  # fmt: skip
    assert [run.start_s for run in runs] == [0, stamps[100], stamps[107], stamps[999]]


def test_jitter_below_half_a_sample_is_no_gap():
    rng = np.random.default_rng(1)
    stamps = 50 + np.arange(5000) / 1000 + rng.uniform(-1e-4, 1e-4, 5000)
    rate_hz, runs = runs_of(stamps, "file")
    assert len(runs) == 1
    assert rate_hz == pytest.approx(1000, rel=1e-4 * 2 / 5)


@pytest.mark.parametrize(
    "stamps", [[], [1.0], [1.0, 1.0, 1.0], [2.0, 1.0, 0.0], [0.0, np.nan], [np.nan] * 3,
               [0, 1, 2, 3, 2.5, 4], [0, 1, 2, np.nan, 4], [0, 1, 2, 3, np.inf]]
)  # fmt: skip
def test_stamps_that_cannot_be(stamps):
    with pytest.raises(ReaderError, match=r"^file: "):
        runs_of(np.array(stamps), "file")
