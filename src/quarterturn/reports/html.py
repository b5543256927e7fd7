"""A report for a page: a quiet table, sentences, pictures, and the method folded away.

Self-contained: style and pictures are inside, nothing is fetched, nothing runs.
"""

from quarterturn.reports.cells import HEADINGS, NUMBERS, Cells, cells, columns_in_use, coupling_text, curve_text
from quarterturn.reports.markup import definitions, formula, framed, head_width, number, saying, verbatim, words
from quarterturn.reports.plots import Picture
from quarterturn.reports.report import Report
from quarterturn.reports.text import SHORT_NAME

TITLES = {
    **{name: (words(heading), "") for name, heading in HEADINGS.items()},
    "unit": ("unit", "of value, error and exact"),
    "exact": ("exact", "an independent solution at the same spacing"),
    "pull": ("pull", "(value − exact) / error"),
    "tau": ("<i>τ</i>", "integrated autocorrelation time in draws, 1/2 + sum of the autocorrelations"),
    "n_eff": ("<i>n</i><sub>eff</sub>", "effective number of samples"),
}


def html(report: Report, pictures: tuple[Picture, ...]) -> str:
    """`report` as one HTML element with these `pictures`."""
    return framed(
        _title(report),
        _table([cells(row) for row in report.rows]),
        saying([("qt-warning", "Warning:", warning) for warning in report.warnings]),
        _pictures(pictures),
        _method(report),
        _record(report),
    )


def _title(report: Report) -> str:
    couplings = coupling_text(report)
    beside = f' <span class="qt-quiet">{words(couplings)}</span>' if couplings else ""
    return f'<p class="qt-title"><strong>{words(report.title)}</strong>{beside}</p>'


def _table(lines: list[Cells]) -> str:
    """One line a number; a remark has a line of its own below, so that the table stays narrow."""
    if not lines:
        return ""
    columns = [name for name in columns_in_use(lines) if name != "remark"]
    widths = {name: head_width(line[name] for line in lines) for name in columns if name in NUMBERS}
    heading = "".join(_heading(name) for name in columns)
    rows = "".join(_row(line, columns, widths) for line in lines)
    table = f"<table><thead><tr>{heading}</tr></thead><tbody>{rows}</tbody></table>"
    return f'<div class="qt-wide">{table}</div>'


def _row(line: Cells, columns: list[str], widths: dict[str, int]) -> str:
    row = f"<tr>{''.join(_cell(line, name, widths) for name in columns)}</tr>"
    if not line.remark:
        return row
    return f'{row}<tr class="qt-remark"><td></td><td colspan="{len(columns) - 1}">{words(line.remark)}</td></tr>'


def _heading(column: str) -> str:
    shown, meaning = TITLES[column]
    return f'<th scope="col" title="{words(meaning)}">{shown}</th>' if meaning else f'<th scope="col">{shown}</th>'


def _cell(line: Cells, column: str, widths: dict[str, int]) -> str:
    if column == "label":
        return f'<th scope="row">{formula(line.latex, line.label)}</th>'
    return f"<td>{number(line[column], widths[column]) if column in NUMBERS else words(line[column])}</td>"


def _pictures(pictures: tuple[Picture, ...]) -> str:
    images = "".join(f'<img src="{picture.uri}" alt="{words(picture.words)}">' for picture in pictures)
    return f'<div class="qt-pictures">{images}</div>' if images else ""


def _method(report: Report) -> str:
    facts = [(name, words(fact)) for name, fact in report.facts]
    curves = [("curve", words(line)) for line in curve_text(report)]
    action = [("action", formula(report.latex, ""))] if report.latex else []
    notation = [("notation", verbatim(report.action_text))] if report.action_text else []
    listed = definitions([*action, *notation, *facts, *curves])
    return f"<details><summary>action and method</summary>{listed}</details>" if listed else ""


def _record(report: Report) -> str:
    if not report.record_name:
        return ""
    name = words(report.record_name)
    return (
        f'<p class="qt-quiet">record <code title="{name}">{name[:SHORT_NAME]}</code>, '
        "checked by <code>quarterturn verify NOTEBOOK</code></p>"
    )
