"""`series` end to end: which coupling, what stands beside what, records that are made again, and what is refused."""

from fractions import Fraction

import pytest

import quarterturn as qt
from quarterturn.errors import RequestError, SpectrumError
from quarterturn.records.verdict import compare
from quarterturn.reports.html import html
from quarterturn.reports.latex import latex
from quarterturn.reports.plots import pictures
from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.verification import rerun

WELL = "q(t)\nL = 1/2 q'^2 - 1/2 q^2 (1 - sqrt(g) q)^2\ng = 0.02"


@pytest.fixture(scope="module")
def quartic() -> DeclaredAction:
    return action("q(t)\nL = 1/2 m q'^2 - 1/2 m w^2 q^2 - lam q^4\nm = 1, w = 1, lam = 0.2", "quartic")


def test_the_one_anharmonic_coupling_is_found(quartic: DeclaredAction) -> None:
    """Bender and Wu, Phys. Rev. 184 (1969) 1231."""
    found = qt.series(quartic, order=20)
    assert found.coupling == "lam"
    assert found.coefficients[:4] == (Fraction(1, 2), Fraction(3, 4), Fraction(-21, 8), Fraction(333, 16))
    assert found.formula(3) == "1/2 + 3/4 lam - 21/8 lam^2 + ..."


def test_sums_stand_beside_the_level_and_agree_with_it(quartic: DeclaredAction) -> None:
    found = qt.series(quartic, order=60, level=1, lam=0.3)
    assert found.exact == pytest.approx(qt.levels(quartic, lam=0.3).energies[1], rel=1e-13)
    for method in ("Padé", "Borel-Padé", "conformal Borel", "partial sum"):
        assert abs(found[method].value - found.exact) <= found[method].error + found.exact_error
    rows = {row.label: row for row in found.report().rows}
    assert rows["E_1, Borel-Padé"].exact == found.exact
    assert abs(rows["E_1, Borel-Padé"].pull) <= 1
    assert found["Borel-Padé"].error < 1e-9 < found["partial sum"].error


def test_decimal_couplings_are_the_numbers_that_were_written(quartic: DeclaredAction) -> None:
    found = qt.series(quartic, order=1, w=0.1, m=0.5)
    assert found.coefficients == (Fraction(1, 20), Fraction(3, 4) * 4 * 100)


def test_an_irrational_frequency_is_a_root_in_the_series(quartic: DeclaredAction) -> None:
    bare = action("q(t)\nL = 1/2 q'^2 - q^2 - lam q^4\nlam = 0.2")
    found = qt.series(bare, order=40)
    assert found.formula(2) == "1/2 sqrt(2) + 3/8 lam + ..."
    assert abs(found["Borel-Padé"].value - found.exact) <= found["Borel-Padé"].error + found.exact_error


def test_a_root_of_the_coupling_gives_the_series_of_the_double_well() -> None:
    """Zinn-Justin and Jentschura, Ann. Phys. 313 (2004) 197."""
    found = qt.series(action(WELL), order=20)
    assert found.formula(4) == "1/2 - g - 9/2 g^2 - 89/2 g^3 + ..."
    assert "does not determine the level" in found.warnings[0]
    assert found.sums == {}
    assert all(row.state != "good" and row.error is None for row in found.report().rows)
    assert "0.4777(unresolved)" in repr(found)


def test_without_an_exact_level_the_report_says_why() -> None:
    found = qt.series(action("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^3\nlam = 0.1"), order=20)
    assert found.exact is None
    assert any("no exact level" in w and "not bounded below" in w for w in found.warnings)


def test_a_record_is_made_again_bit_for_bit(quartic: DeclaredAction) -> None:
    for found in (qt.series(quartic, order=30, lam=0.5, level=2), qt.series(action(WELL), order=12)):
        again = rerun(found.record)
        assert compare(found.record, again).answer == "identical"
    other = qt.series(quartic, order=31, lam=0.5, level=2).record
    assert compare(found.record | {"results": []}, again | {"results": []}).answer == "undecided"
    altered = rerun(other)
    altered["results"][2]["value"] += 1e-3
    assert compare(other, altered).answer == "different"


def test_the_report_renders_everywhere(quartic: DeclaredAction) -> None:
    report = qt.series(quartic, order=40).report()
    page = html(report, pictures(report))
    assert "Borel-Padé" in page
    assert page.count("<img") == 1
    assert "\\begin{tabular}" in latex(report)
    (picture,) = pictures(report)
    assert picture.words.count("against order") == 4
    assert len(picture.svg) < 60_000


def test_what_can_not_be_done_is_refused_with_the_reason(quartic: DeclaredAction) -> None:
    with pytest.raises(RequestError, match="order must be a whole number"):
        qt.series(quartic, order=-1)
    with pytest.raises(RequestError, match="coupling must be one of the action's"):
        qt.series(quartic, coupling="mu")
    with pytest.raises(RequestError, match="beta has no meaning for a series"):
        qt.series(quartic, beta=2)
    with pytest.raises(RequestError, match="no sum by 'Borel'"):
        qt.series(quartic, order=10)["Borel"]
    with pytest.raises(RequestError, match="say which coupling"):
        qt.series(action("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4 - g q^6\nlam = 1, g = 1"))
    with pytest.raises(SpectrumError, match="the mass must be a rational number that does not depend on m"):
        qt.series(quartic, coupling="m")
    with pytest.raises(SpectrumError, match="cos\\(q\\) is none"):
        qt.series(action("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam cos(q)\nlam = 1"))
    with pytest.raises(SpectrumError, match="2 degrees of freedom"):
        qt.series(action("q[2](t)\nL = 1/2 q'.q' - 1/2 q.q - lam (q.q)^2\nlam = 0.1"))
    with pytest.raises(SpectrumError, match="not for an angle"):
        qt.series(action("theta(t) mod 2 pi\nL = 1/2 theta'^2 - lam (1 - cos(theta))\nlam = 0.1"))
    with pytest.raises(SpectrumError, match="no oscillator to start from"):
        qt.series(action("q(t)\nL = 1/2 q'^2 - lam (q^2 - 1)^2\nlam = 1"))
