"""`verify`: identical, different, altered, and nothing of the notebook executed."""

import copy
import json
from pathlib import Path
from typing import Any

import nbformat
import pytest
from nbformat.v4 import new_code_cell, new_notebook, new_output

from quarterturn.records.canonical import record_name
from quarterturn.runs.declaration import action
from quarterturn.runs.sampling import sample
from quarterturn.runs.spectrum import levels
from quarterturn.runs.verification import verify

BODY = (
    "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.5\n"
    "lattice 16, a = 0.25\nmeasure <q^2>, G(t) = <q(t) q(0)>"
)


@pytest.fixture(scope="module")
def results() -> list[Any]:
    act = action(BODY, "small")
    return [
        sample(act, draws=64, chains=8, lam=0.7, seed=3),
        levels(act, count=3),
        levels(act, spacing="lattice", count=2),
    ]


def written(place: Path, outputs: list[tuple[dict, dict]], source: str = "1") -> Path:
    cells = []
    for data, metadata in outputs:
        cell = new_code_cell(source)
        cell.outputs = [new_output("display_data", data=data, metadata=metadata)]
        cells.append(cell)
    nbformat.write(new_notebook(cells=cells), place)
    return place


def bundles(results: list[Any]) -> list[tuple[dict, dict]]:
    return [copy.deepcopy(r._repr_mimebundle_()) for r in results]


def test_a_faithful_notebook_is_identical(results: list[Any], tmp_path: Path) -> None:
    checked = verify(written(tmp_path / "n.ipynb", bundles(results)))
    assert [v.answer for _, v in checked.results] == ["identical"] * 3, str(checked)
    assert checked.passed and checked.answer == "identical"
    assert json.loads(json.dumps(checked.to_json()))["answer"] == "identical"


def test_a_shifted_number_with_a_fresh_name_is_different(results: list[Any], tmp_path: Path) -> None:
    _, metadata = bundles(results)[0]
    record = metadata["quarterturn"]["record"]
    record["results"][0]["value"] += 6 * 2**0.5 * record["results"][0]["error"]
    metadata["quarterturn"]["name"] = record_name(record)
    checked = verify(written(tmp_path / "n.ipynb", [({"text/markdown": "a number"}, metadata)]))
    assert checked.answer == "different" and not checked.passed
    assert "<q^2>" in str(checked) and "sigma" in str(checked)


def test_a_changed_record_under_its_old_name_is_altered(results: list[Any], tmp_path: Path) -> None:
    data, metadata = bundles(results)[0]
    metadata["quarterturn"]["record"]["couplings"]["lam"] = 0.8
    assert verify(written(tmp_path / "n.ipynb", [(data, metadata)])).answer == "altered"


def test_a_notebook_without_records_is_undecided(tmp_path: Path) -> None:
    checked = verify(written(tmp_path / "n.ipynb", [({"text/plain": "nothing"}, {})]))
    assert checked.answer == "undecided" and "no records" in str(checked)


def test_no_code_of_the_notebook_is_executed(results: list[Any], tmp_path: Path) -> None:
    trap = tmp_path / "sprung"
    place = written(tmp_path / "n.ipynb", bundles(results)[:1], f"open({str(trap)!r}, 'w').close()")
    assert verify(place).answer == "identical"
    assert not trap.exists()


def test_a_run_that_would_take_for_ever_is_refused_with_the_reason(results: list[Any], tmp_path: Path) -> None:
    _, metadata = bundles(results)[0]
    record = metadata["quarterturn"]["record"]
    record["request"]["draws"] = 10**12
    metadata["quarterturn"]["name"] = record_name(record)
    checked = verify(written(tmp_path / "n.ipynb", [({"text/markdown": "a number"}, metadata)]))
    assert checked.answer == "cannot be rerun" and "hours" in str(checked)


def test_a_run_that_stopped_by_time_is_repeated_by_its_draws(tmp_path: Path) -> None:
    run = sample(action(BODY, "small"), error=1e-9, time=1.0, chains=8)
    assert run.stop == "time"
    assert verify(written(tmp_path / "n.ipynb", bundles([run]))).answer == "identical"
