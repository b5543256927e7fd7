"""A report for a paper: one plain tabular, values aligned at the decimal point, no package needed.

Withheld and unresolved numbers keep their words; warnings follow the table, so that none is lost on the way to print.
"""

import re

from quarterturn.reports.cells import (
    NUMBERS,
    SCIENTIFIC,
    Cells,
    cells,
    columns_in_use,
    coupling_text,
    head_length,
    one_line,
)
from quarterturn.reports.report import Report
from quarterturn.reports.text import SHORT_NAME

HEADINGS = {
    "label": "observable",
    "value": "value",
    "unit": "unit",
    "exact": "exact",
    "pull": "pull",
    "tau": r"$\tau$",
    "n_eff": r"$n_{\mathrm{eff}}$",
    "remark": "remark",
}
REMARK_WIDTH = "0.3\\linewidth"
SPECIAL = {
    "\\": r"\textbackslash{}",
    "^": r"\textasciicircum{}",
    "~": r"\textasciitilde{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    **{letter: "\\" + letter for letter in "&%$#_{}"},
}


def latex(report: Report) -> str:
    """`report` as LaTeX source."""
    parts = [f"\\noindent\\textbf{{{escaped(report.title)}}}"]
    couplings = coupling_text(report)
    if couplings:
        parts[0] += f"\\quad {escaped(couplings)}"
    if report.latex:
        parts.append(f"\\[ {one_line(report.latex)} \\]")
    if report.rows:
        parts.append(_tabular([cells(row) for row in report.rows]))
    parts += [f"\\noindent\\emph{{Warning:}} {escaped(warning)}" for warning in report.warnings]
    if report.record_name:
        parts.append(f"\\noindent record \\texttt{{{escaped(report.record_name[:SHORT_NAME])}}}")
    return "\n\n".join(parts) + "\n"


def escaped(text: str) -> str:
    """`text` on one line, with LaTeX's own letters made harmless."""
    return "".join(SPECIAL.get(letter, letter) for letter in one_line(text))


def _tabular(lines: list[Cells]) -> str:
    columns = columns_in_use(lines)
    layout = dict.fromkeys(columns, "l")
    layout.update({name: "r@{}l" for name in columns if name in NUMBERS})
    if "remark" in columns:
        layout["remark"] = f"p{{{REMARK_WIDTH}}}"
    heading = [
        f"\\multicolumn{{2}}{{l}}{{{HEADINGS[name]}}}" if name in NUMBERS else HEADINGS[name] for name in columns
    ]
    rows = [" & ".join(_cell(line, name) for name in columns) + r" \\" for line in lines]
    body = [" & ".join(heading) + r" \\", r"\hline", *rows]
    return "\n".join([f"\\begin{{tabular}}{{{''.join(layout.values())}}}", *body, "\\end{tabular}"])


def _cell(line: Cells, column: str) -> str:
    if column == "label":
        return f"${one_line(line.latex)}$" if line.latex else escaped(line.label)
    return _number(line[column]) if column in NUMBERS else escaped(line[column])


def _number(text: str) -> str:
    """Two cells: what stands in front of the decimal point, and the rest."""
    if not text or text[0] not in "+-0123456789":
        return f"\\multicolumn{{2}}{{l}}{{{escaped(text)}}}"
    split = head_length(text)
    head, tail = text[:split], escaped(text[split:])
    scientific = re.match(SCIENTIFIC, tail)
    if scientific:
        sign = scientific[2].strip("+")
        tail = f"{scientific[1]}$\\,\\times 10^{{{sign}{scientific[3]}}}$"
    return f"${head}$ & {tail}"
