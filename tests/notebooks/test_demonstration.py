"""The demonstration: it runs to its end, shows the one error it means to show, and its numbers can be made again."""

import io
import json
import re
import sys
from collections.abc import Iterator
from importlib.resources import files
from pathlib import Path
from typing import Any

import nbformat
import pytest

import quarterturn
from quarterturn.notebooks.demonstration import NAME, DemonstrationError, copied, execute, findings
from quarterturn.records.notebook import embedded
from quarterturn.runs.verification import verify

LONGEST = 90  # seconds for all cells on two cores


@pytest.fixture(scope="module")
def environment(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """For the kernel: this package wherever it lies, and a python3 kernel that points somewhere else."""
    elsewhere = tmp_path_factory.mktemp("jupyter")
    specification = elsewhere / "kernels" / "python3" / "kernel.json"
    specification.parent.mkdir(parents=True)
    specification.write_text('{"argv": ["/nowhere/python", "{connection_file}"], "display_name": "x", "language": "x"}')
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("PYTHONPATH", str(Path(quarterturn.__file__).parent.parent))
        patch.setenv("JUPYTER_PATH", str(elsewhere))
        patch.setenv("IPYTHONDIR", str(tmp_path_factory.mktemp("ipython")))
        yield


@pytest.fixture(scope="module")
def told() -> io.StringIO:
    return io.StringIO()


@pytest.fixture(scope="module")
def executed(environment: None, told: io.StringIO, tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = copied(tmp_path_factory.mktemp("demonstration"))
    execute(path, told)
    return path


def code_cells(path: Path) -> list[Any]:
    return [cell for cell in nbformat.read(path, as_version=4).cells if cell.cell_type == "code"]


def test_the_committed_notebook_has_no_outputs_and_is_valid() -> None:
    notebook = nbformat.reads(files("quarterturn.notebooks").joinpath(NAME).read_text(encoding="utf-8"), as_version=4)
    nbformat.validate(notebook)
    for cell in notebook.cells:
        if cell.cell_type == "code":
            assert cell.outputs == [] and cell.execution_count is None
    assert notebook.metadata["kernelspec"]["name"] == "python3"


def test_every_cell_ran_and_errors_stand_only_where_they_are_meant(executed: Path) -> None:
    for number, cell in enumerate(code_cells(executed), 1):
        assert cell.execution_count == number
        errors = [output for output in cell.outputs if output.output_type == "error"]
        meant = "raises-exception" in cell.metadata.get("tags", [])
        assert bool(errors) == meant, cell.source
        for error in errors:
            assert error.ename == "ActionError" and "not bounded below" in "\n".join(error.traceback)
            assert "Traceback" not in "\n".join(error.traceback)


def test_it_is_quick_and_tells_each_cell(executed: Path, told: io.StringIO) -> None:
    lines = told.getvalue().splitlines()
    assert len(lines) == len(code_cells(executed))
    times = [float(re.search(r"([0-9.]+) s$", line)[1]) for line in lines]  # type: ignore[index]
    assert sum(times) < LONGEST


def test_only_results_remain_of_the_cells_that_sample(executed: Path) -> None:
    for cell in code_cells(executed):
        if "%sample" in cell.source and "raises-exception" not in cell.metadata.get("tags", []):
            assert [output.output_type for output in cell.outputs] == ["execute_result"], cell.source


def test_the_warnings_that_the_text_promises_are_there(executed: Path) -> None:
    records = [found.record for found in embedded(executed) if found.record]
    by_action = {
        (r["kind"], r["action"]["name"], r["lattice"] and r["lattice"]["sites"]): r["warnings"] for r in records
    }
    assert any("lattice artefact" in w for w in by_action["sample", "ion", 120])
    assert any("beta = 2 is short" in w for w in by_action["sample", "ion", 20])
    assert any("stuck" in w for w in by_action["sample", "leaning", 120])
    (same,) = [cell for cell in code_cells(executed) if cell.source.startswith("request = ")]
    assert same.outputs[0].data["text/plain"] == "True"


def test_every_recorded_number_is_made_again_bit_for_bit(executed: Path) -> None:
    verdict = verify(executed)
    assert len(verdict.results) == 4
    assert verdict.answer == "identical", str(verdict)


def test_what_was_found_is_told_with_the_recorded_numbers(executed: Path) -> None:
    lines = findings(executed)
    assert len(lines) == 4
    assert re.match(
        r"ion, sampled at d = 1, h = 3, m = 1, beta = 12: <q\^2> = 0\.6\d+\(\d+\), gap\(q\) = 0\.5", lines[0]
    )
    # from the levels in the continuum, checked against outside values in the room imaginary
    assert lines[1].startswith("ion, levels at d = 1, h = 3, m = 1: E_1 - E_0 = 0.571411")
    assert "unresolved" in lines[3]


def test_no_path_of_this_machine_is_in_the_saved_notebook(executed: Path) -> None:
    text = executed.read_text(encoding="utf-8")
    for place in (
        sys.prefix,
        sys.base_prefix,
        str(Path.home()),
        str(executed.parent),
        str(Path(quarterturn.__file__).parent),
    ):
        assert len(place) < 2 or place not in text
    metadata = json.loads(text)["metadata"]
    assert metadata["kernelspec"] == {"display_name": "Python 3", "language": "python", "name": "python3"}


def test_a_file_of_the_users_is_never_overwritten(tmp_path: Path) -> None:
    mine = tmp_path / NAME
    mine.write_text("mine")
    second, third = copied(tmp_path), copied(tmp_path)
    assert mine.read_text() == "mine"
    assert [second.name, third.name] == ["tunnelling_ion-2.ipynb", "tunnelling_ion-3.ipynb"]


def test_a_cell_that_fails_is_named_and_what_ran_is_saved(environment: None, tmp_path: Path) -> None:
    cells = [nbformat.v4.new_code_cell(source) for source in ("1 + 1", "1 / 0", "2 + 2")]
    path = tmp_path / "failing.ipynb"
    nbformat.write(nbformat.v4.new_notebook(cells=cells), path)
    with pytest.raises(DemonstrationError, match="cell 2 failed: ZeroDivisionError: division by zero"):
        execute(path, io.StringIO())
    first, second, third = code_cells(path)
    assert first.outputs[0].data["text/plain"] == "2"
    assert second.outputs[0].ename == "ZeroDivisionError" and third.outputs == []
