"""The command line: what is typed goes in, files and an exit status come out.

Exit status: 0 done; 2 bad input, nothing written; 130 stopped by Ctrl-C; 1 anything else.
Heavy modules are imported inside the commands, so that `--help` answers at once.
"""

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path

from lfptools.errors import InputError

_CAUTION = (
    "Research use; no medical device, no basis for a clinical or surgical decision. A lead in "
    "time is not proof of a projection: unrecorded common input can make one. Arrival order "
    "alone is not direction of influence."
)


def parser() -> argparse.ArgumentParser:
    """Return the parser of all commands."""
    top = argparse.ArgumentParser(
        prog="lfptools",
        description="From recordings of local field potentials and spikes in several areas to a "
        "table of when each evoked wave arrives, where its current enters, what it does to the "
        "neurons and which area leads.",
        epilog=_CAUTION,
    )
    top.add_argument("--version", action="store_true", help="print the version and stop")
    commands = top.add_subparsers(dest="command", metavar="COMMAND")

    demo = commands.add_parser(
        "demo", help="simulate a session, run it and compare the tables with the known truth"
    )
    demo.add_argument("--out", type=Path, metavar="DIR", help="new folder; default: next free one")
    demo.add_argument("--seed", type=int, default=1, metavar="N", help="default: 1")
    demo.add_argument("--quiet", action="store_true", help="no progress bar")

    check = commands.add_parser(
        "check", help="open everything a session file names, say what was found, analyse nothing"
    )
    check.add_argument("session", type=Path, metavar="SESSION.toml")

    run = commands.add_parser("run", help="analyse a session: tables, figures and a report")
    run.add_argument("session", type=Path, metavar="SESSION.toml")
    run.add_argument("--out", type=Path, required=True, metavar="DIR", help="folder of results")
    run.add_argument("--force", action="store_true", help="write into a folder that is not empty")
    run.add_argument("--quiet", action="store_true", help="no progress bar")

    bench = commands.add_parser(
        "bench", help="scrub the windows of a session and watch the answers, in the browser"
    )
    bench.add_argument("session", type=Path, metavar="SESSION.toml")
    bench.add_argument(
        "--no-browser", action="store_true", help="print the address and open no browser"
    )

    commands.add_parser("formats", help="list the recording formats: what each carries and needs")
    return top


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status."""
    asked = parser().parse_args(arguments)
    if asked.version:
        from importlib.metadata import version

        print(version("lfptools"))
        return 0
    if asked.command is None:
        parser().print_help()
        return 2
    try:
        return _COMMANDS[asked.command](asked)
    except InputError as error:
        print(f"lfptools: {error}", file=sys.stderr)
        return 2
    except KeyboardInterrupt:
        print("lfptools: stopped", file=sys.stderr)
        return 130


def _demo(asked: argparse.Namespace) -> int:
    from lfptools.cli.demo import run_demo

    if asked.seed < 0:
        raise InputError(f"--seed is {asked.seed}; it must be 0 or above")
    run_demo(out=asked.out, seed=asked.seed, quiet=asked.quiet)
    return 0


def _check(asked: argparse.Namespace) -> int:
    from lfptools.cli.overview import show_overview

    show_overview(asked.session)
    return 0


def _run(asked: argparse.Namespace) -> int:
    from lfptools.cli.running import run_session

    page = run_session(asked.session, asked.out, force=asked.force, quiet=asked.quiet)
    print(f"report: {page}")
    return 0


def _bench(asked: argparse.Namespace) -> int:
    from lfptools.cli.bench import serve
    from lfptools.io.opening import open_session

    open_session(asked.session)  # refuses here, on the terminal, what the page would refuse
    serve(asked.session, browser=not asked.no_browser)
    return 0


def _formats(asked: argparse.Namespace) -> int:
    from lfptools.cli.overview import show_formats

    show_formats()
    return 0


_COMMANDS = {"demo": _demo, "check": _check, "run": _run, "bench": _bench, "formats": _formats}
