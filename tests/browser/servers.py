"""Servers for the browser tests: JupyterLab with one notebook, and the page of `lfptools bench`.

Bound to 127.0.0.1 with a token, every folder of theirs temporary, ended with their own process
group.
"""

import os
import re
import signal
import subprocess
import sys
import time
import urllib.request
from contextlib import contextmanager, suppress
from pathlib import Path

import nbformat

import lfptools
from lfptools.cli.bench import free_port

ROOT = Path(lfptools.__file__).parent.parent
TOKEN = "only-for-this-test"


def environment(folder):
    """Return an environment whose caches and settings all lie in `folder`."""
    own = {
        name: str(folder / name.lower())
        for name in (
            "JUPYTER_CONFIG_DIR", "JUPYTER_DATA_DIR", "JUPYTER_RUNTIME_DIR", "IPYTHONDIR",
            "MPLCONFIGDIR", "XDG_CACHE_HOME", "JUPYTERLAB_WORKSPACES_DIR",
        )
    }  # fmt: skip
    paths = [str(ROOT), str(ROOT / "widgets"), os.environ.get("PYTHONPATH", "")]
    own["PYTHONPATH"] = os.pathsep.join(filter(None, paths))
    return os.environ | own


@contextmanager
def running(command, folder):
    """Start a server, yield its process and log, end it and all that it started."""
    log = folder / "server.log"
    with log.open("w") as said:
        server = subprocess.Popen(
            command, cwd=folder, env=environment(folder), stdout=said, stderr=said,
            start_new_session=True,
        )  # fmt: skip
    try:
        yield server, log
    finally:
        server.terminate()
        with suppress(subprocess.TimeoutExpired):
            server.wait(timeout=20)
        with suppress(ProcessLookupError):
            os.killpg(server.pid, signal.SIGKILL)


@contextmanager
def lab(folder, source):
    """Serve a notebook of one cell in JupyterLab; yield its address."""
    notebook = nbformat.v4.new_notebook(cells=[nbformat.v4.new_code_cell(source)])
    notebook.metadata["kernelspec"] = {
        "name": "python3", "display_name": "Python 3", "language": "python",
    }  # fmt: skip
    nbformat.write(notebook, folder / "bench.ipynb")
    port = free_port()
    command = [
        sys.executable, "-m", "jupyterlab", "--no-browser", "--allow-root",
        "--ServerApp.ip=127.0.0.1", f"--ServerApp.port={port}", "--ServerApp.port_retries=0",
        f"--IdentityProvider.token={TOKEN}", f"--ServerApp.root_dir={folder}",
        "--LabApp.expose_app_in_browser=True", "--LabApp.news_url=None",
    ]  # fmt: skip
    with running(command, folder) as (server, log):
        _answers(f"http://127.0.0.1:{port}/api/status?token={TOKEN}", server, log)
        yield f"http://127.0.0.1:{port}/lab/tree/bench.ipynb?token={TOKEN}&reset"


@contextmanager
def page(folder, session):
    """Serve the bench through the command line; yield its address."""
    command = [sys.executable, "-m", "lfptools", "bench", str(session), "--no-browser"]
    with running(command, folder) as (server, log):
        found = None
        ends = time.monotonic() + 60
        while not found and time.monotonic() < ends and server.poll() is None:
            time.sleep(0.1)
            found = re.search(r"bench: (\S+)", log.read_text())
        assert found, log.read_text()
        yield found.group(1)


def _answers(address, server, log):
    ends = time.monotonic() + 60
    while time.monotonic() < ends:
        assert server.poll() is None, log.read_text()
        try:
            with urllib.request.urlopen(address, timeout=2):
                return
        except OSError:
            time.sleep(0.1)
    raise AssertionError(log.read_text())
