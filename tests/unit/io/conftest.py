"""A small session on disk: two areas on SpikeGLX and NWB, units, events; one clock."""

from pathlib import Path

import numpy as np
import pytest

from lfptools.io.write_nwb import write_nwb
from lfptools.io.write_spikeglx import write_spikeglx
from lfptools.model import SpikeTrains

SESSION = """\
session = "whisk-01"
subject = "rat 1"

[[source]]
name = "s1_lfp"
format = "spikeglx"
path = "s1/run_g0_t0.imec0.lf.bin"
clock = "rig"

[[source]]
name = "m1"
format = "nwb"
path = "m1.nwb"
clock = "rig"

[[area]]
name = "S1"
source = "s1_lfp"
channels = "0-3"
pitch_um = 100
bad = [2]
layers = { L4 = [100, 250] }

[[area]]
name = "M1"
source = "m1"
channels = "3-0"
depths_um = [0, 100, 250, 300]

[[units]]
area = "S1"
source = "m1"
keep = ["good"]

[[units]]
area = "M1"
source = "m1"

[events]
file = "events.csv"
clock = "rig"

[trials]
window_ms = [-200, 300]
baseline_ms = [-100, 0]

[[window]]
name = "early"
span_ms = [5, 40]
direction_ms = [0, 100]

[window.for.M1]
span_ms = [10, 50]

[[window]]
name = "late"
span_ms = [50, 150]
extremum = "peak"
areas = ["S1"]
"""

EVENTS = "time_s,condition,whisker\n11.0,single,C2\n11.5,pad,C2\n12.25,single,D1\n"

#: Units of the session: S1 has a good and a bad one, M1 one.
UNITS = SpikeTrains(
    unit=("a", "b", "c"),
    area=("S1", "S1", "M1"),
    depth_um=np.array([150.0, 350.0, 120.0]),
    time_s=(np.array([10.5, 11.25]), np.array([11.0]), np.array([12.0, 12.5, 13.0])),
)


def signal(n_samples: int, n_channels: int, rng: int = 1) -> np.ndarray:
    return np.random.default_rng(rng).normal(0, 60, (n_samples, n_channels)).astype(np.float32)


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """The session with all its files: 4 s from 10 s on, 4 channels an area."""
    write_spikeglx(
        tmp_path / "s1", "run", signal(4000, 4), 1000.0, first_sample=10_000,
        depth_um=np.arange(4) * 100.0,
    )  # fmt: skip
    write_nwb(
        tmp_path / "m1.nwb", data_uv=signal(2000, 4, 2), rate_hz=500.0, starting_time_s=10.0,
        depth_um=np.arange(4) * 100.0, area="M1", units=UNITS, quality=["good", "mua", "good"],
    )  # fmt: skip
    (tmp_path / "events.csv").write_text(EVENTS)
    (tmp_path / "session.toml").write_text(SESSION)
    return tmp_path


@pytest.fixture
def bare(tmp_path: Path) -> Path:
    """The session file with empty files behind it: enough to check the session file alone."""
    (tmp_path / "s1").mkdir()
    for name in ("s1/run_g0_t0.imec0.lf.bin", "m1.nwb", "events.csv"):
        (tmp_path / name).touch()
    (tmp_path / "session.toml").write_text(SESSION)
    return tmp_path


@pytest.fixture
def session_text() -> str:
    return SESSION


#: Every kind of comment, an area's own span, and tables behind the windows.
COMMENTED_WINDOWS = """\
# Windows, as agreed before the recording

[[window]]   # the first wave
name = "early"  # feedforward
span_ms = [5, 40]# from the pilot
direction_ms = [ 0 , 100 ]
# extremum = "peak"

  # M1 is later
  [window.for.M1]
  span_ms = [10, 50]   # by eye

# the second wave
[[window]]
span_ms = [
  50,   # after the first
  150,
]
name = 'late'
extremum = "peak"

areas = ["S1"]
# end of the windows

# how large is too large
[clean]
amplitude_sd = 7.0   # SDs
""".replace("# feedforward", "# feedforward  ")  # blanks at the end of a line


@pytest.fixture
def commented(bare: Path) -> Path:
    """Return a session file whose windows carry comments."""
    path = bare / "session.toml"
    path.write_text(SESSION[: SESSION.index("[[window]]")] + COMMENTED_WINDOWS)
    return path


@pytest.fixture
def commented_windows() -> str:
    return COMMENTED_WINDOWS
