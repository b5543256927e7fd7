"""Colours of action cells in the notebook: on with the magic, off without it."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from nbformat.v4 import new_code_cell
from playwright.sync_api import Locator, expect

pytestmark = pytest.mark.xdist_group("bundle")

ACTION = """%%action quartic
q(t)                                        # a path
L = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4
w = 1, lam = 0.1
lattice 200, a = 0.1
measure <q^2>, <q(t) q(0)>, gap(q)"""
PYTHON = "def half(n):\n    return n / 2  # a comment"
THEMES = ("JupyterLab Light", "JupyterLab Dark")


def colour(line: Locator, text: str) -> str:
    """Computed colour of the token of a line that reads `text`."""
    token = line.locator("span", has_text=text).filter(has_not=line.page.locator("span")).first
    return str(token.evaluate("node => getComputedStyle(node).color"))


def classes(line: Locator) -> dict[str, str]:
    """Text of each coloured token of a line, with its classes."""
    spans = line.locator("span").evaluate_all("nodes => nodes.map(n => [n.textContent.trim(), n.className])")
    return dict(spans)


@pytest.mark.parametrize("theme", THEMES)
def test_an_action_is_coloured_by_its_own_notation(
    open_notebook: Callable[[list[Any]], Any], theme: str, tmp_path: Path
) -> None:
    notebook = open_notebook([new_code_cell(ACTION), new_code_cell(PYTHON)])
    notebook.wear(theme)
    lagrangian = notebook.line(0, 2)
    expect(notebook.line(0, 1).locator(".qt-Action-field")).to_have_text("q")
    expect(lagrangian.locator(".qt-Action-derivative")).to_have_text("'")
    expect(notebook.line(0, 5).locator(".qt-Action-expectation")).to_have_count(4)
    field, number, keyword, derivative = (colour(lagrangian, text) for text in ("q", "1", "L", "'"))
    assert len({field, number, keyword, derivative}) == 4
    assert colour(notebook.line(0, 1), "# a path") not in {field, number, keyword, derivative}
    notebook.picture(tmp_path / "action.png")


def test_pythons_colours_return_when_the_magic_goes_and_leave_when_it_comes(
    open_notebook: Callable[[list[Any]], Any],
) -> None:
    notebook = open_notebook([new_code_cell("%%action a\n" + PYTHON), new_code_cell(PYTHON)])
    expect(notebook.line(1, 0).locator("span", has_text="def").first).to_be_visible()  # Python's mode loads on its own
    ours = classes(notebook.line(0, 1))
    python = classes(notebook.line(1, 0))
    assert python["def"] and python != ours

    notebook.line(0, 0).click()
    page = notebook.page
    page.keyboard.press("Home")
    page.keyboard.press("Shift+ArrowDown")
    page.keyboard.press("Delete")
    expect(notebook.line(0, 0)).to_have_text("def half(n):")
    expect(notebook.line(0, 0).locator("span", has_text="def").first).to_have_class(python["def"])
    assert classes(notebook.line(0, 0)) == python

    page.keyboard.press("ControlOrMeta+Home")
    page.keyboard.type("%%action a\n")
    expect(notebook.line(0, 1)).to_contain_text("def half(n):")
    assert classes(notebook.line(0, 0))["%%action"]
    assert "def" not in {text for text, name in classes(notebook.line(0, 1)).items() if name == python["def"]}
