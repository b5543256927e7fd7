"""A report for a terminal: a table aligned at the decimal point, warnings as sentences, the method line by line.

Widths are counted in terminal cells, not in code points, so that Greek, accents and wide letters keep the columns.
"""

from collections.abc import Iterable

from quarterturn.errors import display_width
from quarterturn.reports.cells import (
    HEADINGS,
    NUMBERS,
    Cells,
    cells,
    columns_in_use,
    coupling_text,
    curve_text,
    head_length,
    one_line,
)
from quarterturn.reports.report import Report

WIDTH = 110
NARROWEST_REMARK = 24
GAP = "   "
SHORT_NAME = 12  # letters of a record's name that are shown


def text(report: Report) -> str:
    """`report` in plain text, without a trailing line break."""
    parts = [_heading(report)]
    if report.rows:
        parts.append("\n".join(_table([cells(row) for row in report.rows])))
    parts.append("\n".join(curve_text(report)))
    parts.append("\n".join(_sentences("Warning: ", report.warnings)))
    parts.append("\n".join(_facts([*report.facts, *_record_fact(report)])))
    return "\n\n".join(part for part in parts if part)


def _heading(report: Report) -> str:
    return "\n".join(line for line in (one_line(report.title), coupling_text(report)) if line)


def _record_fact(report: Report) -> list[tuple[str, str]]:
    if not report.record_name:
        return []
    return [("record", f"{report.record_name[:SHORT_NAME]}; checked by: quarterturn verify NOTEBOOK")]


def _table(lines: list[Cells]) -> list[str]:
    """Heading, rule and rows. Remarks that are too long go on in the next line, in their own column."""
    columns = columns_in_use(lines)
    aligned = {name: _aligned([line[name] for line in lines], name) for name in columns}
    widths = {name: max(map(display_width, [HEADINGS[name], *aligned[name]])) for name in columns}
    fixed = sum(widths[name] + len(GAP) for name in columns if name != "remark")
    room = max(WIDTH - fixed, NARROWEST_REMARK)
    table = [_join({name: HEADINGS[name] for name in columns}, widths)]
    rows = []
    for index in range(len(lines)):
        first = {name: aligned[name][index] for name in columns}
        remark = wrapped(first.get("remark", ""), room)
        if "remark" in columns:
            first["remark"] = remark[0]
        rows.append(_join(first, widths))
        rows += [_join({**dict.fromkeys(columns, ""), "remark": more}, widths) for more in remark[1:]]
    return [*table, "─" * max(map(display_width, [*table, *rows])), *rows]


def _aligned(texts: list[str], column: str) -> list[str]:
    """The cells of a column; numbers moved so that their decimal points stand below each other."""
    if column not in NUMBERS:
        return texts
    heads = [head_length(text) if text and text[0] in "+-0123456789" else 0 for text in texts]
    deepest = max(heads)
    return [" " * (deepest - head) + text if head else text for head, text in zip(heads, texts, strict=True)]


def _join(line: dict[str, str], widths: dict[str, int]) -> str:
    return GAP.join(padded(text, widths[name]) for name, text in line.items()).rstrip()


def _sentences(mark: str, sentences: Iterable[str]) -> list[str]:
    lines: list[str] = []
    for sentence in sentences:
        first, *more = wrapped(one_line(sentence), WIDTH - len(mark))
        lines += [mark + first, *(" " * len(mark) + line for line in more)]
    return lines


def _facts(facts: list[tuple[str, str]]) -> list[str]:
    names = [one_line(name) for name, _ in facts]
    width = max(map(display_width, names), default=0)
    lines: list[str] = []
    for name, (_, fact) in zip(names, facts, strict=True):
        first, *more = wrapped(one_line(fact), WIDTH - width - len(GAP))
        lines += [padded(name, width) + GAP + first, *(" " * width + GAP + line for line in more)]
    return lines


def padded(text: str, width: int) -> str:
    """`text` followed by as many blanks as it lacks to `width` terminal cells."""
    return text + " " * (width - display_width(text))


def wrapped(text: str, width: int) -> list[str]:
    """Lines of at most `width` terminal cells, broken at blanks; a longer word keeps a line of its own."""
    lines, line = [], ""
    for word in text.split():
        longer = f"{line} {word}" if line else word
        if line and display_width(longer) > width:
            lines.append(line)
            longer = word
        line = longer
    return [*lines, line]
