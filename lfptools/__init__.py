"""Recordings of LFP and spikes in two or more areas in, timing, depth and direction out.

    files --open_session--> Session --cut_trials--> CutSession --analyse--> Results
                                                                              |
              report.html, tables, arrays.h5, manifest.json <--write_results--'

    session.toml  says where the files are, which channels lie in which area, what to look for
    Session       recordings, opened and not yet read, with events and units on one clock
    CutSession    accepted trials of every area, the reason for every other one
    Results       tables with intervals, counts and controls; averages, depth maps and rates
    simulate      sessions with known truth, written as real recording files

Public names are loaded on first use, so that `import lfptools` costs next to nothing.
"""

from importlib import import_module
from typing import Any

_PUBLIC = {
    "CutSession": "lfptools.model",
    "InputError": "lfptools.errors",
    "LfptoolsError": "lfptools.errors",
    "OutputError": "lfptools.errors",
    "ReaderError": "lfptools.errors",
    "Results": "lfptools.analysis",
    "Session": "lfptools.model",
    "SessionFileError": "lfptools.errors",
    "analyse": "lfptools.analysis",
    "cut_trials": "lfptools.trials",
    "open_session": "lfptools.io.opening",
    "read_session_file": "lfptools.io.session_file",
    "stream_average": "lfptools.trials",
    "write_results": "lfptools.report.leave",
}

__all__ = sorted(_PUBLIC)


def __getattr__(name: str) -> Any:
    """Load a public name on first use."""
    if name not in _PUBLIC:
        raise AttributeError(f"module 'lfptools' has no attribute {name!r}")
    return getattr(import_module(_PUBLIC[name]), name)


def __dir__() -> list[str]:
    return list(__all__)
