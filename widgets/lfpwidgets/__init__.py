"""The interactive bench: plain state objects first, views over them second.

    CutSession --BenchState--> View --Answers--> quick and full answers --words--> tables
                                 '----Scene----> pictures --Surface--> the page

`Bench` puts them together; everything but `Surface` works without a widget. Public names are
loaded on first use.
"""

from importlib import import_module
from typing import Any

_PUBLIC = {
    "Answers": "lfpwidgets.answers",
    "Bench": "lfpwidgets.bench",
    "BenchState": "lfpwidgets.state",
}

__all__ = sorted(_PUBLIC)


def __getattr__(name: str) -> Any:
    """Load a public name on first use."""
    if name not in _PUBLIC:
        raise AttributeError(f"module 'lfpwidgets' has no attribute {name!r}")
    return getattr(import_module(_PUBLIC[name]), name)


def __dir__() -> list[str]:
    return list(__all__)
