"""A report in LaTeX: plain tabular, cells in number, letters harmless."""

import re

from hypothesis import given
from hypothesis import strategies as st

from quarterturn.reports.latex import escaped, latex
from quarterturn.reports.report import Report, Row

GOLDEN = r"""
\begin{tabular}{lr@{}lr@{}lr@{}lr@{}lr@{}lp{0.3\linewidth}}
observable & \multicolumn{2}{l}{value} & \multicolumn{2}{l}{exact} & \multicolumn{2}{l}{pull} & \multicolumn{2}{l}{$\tau$} & \multicolumn{2}{l}{$n_{\mathrm{eff}}$} & remark \\
\hline
$\langle q^2\rangle$ & $0$ & .4996(12) & $0$ & .50000 & $-0$ & .3 & $0$ & .630(21) & $12400$ &  &  \\
$\langle q(1)q(0)\rangle_c$ & $-12$ & .26(21) & $-12$ & .250 & $-0$ & .1 & $0$ & .71 & $980$ &  &  \\
$\Delta E$ & $1$ & .0003(34) & $1$ & .00000 & $+0$ & .1 & \multicolumn{2}{l}{} & \multicolumn{2}{l}{} & three windows, averaged \\
$U$ & $0$ & .4123(unresolved) & $0$ & .4 & \multicolumn{2}{l}{} & \multicolumn{2}{l}{} & \multicolumn{2}{l}{} & run ten times longer \\
$\langle Q^2\rangle$ & \multicolumn{2}{l}{withheld} & \multicolumn{2}{l}{} & \multicolumn{2}{l}{} & \multicolumn{2}{l}{} & \multicolumn{2}{l}{} & the winding number changed 3 times \\
\end{tabular}
"""  # noqa: E501


def test_table_reads_as_agreed(sampled):
    assert GOLDEN.strip() in latex(sampled)


def test_needs_no_package_and_keeps_the_warnings(sampled):
    source = latex(sampled)
    assert "rule" not in source
    assert r"\emph{Warning:} binder: the autocorrelation time could not be resolved." in source


def test_rows_have_as_many_cells_as_the_table_has_columns(sampled):
    body = re.search(r"\\begin\{tabular\}.*?\n(.*)\\end", latex(sampled), re.DOTALL).group(1)
    for line in body.splitlines():
        if line != r"\hline":
            assert line.count("&") + line.count(r"\multicolumn{2}") == 11


@given(st.text(max_size=60))
def test_labels_without_latex_are_escaped(label):
    assert not re.search(r"(?<!\\)[&%$#_~^<>|]", escaped(label).replace(r"\textbackslash{}", ""))
    escaped_only = re.sub(r"\\text[a-z]+\{\}|\\[&%$#_{}]", "", escaped(label))
    assert "\\" not in escaped_only
    assert "{" not in escaped_only


def test_label_is_written_out_where_it_has_no_latex():
    source = latex(Report("sample", "50% of $x_1$", "", "", (), (Row("<q_1^2> & more", "", 1.0, 0.1),)))
    assert r"\textless{}q\_1\textasciicircum{}2\textgreater{} \& more & $1$ & .00(10)" in source
    assert r"50\% of \$x\_1\$" in source


def test_power_of_ten():
    source = latex(Report("sample", "t", "", "", (), (Row("a", "a", -1.234e-7, 5.6e-9),)))
    assert r"$a$ & $-1$ & .234(56)$\,\times 10^{-7}$ \\" in source
