"""A session file and windows come in; the file goes out saved, with what became of each window."""

from pathlib import Path

import msgspec

from lfptools.choices import AnalysisChoices, WindowChoice
from lfptools.errors import SessionFileError
from lfptools.io.session_file import parse_session_file, session_bytes
from lfptools.io.session_update import content_digest, save_session_as, update_session_file
from lfptools.io.session_windows import with_windows
from lfpwidgets.view import View

Opened = tuple[WindowChoice | None, ...]


class KeptFile:
    """The session file as it was opened, and the name in it of every window opened from it."""

    def __init__(self, path: Path, content: bytes, windows: list[WindowChoice]) -> None:
        self.path = path
        self._content = content
        self._name_in_file = {each.name: each.name for each in windows}

    @classmethod
    def of(cls, path: Path, choices: AnalysisChoices) -> "KeptFile":
        """Read a session file, which must say what `choices` say; windows and signal may differ.

        Raises
        ------
        SessionFileError
            If it says something else, or is no valid session file.
        """
        path = Path(path)
        content = session_bytes(path)
        found = parse_session_file(content, path).choices
        signal = found.direction.signal
        choices = msgspec.structs.replace(
            choices, direction=msgspec.structs.replace(choices.direction, signal=signal)
        )
        other = [
            msgspec.structs.fields(choices)[at].encode_name
            for at, key in enumerate(choices.__struct_fields__)
            if key != "window" and getattr(choices, key) != getattr(found, key)
        ]
        if other:
            raise SessionFileError(
                f"{path}: does not say what these trials were cut by; it differs in "
                f"{', '.join(other)}; open the session again"
            )
        return cls(path, content, found.window)

    def save(self, view: View, opened: Opened) -> None:
        """Write the windows and the signal of a view into the file.

        Parameters
        ----------
        view : View
            What to write.
        opened : tuple of WindowChoice or None
            For each window of the view, the one it was when the session was opened.

        Raises
        ------
        SessionFileError
            If the file changed on disk; it can still be saved under another name.
        OutputError
            If the file system refuses.
        """
        was = self._was(view, opened)
        new = with_windows(
            self._content, self.path, view.windows, direction_signal=view.signal, was=was
        )
        update_session_file(
            self.path,
            view.windows,
            seen=content_digest(self._content),
            direction_signal=view.signal,
            was=was,
        )
        self._note(self.path, new, view, opened)

    def save_as(self, new_path: Path, view: View, opened: Opened) -> None:
        """Write them into a new file beside the old one, and go on with that one.

        It starts from the file as it was opened, whatever has become of it.

        Raises
        ------
        SessionFileError
            If the new file lies in another folder.
        OutputError
            If it exists, or the file system refuses.
        """
        path = save_session_as(
            self.path,
            new_path,
            view.windows,
            content=self._content,
            direction_signal=view.signal,
            was=self._was(view, opened),
        )
        self._note(path, session_bytes(path), view, opened)

    def _was(self, view: View, opened: Opened) -> dict[str, str]:
        return {
            window.name: self._name_in_file[each.name]
            for window, each in zip(view.windows, opened, strict=True)
            if each is not None and each.name in self._name_in_file
        }

    def _note(self, path: Path, content: bytes, view: View, opened: Opened) -> None:
        self.path, self._content = path, content
        self._name_in_file = {
            each.name: window.name
            for window, each in zip(view.windows, opened, strict=True)
            if each is not None
        }
