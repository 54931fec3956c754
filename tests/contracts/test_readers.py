"""One set of rules that every reader of signals obeys, on small files with known contents."""

import pickle
import shutil
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from lfptools.choices import SourceChoice
from lfptools.errors import InputError, ReaderError
from lfptools.io.formats import FORMATS, holding
from lfptools.io.write_nwb import write_nwb
from lfptools.io.write_spikeglx import write_spikeglx
from lfptools.model import Recording

N_SAMPLES, N_CHANNELS, RATE_HZ = 3000, 5, 1250.0


def truth_uv() -> np.ndarray:
    """Return potentials whose every sample is told apart from its neighbours."""
    rng = np.random.default_rng(20)
    slow = np.cumsum(rng.normal(0, 5, (N_SAMPLES, N_CHANNELS)), axis=0)
    return slow + 40 * np.arange(N_CHANNELS)


@dataclass(frozen=True)
class Case:
    """How a test file of a format is made, and what reading it must give."""

    write: Callable[[Path], Path]
    count_uv: float
    start_s: float
    source: dict

    def open(self, path: Path, **changes: object) -> Recording:
        source = SourceChoice(**{"name": "lfp", "path": path.name, **self.source, **changes})
        return FORMATS[source.format].reader("signals")(source, path)


def write_raw(folder: Path) -> Path:
    path = folder / "lfp.bin"
    np.rint(truth_uv() / 0.5).astype("<i2").tofile(path)
    return path


def write_float(folder: Path) -> Path:
    path = folder / "lfp.f4"
    (truth_uv() / 1000).astype("<f4").tofile(path)
    return path


def write_lf(folder: Path) -> Path:
    return write_spikeglx(folder, "run", truth_uv(), RATE_HZ, first_sample=12_500, gain=1000)


def write_hdf5(folder: Path) -> Path:
    return write_nwb(
        folder / "lfp.nwb", data_uv=truth_uv(), rate_hz=RATE_HZ, starting_time_s=4.25,
        depth_um=np.arange(N_CHANNELS) * 100.0, area="S1", gain_uv=0.1,
    )  # fmt: skip


SAMPLES = {"rate_hz": RATE_HZ, "n_channels": N_CHANNELS}
CASES = {
    "raw": Case(write_raw, 0.5, 0.0, {"format": "raw", "gain_uv": 0.5, "dtype": "<i2", **SAMPLES}),
    "raw float": Case(
        write_float, 1e-4, 0.0, {"format": "raw", "gain_uv": 1e3, "dtype": "float32", **SAMPLES}
    ),
    # one count of the 10-bit converter: 0.6 V / 512 / gain 1000 (probe's data sheet, from memory)
    "spikeglx": Case(write_lf, 1.171875, 10.0, {"format": "spikeglx"}),
    "nwb": Case(write_hdf5, 0.1, 4.25, {"format": "nwb"}),
}
EACH = pytest.mark.parametrize("case", CASES.values(), ids=CASES.keys())


def test_every_format_with_signals_has_a_case():
    assert {case.source["format"] for case in CASES.values()} == set(holding("signals"))


@EACH
def test_signals_are_exact_to_half_a_count(case, tmp_path):
    found = case.open(case.write(tmp_path))
    read_uv = found.read_uv(0, N_SAMPLES, np.arange(N_CHANNELS))
    assert read_uv.shape == (N_CHANNELS, N_SAMPLES)
    assert np.abs(read_uv - truth_uv().T).max() <= case.count_uv / 2 * (1 + 1e-9)


@EACH
def test_rate_start_and_length(case, tmp_path):
    found = case.open(case.write(tmp_path))
    assert found.rate_hz == RATE_HZ
    assert found.time_of(0) == case.start_s
    assert found.time_of(N_SAMPLES - 1) == pytest.approx(case.start_s + (N_SAMPLES - 1) / RATE_HZ)
    assert (found.n_samples, found.n_channels) == (N_SAMPLES, N_CHANNELS)
    assert len(found.channel_names) == len(set(found.channel_names)) == N_CHANNELS
    assert found.source == found.clock == "lfp"


@EACH
def test_gain_is_the_size_of_a_count(case, tmp_path):
    found = case.open(case.write(tmp_path))
    if found.fetch(0, 1, np.arange(1)).dtype.kind == "i":
        assert found.gain_uv == pytest.approx(np.full(N_CHANNELS, case.count_uv), rel=1e-6)


@EACH
@pytest.mark.parametrize("span", [(0, 1), (0, 0), (7, 7), (1, 2999), (1500, 3000), (2999, 3000)])
@pytest.mark.parametrize("channels", [[0], [4, 1, 3], [2, 2], []])
def test_any_span_of_any_channels_equals_the_slice(case, span, channels, tmp_path):
    found = case.open(case.write(tmp_path))
    whole = found.fetch(0, N_SAMPLES, np.arange(N_CHANNELS))
    part = found.fetch(*span, np.array(channels, dtype=int))
    assert part.shape == (span[1] - span[0], len(channels))
    assert np.array_equal(part, whole[span[0] : span[1]][:, channels])


@EACH
def test_counts_are_read_only_and_the_file_stays_as_it_was(case, tmp_path):
    path = case.write(tmp_path)
    before = path.read_bytes(), path.stat().st_mtime_ns
    counts = case.open(path).fetch(0, 10, np.arange(N_CHANNELS))
    with pytest.raises(ValueError, match="read-only"):
        counts[0, 0] = 1
    assert (path.read_bytes(), path.stat().st_mtime_ns) == before


@EACH
def test_files_that_cannot_be_written_are_read(case, tmp_path):
    path = case.write(tmp_path)
    for each in (path, *path.parent.glob("*.meta")):
        each.chmod(0o400)
    assert case.open(path).n_samples == N_SAMPLES


@EACH
@pytest.mark.parametrize("span", [(-1, 10), (0, N_SAMPLES + 1), (10, 5)])
def test_spans_outside_are_refused(case, span, tmp_path):
    with pytest.raises(InputError, match=rf"samples \[{span[0]}, {span[1]}\)"):
        case.open(case.write(tmp_path)).fetch(*span, np.arange(1))


@EACH
@pytest.mark.parametrize("channel", [-1, N_CHANNELS])
def test_channels_outside_are_refused(case, channel, tmp_path):
    with pytest.raises(InputError, match=f"it holds 0 to {N_CHANNELS - 1}"):
        case.open(case.write(tmp_path)).fetch(0, 1, np.array([channel]))


@EACH
def test_files_are_named(case, tmp_path):
    path = case.write(tmp_path)
    found = case.open(path)
    assert path in found.files
    assert all(each.is_file() for each in found.files)


@EACH
def test_amplifier_and_clock_come_from_the_source(case, tmp_path):
    found = case.open(case.write(tmp_path), amplifier_hz=(0.5, 500.0), clock="rig")
    assert (found.amplifier_hz, found.clock) == ((0.5, 500.0), "rig")


def refused(case: Case, path: Path, **changes: object) -> str:
    """Open a bad file; return the message, which must name the file."""
    with pytest.raises(ReaderError) as caught:
        case.open(path, **changes)
    assert str(path.with_suffix("")) in str(caught.value)
    return str(caught.value)


@EACH
def test_a_missing_file_is_refused(case, tmp_path):
    path = case.write(tmp_path)
    path.unlink()
    refused(case, path)


@EACH
def test_an_empty_file_is_refused(case, tmp_path):
    path = case.write(tmp_path)
    path.write_bytes(b"")
    refused(case, path)


@EACH
def test_a_file_cut_in_the_middle_of_a_frame_is_refused(case, tmp_path):
    path = case.write(tmp_path)
    path.write_bytes(path.read_bytes()[:-3])
    refused(case, path)


@pytest.mark.parametrize("name", ["spikeglx", "nwb"])  # raw has no header that could tell
def test_a_file_cut_between_frames_is_refused(name, tmp_path):
    case = CASES[name]
    path = case.write(tmp_path)
    path.write_bytes(path.read_bytes()[: -2 * 10 * (N_CHANNELS + 1)])
    refused(case, path)


def change_meta(path: Path, **fields: object) -> None:
    meta = path.with_suffix(".meta")
    lines = [line for line in meta.read_text().splitlines() if line.split("=")[0] not in fields]
    lines += [f"{key}={value}" for key, value in fields.items() if value is not None]
    meta.write_text("\n".join(lines) + "\n")


@pytest.mark.parametrize("n_channels", [4, 7])
def test_wrong_channel_count(n_channels, tmp_path):
    path = write_raw(tmp_path)
    size = N_SAMPLES * N_CHANNELS
    with open(path, "ab") as file:  # so that neither 4 nor 7 channels divide it
        file.write(bytes(2 * N_CHANNELS))
    assert (size + N_CHANNELS) % n_channels
    assert "no whole number of frames" in refused(CASES["raw"], path, n_channels=n_channels)
    path = write_lf(tmp_path / "lf")
    change_meta(path, nSavedChans=n_channels)
    assert "must agree" in refused(CASES["spikeglx"], path)


@pytest.mark.parametrize(
    ("fields", "words"),
    [
        ({"imSampRate": 0}, "no sampling rate above 0"),
        ({"imSampRate": "nan"}, "needed is a finite number"),
        ({"imSampRate": None}, "no sampling rate"),
        ({"firstSample": None}, "firstSample is missing"),
        ({"firstSample": "x"}, "firstSample is 'x'"),
        ({"firstSample": "1e18"}, "first sample is said to lie at 8e+14 s"),
        ({"fileSizeBytes": 1000}, "its meta says fileSizeBytes=1000"),
        ({"snsApLfSy": "0,4,1"}, "must agree"),
        ({"imAiRangeMax": 0}, "gain of channel 0 is 0"),
        ({"~imroTbl": "(0,384)" + "(0 0 0 500 0 1)" * 384}, "ZeroDivisionError"),
        ({"~imroTbl": "(0,384)(0 0 0 500 250 1)"}, "IndexError"),
        ({"imDatPrb_pn": "NONE"}, "NONE"),
        ({"fileName": "x"}, "x"),
    ],
)
def test_spikeglx_headers_that_cannot_be(fields, words, tmp_path):
    path = write_lf(tmp_path)
    change_meta(path, **fields)
    assert words in refused(CASES["spikeglx"], path)


def test_spikeglx_without_header_is_refused(tmp_path):
    path = write_lf(tmp_path)
    path.with_suffix(".meta").unlink()
    assert "is missing" in refused(CASES["spikeglx"], path)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"rate_hz": 0.0}, "sampling rate"),
        ({"gain_uv": 0.0}, "gain of channel 0"),
        ({"gain_uv": float("nan")}, "gain of channel 0"),
    ],
)
def test_raw_descriptions_that_cannot_be(changes, words, tmp_path):
    assert words in refused(CASES["raw"], write_raw(tmp_path), **changes)


def test_a_file_of_another_format_is_refused(tmp_path):
    for name, case in CASES.items():
        for other in CASES.values():
            if other is case or "raw" in (case.source["format"], other.source["format"]):
                continue
            folder = tmp_path / name
            refused(case, shutil.copy(other.write(folder / "of"), folder / "odd.nwb"))


class Trap:
    """Leaves a file behind when it is unpickled."""

    def __init__(self, path: Path) -> None:
        self.path = path

    def __reduce__(self) -> tuple:
        return Path.touch, (self.path,)


def test_no_pickle_is_ever_opened(tmp_path):
    """A pickle given to every reader under every name, as the file meant and beside it."""
    trap = tmp_path / "opened"
    content = pickle.dumps(Trap(trap))
    pickle.loads(content)
    assert trap.exists()  # it works
    trap.unlink()
    for name, case in CASES.items():
        folder = tmp_path / name
        folder.mkdir()
        path = case.write(folder)
        for suffix in (".pickle", ".pkl", ".bin", ".nwb"):
            (folder / f"trap{suffix}").write_bytes(content)
        case.open(path).fetch(0, 10, np.arange(1))
        path.write_bytes(content)
        if case.source["format"] != "raw":
            refused(case, path)
    assert not trap.exists()
