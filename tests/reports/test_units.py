"""Units in tables: a terminal, a page, a paper, the payload of the Lab extension; and along the axes of a picture."""

from quarterturn.reports.html import html
from quarterturn.reports.latex import latex
from quarterturn.reports.panels import panels
from quarterturn.reports.plots import figure
from quarterturn.reports.report import Curve, Report, Row
from quarterturn.reports.text import text


def test_units_have_a_column_of_their_own_only_where_they_have_names() -> None:
    gap = Row("gap(q)", "", 2901.1, 2.8, 2900.0, unit="1/cm")
    square = Row("<q^2>", "", 0.005746, 0.000017, unit="angstrom^2")
    report = Report("sample", "bond", "", "", (), (gap, square))
    page = html(report, ())
    assert '<th scope="col" title="of value, error and exact">unit</th>' in page
    assert "<td>1/cm</td>" in page and "<td>angstrom^2</td>" in page
    assert "2901.1(2.8)       1/cm" in text(report)
    assert "angstrom\\textasciicircum{}2" in latex(report)
    plain = Report("sample", "bond", "", "", (), (Row("gap(q)", "", 1.0, 0.1),))
    assert all("unit" not in shown for shown in (text(plain), latex(plain), html(plain, ()).replace("units", "")))
    assert report.payload()["rows"][0]["unit"] == "1/cm"


def test_axes_name_their_units_typeset() -> None:
    curve = Curve("G(t)", r"G(t)", "t [(1/cm)^-1]", (0.0, 1.0), (2.0, 1.0), (0.1, 0.1), unit="angstrom^2")
    drawn = figure(Report("sample", "bond", "", "", (), (), (curve,)))
    assert drawn is not None
    (axes,) = [a for part in drawn.subfigs for a in part.axes]
    assert axes.get_ylabel() == r"$G(t)\ [\mathrm{angstrom^{2}}]$"
    assert axes.get_xlabel() == r"$t\ [\mathrm{(1/cm)^{-1}}]$"


def test_wave_functions_stand_on_their_energies() -> None:
    """The panel adds the energy of each wave: what is given is the bare function and its baseline."""
    x, flat = (-1.0, 0.0, 1.0), (0.5, 1.0, 0.5)
    waves = [Curve(f"E_{n}", "", "q", x, flat, style="wave", baseline=e) for n, e in enumerate((100.0, 300.0))]
    potential = Curve("V", "V", "q [angstrom]", x, (500.0, 0.0, 500.0), style="potential", unit="1/cm")
    report = Report("levels", "bond", "", "", (), (), (potential, *waves))
    drawn = figure(report)
    assert drawn is not None and len(panels(report.curves)) == 1
    (axes,) = [a for part in drawn.subfigs for a in part.axes]
    low, high = axes.get_ylim()
    assert axes.get_ylabel() == "energy [1/cm]"
    assert low < 0 and 300 < high < 700
