"""A session file in, the bench as a page of its own out, on this machine alone.

The page is a one-cell notebook in a temporary folder, served by Voila, bound to 127.0.0.1 and
closed to everybody without its token. One kernel has always run the notebook ahead, so that a
page opens at once.
"""

import json
import os
import secrets
import signal
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
import webbrowser
from contextlib import suppress
from importlib.util import find_spec
from pathlib import Path
from tempfile import TemporaryDirectory

from lfptools.errors import InputError, LfptoolsError

_HOST = "127.0.0.1"
_PAGE = "bench.ipynb"
_START_S = 60.0
#: Tells the bench that it stands on a page of its own and needs no picture for a saved notebook.
PAGE_VARIABLE = "LFPTOOLS_BENCH_PAGE"
#: The products behind an answer are small: more BLAS threads get into one another's way.
_ONE_THREAD = {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"}


def serve(session: Path, *, browser: bool) -> None:
    """Serve the bench of a session until Ctrl-C.

    Raises
    ------
    InputError
        If Voila is not installed; the session itself is checked before (see `lfptools.cli`).
    LfptoolsError
        If the server does not come up.
    """
    for needed in ("voila",):
        if find_spec(needed) is None:
            raise InputError(f"the bench needs {needed}: pip install 'lfptools[app]'")
    token, port = secrets.token_urlsafe(24), free_port()
    with TemporaryDirectory(prefix="lfptools-bench-") as folder:
        (Path(folder) / _PAGE).write_text(json.dumps(notebook(session.resolve())))
        # The folder is this user's alone; a command line can be read by everybody.
        (Path(folder) / "voila.json").write_text(json.dumps({"Voila": {"token": token}}))
        log = Path(folder) / "server.log"
        with log.open("wb") as said:
            server = subprocess.Popen(
                command(port),
                cwd=folder,
                env=os.environ | {PAGE_VARIABLE: "1"} | _ONE_THREAD,
                stdout=said,
                stderr=said,
                start_new_session=True,
            )
        signal.signal(signal.SIGTERM, _stop)  # else the server would outlive this process
        try:
            _wait(server, port, token, log)
            address = f"http://{_HOST}:{port}/?token={token}"
            print(f"bench: {address}", flush=True)
            print("Ctrl-C ends it", flush=True)
            if browser:
                webbrowser.open(address)
            server.wait()
        finally:
            end(server)


def command(port: int) -> list[str]:
    """Return the command of the server; the token stands in a file of the folder, not here."""
    return [
        sys.executable, "-m", "voila", _PAGE,
        "--no-browser",
        f"--Voila.ip={_HOST}",
        f"--port={port}",
        "--Voila.port_retries=0",
        "--preheat_kernel=True",
        "--VoilaConfiguration.show_tracebacks=True",
    ]  # fmt: skip


def notebook(session: Path) -> dict:
    """Return the notebook of one cell that shows the bench of a session."""
    return {
        "cells": [
            {
                "cell_type": "code",
                "execution_count": None,
                "id": "bench",
                "metadata": {},
                "outputs": [],
                "source": f"import lfpwidgets\nlfpwidgets.Bench({str(session)!r})",
            }
        ],
        "metadata": {
            "kernelspec": {"display_name": "Python 3", "language": "python", "name": "python3"}
        },
        "nbformat": 4,
        "nbformat_minor": 5,
    }


def free_port() -> int:
    """Return a port of this machine that nobody listens on."""
    with socket.socket() as probe:
        probe.bind((_HOST, 0))
        return probe.getsockname()[1]


def _wait(server: subprocess.Popen, port: int, token: str, log: Path) -> None:
    """Return once the server answers to the token."""
    ends = time.monotonic() + _START_S
    request = urllib.request.Request(
        f"http://{_HOST}:{port}/voila/static/voila.js", headers={"Authorization": f"token {token}"}
    )
    while time.monotonic() < ends:
        if server.poll() is not None:
            said = log.read_text(errors="replace").strip()
            raise LfptoolsError(f"the server of the bench ended: {said[-800:]}")
        try:
            with urllib.request.urlopen(request, timeout=2):
                return
        except (urllib.error.URLError, OSError):
            time.sleep(0.1)
    raise LfptoolsError(f"the server of the bench did not answer within {_START_S:.0f} s")


def _stop(_signal: int, _frame: object) -> None:
    raise SystemExit(0)


def end(server: subprocess.Popen) -> None:
    """End the server: asked first, so that it ends its kernels; then its process group killed."""
    if server.poll() is None:
        server.terminate()
        with suppress(subprocess.TimeoutExpired):
            server.wait(timeout=15)
    with suppress(ProcessLookupError, PermissionError):
        os.killpg(server.pid, signal.SIGKILL)
