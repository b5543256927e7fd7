"""What a measurement means: brackets, formulas, cumulants, and how it is called."""

from fractions import Fraction

import pytest

from quarterturn.actions.declare import declare
from quarterturn.actions.expression import Expression, Symbol
from quarterturn.actions.measurements import measurement_label
from quarterturn.actions.model import Measurement
from quarterturn.errors import ActionError

HEAD = "q(t)\nL = 1/2 q'^2 - q^2 - lam q^4\nlam = 1\nlattice 100, a = 0.1\nmeasure "


def measured(text: str) -> Measurement:
    (only,) = declare(HEAD + text).measurements
    return only


def symbols(m: Measurement) -> dict[str, Expression]:
    return {b.label: Expression.of(Symbol("bracket", str(i))) for i, b in enumerate(m.brackets)}


def test_a_site_average_is_one_bracket() -> None:
    m = measured("<q^2 + lam q^4>")
    assert m.kind == "number" and len(m.brackets) == 1 and m.brackets[0].over == "sites"


def test_a_free_time_makes_a_curve() -> None:
    m = measured("G(t) = <q(t) q(0)>")
    assert (m.kind, m.label) == ("curve", "G(t)") and m.brackets[0].free


def test_fixed_times_start_at_zero_and_the_written_order_does_not_matter() -> None:
    assert measured("<q(1.5) q(1)>").brackets[0].groups == measured("<q(0) q(0.5)>").brackets[0].groups
    assert [t for t, _ in measured("<q(2) q(0) q(1)>").brackets[0].groups] == [0, 1, 2]


def test_the_connected_two_point_function_subtracts_the_means() -> None:
    m = measured("<q(t) q(0)>_c")
    s = symbols(m)
    assert m.kind == "curve" and m.formula == s["<q(t) q(0)>"] - s["<q>"] * s["<q>"]


def test_the_fourth_cumulant_has_its_textbook_form() -> None:
    m = measured("<q^4>_c")
    s = symbols(m)
    one, two, three, four = s["<q>"], s["<q^2>"], s["<q^3>"], s["<q^4>"]
    number = Expression.number
    expected = four - number(4) * three * one - number(3) * two**2 + number(12) * two * one**2 - number(6) * one**4
    assert m.formula == expected


def test_binder_is_the_cumulant_of_the_mean() -> None:
    m = measured("binder(q)")
    four, two = (Expression.of(Symbol("bracket", str(i))) for i in range(2))
    assert m.formula == Expression.number(1) - four * (two * two).scaled(3).inverse()
    assert all(b.over == "path" for b in m.brackets)


def test_volume_and_means_combine() -> None:
    m = measured("chi = vol (<(mean q)^2> - <|mean q|>^2)")
    assert m.label == "chi" and len(m.brackets) == 2
    assert Symbol("geometry", "vol") in m.formula.symbols


def test_a_multiple_of_a_product_at_two_times_is_taken_out() -> None:
    m = measured("<2 q(t) q(0)>")
    assert m.formula == Expression.of(Symbol("bracket", "0")).scaled(2)


def test_a_gap_keeps_its_operators() -> None:
    m = measured("gap(q, q^3)")
    assert m.kind == "gap" and len(m.operators) == 2 and m.label == "gap(q, q^3)"


@pytest.mark.parametrize(
    ("typed", "label"),
    [
        ("< q² >", "<q^2>"),
        ("<q(t)q(0)>", "<q(t) q(0)>"),
        ("⟨q^2⟩", "<q^2>"),
        ("gap( q,q^3 )", "gap(q, q^3)"),
        ("<q^2>_c", "<q^2>_c"),
        ("1-<q^4>/<q^2>^2", "1 - <q^4>/<q^2>^2"),
        ("<|mean q|>", "<|mean q|>"),
        ("average phase", "average phase"),
        ("E_0", "E_0"),
    ],
)
def test_labels_have_one_spelling(typed: str, label: str) -> None:
    assert measurement_label(typed) == label


def test_without_a_measure_statement_there_is_a_default() -> None:
    assert [m.label for m in declare("q(t)\nL = 1/2 q'^2 - q^2").measurements] == ["<q>", "<q^2>"]
    assert [m.label for m in declare("theta(t) mod 2 pi\nL = theta'^2").measurements] == ["<cos(theta)>"]


def test_times_are_exact_fractions() -> None:
    assert measured("<q(0.1) q(0)>").brackets[0].groups[1][0] == Fraction(1, 10)


def test_a_path_may_be_called_p() -> None:
    """A momentum is refused inside an average, but this is a path."""
    assert declare("p(t)\nL = 1/2 p'^2 - p^2\nmeasure <p^2>").measurements[0].label == "<p^2>"
    with pytest.raises(ActionError, match="operator ordering"):
        measured("<q p>")
