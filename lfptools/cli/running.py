"""A session file and a folder in, the results on disk out, with a progress bar on the way."""

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from rich.console import Console
from rich.progress import BarColumn, Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

from lfptools.analysis import Results, analyse
from lfptools.io.opening import open_session
from lfptools.model import Session
from lfptools.report.leave import need_folder, write_results
from lfptools.trials import Progress as Report


@contextmanager
def progress_bar(quiet: bool) -> Iterator[Report]:
    """Yield a function that takes (stage, share done) and draws it on the error stream."""
    bar = Progress(
        SpinnerColumn(),
        TextColumn("{task.description}"),
        BarColumn(),
        TimeElapsedColumn(),
        console=Console(stderr=True),
        transient=True,
        disable=quiet,
    )
    with bar:
        task = bar.add_task("opening", total=1.0)
        yield lambda stage, share: bar.update(task, description=stage, completed=share)


def run_session(path: Path, out: Path, *, force: bool, quiet: bool) -> Path:
    """Analyse a session and write its results; return the path of the report.

    Raises
    ------
    InputError
        If the session, a recording or the output folder is not as needed; nothing is written.
    """
    need_folder(out, force=force)
    page, _ = write_session(open_session(path), path, out, force=force, quiet=quiet)
    return page


def write_session(
    session: Session, path: Path, out: Path, *, force: bool, quiet: bool
) -> tuple[Path, Results]:
    """Analyse an opened session and write its results; return the report's path and them."""
    with progress_bar(quiet) as progress:
        results = analyse(session, progress=progress)
        progress("drawing the figures and writing the report", 0.0)
        page = write_results(results, out, session=session, root=path.parent, force=force)
    return page, results
