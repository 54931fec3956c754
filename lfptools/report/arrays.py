"""Results in, every curve and map behind a figure out, ready for an HDF5 file."""

from collections.abc import Iterator
from typing import Any
from urllib.parse import quote

import numpy as np

from lfptools.analysis.results import Results
from lfptools.evoked import Average
from lfptools.plot.sheets import shown_unit
from lfptools.rates import RateCurve, spike_raster

Item = tuple[str, tuple[np.ndarray, dict[str, Any]]]


def arrays(results: Results) -> dict[str, tuple[np.ndarray, dict[str, Any]]]:
    """Return arrays by "group/area/condition/name", each with its attributes.

    Groups are `lfp` (averages of the good contacts), `csd` (maps by depth), `signals` (what
    stands for each area), `firing` and `rasters` (of the units shown). Attributes name area
    and condition as they are, `unit`, and in `axes` what each axis is, whose values stand
    beside the array under that name.
    """
    groups = {
        "lfp": results.averages,
        "csd": results.maps,
        "signals": results.signal_averages,
    }
    found: dict[str, tuple[np.ndarray, dict[str, Any]]] = {}
    for group, averages in groups.items():
        for average in averages:
            found |= dict(_of_average(group, average))
    for curve in results.rates:
        found |= dict(_of_rates(curve))
        found |= dict(_of_raster(results, curve))
    return found


def _place(group: str, area: str, condition: str) -> str:
    """Return a path in the file; a slash or a dot in a name must not open a group."""
    names = (quote(name, safe=" ").replace(".", "%2E") for name in (area, condition))
    return "/".join((group, *names))


def _of_average(group: str, average: Average) -> Iterator[Item]:
    place = _place(group, average.area, average.condition)
    shared = {
        "area": average.area,
        "condition": average.condition,
        "n_trials": average.n_trials,
        "level": average.level,
    }
    curve = shared | {"unit": average.unit, "axes": "depth_um, time_s"}
    yield f"{place}/mean", (average.mean, curve)
    yield f"{place}/lo", (average.lo, curve)
    yield f"{place}/hi", (average.hi, curve)
    yield f"{place}/time_s", (average.time_s, shared | {"unit": "s", "axes": "time_s"})
    yield f"{place}/depth_um", (average.depth_um, shared | {"unit": "um", "axes": "depth_um"})
    yield f"{place}/channel", (average.channel, shared | {"unit": "", "axes": "depth_um"})


def _of_rates(curve: RateCurve) -> Iterator[Item]:
    place = _place("firing", curve.area, curve.condition)
    shared = {
        "area": curve.area,
        "condition": curve.condition,
        "n_trials": curve.n_trials,
        "bin_s": curve.bin_s,
    }
    for name in ("rate_hz", "lo_hz", "hi_hz"):
        yield f"{place}/{name}", (getattr(curve, name), shared | {"unit": "Hz", "axes": "time_s"})
        each = getattr(curve, f"unit_{name}")
        yield f"{place}/unit_{name}", (each, shared | {"unit": "Hz", "axes": "unit, time_s"})
    yield f"{place}/time_s", (curve.time_s, shared | {"unit": "s", "axes": "time_s"})
    yield f"{place}/unit", (np.array(curve.unit), shared | {"unit": "", "axes": "unit"})


def _of_raster(results: Results, curve: RateCurve) -> Iterator[Item]:
    unit = shown_unit(results, curve.area)
    if unit is None or results.cut.spikes is None:
        return
    place = _place("rasters", curve.area, curve.condition)
    shared = {
        "area": curve.area,
        "condition": curve.condition,
        "n_trials": curve.n_trials,
        "of_unit": results.cut.spikes.unit[unit],
        "axes": "spike",
    }
    trial, time_s = spike_raster(results.cut, unit, curve.condition)
    yield f"{place}/trial", (trial, shared | {"unit": ""})
    yield f"{place}/time_s", (time_s, shared | {"unit": "s"})
