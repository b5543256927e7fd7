"""A real JupyterLab in a real browser, with the wheel of this checkout installed.

`open_notebook` is what tests use: it writes cells to a file, opens it and hands back a `Notebook`. The laboratory is an
environment of its own that borrows the packages of the running one and holds the wheel besides, so what is tested is
what is shipped. All tests here share one worker, hence one laboratory: `xdist_group("bundle")`.
"""

import json
import os
import secrets
import shutil
import socket
import subprocess
import sys
import sysconfig
import time
import urllib.error
import urllib.request
import venv
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import nbformat
import pytest
from playwright.sync_api import Browser, ConsoleMessage, Locator, Page, expect, sync_playwright

ROOT = Path(__file__).parents[2]
START_SECONDS = 60
CHROMIUM_NAMES = ("chromium", "chromium-browser", "google-chrome")
CHROMIUM_FLAGS = (
    *("--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking"),
    *("--disable-component-update", "--disable-sync", "--disable-dev-shm-usage"),
)
RUN_ALL = """limit => {
    const run = async () => {
        const session = window.jupyterapp.shell.currentWidget.sessionContext;
        await session.ready;
        await session.session.kernel.info;
        await window.jupyterapp.commands.execute('notebook:run-all-cells');
        return true;
    };
    return Promise.race([run(), new Promise(resolve => setTimeout(() => resolve(false), limit))]);
}"""
QUIET = {"disabledExtensions": {"@jupyterlab/apputils-extension:announcements": True}}


@dataclass(frozen=True)
class Laboratory:
    """A running JupyterLab: its address, the folder that it serves, the token and where it logs."""

    address: str
    folder: Path
    token: str
    log: Path


@dataclass
class Notebook:
    """A notebook open in a page of its own."""

    page: Page
    complaints: list[str] = field(default_factory=list)  # errors on the console that come from our code

    def cell(self, index: int) -> Locator:
        return self.page.locator(".jp-Notebook .jp-Cell").nth(index)

    def line(self, index: int, line: int) -> Locator:
        """A line of the editor of a cell; both count from 0."""
        return self.cell(index).locator(".cm-line").nth(line)

    def result(self, index: int) -> Locator:
        """What our extension has drawn below a cell."""
        return self.cell(index).locator(".qt-Result")

    def command(self, name: str, **arguments: Any) -> None:
        """Execute a command of JupyterLab and wait for it."""
        self.page.evaluate("([n, a]) => window.jupyterapp.commands.execute(n, a)", [name, arguments])

    def wear(self, theme: str) -> None:
        self.command("apputils:change-theme", theme=theme)
        expect(self.page.locator(f'body[data-jp-theme-name="{theme}"]')).to_be_attached()

    def run_all(self, seconds: int) -> None:
        """Run every cell once the kernel is there; fails where they have not ended in time."""
        ended = self.page.evaluate(RUN_ALL, 1000 * seconds)
        assert ended, f"the cells did not end in {seconds} s"

    def picture(self, place: Path) -> None:
        self.page.screenshot(path=place, full_page=True)


@pytest.fixture(scope="session")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel of this checkout."""
    folder = tmp_path_factory.mktemp("wheel")
    run([sys.executable, "-m", "build", "--wheel", "--no-isolation", "--outdir", str(folder), str(ROOT)])
    return next(folder.glob("*.whl"))


@pytest.fixture(scope="session")
def laboratory_python(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Python of an environment with the wheel and, by reference, the packages of the running environment."""
    place = tmp_path_factory.mktemp("environment")
    venv.create(place, symlinks=True)
    python = place / "bin" / "python"
    run([sys.executable, "-m", "pip", "--python", str(python), "install", "-q", "--no-deps", "--no-index", str(wheel)])
    packages = Path(sysconfig.get_path("purelib", vars={"base": str(place)}))
    (packages / "borrowed.pth").write_text(sysconfig.get_path("purelib") + "\n")
    settings = place / "etc" / "jupyter" / "labconfig" / "page_config.json"
    settings.parent.mkdir(parents=True)
    settings.write_text(json.dumps(QUIET))
    return python


@pytest.fixture(scope="session")
def laboratory(laboratory_python: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Laboratory]:
    """JupyterLab on the loopback address, ended with the session."""
    home = tmp_path_factory.mktemp("home")
    folder = tmp_path_factory.mktemp("notebooks")
    port, token = free_port(), secrets.token_hex(16)
    environment = {name: value for name, value in os.environ.items() if not name.startswith(("JUPYTER", "PYTHON"))}
    environment |= {
        "HOME": str(home),
        "IPYTHONDIR": str(home / "ipython"),
        "JUPYTERLAB_DIR": str(Path(sys.prefix, "share", "jupyter", "lab")),
        "PYDEVD_DISABLE_FILE_VALIDATION": "1",
    }
    arguments = ["--no-browser", "--allow-root", "--ip=127.0.0.1", f"--port={port}", "--ServerApp.port_retries=0"]
    arguments += [f"--IdentityProvider.token={token}", f"--ServerApp.root_dir={folder}"]
    arguments += [
        "--LabApp.expose_app_in_browser=True",
        "--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate",
    ]
    log = home / "jupyterlab.log"
    with log.open("w") as stream:
        server = subprocess.Popen(
            [str(laboratory_python), "-m", "jupyterlab", *arguments],
            env=environment,
            cwd=folder,
            stdout=stream,
            stderr=subprocess.STDOUT,
        )
        try:
            wait_for(f"http://127.0.0.1:{port}/api", server, log)
            yield Laboratory(f"http://127.0.0.1:{port}", folder, token, log)
        finally:
            server.terminate()
            server.wait(timeout=30)


@pytest.fixture(scope="session")
def browser() -> Iterator[Browser]:
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=chromium(), args=CHROMIUM_FLAGS)
        yield browser
        browser.close()


@pytest.fixture
def open_notebook(
    laboratory: Laboratory, browser: Browser, request: pytest.FixtureRequest
) -> Iterator[Callable[[list[Any]], Notebook]]:
    """Write cells to a notebook file and open it; errors of our code on the console fail the test at its end."""
    opened: list[Notebook] = []

    def open_cells(cells: list[Any]) -> Notebook:
        kernel = {"kernelspec": {"name": "python3", "display_name": "Python 3", "language": "python"}}
        notebook = nbformat.v4.new_notebook(cells=cells, metadata=kernel | {"language_info": {"name": "python"}})
        path = laboratory.folder / f"{request.node.originalname}-{secrets.token_hex(4)}.ipynb"
        nbformat.write(notebook, path)
        context = browser.new_context(viewport={"width": 1180, "height": 1500})
        shown = Notebook(context.new_page())
        opened.append(shown)
        watch(shown)
        shown.page.goto(f"{laboratory.address}/doc/tree/{path.name}?token={laboratory.token}")
        expect(shown.cell(0)).to_be_visible(timeout=1000 * START_SECONDS)
        return shown

    yield open_cells
    complaints = [complaint for notebook in opened for complaint in notebook.complaints]
    for notebook in opened:
        notebook.page.context.close()
    assert not complaints


def watch(notebook: Notebook) -> None:
    """Keep what the page complains about, where it names our extension."""

    def on_console(message: ConsoleMessage) -> None:
        told = f"{message.text} ({message.location.get('url', '')})"
        if message.type in ("error", "warning") and "quarterturn" in told:
            notebook.complaints.append(told)

    def on_error(error: Any) -> None:
        told = f"{error.message}\n{error.stack or ''}"
        if "quarterturn" in told:
            notebook.complaints.append(told)

    notebook.page.on("console", on_console)
    notebook.page.on("pageerror", on_error)


def chromium() -> str:
    """Path of a Chromium, installed with Debian's package manager where there is none and we may."""
    if found := next(filter(None, map(shutil.which, CHROMIUM_NAMES)), None):
        return found
    if shutil.which("apt-get") is None or os.geteuid() != 0:
        pytest.fail(
            "The browser tests need Chromium. Install it (Debian: apt-get install chromium) and run them again."
        )
    environment = {**os.environ, "DEBIAN_FRONTEND": "noninteractive"}
    for arguments in (["update"], ["install", "-y", "--no-install-recommends", "chromium"]):
        run(["apt-get", "-qq", *arguments], env=environment)
    found = shutil.which("chromium")
    assert found, "apt-get installed Chromium, but there is no program of that name"
    return found


def run(command: list[str], **settings: Any) -> None:
    """Run a command; where it fails, the test fails with what the command said."""
    done = subprocess.run(command, capture_output=True, text=True, **settings)
    if done.returncode != 0:
        pytest.fail(f"{' '.join(command)} ended with {done.returncode}:\n{done.stdout[-4000:]}\n{done.stderr[-4000:]}")


def free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


def wait_for(address: str, server: "subprocess.Popen[bytes]", log: Path) -> None:
    """Return once the server answers."""
    deadline = time.monotonic() + START_SECONDS
    while time.monotonic() < deadline and server.poll() is None:
        try:
            urllib.request.urlopen(address, timeout=5).close()
            return
        except (urllib.error.URLError, ConnectionError, TimeoutError):
            time.sleep(0.2)
    pytest.fail(f"JupyterLab did not start in {START_SECONDS} s:\n{log.read_text()[-4000:]}")
