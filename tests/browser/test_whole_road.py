"""The whole road in a browser: load the extension, declare, be refused, sample, solve; what a user sees."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from nbformat.v4 import new_code_cell
from playwright.sync_api import expect

pytestmark = pytest.mark.xdist_group("bundle")

ACTION = """%%action quartic
q(t)
L = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4
w = 1, lam = 0.1
lattice 100, a = 0.2
measure <q^2>, <q(t) q(0)>, gap(q)"""
WRONG = ACTION.replace("- lam q^4", "- lam q^").replace("quartic", "typo")


def test_an_action_is_declared_sampled_and_solved(open_notebook: Callable[[list[Any]], Any], tmp_path: Path) -> None:
    cells = ["%load_ext quarterturn", ACTION, WRONG, "%sample quartic draws=96", "%levels quartic count=3"]
    typed = [new_code_cell(c) for c in cells]
    typed[2].metadata["tags"] = ["raises-exception"]
    notebook = open_notebook(typed)
    notebook.run_all(120)
    declared = notebook.cell(1).locator(".jp-OutputArea-output").first
    expect(declared).to_contain_text("action quartic")
    expect(declared.locator("mjx-container").first).to_be_visible(timeout=20_000)  # the action is typeset
    refused = notebook.cell(2).locator(".jp-OutputArea-output").last
    expect(refused).to_contain_text("a power needs an exponent, such as q^4")
    expect(refused).not_to_contain_text("Traceback")
    sampled = notebook.result(3)
    expect(sampled).to_contain_text("<q^2>", timeout=90_000)  # a refused cell ends "run all" early
    expect(sampled.locator("svg").first).to_be_visible()
    solved = notebook.result(4)
    ground_state = "0.559146327183"  # E_0 in Hioe and Montroll's convention, see qm-aho-levels-lam0.1 in tests/outside
    expect(solved).to_contain_text(ground_state, timeout=30_000)
    for theme in ("JupyterLab Light", "JupyterLab Dark"):
        notebook.wear(theme)
        picture = tmp_path / f"road-{theme[-5:].strip()}.png"
        notebook.picture(picture)
        assert picture.stat().st_size > 10_000
