"""The notation on one page, made from the tables that the parser reads, so that the two can't drift apart.

Each row is something that can be written, with what it means. `body` puts a row into a whole cell, which the tests
parse.
"""

from __future__ import annotations

import html
import textwrap
from collections.abc import Iterator
from dataclasses import dataclass

from quarterturn.notation.symbols import (
    BOUNDARIES,
    COMPLEX,
    CONSTANTS,
    COORDINATES,
    FORMS,
    FRACTIONS,
    FUNCTIONS,
    GEOMETRY,
    KEYWORDS,
    LETTERS,
    MEASURES,
    PIECES,
    RESERVED,
    SPELLINGS,
    SUBSCRIPTS,
    SUPERSCRIPTS,
)

WIDTH = 100
LEFT = 38
FIELDS = "q(t), r[3](t), theta(t) mod 2 pi"
ON_SPACE = "phi(t, x), n[3](t, x), psi(t, x) complex"


@dataclass(frozen=True)
class Row:
    """What can be written, what it means, and a cell that it stands in ({} is its place; empty: it is no formula)."""

    written: str
    meaning: str
    cell: str = ""

    @property
    def body(self) -> str:
        return self.cell.replace("{}", self.written)


@dataclass(frozen=True)
class Section:
    title: str
    rows: tuple[Row, ...]


def _in(cell: str, *rows: tuple[str, str]) -> Iterator[Row]:
    for written, meaning in rows:
        yield Row(written, meaning, cell)


IN_L = FIELDS + "\nL = {}"
IN_FIELD_L = ON_SPACE + "\nL = {}"
ALONE = "{}"
STATEMENT = "q(t)\n{}"
MEASURED = f"{FIELDS}\nJ(t) = exp(-t^2)\nmeasure {{}}"
MEASURED_ON_SPACE = f"{ON_SPACE}\nmeasure {{}}"
FORM_EXAMPLES = {
    "L": "L = 1/2 q'^2 - lam q^4",
    "LE": "LE = 1/2 q'^2 + lam q^4",
    "SE": "SE = -2 kappa sum_mu phi phi(+mu) + phi^2",
    "H": "H = 1/2 p^2 + lam q^4",
}
KEYWORD_EXAMPLES = {
    "lattice": "lattice 200, a = 0.1",
    "measure": "measure <q^2>, <q(t) q(0)>, gap(q)",
    "metric": "metric -+++",
    "units": "units amu, angstrom, 1/cm",
}
BOUNDARY_EXAMPLES = {
    "twist": "twist x = 0.3",
    "fixed": "fixed q(0) = -1, q(beta) = 1",
    "antiperiodic": "antiperiodic t",
}


def _degrees() -> Section:
    rows = _in(
        ALONE,
        ("q(t)", "a path: one real number at each time"),
        ("r[3](t)", "a path of vectors; its components are r[1], r[2], r[3]"),
        ("phi(t, x)", f"a field; its coordinates, of {', '.join(COORDINATES)}, say how many dimensions there are"),
        ("theta(t) mod 2 pi", "an angle, or another quantity on a circle"),
        ("psi(t, x) complex", "a complex field"),
        ("n[3](t, x), n.n = 1", "a field of unit vectors"),
        ("A(t, x, y, z) in su(2)", "a field with values in a group (read, and refused for now)"),
    )
    return Section("Degrees of freedom", tuple(rows))


def _statements() -> Section:
    forms = (Row(FORM_EXAMPLES[word], meaning, "q(t)\n{}") for word, meaning in FORMS.items())
    given = _in(
        STATEMENT,
        ("lam = 0.1, w = 2 pi", "couplings and their defaults"),
        ("g = [[1, 0.5], [0.5, 2]]", "a symmetric tensor of couplings; g[1,2] = 0.3 gives one entry"),
        ("V(q) = q^2 - q^4", "a definition"),
        ("J(t) = j0 exp(-t^2)", "a source: a function of the coordinates, used as J q in L"),
    )
    words = (Row(KEYWORD_EXAMPLES[word], meaning, STATEMENT) for word, meaning in KEYWORDS.items())
    return Section("Statements, one a line or with ; between two; # begins a comment", (*forms, *given, *words))


def _lattice() -> Section:
    sizes = _in(
        STATEMENT,
        ("lattice beta = 20, a = 0.1", "length and spacing; 'lattice 200, beta = 20' says the same"),
        ("lattice beta = vacuum 1e-6, a = 0.1", "as long as exp(-beta gap) < 1e-6 needs"),
        ("lattice 64 x 64, a = 0.1, a_t = 0.05", "a field: sites in each direction, time first"),
    )
    ends = (Row(BOUNDARY_EXAMPLES.get(word, word), meaning, STATEMENT) for word, meaning in BOUNDARIES.items())
    return Section("The lattice, and its ends (as statements, or behind a comma)", (*sizes, *ends))


def _formulas() -> Section:
    plain = _in(
        IN_L,
        ("a b", "a product; a/b c is (a/b) c"),
        ("q^2", "a power, also q² and q**2; 4! is a factorial"),
        ("q'^2", "the derivative in time, also q̇ and d_t q"),
        ("r.r", "a dot product, also r·r"),
        ("r[1]", "a component"),
        ("r[a] r[a]", "an index that stands twice is summed over"),
        ("sum_a r[a]^4", "a sum over an index, of the product that follows; also Σ_a"),
        ("g[a,b] r[a] r[b]", "entries of a tensor"),
        ("|q|", "modulus, or the length of a vector"),
        ("√q", "square root"),
        ("{q^2 where |q| < 1, |q| otherwise}", "cases; conditions are joined by 'and', and -1 < q < 1 is one"),
    )
    fields = _in(
        IN_FIELD_L,
        ("d_x phi", "the derivative along one coordinate, also ∂_x phi"),
        ("d_mu phi d^mu phi", "all of them, contracted with the metric: an index stands once low and once high"),
        ("(d phi)^2", "short for it, also (∂φ)²; d phi . d chi of two fields"),
        ("psi^* psi", "the complex conjugate, also psi† and ψ̄"),
        ("phi(+mu)", "the next site, in SE; phi(-x) the one before"),
    )
    return Section("Formulas", (*plain, *fields))


def _functions() -> Section:
    elementary = (Row(f"{name}(q)", meaning, IN_L) for name, meaning in FUNCTIONS.items())
    complex_ones = (Row(f"{name}(psi)", meaning, IN_FIELD_L) for name, meaning in COMPLEX.items())
    constants = (Row(name, "3.14159…, also π", IN_L) for name in CONSTANTS)
    tables = (
        Row('table("well.csv", q, cubic)', f"{meaning}; linear, monotone or cubic", IN_L) for meaning in PIECES.values()
    )
    return Section("Functions", (*elementary, *complex_ones, *constants, *tables))


def _measurements() -> Section:
    rows = _in(
        MEASURED,
        ("<q^2>", "the expectation value of a time-ordered product"),
        ("<q(t) q(0)>", "a curve in t; other times are numbers"),
        ("<q^4>_c", "connected"),
        ("<|mean q|>", RESERVED["mean"]),
        ("energy", RESERVED["energy"]),
        ("log Z[J]", "the generating functional of a source, relative to J = 0"),
        ("G(t) = <q(t) q(0)>", "a name for it"),
        ("vol <(mean q)^2>", f"formulas of brackets, with {' and '.join(GEOMETRY)}"),
    )
    fields = _in(MEASURED_ON_SPACE, ("<sum_x phi(t,x) phi(0,0)>", "summed over space: zero momentum"))
    examples = {"charge": "<charge(theta)^2>", "xi2": "xi2(phi)"}
    named = (
        Row(examples.get(name, f"{name}(q)"), meaning, MEASURED_ON_SPACE if name == "xi2" else MEASURED)
        for name, meaning in MEASURES.items()
    )
    return Section("Measurements", (*rows, *fields, *named))


def _spelling() -> Section:
    greek = " ".join(f"{letter} {name}" for letter, name in LETTERS.items())
    others = ", ".join(f"{other} is {name}" for other, name in SPELLINGS.items())
    small = f"{''.join(SUPERSCRIPTS)} {''.join(FRACTIONS)} {''.join(SUBSCRIPTS)}"
    rows = (
        Row(greek, f"one name in two spellings; {others}"),
        Row(small, "powers, fractions, and the ends of names: m₀ is m_0"),
        Row(", ".join(RESERVED), "words that can't be names"),
    )
    return Section("Spellings", rows)


def sections() -> tuple[Section, ...]:
    """The page in its order."""
    return (_degrees(), _statements(), _formulas(), _functions(), _lattice(), _measurements(), _spelling())


class Reference:
    """The page, as text and as HTML."""

    def __str__(self) -> str:
        return "\n\n".join("\n".join(_text(section)) for section in sections())

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        return "".join(_table(section) for section in sections())


def reference() -> Reference:
    """The notation on one page.

    Returns
    -------
    Reference
        Shows itself as a table in a notebook; `str` gives text, at most 100 columns wide.
    """
    return Reference()


def _text(section: Section) -> Iterator[str]:
    yield section.title
    yield "-" * len(section.title)
    for row in section.rows:
        left = textwrap.wrap(row.written, WIDTH if not row.cell else LEFT + 20, break_long_words=False)
        right = textwrap.wrap(row.meaning, WIDTH - LEFT - 2)
        if len(left) == 1 and len(left[0]) <= LEFT:
            yield f"{left[0]:<{LEFT}}  {right[0]}"
            right = right[1:]
        else:
            yield from left
        yield from (" " * (LEFT + 2) + line for line in right)


def _table(section: Section) -> str:
    rows = "".join(
        f'<tr><td style="text-align:left;vertical-align:top"><code>{html.escape(row.written)}</code></td>'
        f'<td style="text-align:left">{html.escape(row.meaning)}</td></tr>'
        for row in section.rows
    )
    return f"<h4>{html.escape(section.title)}</h4><table>{rows}</table>"
