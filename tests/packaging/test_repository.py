"""What the repository holds, and what it must not."""

import json
import re
import subprocess
from pathlib import Path

import pytest

import quarterturn

AGREED = {"pyproject.toml", "README.md", "DEVELOPERS.md", "src", "tests", "labextension"}


@pytest.fixture(scope="module")
def tracked(root: Path) -> list[str]:
    """Paths of the files under version control; in an unpacked sdist, of all files that are not built."""
    if (root / ".git").exists():
        listing = subprocess.run(["git", "ls-files"], cwd=root, capture_output=True, text=True, check=True)
        return listing.stdout.splitlines()
    return [path.relative_to(root).as_posix() for path in root.rglob("*") if path.is_file()]


def test_the_top_level_holds_what_was_agreed_and_dot_files(tracked: list[str]) -> None:
    top = {path.split("/")[0] for path in tracked}
    assert {name for name in top if not name.startswith(".")} - {"PKG-INFO"} <= AGREED


def test_nothing_that_is_built_is_under_version_control(root: Path, tracked: list[str]) -> None:
    if not (root / ".git").exists():
        assert (root / "PKG-INFO").exists(), "neither a checkout nor an sdist"
        return
    built = ("labextension/lib/", "labextension/node_modules/", "src/quarterturn/labextension/")
    assert not [path for path in tracked if path.startswith(built)]


def test_both_halves_have_one_version(root: Path) -> None:
    package = json.loads((root / "labextension" / "package.json").read_text())
    lock = json.loads((root / "labextension" / "package-lock.json").read_text())
    assert package["version"] == lock["version"] == lock["packages"][""]["version"] == quarterturn.__version__


def test_the_lock_file_names_no_registry(root: Path) -> None:
    lock = (root / "labextension" / "package-lock.json").read_text()
    assert '"resolved"' not in lock
    assert not re.findall(r"https?://[^\"]*\.tgz", lock)
