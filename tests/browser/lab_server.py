"""A JupyterLab on a free loopback port that knows nothing of the user's settings."""

from __future__ import annotations

import contextlib
import json
import os
import secrets
import signal
import socket
import subprocess
import sys
import time
import urllib.request
from pathlib import Path

START_SECONDS = 90
STOP_SECONDS = 20
POLL_SECONDS = 0.05


def settings(theme):
    """Settings of the interface: nothing fetched, nothing asked, this theme."""
    return {
        "@jupyterlab/apputils-extension:notification": {
            "checkForUpdates": False,
            "fetchNews": "false",
            "doNotDisturbMode": True,
        },
        "@jupyterlab/apputils-extension:themes": {"theme": f"JupyterLab {theme}"},
    }


@contextlib.contextmanager
def serving(root, home, theme="Light"):
    """Run a server on the folder `root`, its own files in `home`; yields base address and token."""
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    token = secrets.token_hex(16)
    base = f"http://127.0.0.1:{port}"
    log = Path(home, "lab.log")
    with log.open("wb") as out:
        server = subprocess.Popen(
            [
                *(sys.executable, "-m", "jupyterlab", "--no-browser", "--allow-root"),
                *("--ServerApp.ip=127.0.0.1", f"--ServerApp.port={port}"),
                *("--ServerApp.port_retries=0", f"--ServerApp.root_dir={root}"),
                *(f"--IdentityProvider.token={token}", "--LabApp.expose_app_in_browser=True"),
                "--LabApp.extension_manager=readonly",
            ],
            cwd=root,
            env=_environment(home, theme),
            stdout=out,
            stderr=out,
            start_new_session=True,
        )
    try:
        _wait(server, f"{base}/api/status?token={token}", log)
        yield base, token
    finally:
        _stop(server)


def _environment(home, theme):
    env = dict(os.environ, OMP_NUM_THREADS="1")
    for name in ("JUPYTER_CONFIG_DIR", "JUPYTER_DATA_DIR", "JUPYTER_RUNTIME_DIR", "IPYTHONDIR"):
        env[name] = str(Path(home, name.lower()))
        Path(env[name]).mkdir()
    overrides = Path(env["JUPYTER_CONFIG_DIR"], "labconfig", "default_setting_overrides.json")
    overrides.parent.mkdir()
    overrides.write_text(json.dumps(settings(theme)), encoding="utf-8")
    return env


def _wait(server, address, log):
    end = time.monotonic() + START_SECONDS
    while True:
        if server.poll() is not None or time.monotonic() > end:
            raise RuntimeError(f"no server: {log.read_text(errors='replace')[-3000:]}")
        try:
            urllib.request.urlopen(address, timeout=5).close()
        except OSError:
            time.sleep(POLL_SECONDS)
        else:
            return


def _stop(server):
    """End the server, which ends its kernels; only what was started here."""
    if server.poll() is not None:
        return
    server.send_signal(signal.SIGTERM)
    try:
        server.wait(STOP_SECONDS)
    except subprocess.TimeoutExpired:
        os.killpg(server.pid, signal.SIGKILL)  # a session of its own: our children only
        server.wait()
