"""Linter, formatter and type checker, as part of the tests."""

import subprocess
import sys
from pathlib import Path

import pytest

CHECKED = ["src", "tests", "labextension"]


@pytest.mark.parametrize(
    "command",
    [["ruff", "check", *CHECKED], ["ruff", "format", "--check", *CHECKED], ["mypy"]],
    ids=["ruff check", "ruff format", "mypy"],
)
def test_the_code_passes(command: list[str], root: Path) -> None:
    done = subprocess.run([sys.executable, "-m", *command], cwd=root, capture_output=True, text=True)
    assert done.returncode == 0, done.stdout + done.stderr
