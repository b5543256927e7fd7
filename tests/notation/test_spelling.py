"""One tree, however it is spelled: ASCII or Unicode, with or without blanks, on one line or several."""

import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from quarterturn.errors import NotationError
from quarterturn.notation.statements import parse
from quarterturn.notation.tree import Name, Negative, Product, Sum, SumOver

HEAD = "q(t), phi(t, x), r[3](t), theta(t), psi(t) complex\n"
ATOMS = ["q", "phi", "lam", "m_0", "2", "0.5", "(1/2 q)", "pi", "q'", "r.r", "r[1]", "r[a] r[a]", "|q|", "theta'^2",
         "d_x phi", "d_mu phi d^mu phi", "(d phi)^2", "sqrt(q)", "psi^*", "cos(theta)", "sum_a r[a]^4"]  # fmt: skip
UNICODE = {"phi": "φ", "lam": "λ", "m_0": "m₀", "1/2": "½", "pi": "π", "'": "′", ".": "·", "d_x": "∂ₓ", "d_mu": "∂_μ",
           "d^mu": "∂^μ", "d φ": "∂φ", "sqrt": "√", "^*": "†", "theta": "θ", "sum_a": "Σ_a", "^2": "²", "^4": "⁴",
           "-": "−", "psi": "ψ"}  # fmt: skip


def formulas() -> st.SearchStrategy[str]:
    def larger(inner: st.SearchStrategy[str]) -> st.SearchStrategy[str]:
        return st.one_of(
            st.builds("({} + {})".format, inner, inner),
            st.builds("({} - {})".format, inner, inner),
            st.builds("{} {}".format, inner, inner),
            st.builds("({})^2".format, inner),
            st.builds("exp({})".format, inner),
            st.builds("({})/lam".format, inner),
        )

    return st.recursive(st.sampled_from(ATOMS), larger, max_leaves=8)


def tree(formula: str) -> object:
    return parse(HEAD + "L = " + formula)[-1]


def in_unicode(formula: str) -> str:
    kept = re.sub(r"\d\.\d", lambda m: m.group().replace(".", ":"), formula)
    for plain, other in UNICODE.items():
        kept = kept.replace(plain, other)
    return kept.replace(":", ".")


@given(formulas())
@settings(max_examples=400, deadline=None, derandomize=True)
def test_unicode_and_ascii_are_one_tree(formula: str) -> None:
    assert tree(in_unicode(formula)) == tree(formula)


@given(formulas(), st.integers(1, 3))
@settings(max_examples=200, deadline=None, derandomize=True)
def test_blanks_and_lines_change_nothing(formula: str, blanks: int) -> None:
    wide = re.sub(r"(?<=[)+\-]) | (?=[(+\-])", " " * blanks + "\t", formula)
    broken = formula.replace(" + ", "\n   + ").replace(" - ", " -\n  ")
    assert tree(wide) == tree(formula)
    assert tree(broken + "  # a comment") == tree(formula)


@given(formulas(), formulas(), formulas())
@settings(max_examples=200, deadline=None, derandomize=True)
def test_a_sum_over_an_index_takes_the_product_behind_it(front: str, inside: str, behind: str) -> None:
    found = parse(f"{HEAD}L = ({front}) sum_k ({inside}) q - ({behind})")[-1].body
    assert isinstance(found, Sum) and isinstance(found.terms[0], Product)
    inner = found.terms[0].right
    assert inner == SumOver("k", Product(tree(f"({inside})").body, Name("q")))
    assert found.terms[1] == Negative(tree(f"({behind})").body)


@given(st.text(st.characters(max_codepoint=0x2FFF) | st.sampled_from("qφ'^*()[]{}<>|=,;\n#.+-/½²λ "), max_size=200))
@settings(max_examples=600, deadline=None, derandomize=True)
def test_any_text_is_read_or_refused_with_a_place_inside_it(text: str) -> None:
    try:
        assert parse(text)
    except NotationError as complaint:
        lines = text.split("\n")
        assert str(complaint)
        if complaint.span:
            assert 1 <= complaint.span.line <= len(lines)
            assert 1 <= complaint.span.column <= len(lines[complaint.span.line - 1]) + 1


SPELLINGS = [
    ("∂_t q ∂ₜ q", "d_t q d_t q"),
    ("∂_μφ ∂^μφ", "d_mu phi d^mu phi"),
    ("∂ₓφ + ∂_xφ", "d_x phi + d_x phi"),
    ("q̇² + ẋ + q″", "q'^2 + x' + q''"),
    ("q̈", "q''"),
    ("(∂φ)²", "(d(phi))^2"),
    ("ψ̄ ψ + ψ† ψ + ψ^† ψ", "psi^* psi + psi^* psi + psi^* psi"),
    ("q⁻² + q¹²", "q^-2 + q^12"),
    ("λ₀ m₁₂ gₐ", "lam_0 m_12 g_a"),
    ("∑_μ φ φ(+μ) + Σ_a r[a]", "sum_mu phi phi(+mu) + sum_a r[a]"),
    ("2·q ⋅ 3 × q − 1 – 2", "2.q . 3 * q - 1 - 2"),
    ("q**2 * 3", "q^2 3"),
    ("ln(q) + √(q) + √2", "log(q) + sqrt(q) + sqrt(2)"),
    ("d phi . d phi", "∂φ·∂φ"),
    ("⅓ q ∕ 2", "1/3 q / 2"),
]


@pytest.mark.parametrize(("one", "other"), SPELLINGS)
def test_two_spellings_are_one_tree(one: str, other: str) -> None:
    assert tree(one) == tree(other)


def test_a_coupling_called_d_goes_on_working() -> None:
    given_d = parse("q(t)\nd = 3, d_x = 2, sum_a = 1\nL = q'^2 - d q^2 - d_x q - sum_a q")[-1].body
    names = [term.body.left for term in given_d.terms[1:]]  # type: ignore[union-attr]
    assert names == [Name("d"), Name("d_x"), Name("sum_a")]
    inside = parse("q(t)\nV(d) = d q")[-1].body
    assert inside == Product(Name("d"), Name("q"))


LINES = [
    "q(t)\nw = 1, lam = 2\nL = q'^2 - w q^2\nlattice 64, a = 0.1\nmeasure <q^2>, <q>",
    "q(t); w = 1, lam = 2; L = q'^2 - w q^2; lattice 64, a = 0.1; measure <q^2>, <q>",
    "q(t)\nw = 1,\nlam = 2\nL = q'^2 -\n  w q^2\nlattice 64,\n  a = 0.1\nmeasure <q^2>,\n  <q>",
    "q(t), w = 1, lam = 2, L = q'^2 - w q^2\n\n# nothing\nlattice 64, a = 0.1 # here\nmeasure <q^2>, <q>\r\n",
    "q(t)\nw = 1, lam = 2\nL =\n q'^2\n - w q^2\nlattice 64, a = 0.1\nmeasure <q^2>, <q>",
]


@pytest.mark.parametrize("body", LINES)
def test_lines_are_joined_where_they_go_on(body: str) -> None:
    assert parse(body) == parse(LINES[0])


def test_braces_go_on_over_lines() -> None:
    one = parse("V(q) = {q^2 where |q| < 1 and q > -1, q where 1 <= q < 2, |q| otherwise}")
    assert parse("V(q) = {q^2 where |q| < 1 and q > -1,\n  q where 1 ≤ q < 2,\n  |q| otherwise\n}") == one
