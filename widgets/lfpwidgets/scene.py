"""The state of the bench and its answers in, all that the page draws out, pictures included."""

from typing import Any

import numpy as np

from lfptools.analysis.memo import Memo
from lfptools.evoked import Average
from lfpwidgets.answers import Answers
from lfpwidgets.picture import (
    LEFT_PX,
    RIGHT_PX,
    WIDTH_PX,
    Strip,
    as_plain,
    averages_strip,
    map_strip,
    time_strip,
    units_strip,
)
from lfpwidgets.state import BenchState
from lfpwidgets.view import units_of

#: Time shown before the stimulus, ms, where the trial reaches so far.
_BEFORE_MS = 100.0
_MOST_STRIPS = 64


class Scene:
    """What the page shows of a state; pictures are drawn once and kept.

    Parameters
    ----------
    state : BenchState
        Windows and what is looked at.
    answers : Answers
        Where averages, maps and rates come from.
    """

    def __init__(self, state: BenchState, answers: Answers) -> None:
        self._state = state
        self._answers = answers
        self._strips = Memo(_MOST_STRIPS)
        self._conditions = answers.estimated

    @property
    def span_ms(self) -> tuple[float, float]:
        """Time that the pictures show."""
        first, last = self._state.cut.choices.trials.window_ms
        return max(first, -_BEFORE_MS), last

    def traits(self) -> dict[str, Any]:
        """Return the traits of the surface: the scene and its pictures."""
        strips = self._all_strips()
        pictures = {name: strips[name].png if name in strips else b"" for name in _PICTURES}
        plain = [as_plain(strip) | {"picture": name} for name, strip in strips.items()]
        turn = hash(tuple(id(strip) for strip in strips.values()))
        # The pictures first: the page draws them when the scene that names them comes.
        return {**pictures, "scene": self._plain(plain, turn)}

    def averages(self) -> list[Average]:
        """Return the averages of the signal that stands for each area, by condition."""
        view = self._state.view
        return [
            self._answers.average(area.area, name, view.signal, view.windows)
            for area in self._state.cut.areas
            for name in self._conditions
        ]

    def room_for_window(self) -> tuple[float, float]:
        """Return a span for a new window: after the last one, or a tenth of the time shown."""
        first, last = self._state.grid.ends_ms
        length = (last - max(first, 0.0)) / 10
        ends = max((window.span_ms[1] for window in self._state.view.windows), default=0.0)
        start = ends + length / 4 if ends + 1.25 * length <= last else max(first, 0.0)
        return start, start + length

    def _plain(self, strips: list[dict[str, Any]], turn: int) -> dict[str, Any]:
        state, view = self._state, self._state.view
        units = [*units_of(state.cut, view.area)] if view.area else []
        return {
            "title": state.cut.name + (" (unsaved windows)" if state.unsaved else ""),
            "geometry": {
                "width": WIDTH_PX,
                "left": LEFT_PX,
                "right": RIGHT_PX,
                "span": list(self.span_ms),
                "step": state.step_ms,
                "bounds": [max(state.grid.ends_ms[0], self.span_ms[0]), state.grid.ends_ms[1]],
            },
            "windows": [
                {
                    "name": window.name,
                    "first": window.span_ms[0],
                    "last": window.span_ms[1],
                    "extremum": window.extremum,
                }
                for window in view.windows
            ],
            "hand": view.hand,
            "options": {
                "condition": list(state.cut.table.conditions),
                "area": [area.area for area in state.cut.areas],
                "signal": ["csd", "lfp"],
                "unit": units,
            },
            "chosen": {
                "condition": view.condition,
                "area": view.area,
                "signal": view.signal,
                "unit": self._unit() or "",
            },
            "strips": strips,
            "pictureTurn": turn,
            "canUndo": state.can_undo,
            "canRedo": state.can_redo,
            "canSave": state.path is not None,
            "saveHint": f"write the windows into {state.path.name}"
            if state.path
            else "these trials come from no session file",
        }

    def _all_strips(self) -> dict[str, Strip]:
        view = self._state.view
        averages = self.averages()
        contacts = tuple(float(each.depth_um[0]) for each in averages)
        strips = {
            "averages_png": self._strips.get(
                ("averages", view.signal, contacts),
                lambda: averages_strip(averages, self.span_ms, self._conditions),
            )
        }
        shown = view.condition if view.condition in self._conditions else self._conditions[0]
        if self._has_map(view.area, view.signal):
            strips["map_png"] = self._strips.get(
                ("map", view.area, shown, view.signal),
                lambda: self._map(view.area, shown, view.signal),
            )
        unit = self._unit()
        if unit is not None:
            strips["units_png"] = self._strips.get(
                ("units", view.area, unit), lambda: self._units(view.area, unit)
            )
        else:
            strips["time_png"] = self._strips.get(("time",), lambda: time_strip(self.span_ms))
        return strips

    def _has_map(self, area: str, signal: str) -> bool:
        trials = self._state.cut.trials_of(area)
        if trials is None:
            return False
        return signal == "lfp" or area in self._answers.mapped_areas

    def _map(self, area: str, condition: str, signal: str) -> Strip:
        maps = {name: self._answers.map(area, name, signal) for name in self._conditions}
        trials = self._state.cut.trials_of(area)
        assert trials is not None
        return map_strip(
            maps[condition],
            self.span_ms,
            contacts=trials.contacts,
            layers=trials.layers,
            limit=max(float(np.abs(each.mean).max()) for each in maps.values()),
        )

    def _units(self, area: str, unit: str) -> Strip:
        curves = [self._answers.rates(area, name) for name in self._conditions]
        counts = {
            name: int(np.count_nonzero(self._state.cut.condition == name))
            for name in self._conditions
        }
        return units_strip(
            [curve for curve in curves if curve is not None],
            {name: self._answers.raster(unit, name) for name in self._conditions},
            self.span_ms,
            unit=unit,
            n_trials=counts,
            conditions=self._conditions,
        )

    def _unit(self) -> str | None:
        view = self._state.view
        units = view.units or units_of(self._state.cut, view.area)
        return units[0] if units else None


_PICTURES = ("averages_png", "map_png", "units_png", "time_png")
