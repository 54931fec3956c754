"""The widget itself: what the kernel shows travels out, what the hand does comes back.

No computation here: traits that the browser draws from, and messages handed on.
"""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import anywidget
import traitlets

_HERE = Path(__file__).parent
#: JupyterLab holds small replies back by about 35 ms, waiting for an acknowledgement; a second
#: buffer of this size in the reply is not held back.
_UNHELD = bytes(140_000)


class Surface(anywidget.AnyWidget):
    """Pictures, windows and answers of the bench in the browser."""

    _esm = (_HERE / "bench.js").read_text(encoding="utf-8")
    _css = (_HERE / "bench.css").read_text(encoding="utf-8")

    scene = traitlets.Dict().tag(sync=True)
    averages_png = traitlets.Bytes().tag(sync=True)
    map_png = traitlets.Bytes().tag(sync=True)
    units_png = traitlets.Bytes().tag(sync=True)
    time_png = traitlets.Bytes().tag(sync=True)

    def __init__(self, heard: Callable[[dict[str, Any]], None], **traits: Any) -> None:
        super().__init__(**traits)
        self.on_msg(lambda _widget, content, _buffers: heard(content))

    def __repr__(self) -> str:
        return f"the bench on {self.scene.get('title', 'no session')}"

    def answer(self, answer: dict[str, Any], turn: int = 0) -> None:
        """Send answers; `turn` numbers the position of the hand that they belong to."""
        self.send({"kind": "answer", "turn": turn, "answer": answer}, [_UNHELD])

    def say(self, text: str) -> None:
        """Show what was done."""
        self.send({"kind": "said", "text": text})

    def complain(self, text: str) -> None:
        """Show what went wrong, in a place of its own."""
        self.send({"kind": "error", "text": text})
