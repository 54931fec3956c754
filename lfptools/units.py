"""Conversions between the units of files and tables and those used inside.

Inside: uV for potentials, s for times, um for depths (0 at the surface, downwards
positive), uA/mm^3 for current source density (sinks negative), Hz for rates.
"""

MS_PER_S = 1000.0
UV_PER_V = 1e6
#: 1 uA/mm^3 is 1000 A/m^3 (check: 1 mV/mm^2 x .3 S/m = 300 A/m^3 = .3 uA/mm^3).
A_M3_PER_UA_MM3 = 1000.0

#: Unit of each kind of signal, as tables and axes print it.
SIGNAL_UNITS = {"lfp": "uV", "csd": "uA/mm^3"}


def s_from_ms(value_ms: float) -> float:
    """Seconds from milliseconds."""
    return value_ms / MS_PER_S


def ms_from_s(value_s: float) -> float:
    """Milliseconds from seconds."""
    return value_s * MS_PER_S
