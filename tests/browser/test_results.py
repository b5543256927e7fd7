"""Results in the notebook: drawn from the vendor JSON of the file, whatever that holds."""

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from nbformat.v4 import new_code_cell, new_output
from playwright.sync_api import Locator, expect

from quarterturn.reports.report import RESULT_MIME, Curve, Report, Row

pytestmark = pytest.mark.xdist_group("bundle")

INK = {"JupyterLab Light": "rgba(0, 0, 0, 0.87)", "JupyterLab Dark": "rgb(255, 255, 255)"}
TIMES = tuple(0.1 * i for i in range(60))
PLACES = tuple(0.1 * i - 4 for i in range(81))
DECAY = tuple(0.3058 * math.exp(-1.2 * t) for t in TIMES)

REPORT = Report(
    kind="sample",
    title="quartic, sampled",
    action_text="q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1",
    latex=r"S_E = \int d\tau \left[ \tfrac{1}{2} \dot q^2 + \tfrac{1}{2} \omega^2 q^2 + \lambda q^4 \right]",
    couplings=(("w", 1.0), ("lam", 0.1)),
    rows=(
        Row("<q^2>", r"\langle q^2 \rangle", 0.30579, 0.0012, 0.305814, -0.02, 1.31, 0.08, 12480.0),
        Row("<q^4>", r"\langle q^4 \rangle", 0.2612, 0.0031, 0.26019, 0.33, 1.62, 0.11, 10091.4),
        Row("energy", r"E", 12.53, 0.31, 12.559146, -0.09, 2.5, 0.3, 6540.0),
        Row("gap(q)", r"\Delta(q)", 1.21, None, 1.210345, state="unresolved", remark="too few effective samples"),
        Row("chi", r"\chi", None, state="withheld", remark="a sector was visited fewer than ten times"),
        Row("<q>", r"\langle q \rangle", -0.0011, 0.0043, 0.0, -0.26, 1.02, 0.05, 15800.0),
    ),
    curves=(
        Curve(
            "<q(t) q(0)>",
            r"\langle q(t)\, q(0) \rangle",
            "t",
            TIMES,
            tuple(y + 0.004 * math.sin(7 * i) for i, y in enumerate(DECAY)),
            tuple(0.004 for _ in TIMES),
            DECAY,
        ),
        Curve(
            "gap from <q(t) q(0)>",
            "",
            "t",
            TIMES[:20],
            tuple(1.2 + 0.3 * math.exp(-2 * t) for t in TIMES[:20]),
            tuple(0.01 + 0.02 * t for t in TIMES[:20]),
            style="gap",
            plateau=(1.21, 0.012, 0.8, 1.9),
        ),
        *(
            Curve(
                "<q^2>",
                "",
                "draw",
                tuple(range(400)),
                tuple(0.3 + 0.1 * math.sin(i * i + chain) for i in range(400)),
                style="history",
            )
            for chain in range(2)
        ),
        Curve("V(q)", "", "q", PLACES, tuple(q**2 / 2 + 0.1 * q**4 for q in PLACES), style="potential"),
        *(
            Curve(
                f"psi_{n}",
                "",
                "q",
                PLACES,
                tuple(q**n * math.exp(-0.6 * q**2) for q in PLACES),
                style="wave",
                baseline=0.56 + 1.2 * n,
            )
            for n in range(2)
        ),
    ),
    warnings=("the lattice artefact, about 0.4 %, is larger than the statistical error of <q^2>.",),
    facts=(("method", "Hamiltonian moves, 16 chains"), ("draws", "16 x 2000")),
    record_name="3f2a9c41be07d5c8" * 4,
)


def cell_with(payload: Any) -> Any:
    """A code cell as a saved notebook holds it, with a result below."""
    data = {RESULT_MIME: payload, "text/plain": "plain copy of the result", "text/html": "<p>HTML copy</p>"}
    return new_code_cell("result", outputs=[new_output("display_data", data=data)], execution_count=1)


def left_edges_of_points(table: Locator, column: int) -> set[int]:
    """Where the part after the decimal point begins, in each line of a column, in pixels."""
    wholes = table.locator(f"tbody tr td:nth-of-type({column}) .qt-Result-whole")
    return {round(box["x"] + box["width"]) for box in (w.bounding_box() for w in wholes.all()) if box}


@pytest.mark.parametrize("theme", INK)
def test_a_saved_result_is_drawn_in_words_numbers_and_pictures(
    open_notebook: Callable[[list[Any]], Any], theme: str, tmp_path: Path
) -> None:
    notebook = open_notebook([cell_with(REPORT.payload())])
    notebook.wear(theme)
    result = notebook.result(0)
    expect(result.locator(".qt-Result-title")).to_have_text("quartic, sampled")
    expect(result.get_by_role("note", name="warnings")).to_contain_text("Warning: the lattice artefact")
    expect(result.get_by_label("couplings")).to_contain_text("lam = 0.1")
    lines = result.locator("tbody tr")
    expect(lines).to_have_count(len(REPORT.rows))
    for line, text in enumerate(
        ["0.3058(12)", "0.2612(31)", "12.53(31)", "1.21(unresolved)", "withheld", "\u22120.0011(43)"]
    ):
        expect(lines.nth(line)).to_contain_text(text)
    expect(lines.nth(0)).to_contain_text("12\u202f480")
    expect(lines.nth(4)).to_contain_text("a sector was visited fewer than ten times")
    expect(result.locator("mjx-container, .katex").first).to_be_visible(timeout=30_000)
    notebook.picture(tmp_path / "result.png")
    assert len(left_edges_of_points(result.locator("table"), 1)) == 1
    expect(result.locator("svg.qt-Plot")).to_have_count(4)
    expect(result.locator("svg.qt-Plot").nth(2).locator("polyline")).to_have_count(2)
    expect(result.locator("svg.qt-Plot").nth(3).locator("polyline")).to_have_count(3)
    expect(result.locator("svg.qt-Plot").first.locator("circle")).to_have_count(len(TIMES))
    expect(result.locator(".qt-Result-record")).to_have_text("record 3f2a9c41be07")
    ink = result.evaluate("node => getComputedStyle(node).color")
    exact = result.locator(".qt-Plot-exact").evaluate("node => getComputedStyle(node).stroke")
    assert exact == ink == INK[theme]


def test_the_axis_is_switched_from_the_keyboard(open_notebook: Callable[[list[Any]], Any], tmp_path: Path) -> None:
    notebook = open_notebook([cell_with(REPORT.payload())])
    figure = notebook.result(0).locator("figure").first
    button = figure.get_by_role("button")
    expect(button).to_have_text("logarithmic axis")
    for key, after in (("Enter", "linear axis"), ("Space", "logarithmic axis")):
        button.focus()
        notebook.page.keyboard.press(key)
        expect(button).to_have_text(after)
        expect(button).to_be_focused()
        notebook.picture(tmp_path / f"{key}.png")


HOSTILE = '<img src=x onerror="window.broken = true"><script>window.broken = true</script>'


@pytest.mark.parametrize(
    ("payload", "words"),
    [
        ({"version": 2}, "format 2"),
        ({"version": 1}, "result"),
        ("not an object", "holds none"),
        ({"version": 1, "rows": [{}, None], "curves": [{}, {"x": [1], "y": ["a"]}]}, "This curve holds no numbers."),
        (
            {
                "version": 1,
                "rows": [{"label": "a", "value": None, "error": None}],
                "curves": [{"label": "c", "x": [0, 1, 2], "y": [None, -1, 1e308], "error": [None, 1e308, -1]}],
            },
            "no finite number came out",
        ),
        ({"version": 1, "curves": [{"x": [*range(200_000)], "y": [0.5] * 200_000, "style": "history"}]}, "result"),
        ({"version": 1, "title": HOSTILE, "latex": HOSTILE, "rows": [{"label": HOSTILE, "latex": HOSTILE}]}, "<img"),
    ],
    ids=["format", "empty", "text", "no numbers", "nulls", "huge", "hostile"],
)
def test_a_malformed_result_is_answered_in_words(
    open_notebook: Callable[[list[Any]], Any], payload: Any, words: str
) -> None:
    notebook = open_notebook([cell_with(payload)])
    expect(notebook.result(0)).to_contain_text(words)
    assert notebook.page.evaluate("window.broken") is None


def test_the_plain_copy_stands_in_for_a_result_of_another_format(open_notebook: Callable[[list[Any]], Any]) -> None:
    notebook = open_notebook([cell_with({"version": 99})])
    expect(notebook.result(0)).to_contain_text("plain copy of the result")
