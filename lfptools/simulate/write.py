"""A simulated session comes in; a folder of recording files and a session file goes out.

Two formats on one clock, as a laboratory would hand them over: SpikeGLX streams, and for the
last area an NWB file at half the rate that also holds the sorted units of all areas. No two
files begin at the same time.
"""

import json
from pathlib import Path

import numpy as np
from scipy.signal import resample_poly

from lfptools.errors import OutputError
from lfptools.io.session_file import write_session_file
from lfptools.io.whole import write_whole
from lfptools.io.write_nwb import write_nwb
from lfptools.io.write_spikeglx import write_spikeglx
from lfptools.simulate.recording import Simulated, SimulatedArea

_CLOCK = "rig"
_RUN = "whisker"
#: 0.6 V / 512 / 500 is 2.34 uV a count and a range of +-1.2 mV.
_GAIN = 500
_NWB_STREAM = "acquisition/lfp"
#: The NWB file holds every second sample.
_DECIMATION = 2

_HEADER = """\
One session: a rat, single whiskers deflected or air puffed on the whole pad, an array of 16
contacts each in S1, S2 and M1. Simulated: truth.json says what is in it.
Paths are relative to this file. `lfptools check` tells what it opens and analyses nothing.
Tables that are not here ([clean], [latency], [csd], [direction], [resample] ...) keep their
defaults; the manifest of a run lists every value used."""

_COMMENTS = {
    "subject": "optional",
    "source.name": "one stream of one recording; areas and units refer to this name",
    "source.stream": "needed where the recording holds several",
    "source.clock": "sources that name the same clock share it; start times count",
    "source.amplifier_hz": "pass band of the amplifier; its delay is part of every latency",
    "area.name": "areas stand in the order of the pathway",
    "area.channels": 'from the surface down; "15-0" where the file counts from the tip',
    "area.pitch_um": "distance of neighbouring contacts; or depths_um = [..]",
    "area.first_depth_um": "of the first contact below the surface",
    "units.source": "one file holds the units of all areas, told apart by its column `area`",
    "events.file": "columns time_s and condition; further columns are factors",
    "events.clock": "the clock of time_s",
    "trials.baseline_ms": "before the stimulus; its mean is taken off each trial",
    "window.name": "each window holds one wave of each area",
    "window.span_ms": "after the stimulus; the trough is looked for here",
    "window.extremum": 'sinks are troughs; "peak" looks for maxima',
    "window.direction_ms": "wider span for coupling and direction only",
}


def write_demo(simulated: Simulated, folder: str | Path) -> Path:
    """Write a simulated session as recording files.

    Parameters
    ----------
    simulated : Simulated
        The session. The same one gives the same bytes.
    folder : str or Path
        Where it goes; must be new or empty.

    Returns
    -------
    Path
        The session file; beside it events.csv, truth.json and the recordings.

    Raises
    ------
    OutputError
        If the folder holds something already or cannot be written.
    """
    folder = Path(folder)
    if folder.exists() and (not folder.is_dir() or any(folder.iterdir())):
        raise OutputError(f"{folder} exists and is not an empty folder; name a new one")
    *front, last = simulated.areas
    sources = [_write_spikeglx(simulated, area, folder) for area in front]
    sources.append(_write_nwb(simulated, last, folder))
    truth = json.dumps(simulated.truth, indent=1, allow_nan=False)
    write_whole(folder / "truth.json", f"{truth}\n".encode())
    write_whole(folder / "events.csv", _events(simulated).encode())
    tables = _tables(simulated, sources)
    return write_session_file(folder / "session.toml", tables, _HEADER, comments=_COMMENTS)


def _source(simulated: Simulated, name: str, format_name: str, path: str, stream: str) -> dict:
    return {
        "name": name,
        "format": format_name,
        "path": path,
        "stream": stream,
        "clock": _CLOCK,
        "amplifier_hz": _numbers(simulated.scenario.amplifier_hz),
    }


def _write_spikeglx(simulated: Simulated, area: SimulatedArea, folder: Path) -> dict:
    """Write one area as a SpikeGLX stream and return its [[source]]."""
    scenario = simulated.scenario
    late = round(scenario.area(area.name).starts_late_s * simulated.rate_hz)
    name = area.name.lower()
    path = write_spikeglx(
        folder / name,
        _RUN,
        area.data_uv[late:],
        simulated.rate_hz,
        first_sample=scenario.first_sample + late,
        gain=_GAIN,
        depth_um=area.depth_um,
    )
    inside = path.relative_to(folder).as_posix()
    return _source(simulated, f"{name}_lfp", "spikeglx", inside, "imec0.lf")


def _write_nwb(simulated: Simulated, area: SimulatedArea, folder: Path) -> dict:
    """Write the last area and all units as NWB and return its [[source]]."""
    rate_hz = simulated.rate_hz / _DECIMATION
    late = round(simulated.scenario.area(area.name).starts_late_s * rate_hz)
    data_uv = resample_poly(area.data_uv, 1, _DECIMATION, axis=0)
    name = area.name.lower()
    write_nwb(
        folder / f"{name}.nwb",
        data_uv=data_uv[late:],
        rate_hz=rate_hz,
        starting_time_s=simulated.start_s + late / rate_hz,
        depth_um=area.depth_um,
        area=area.name,
        units=simulated.spikes,
    )
    return _source(simulated, f"{name}_nwb", "nwb", f"{name}.nwb", _NWB_STREAM)


def _events(simulated: Simulated) -> str:
    """Return the table of stimuli as text."""
    events = simulated.events
    lines = [",".join(["time_s", "condition", *events.factors])]
    for time_s, *texts in zip(
        events.time_s, events.condition, *events.factors.values(), strict=True
    ):
        lines.append(",".join([f"{time_s:.6f}", *texts]))
    return "\n".join(lines) + "\n"


def _tables(simulated: Simulated, sources: list[dict]) -> dict:
    """Return the session file as plain tables."""
    scenario = simulated.scenario
    with_units = dict.fromkeys(simulated.spikes.area)
    tables = {
        "session": "whisker-demo",
        "subject": "rat 1",
        "source": sources,
        "area": [_area(simulated, *each) for each in zip(simulated.areas, sources, strict=True)],
        "units": [{"area": name, "source": sources[-1]["name"]} for name in with_units],
        "events": {"file": "events.csv", "clock": _CLOCK},
        "trials": {"window_ms": [-200, 300], "baseline_ms": [-100, 0]},
        "window": [
            {
                "name": window.name,
                "span_ms": _numbers(window.span_ms),
                "extremum": "trough",
                "direction_ms": _numbers(window.direction_ms),
            }
            for window in scenario.windows
        ],
    }
    return {key: value for key, value in tables.items() if value}


def _area(simulated: Simulated, area: SimulatedArea, source: dict) -> dict:
    scenario = simulated.scenario
    layers = scenario.area(area.name).layers
    pitch_um, first_depth_um = _numbers((scenario.pitch_um, area.depth_um[0]))
    return {
        "name": area.name,
        "source": source["name"],
        "channels": f"0-{len(area.depth_um) - 1}",
        "pitch_um": pitch_um,
        "first_depth_um": first_depth_um,
        "layers": {name: _numbers(span_um) for name, span_um in layers.items()},
    }


def _numbers(values: tuple[float, ...] | np.ndarray) -> list[float]:
    """Return plain numbers, whole ones without a point, as one would type them."""
    return [int(value) if float(value).is_integer() else float(value) for value in values]
