"""A notebook server of its own on the loopback address, and a browser to look at it."""

import os
import shutil
import socket
import subprocess
import sys
import time
import urllib.request
from contextlib import contextmanager
from pathlib import Path

import pytest
from bench_examples import ROOT

STARTS_WITHIN_S = 60


def artefacts(tmp_path: Path) -> Path:
    """Where screenshots go: the folder that CI_ARTEFACTS names, else a temporary one."""
    folder = Path(os.environ.get("CI_ARTEFACTS") or tmp_path / "artefacts")
    folder.mkdir(parents=True, exist_ok=True)
    return folder


def copy_project(folder: Path) -> None:
    """The notebooks and what they read, so that nothing is left in the repository."""
    for name in ("notebooks", "missions", "stations", "tle_samples"):
        shutil.copytree(ROOT / name, folder / name, ignore=shutil.ignore_patterns(".ipynb_checkpoints", "*.png"))


@contextmanager
def server(module: str, arguments: list[str], folder: Path):
    """`python -m module` serving on a free port of 127.0.0.1; yields its address, and ends it afterwards."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    own = {f"JUPYTER_{name}_DIR": str(folder / ".jupyter" / name.lower()) for name in ("CONFIG", "DATA", "RUNTIME")}
    own["JUPYTERLAB_WORKSPACES_DIR"] = str(folder / ".jupyter" / "workspaces")
    own["JUPYTERLAB_SETTINGS_DIR"] = str(_without_news(folder / ".jupyter" / "settings"))
    command = [sys.executable, "-m", module, *arguments, f"--port={port}"]
    address = f"http://127.0.0.1:{port}"
    with open(folder / "server.log", "w") as log:
        process = subprocess.Popen(command, env=os.environ | own, cwd=folder, stdout=log, stderr=subprocess.STDOUT)
        try:
            _wait_for(address, process, folder / "server.log")
            yield address
        finally:
            process.terminate()
            process.wait()


def _without_news(folder: Path) -> Path:
    """Settings in which the page does not ask whether it may fetch news."""
    own = folder / "@jupyterlab" / "apputils-extension" / "notification.jupyterlab-settings"
    own.parent.mkdir(parents=True)
    own.write_text('{"fetchNews": "false", "checkForUpdates": false}')
    return folder


def _wait_for(address: str, process: subprocess.Popen, log: Path) -> None:
    for _ in range(STARTS_WITHIN_S * 5):
        if process.poll() is not None:
            break
        try:
            urllib.request.urlopen(f"{address}/static/favicon.ico", timeout=5).close()
            return
        except urllib.error.HTTPError:
            return  # it answers
        except OSError:
            time.sleep(0.2)
    pytest.fail(f"the server did not start:\n{log.read_text()[-2000:]}")
