"""Notebooks with results in them."""

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import nbformat
import pytest
from nbformat.v4 import new_code_cell, new_notebook, new_output

import quarterturn as qt

WELL = """q(t)
L = 1/2 q'^2 - lam (q^2 - v2)^2
lam = 0.3, v2 = 1
lattice 24, a = 0.25
measure <q^2>, gap(q)
"""


@pytest.fixture(scope="session")
def levels() -> Any:
    return qt.levels(qt.action(WELL, "well"), count=2)


@pytest.fixture(scope="session")
def run() -> Any:
    return qt.sample(qt.action(WELL, "well"), lam=0.5, draws=64, seed=4)


@pytest.fixture
def notebook_of(tmp_path: Path) -> Callable[..., str]:
    """Writes a notebook whose outputs show these results."""

    def write(*results: Any, name: str = "paper.ipynb") -> str:
        cells = []
        for number, result in enumerate(results, 1):
            data, metadata = result._repr_mimebundle_()
            output = new_output("execute_result", data, metadata=metadata, execution_count=number)
            cells.append(new_code_cell("raise SystemExit('never executed')", outputs=[output], execution_count=number))
        path = tmp_path / name
        nbformat.write(new_notebook(cells=cells), path)
        return str(path)

    return write


@pytest.fixture
def altered() -> Callable[[str, str, str], str]:
    """Replaces a text in a notebook, as somebody might who doesn't like a number."""

    def alter(path: str, old: str, new: str) -> str:
        text = Path(path).read_text(encoding="utf-8")
        assert old in text
        Path(path).write_text(text.replace(old, new), encoding="utf-8")
        json.loads(text)
        return path

    return alter
