"""The name of a format comes in; what it carries, what it needs and its reader go out."""

from collections.abc import Callable
from dataclasses import dataclass
from importlib import import_module

#: Keys of [[source]] that describe the samples where the format itself does not.
SAMPLE_KEYS = ("rate_hz", "n_channels", "gain_uv", "dtype")


@dataclass(frozen=True, slots=True)
class Format:
    """One family of files that can be read.

    `carries` lists what its files tell (signals, units, events, clock, geometry); `needs`
    lists the keys of [[source]] that must be given because they do not. `signals` and
    `units` name the functions that read each, as "module:function", so that a reader's
    library is loaded only when a session uses it.
    """

    name: str
    what: str
    carries: tuple[str, ...]
    needs: tuple[str, ...] = ()
    signals: str | None = None
    units: str | None = None

    def reader(self, of: str) -> Callable:
        """Return the function that reads `of`, "signals" or "units".

        Raises
        ------
        ValueError
            If the format holds none.
        """
        place = {"signals": self.signals, "units": self.units}[of]
        if place is None:
            raise ValueError(f"format {self.name} holds no {of}")
        module, function = place.split(":")
        return getattr(import_module(module), function)


FORMATS: dict[str, Format] = {
    each.name: each
    for each in (
        Format(
            "spikeglx",
            "SpikeGLX stream: .bin with its .meta beside it",
            carries=("signals", "clock", "geometry"),
            signals="lfptools.io.spikeglx:open_spikeglx",
        ),
        Format(
            "nwb",
            "NWB 2 file (HDF5): an ElectricalSeries, a units table",
            carries=("signals", "units", "clock", "geometry"),
            signals="lfptools.io.nwb:open_nwb",
            units="lfptools.io.nwb_tables:read_nwb_units",
        ),
        Format(
            "raw",
            "raw binary: frames of interleaved channels and nothing else",
            carries=("signals",),
            needs=SAMPLE_KEYS,
            signals="lfptools.io.raw:open_raw",
        ),
        Format(
            "table",
            "CSV of spikes with columns unit and time_s; may have area (needed where several "
            "areas take units from the file) and depth_um (needed for the field of the "
            "neighbouring contact)",
            carries=("units",),
            units="lfptools.io.tables:read_spikes_csv",
        ),
    )
}


def holding(of: str) -> tuple[str, ...]:
    """Return the names of the formats that hold `of`, "signals" or "units"."""
    return tuple(name for name, each in FORMATS.items() if of in each.carries)
