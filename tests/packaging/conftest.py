"""Wheel and sdist of this checkout, built once; the JavaScript half is built along with them where it is not yet."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="session")
def distributions(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the sdist and the wheel that was built from it."""
    folder = tmp_path_factory.mktemp("dist")
    command = [sys.executable, "-m", "build", "--no-isolation", "--outdir", str(folder), str(ROOT)]
    done = subprocess.run(command, capture_output=True, text=True)
    if done.returncode != 0:
        pytest.fail(f"the build ended with {done.returncode}:\n{done.stdout[-4000:]}\n{done.stderr[-4000:]}")
    return folder


@pytest.fixture(scope="session")
def root() -> Path:
    return ROOT
