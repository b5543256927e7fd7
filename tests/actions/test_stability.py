"""Exact decisions about polynomials of several variables, against brute force; findings of fields with their places."""

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from quarterturn.actions.declare import declare
from quarterturn.actions.stability import least_binary, least_copositive

SMALL = st.integers(-4, 5)


@settings(max_examples=400, deadline=None, derandomize=True)
@given(st.lists(SMALL, min_size=3, max_size=9).filter(lambda c: len(c) % 2 == 1))
def test_the_sign_of_a_form_in_two_variables(coefficients: list[int]) -> None:
    angle = np.linspace(0, np.pi, 20001)
    x, y = np.cos(angle), np.sin(angle)
    degree = len(coefficients) - 1
    least = sum(c * x**k * y ** (degree - k) for k, c in enumerate(coefficients)).min()
    assume(abs(least) > 1e-6)  # a minimum of zero is not seen by brute force
    assert least_binary([Fraction(c) for c in coefficients]) == ("negative" if least < 0 else "positive")


def test_forms_that_touch_zero() -> None:
    square = [Fraction(c) for c in (1, -2, 1)]  # (x - y)^2
    assert least_binary(square) == "zero"
    assert least_binary([Fraction(c) for c in (0, 0, 1, 0, 0)]) == "zero"  # x^2 y^2
    assert least_binary([Fraction(c) for c in (-1, 3, -3, 1, 0)]) == "negative"  # an odd root


@settings(max_examples=200, deadline=None, derandomize=True)
@given(st.integers(1, 4), st.data())
def test_copositive_matrices(size: int, data: st.DataObject) -> None:
    upper = [[data.draw(SMALL) if j >= i else 0 for j in range(size)] for i in range(size)]
    matrix = [[Fraction(upper[min(i, j)][max(i, j)]) for j in range(size)] for i in range(size)]
    sign, x = least_copositive(matrix)
    rng = np.random.default_rng(3)
    points = np.abs(rng.normal(size=(4000, size))) * (rng.random((4000, size)) < 0.7)
    points = points[points.sum(axis=1) > 0]
    least = np.einsum("ni,ij,nj->n", points, np.array(matrix, float), points).min()
    if sign == "negative":
        assert x is not None and min(x) >= 0
        assert sum(a * b * matrix[i][j] for i, a in enumerate(x) for j, b in enumerate(x)) < 0
    else:
        assert least > -1e-9


def fatal(text: str) -> tuple[str, str]:
    """The first fatal finding, and what it underlines."""
    found = next(f for f in declare(text).findings if f.severity == "fatal")
    assert found.span is not None
    line = text.split("\n")[found.span.line - 1]
    return found.message, line[found.span.column - 1 : found.span.end_column - 1]


def test_two_scalars_are_stable_above_the_bound_of_their_mixed_coupling() -> None:
    """g12 > -2 sqrt(g1 g2) (Kannike, Eur. Phys. J. C 72 (2012) 2093, eq. (6), for lambda_i phi_i^4)."""
    body = "phi(t,x), chi(t,x)\nL = 1/2 (d phi)^2 + 1/2 (d chi)^2 - g1 phi^4 - g2 chi^4 - g12 phi^2 chi^2\n"
    text = body + "g1 = 4, g2 = 0.25, g12 = -2.1"
    message, place = fatal(text)
    assert "stable for g12 > -2 sqrt(g1 g2), which is -2 here" in message and "exactly" in message
    assert place == "g12 phi^2 chi^2"
    assert not [f for f in declare(body + "g1 = 4, g2 = 0.25, g12 = -1.9").findings if f.severity == "fatal"]


@pytest.mark.parametrize(
    ("text", "words", "place"),
    [
        ("phi(t,x)\nL = 1/2 (d phi)^2 - m2 phi^2 - lam phi^4\nm2 = 1, lam = -0.1", "stable for lam > 0", "lam phi^4"),
        ("phi[3](t,x)\nL = 1/2 (d phi)^2 - lam (phi.phi)^2\nlam = -1", "along |phi|", "lam (phi.phi)^2"),
        ("psi(t,x) complex\nL = |psi'|^2 - |d_x psi|^2 - lam |psi|^4\nlam = -1", "along |psi|", "lam |psi|^4"),
        ("phi(t,x)\nmetric -+\nL = 1/2 (d phi)^2 - 1/2 phi^2", "other signature", "1/2 (d phi)^2"),
        ("phi(t,x)\nL = 1/2 phi'^2 + 1/2 (d_x phi)^2 - phi^2", "gradient energy", "1/2 (d_x phi)^2"),
        ("phi(t,x), chi(t,x)\nL = 1/2 (d phi)^2 - 1/2 (d chi)^2 - phi^2 - chi^2", "derivative of chi", "1/2 (d chi)^2"),
        ("a(t), b(t)\nL = 1/2 a'^2 + 1/2 b'^2 - (a^4 - 3 a^3 b + b^4)", "Sturm", "a^4 - 3 a^3 b + b^4"),
        ("q(t)\nL = 1/2 q'^2 - 1/2 q^2 + sinh(q)", "numerically", "sinh(q)"),
    ],
)  # fmt: skip
def test_a_finding_underlines_the_term_that_causes_it(text: str, words: str, place: str) -> None:
    message, underlined = fatal(text)
    assert words in message
    assert underlined.lstrip("-+ ") == place


def test_a_rerun_with_another_sign_is_refused_at_the_place() -> None:
    import quarterturn as qt

    text = "q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 0.1\nlattice 16, a = 0.25"
    with pytest.raises(qt.ActionError, match="stable for lam > 0") as caught:
        qt.sample(qt.action(text), lam=-0.1, draws=64)
    assert caught.value.span is not None and caught.value.span.column == 26


def test_terms_of_different_dimension_are_named() -> None:
    notes = declare("phi(t,x)\nL = 1/2 (d phi)^2 - 1/2 phi^2 - lam phi^4\nlam = 1").findings
    assert [f.topic for f in notes] == ["dimensions"] and "1/2 phi^2" in notes[0].message
    assert not declare("phi(t,x)\nL = 1/2 (d phi)^2 - 1/2 m2 phi^2 - lam phi^4\nm2 = 1, lam = 1").findings


def test_a_potential_that_knows_a_unit_vector_by_its_length_says_nothing() -> None:
    text = "n[3](t,x), n.n = 1\nL = 1/(2 g2) d_mu n . d^mu n - h n.n\ng2 = 1, h = 1"
    assert "constraint" in [f.topic for f in declare(text).findings]
