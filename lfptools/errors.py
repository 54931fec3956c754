"""The errors that lfptools raises; everything a user can mend descends from InputError.

LfptoolsError
└── InputError (also a ValueError)
    ├── SessionFileError   the session file: a key, a value, a missing part
    ├── ReaderError        a recording, a table of events or spikes
    └── OutputError        the output folder
"""


class LfptoolsError(Exception):
    """Root of every error that lfptools raises on purpose."""


class InputError(LfptoolsError, ValueError):
    """What was handed in cannot be used; the message names it and what is needed."""


class SessionFileError(InputError):
    """The session file is wrong; the message names file, key, found and needed."""


class ReaderError(InputError):
    """A recording or table cannot be read rightly; the message names the file and the cause."""


class OutputError(InputError):
    """The results cannot be written where they were asked for."""
