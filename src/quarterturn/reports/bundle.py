"""What an output holds: one result in every form that a front end may ask for, and its record beside it.

The record travels in the metadata of the output that it describes, under "quarterturn"; saving, reloading and
converting a notebook keep it there.
"""

import base64
from typing import Any

from quarterturn.reports.html import html
from quarterturn.reports.latex import latex
from quarterturn.reports.plots import pictures, png
from quarterturn.reports.report import RESULT_MIME, Report
from quarterturn.reports.text import text


def mimebundle(report: Report) -> tuple[dict[str, Any], dict[str, Any]]:
    """The data and the metadata of an output that shows `report`, as `_repr_mimebundle_` returns them."""
    data: dict[str, Any] = {
        "text/plain": text(report),
        "text/html": html(report, pictures(report)),
        "text/latex": latex(report),
        RESULT_MIME: report.payload(),
    }
    picture = png(report)
    if picture is not None:
        data["image/png"] = base64.b64encode(picture).decode("ascii")
    if not report.record:
        return data, {}
    return data, {"quarterturn": {"record": report.record, "name": report.record_name}}
