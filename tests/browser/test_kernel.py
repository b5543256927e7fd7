"""The wheel in a kernel, behind the notebook."""

from collections.abc import Callable
from typing import Any

import pytest
from nbformat.v4 import new_code_cell
from playwright.sync_api import expect

pytestmark = pytest.mark.xdist_group("bundle")


def test_a_cell_imports_the_installed_package_and_shows_a_result(open_notebook: Callable[[list[Any]], Any]) -> None:
    notebook = open_notebook(
        [
            new_code_cell("import quarterturn\nprint(quarterturn.__file__)"),
            new_code_cell(
                "from IPython.display import display\n"
                "from quarterturn.reports.report import RESULT_MIME, Report, Row\n"
                "rows = (Row('<q^2>', '', 0.30579, 0.0012),)\n"
                "report = Report('sample', 'quartic', '', '', (), rows)\n"
                "display({RESULT_MIME: report.payload()}, raw=True)"
            ),
        ]
    )
    notebook.run_all(60)
    expect(notebook.cell(0).locator(".jp-OutputArea-output")).to_contain_text("environment0")
    expect(notebook.result(1)).to_contain_text("0.3058(12)")
