"""A JupyterLab of our own on the loopback address, and a headless Chromium."""

from __future__ import annotations

import contextlib
import json
import os
import shutil
import signal
import socket
import subprocess
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path

import pytest

from tests.require import require

ROOT = Path(__file__).parents[2]
FOLDERS = (
    "JUPYTER_CONFIG_DIR",
    "JUPYTER_DATA_DIR",
    "JUPYTER_RUNTIME_DIR",
    "IPYTHONDIR",
    "JUPYTERLAB_SETTINGS_DIR",
    "JUPYTERLAB_WORKSPACES_DIR",
)
SETTINGS = {
    "notebook-extension/tracker": {"windowingMode": "none"},
    "apputils-extension/notification": {
        "fetchNews": "false",
        "checkForUpdates": False,
    },
}
FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)
KERNEL_IS_READY = """() => {
  const c = window.jupyterapp?.shell?.currentWidget?.sessionContext;
  const k = c?.session?.kernel;
  return !!(k && c.isReady && k.connectionStatus === 'connected' && k.status === 'idle')
}"""


def _free_port():
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return probe.getsockname()[1]


def _chromium():
    for name in ("chromium", "chromium-browser", "google-chrome"):
        if path := shutil.which(name):
            return path
    if os.environ.get("TOPRECON_REQUIRE_ALL") == "1":
        pytest.fail("Chromium is required here, but is not installed")
    pytest.skip("Chromium is not installed")


@pytest.fixture(scope="session")
def served(tmp_path_factory):
    """Folder served: notebooks and sample events, as in a clone."""
    folder = tmp_path_factory.mktemp("served")
    shutil.copytree(ROOT / "notebooks", folder / "notebooks")
    (folder / "sample_events").symlink_to(
        os.environ.get("FE_SAMPLES") or ROOT / "sample_events"
    )
    return folder


@pytest.fixture(scope="session")
def lab(served, tmp_path_factory):
    """Address of a running JupyterLab."""
    require("jupyterlab")
    home = tmp_path_factory.mktemp("jupyter")
    env = os.environ | {name: str(home / name) for name in FOLDERS}
    for name, content in SETTINGS.items():
        file = (
            home / "JUPYTERLAB_SETTINGS_DIR/@jupyterlab" / f"{name}.jupyterlab-settings"
        )
        file.parent.mkdir(parents=True, exist_ok=True)
        file.write_text(json.dumps(content))
    env |= {"TOPRECON_STRICT": "0", "OMP_NUM_THREADS": "1"}
    address = f"http://127.0.0.1:{(port := _free_port())}"
    log = (home / "log.txt").open("w")
    server = subprocess.Popen(
        [
            sys.executable, "-m", "jupyterlab", "--no-browser", "--ip=127.0.0.1",
            f"--port={port}", "--ServerApp.port_retries=0", "--allow-root",
            "--IdentityProvider.token=", f"--ServerApp.root_dir={served}",
            "--LabApp.expose_app_in_browser=True", "--ServerApp.disable_check_xsrf=True",
            "--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate",
        ],
        env=env, stdout=log, stderr=log, start_new_session=True,
    )  # fmt: skip
    try:
        _wait_for(f"{address}/api/status", home / "log.txt")
        yield address
    finally:
        with contextlib.suppress(ProcessLookupError):
            os.killpg(server.pid, signal.SIGTERM)
        server.wait(timeout=20)
        log.close()


def _wait_for(address, log, seconds=60):
    stop = time.monotonic() + seconds
    while time.monotonic() < stop:
        with (
            contextlib.suppress(urllib.error.URLError, ConnectionError),
            urllib.request.urlopen(address, timeout=5) as answer,
        ):
            if answer.status == 200:
                return
        time.sleep(0.2)
    pytest.fail(f"JupyterLab did not start: {log.read_text()[-2000:]}")


@pytest.fixture(scope="session")
def browser(tmp_path_factory):
    """A Chromium with a fresh profile."""
    api = require("playwright.sync_api")
    path = _chromium()
    with api.sync_playwright() as playwright:
        context = playwright.chromium.launch_persistent_context(
            tmp_path_factory.mktemp("profile"), headless=True, executable_path=path,
            args=list(FLAGS), viewport={"width": 1400, "height": 1100},
        )  # fmt: skip
        yield context
        context.close()


class Notebook:
    """A notebook open in the browser."""

    def __init__(self, page, lab):
        self.page = page
        self.lab = lab
        self.troubles = []
        page.on("pageerror", lambda error: self.troubles.append(str(error)))

    def open(self, path):
        """Open a notebook and wait for its kernel."""
        self.page.goto(f"{self.lab}/doc/tree/{path}?reset")
        self.page.wait_for_function(KERNEL_IS_READY, timeout=60_000)
        return self

    def run_all(self):
        """Run all cells; the command answers False if a cell fails."""
        command = "() => window.jupyterapp.commands.execute('notebook:run-all-cells')"
        assert self.page.evaluate(command) is True
        assert self.page.locator("[data-mime-type*='stderr']").count() == 0
        return self


@pytest.fixture
def notebook(lab, browser, request):
    """A page for a notebook; leaves a picture behind if the test fails."""
    page = browser.new_page()
    page.set_default_timeout(30_000)
    book = Notebook(page, lab)
    yield book
    folder = os.environ.get("TOPRECON_SCREENSHOTS")
    if folder:
        Path(folder).mkdir(parents=True, exist_ok=True)
        page.screenshot(path=f"{folder}/{request.node.name}.png")
    _end_kernels(lab)
    page.close()


def _end_kernels(lab):
    with urllib.request.urlopen(f"{lab}/api/sessions") as answer:
        sessions = json.load(answer)
    for session in sessions:
        call = urllib.request.Request(
            f"{lab}/api/sessions/{session['id']}", method="DELETE"
        )
        with contextlib.suppress(urllib.error.HTTPError):
            urllib.request.urlopen(call).close()
