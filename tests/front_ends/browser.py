"""A Jupyter server on a folder of its own, and notebooks in a real Chromium: what the browser tests are written with.

The server knows only the kernels of the environment it runs in and those that are enrolled into `data`; settings,
workspaces and run-time files lie in the work folder, too, so that nothing of the user's is read or changed.
"""

import contextlib
import json
import os
import re
import secrets
import shutil
import signal
import socket
import subprocess
import sys
import tempfile
import time
import urllib.error
import urllib.request
from pathlib import Path

from playwright.sync_api import sync_playwright

CHROMIUM_FLAGS = [
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync",
]
WAIT_MS = 30_000

# The indicator in the tool bar says "idle" before there is a kernel: the page's own application knows better.
KERNEL_RESTS = """() => {
  const context = window.jupyterapp?.shell?.currentWidget?.sessionContext;
  return context?.isReady && context.session?.kernel?.status === "idle";
}"""


class Server:
    """A Jupyter server that serves JupyterLab (`lab/`) and Notebook (`notebooks/`)."""

    def __init__(self, work: Path):
        self.work = work
        self.root = work / "root"
        self.data = work / "data"
        self.token = secrets.token_hex(16)
        with socket.socket() as probe:
            probe.bind(("127.0.0.1", 0))
            self.port = probe.getsockname()[1]
        self.chosen = work / "settings"
        for folder in (self.root, self.data):
            folder.mkdir(parents=True)
        self.choose()

    def choose(self):
        """The settings that a page finds."""
        folder = self.chosen / "@jupyterlab" / "apputils-extension"
        folder.mkdir(parents=True, exist_ok=True)
        # The toast that asks about news would lie over what is clicked.
        (folder / "notification.jupyterlab-settings").write_text('{"fetchNews": "false", "checkForUpdates": false}')

        # Cells outside the window would be hidden, and could not be clicked.
        folder = self.chosen / "@jupyterlab" / "notebook-extension"
        folder.mkdir(parents=True, exist_ok=True)
        (folder / "tracker.jupyterlab-settings").write_text('{"windowingMode": "none"}')

    def environment(self):
        places = {
            "JUPYTER_DATA_DIR": "data", "JUPYTER_CONFIG_DIR": "config", "JUPYTER_RUNTIME_DIR": "runtime",
            "JUPYTERLAB_SETTINGS_DIR": "settings", "JUPYTERLAB_WORKSPACES_DIR": "workspaces", "IPYTHONDIR": "ipython",
        }
        return os.environ | {name: str(self.work / folder) for name, folder in places.items()}

    def __enter__(self):
        self.log = (self.work / "server.log").open("wb")
        self.process = subprocess.Popen(
            [sys.executable, "-m", "notebook", "--no-browser", "--allow-root", "--ServerApp.ip=127.0.0.1",
             f"--ServerApp.port={self.port}", f"--IdentityProvider.token={self.token}",
             "--LabApp.expose_app_in_browser=True", "--JupyterNotebookApp.expose_app_in_browser=True", str(self.root)],
            env=self.environment(), stdout=self.log, stderr=subprocess.STDOUT, start_new_session=True,
        )
        until(lambda: self.ask("api/status") is not None, "the server answers", 60)
        return self

    def __exit__(self, *_):
        with contextlib.suppress(Exception):
            self.delete_kernels()
        self.process.send_signal(signal.SIGTERM)
        try:
            self.process.wait(15)
        except subprocess.TimeoutExpired:
            os.killpg(self.process.pid, signal.SIGKILL)
            self.process.wait()
        self.log.close()

    def ask(self, path, method="GET"):
        """What the server's own interface answers, or nothing where it does not (yet)."""
        request = urllib.request.Request(
            f"http://127.0.0.1:{self.port}/{path}", method=method, headers={"Authorization": f"token {self.token}"}
        )
        try:
            with urllib.request.urlopen(request, timeout=10) as answer:
                return json.loads(answer.read() or "{}")
        except (urllib.error.URLError, ConnectionError, TimeoutError):
            return None

    def kernels(self):
        return self.ask("api/kernels") or []

    def delete_kernels(self):
        """Kernels outlive the page that started them."""
        for session in self.ask("api/sessions") or []:
            self.ask(f"api/sessions/{session['id']}", "DELETE")
        for kernel in self.kernels():
            self.ask(f"api/kernels/{kernel['id']}", "DELETE")

    def address(self, path):
        return f"http://127.0.0.1:{self.port}/{path}?token={self.token}"


class Page:
    """A page of a browser, with what was said on its console and sent to kernels."""

    def __init__(self, server, browser, pictures: Path, viewport=(1280, 1500), scheme="light"):
        self.server = server
        self.pictures = pictures
        context = browser.new_context(
            viewport={"width": viewport[0], "height": viewport[1]}, color_scheme=scheme
        )
        context.set_default_timeout(WAIT_MS)
        self.page = context.new_page()
        self.console = []
        self.sent = []
        self.replies = 0
        self.page.on("console", lambda message: self.console.append(f"{message.type}: {message.text}"))
        self.page.on("pageerror", lambda error: self.console.append(f"error: {error}"))
        self.page.on("websocket", self._watch)

    def _watch(self, socket):
        def as_bytes(frame):
            return frame if isinstance(frame, bytes) else frame.encode()

        def count(frame):
            self.replies += b'"execute_reply"' in as_bytes(frame)

        socket.on("framesent", lambda frame: self.sent.append(as_bytes(frame)))
        socket.on("framereceived", count)

    def comms_opened(self):
        """How many comms the extension has opened from this page."""
        return sum(b"comm_open" in frame and b"rhythmite.relink" in frame for frame in self.sent)

    def own_complaints(self):
        """What the extension said on the console."""
        return [line for line in self.console if "rhythmite" in line.lower() and not line.startswith("log")]

    def open(self, name, in_notebook=False):
        """Open a notebook and wait for its kernel."""
        self.page.goto(self.server.address(f"notebooks/{name}" if in_notebook else self.lab(name)))
        self.wait_idle()

    def open_text(self, name):
        """Open a file in the text editor."""
        self.page.goto(self.server.address(self.lab(name)))
        self.page.wait_for_selector(".jp-FileEditor .cm-line span")

    def lab(self, name):
        # A workspace of its own: what another page left open must not come back.
        return f"lab/workspaces/page-{id(self)}/tree/{name}"

    def reload(self):
        self.page.reload()
        self.wait_idle()

    def close(self):
        self.page.context.close()

    def wait_idle(self):
        """Wait until the kernel of the notebook rests, as its page shows it."""
        self.page.wait_for_function(KERNEL_RESTS)
        self.page.wait_for_selector(".jp-Notebook-ExecutionIndicator[data-status=idle]")

    def cell(self, number):
        """A cell, counted from 0."""
        # Notebooks of earlier tests may be open in tabs behind.
        front = ".jp-NotebookPanel:not(.lm-mod-hidden) .jp-Notebook"
        return self.page.locator(f"{front} .jp-Cell[data-windowed-list-index='{number}']")

    def output(self, number):
        """What the output of a cell shows as text."""
        area = self.cell(number).locator(".jp-OutputArea").first
        return area.inner_text() if area.count() else ""

    def prompt(self, number):
        return self.cell(number).locator(".jp-InputPrompt").first.inner_text()

    def write(self, number, text):
        """Replace the text of a cell; it has the focus then."""
        self.cell(number).locator(".cm-content").first.click()
        self.page.keyboard.press("Control+A")
        # Typed as one piece, so that the editor closes no brackets by itself.
        self.page.keyboard.insert_text(text)

    def run(self, number, wait=True):
        """Run a cell where it stands, and wait for its reply."""
        replies = self.replies
        self.cell(number).locator(".cm-content").first.click()
        self.page.keyboard.press("Control+Enter")
        if wait:
            self.wait_replies(replies + 1)

    def wait_replies(self, replies, seconds=60):
        end = time.monotonic() + seconds
        while self.replies < replies:
            assert time.monotonic() < end, f"{self.replies} replies after {seconds} s, not {replies}"
            self.page.wait_for_timeout(30)  # events of the page are heard while it waits
        self.wait_idle()

    def menu(self, *path):
        """Choose from the menu bar."""
        self.page.locator(f".lm-MenuBar-item:has-text('{path[0]}')").first.click()
        for position, label in enumerate(path[1:]):
            menu = self.page.locator(".lm-Menu").nth(position)
            item = menu.locator(".lm-Menu-item").filter(
                has=self.page.locator(".lm-Menu-itemLabel", has_text=re.compile(f"^{re.escape(label)}"))
            ).first
            item.hover()
            if position == len(path) - 2:
                item.click()

    def run_all(self, cells):
        """Run all cells, of which so many hold code."""
        replies = self.replies
        self.menu("Run", "Run All Cells")
        self.wait_replies(replies + cells)

    def save(self):
        self.page.keyboard.press("Control+s")
        self.page.wait_for_timeout(500)

    def theme(self, name):
        self.menu("Settings", "Theme", name)
        dark = "false" if "Dark" in name else "true"
        self.page.wait_for_selector(f"body[data-jp-theme-light='{dark}']", state="attached")
        self.page.wait_for_timeout(500)

    def picture(self, name, of=None):
        path = self.pictures / f"{name}.png"
        (of or self.page).screenshot(path=path)
        return path


def until(condition, what, seconds=15.0):
    """Wait until a condition holds; what it is goes into the failure."""
    end = time.monotonic() + seconds
    while True:
        value = condition()
        if value:
            return value
        if time.monotonic() > end:
            raise AssertionError(f"after {seconds:.0f} s it is not so that {what}")
        time.sleep(0.05)


def code_cell(source, identity, outputs=()):
    return {
        "cell_type": "code", "id": identity, "metadata": {}, "execution_count": None, "outputs": list(outputs),
        "source": source,
    }


def write_notebook(path: Path, sources, kernel="rhythmite", language="rhythmite"):
    """A notebook file with a code cell for each source."""
    cells = [code_cell(source, f"cell-{number}") for number, source in enumerate(sources)]
    notebook = {
        "nbformat": 4, "nbformat_minor": 5, "cells": cells,
        "metadata": {
            "kernelspec": {"name": kernel, "display_name": kernel, "language": language},
            "language_info": {"name": language},
        },
    }
    path.write_text(json.dumps(notebook))


def chromium():
    """The path of Chromium on this machine."""
    for name in ("chromium", "chromium-browser", "google-chrome"):
        if path := shutil.which(name):
            return path
    raise SystemExit("chromium was not found on PATH; on Debian and Ubuntu: apt-get install chromium")


@contextlib.contextmanager
def laboratory(pictures: Path, prepare):
    """A server whose folders `prepare(server)` has filled, and a browser; both end with the block."""
    # Whoever ends the tests ends the server, too.
    signal.signal(signal.SIGTERM, lambda *_: sys.exit("ended by a signal"))
    pictures.mkdir(parents=True, exist_ok=True)
    work = Path(tempfile.mkdtemp(prefix="front-end-"))
    try:
        server = Server(work)
        prepare(server)
        with server, sync_playwright() as playwright:
            browser = playwright.chromium.launch(executable_path=chromium(), args=CHROMIUM_FLAGS)
            yield server, browser
            browser.close()
    finally:
        shutil.rmtree(work, ignore_errors=True)
