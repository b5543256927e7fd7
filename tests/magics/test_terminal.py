"""The magics in a terminal: what a person sees who has no browser."""

import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

import quarterturn

pty = pytest.importorskip("pty", reason="there are no pseudo-terminals on this system")
fdpexpect = pytest.importorskip("pexpect.fdpexpect", reason="IPython brings it wherever there are pseudo-terminals")

IPYTHON = "-m IPython --simple-prompt --no-banner --colors=NoColor --HistoryManager.enabled=False"


@pytest.fixture
def terminal(tmp_path: Path) -> Iterator[Any]:
    """IPython on a pseudo-terminal; in a process of its own, not a fork of this one, which has threads."""
    source = str(Path(quarterturn.__file__).parent.parent)
    environment = {**os.environ, "PYTHONPATH": source, "IPYTHONDIR": str(tmp_path), "COLUMNS": "80"}
    ours, theirs = pty.openpty()
    command = [sys.executable, *IPYTHON.split()]
    with subprocess.Popen(
        command, stdin=theirs, stdout=theirs, stderr=theirs, env=environment, start_new_session=True
    ) as process:
        os.close(theirs)
        screen = fdpexpect.fdspawn(ours, encoding="utf-8", timeout=60)
        screen.expect(r"In \[1\]: ")
        yield screen
        process.kill()
    screen.close()


def types(terminal: Any, *lines: str) -> str:
    """Type a cell and return what is written up to the next prompt; two empty lines end a cell of several."""
    for line in [*lines, "", ""] if len(lines) > 1 else lines:
        terminal.sendline(line)
        terminal.expect(r"(\.\.\.: |In \[\d+\]: )")
    return str(terminal.before)


def test_declare_and_sample_in_a_terminal(terminal: Any, well: str) -> None:
    types(terminal, "%load_ext quarterturn")
    card = types(terminal, *well.strip().splitlines())
    assert "action well" in card and "lattice    24 sites, a = 0.25, beta = 6" in card
    types(terminal, "compiled = %sample well draws=16")
    shown = types(terminal, "%sample well error=1e-9 time=3s")
    progress, _, result = shown.partition("Out[4]:")
    assert "\rwell: drawing" in progress and "<q^2> = " in progress
    last = progress.rstrip("\n").split("\r")
    assert not last[-1].strip() and not last[-2].strip()
    lines = result.replace("\r", "").splitlines()
    assert any(line.startswith("observable   value") for line in lines)
    assert any(line.startswith("<q^2> ") and "(" in line for line in lines)
    mistake = types(terminal, "%sample wall")
    assert "no action is called wall; declared: well" in mistake and "Traceback" not in mistake
