"""Names of conditions in, their colours, lines and markers out; sizes and settings of figures.

Every condition is told by three cues: colour, line style and marker.
"""

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from threading import RLock
from typing import Any

from matplotlib import rc_context

#: The colours of Okabe and Ito (2008), Color Universal Design, which readers with the common
#: kinds of colour blindness tell apart; from memory.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#56B4E9", "#E69F00", "#000000")
LINES = ("-", "--", "-.", ":")
MARKERS = ("o", "s", "^", "D", "v")

#: Sinks (negative) orange, sources (positive) purple: a diverging scale of ColorBrewer
#: (Harrower and Brewer 2003) that it lists as safe for colour-blind readers; from memory.
DIVERGING = "PuOr"
SHADES = ("#efefef", "#e4e4e4")
FAINT = "#8c8c8c"
PALE = "#d9d9d9"
INK = "#1a1a1a"

TEXT_PT = 8.0
#: Width of a figure in inches: that of the report's printed page.
WIDTH_IN = 7.0
DPI = 180

#: Settings for `drawing`. Names are shown as they are, never read as mathematics.
SETTINGS = {
    "font.size": TEXT_PT,
    "axes.titlesize": TEXT_PT + 1,
    "axes.labelsize": TEXT_PT,
    "xtick.labelsize": TEXT_PT,
    "ytick.labelsize": TEXT_PT,
    "legend.fontsize": TEXT_PT,
    "figure.titlesize": TEXT_PT + 1,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.linewidth": 0.6,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "lines.linewidth": 1.2,
    "lines.markersize": 4.5,
    "text.parse_math": False,
    "axes.unicode_minus": True,
}

_DRAWING = RLock()


@contextmanager
def drawing(settings: Mapping[str, Any] = SETTINGS) -> Iterator[None]:
    """Draw or save with these settings, one thread at a time.

    matplotlib's settings belong to the whole process: two threads that change and restore them
    by turns would leave one's settings behind for the user's own figures.
    """
    with _DRAWING, rc_context(dict(settings)):
        yield


@dataclass(frozen=True, slots=True)
class Look:
    """How one condition is drawn."""

    colour: str
    line: str
    marker: str


def looks(conditions: Sequence[str]) -> dict[str, Look]:
    """Return the look of each condition, in order of appearance."""
    return {
        name: Look(
            COLOURS[index % len(COLOURS)],
            LINES[index % len(LINES)],
            MARKERS[index % len(MARKERS)],
        )
        for index, name in enumerate(conditions)
    }


def short(name: str, most: int = 24) -> str:
    """Return a name as it fits into a figure: on one line, cut with an ellipsis."""
    line = " ".join(name.split())
    # A label that begins with an underscore would be left out of a legend.
    line = f" {line}" if line.startswith("_") else line
    return line if len(line) <= most else line[: most - 1] + "…"
