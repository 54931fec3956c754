"""A state of the bench in; tables, figures and a plain picture of it out."""

from dataclasses import replace
from pathlib import Path

from lfptools.analysis import analyse
from lfptools.choices import AnalysisChoices
from lfptools.io.whole import whole
from lfptools.plot.sheets import SHEETS
from lfptools.plot.style import drawing
from lfptools.report.tables import write_tables
from lfpwidgets.full import FullAnswer
from lfpwidgets.picture import still_picture
from lfpwidgets.scene import Scene
from lfpwidgets.state import BenchState

#: Text stays text in PDF and SVG, so that it can be edited.
_EDITABLE = {"svg.fonttype": "none", "pdf.fonttype": 42, "svg.hashsalt": "lfptools"}
_KINDS = ("pdf", "svg", "png")


class Leaving:
    """Writes what a user leaves the bench with, beside the session file.

    Parameters
    ----------
    state : BenchState
        Windows and what is looked at.
    scene : Scene
        Where the averages come from.
    """

    def __init__(self, state: BenchState, scene: Scene) -> None:
        self._state = state
        self._scene = scene

    def write(self, what: str, choices: AnalysisChoices) -> Path:
        """Write "tables" (CSV) or "figure" (PDF, SVG, PNG) into the next free folder.

        The numbers are those that `lfptools run` gives for a session saved with `choices`.
        """
        results = analyse(replace(self._state.cut, choices=choices))
        folder = self._free(what)
        folder.mkdir(parents=True)
        if what == "tables":
            write_tables(results, folder)
            return folder
        for name, sheet in SHEETS.items():
            figure = sheet(results)
            for kind in _KINDS if figure is not None else ():
                with drawing(_EDITABLE), whole(folder / f"{name}.{kind}") as part:
                    figure.savefig(part, format=kind, metadata=_undated(kind))
        return folder

    def still(self, answer: FullAnswer | None = None) -> bytes:
        """Return a plain picture of the averages, windows and marks, as PNG."""
        view, cut = self._state.view, self._state.cut
        windows_ms = {
            area.area: {
                window.name: tuple(1000 * edge for edge in window.span_s(area.area))
                for window in view.windows
                if window.holds(area.area)
            }
            for area in cut.areas
        }
        return still_picture(
            self._scene.averages(),
            answer.latencies if answer is not None else (),
            windows_ms,
            self._scene.span_ms,
            cut.table.conditions,
        )

    def _free(self, what: str) -> Path:
        beside = self._state.path.parent if self._state.path else Path.cwd()
        name = f"bench-{what}"
        number, found = 1, beside / name
        while found.exists():
            number += 1
            found = beside / f"{name}-{number}"
        return found


def _undated(kind: str) -> dict[str, str | None]:
    return {"pdf": {"CreationDate": None}, "svg": {"Date": None}, "png": {"Software": None}}[kind]
