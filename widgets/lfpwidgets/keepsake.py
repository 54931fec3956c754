"""Windows not yet saved in, a small file beside the session file out, and back again.

A kernel that dies takes its memory along. What the hand last settled on is therefore kept
beside the session file, whole or not at all, until it is saved; a bench opened anew on the
same session file takes it over, as a step that undo takes back.
"""

import json
from contextlib import suppress
from pathlib import Path

import msgspec

from lfptools.choices import WindowChoice, as_plain
from lfptools.errors import InputError
from lfptools.io.session_update import file_digest
from lfptools.io.whole import write_whole
from lfpwidgets.state import BenchState


def keepsake_path(session_file: Path) -> Path:
    """Return where unsaved windows of a session are kept."""
    return session_file.with_name(f"{session_file.stem}.bench.json")


def keep(state: BenchState) -> None:
    """Keep what is not saved; remove what was kept once nothing is. No error where it cannot."""
    if state.path is None:
        return
    kept = keepsake_path(state.path)
    with suppress(OSError, InputError):
        if not state.unsaved:
            kept.unlink(missing_ok=True)
            return
        plain = {
            "session": file_digest(state.path),
            "signal": state.view.signal,
            "windows": [as_plain(window) for window in state.view.windows],
        }
        write_whole(kept, json.dumps(plain, indent=1).encode())


def take_over(state: BenchState) -> bool:
    """Take over what was kept for this very session file; return whether there was any.

    What was kept for another state of the session file, or cannot be read, is left alone.
    """
    if state.path is None or not keepsake_path(state.path).is_file():
        return False
    try:
        plain = json.loads(keepsake_path(state.path).read_text(encoding="utf-8"))
        if plain["session"] != file_digest(state.path):
            return False
        windows = msgspec.convert(plain["windows"], tuple[WindowChoice, ...])
        state.restore(windows, plain["signal"])
    except (OSError, ValueError, KeyError, TypeError):
        return False
    return state.unsaved
