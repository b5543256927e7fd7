"""Dimensions of fields, couplings and measurements, from the terms of the action.

In natural units the action is a pure number, so each term of the Lagrangian in D dimensions has mass dimension D and a
derivative adds 1; in a laboratory system each term is an energy, and a derivative divides by the time. What is inside
an exponential or a cosine is a pure number, and terms that are added are of one kind. These are linear equations, one
for each base of the system; what they determine is known, the rest is not (common practice).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction

from quarterturn.actions.expression import Atom, Cases, Expression, Function, Monomial, PathAtom, Power, Symbol
from quarterturn.actions.model import Bracket, Measurement
from quarterturn.actions.points import SUMMED
from quarterturn.units.system import Dimension, System, natural

Term = tuple[Monomial, Fraction]
SAME_KIND = ("abs", "mean")  # functions that leave the dimension of their argument


def times(dimension: Dimension, factor: Fraction | int) -> Dimension:
    return tuple(part * factor for part in dimension)


def plus(left: Dimension, right: Dimension) -> Dimension:
    return tuple(a + b for a, b in zip(left, right, strict=True))


@dataclass(frozen=True)
class Form:
    """A dimension that is linear in unknown ones: sum over names of coefficient times unknown, plus what is known."""

    row: Mapping[str, Fraction]
    known: Dimension

    def plus(self, other: Form, factor: Fraction | int = 1) -> Form:
        row = dict(self.row)
        for name, part in other.row.items():
            row[name] = row.get(name, Fraction(0)) + part * factor
        return Form(row, plus(self.known, times(other.known, factor)))


class Equations:
    """What the terms of an action say about the dimensions in it. Unknowns are couplings and `path q`."""

    def __init__(self, system: System, pure: frozenset[str]) -> None:
        self.system, self.pure = system, pure
        self.zero: Dimension = times(system.energy, 0)
        self.rows: list[Form] = []  # each is zero
        self.kinetic: list[Form] = []  # those of terms with a derivative
        self.hidden = 0
        self.seen: dict[Atom, Form] = {}

    def say(self, lagrangian: Expression, each: Dimension) -> None:
        """Each term of the Lagrangian has the dimension `each`."""
        for monomial, _ in lagrangian.terms:
            form = self.of(monomial).plus(Form({}, times(each, -1)))
            self.rows.append(form)
            if any(isinstance(a, PathAtom) and a.order for a, _ in monomial):
                self.kinetic.append(form)

    def of(self, monomial: Monomial) -> Form:
        total = Form({}, self.zero)
        for atom, power in monomial:
            if atom not in self.seen:
                self.seen[atom] = self.of_atom(atom)
            total = total.plus(self.seen[atom], power)
        return total

    def of_atom(self, atom: Atom) -> Form:
        match atom:
            case PathAtom():
                row = {} if atom.name in self.pure else {f"path {atom.name}": Fraction(1)}
                return Form(row, times(self.system.time, -atom.order))
            case Symbol():
                if atom.kind == "constant":
                    return Form({}, self.zero)
                return Form(
                    {atom.name if atom.kind == "coupling" else f"{atom.kind} {atom.name}": Fraction(1)}, self.zero
                )
            case Function() if atom.name not in SAME_KIND:
                self.equal([atom.argument], Form({}, self.zero))
                return Form({}, self.zero)
            case Function():
                return self.equal([atom.argument], self.fresh())
            case Power():
                return self.of_power(atom)
            case Cases():
                for conditions, _ in atom.branches:
                    for f, _ in conditions:
                        self.equal([f], self.fresh())
                return self.equal([*(value for _, value in atom.branches), atom.otherwise], self.fresh())
        return self.fresh()  # a table: nothing says what its numbers count

    def of_power(self, atom: Power) -> Form:
        exponent = atom.exponent.constant
        if exponent is None:  # x^n with a coupling n
            self.equal([atom.base, atom.exponent], Form({}, self.zero))
            return Form({}, self.zero)
        return Form({}, self.zero).plus(self.equal([atom.base], self.fresh()), exponent)

    def fresh(self) -> Form:
        self.hidden += 1
        return Form({f"? {self.hidden}": Fraction(1)}, self.zero)

    def equal(self, expressions: Iterable[Expression], to: Form) -> Form:
        """Every term of the expressions has the dimension `to`."""
        for expression in expressions:
            self.rows += [self.of(monomial).plus(to, -1) for monomial, _ in expression.terms]
        return to


def solve(equations: list[Form]) -> dict[str, Dimension] | None:
    """Elimination over the rationals; the unknowns that are determined, None if there is no solution.

    Each basis row is one unknown in terms of free ones. Rows are sparse: a term of an action has few factors.
    """
    basis: dict[str, Form] = {}
    for equation in equations:
        form = equation
        for name in [n for n in form.row if n in basis]:
            form = form.plus(basis[name], -form.row[name])
        row = {n: part for n, part in form.row.items() if part}
        if not row:
            if any(form.known):
                return None
            continue
        pivot = min(row)
        form = Form({}, times(form.known, 0)).plus(Form(row, form.known), 1 / row[pivot])
        for name, other in basis.items():
            if other.row.get(pivot):
                basis[name] = other.plus(form, -other.row[pivot])
        basis[pivot] = form
    return {n: times(f.known, -1) for n, f in basis.items() if not any(p for m, p in f.row.items() if m != n)}


@dataclass(frozen=True)
class Dimensions:
    """The dimensions that an action determines; `coordinates` is D."""

    system: System
    coordinates: int
    known: Mapping[str, Dimension]  # couplings by name, fields as `path q`
    pure: frozenset[str]  # fields that are pure numbers: angles and unit vectors

    def of_coupling(self, name: str) -> Dimension | None:
        return self.known.get(name)

    def of_path(self, name: str) -> Dimension | None:
        return times(self.system.level, 0) if name in self.pure else self.known.get(f"path {name}")

    # --- measurements ---------------------------------------------------------------------------------------
    def of_measurement(self, m: Measurement) -> Dimension | None:
        """What a measured number counts, None where the action does not determine it."""
        if m.kind == "gap":
            return self.system.level
        if m.kind == "functional":
            return times(self.system.level, 0)
        if m.kind == "xi2":
            return self.system.length
        return self.of(m.formula, m.brackets)

    def of(self, expression: Expression, brackets: tuple[Bracket, ...] = ()) -> Dimension | None:
        """The common dimension of all terms; None where one is unknown or two differ."""
        found = {self._of_monomial(monomial, brackets) for monomial, _ in expression.terms}
        return found.pop() if len(found) == 1 else None

    def _of_monomial(self, monomial: Monomial, brackets: tuple[Bracket, ...]) -> Dimension | None:
        total = times(self.system.level, 0)
        for atom, power in monomial:
            part = self._of_atom(atom, brackets)
            if part is None:
                return None
            total = plus(total, times(part, power))
        return total

    def _of_atom(self, atom: Atom, brackets: tuple[Bracket, ...]) -> Dimension | None:
        zero = times(self.system.level, 0)
        match atom:
            case PathAtom():
                return self.of_path(atom.name)
            case Symbol(kind="bracket"):
                return self._of_bracket(brackets[int(atom.name)], brackets)
            case Symbol(kind="geometry"):
                return times(self.system.step, self.coordinates) if atom.name == "vol" else self.system.step
            case Symbol(kind="observable"):
                return self.system.level if atom.name == "energy" else None
            case Symbol(kind="coupling"):
                return self.known.get(atom.name)
            case Symbol():
                return zero if atom.kind == "constant" else None
            case Function() if atom.name in SAME_KIND:
                return self.of(atom.argument, brackets)
            case Function():
                return zero
            case Power() if atom.exponent.constant is not None:
                base = self.of(atom.base, brackets)
                return None if base is None else times(base, atom.exponent.constant)
        return None

    def _of_bracket(self, bracket: Bracket, brackets: tuple[Bracket, ...]) -> Dimension | None:
        total = times(self.system.level, 0)
        for _, expression in bracket.groups:
            part = self.of(expression, brackets)
            if part is None:
                return None
            total = plus(total, part)
        directions = zip(*bracket.places, strict=True) if bracket.places else ()
        summed = sum(SUMMED in places for places in directions)
        return plus(total, times(self.system.length, summed))


def dimensions(
    lagrangian: Expression,
    coordinates: int = 1,
    pure: frozenset[str] = frozenset(),
    system: System | None = None,
    lattice: bool = False,
) -> Dimensions:
    """The dimensions in an action.

    Terms that contradict each other, as 1/2 q'^2 + 1/2 q^2 do, are written in units in which some scale is 1; then
    natural units determine nothing, and in a laboratory system only the kinetic terms are believed.

    Parameters
    ----------
    lagrangian
        L or L_E; per site for a lattice action, whose terms are pure numbers (`lattice`).
    coordinates
        D.
    pure
        Names of fields that are pure numbers: angles and unit vectors.
    system
        Natural units if absent. In a laboratory system a path that the terms leave open is a length.
    """
    system = system or natural()
    equations = Equations(system, pure)
    each = times(system.energy, 0 if lattice else 1 if system.laboratory else coordinates)
    equations.say(lagrangian, each)
    rows = equations.rows
    if system.laboratory:
        rows = [*rows, *_lengths(equations, rows), Form({"hbar": Fraction(1)}, times(system.hbar_dimension, -1))]
        found = solve(rows)
        if found is None:
            kinetic = equations.kinetic
            hbar = rows[-1]
            found = solve([*kinetic, *_lengths(equations, kinetic), hbar])
    else:
        found = solve(rows)
    return Dimensions(system, coordinates, found or {}, pure)


def contradiction(
    lagrangian: Expression, coordinates: int = 1, pure: frozenset[str] = frozenset()
) -> tuple[Term, Term] | None:
    """Two terms that can't have one dimension, whatever the dimensions of fields and couplings; None if there are none.

    Natural units. The kinetic terms come first, so that the second of the pair is the odd one.
    """
    system = natural()
    each = times(system.energy, coordinates)
    terms = sorted(lagrangian.terms, key=lambda t: -sum(a.order for a, _ in t[0] if isinstance(a, PathAtom)))

    def agrees(chosen: list[Term]) -> bool:
        equations = Equations(system, pure)
        equations.say(Expression(tuple(chosen)), each)
        return solve(equations.rows) is not None

    if agrees(terms):
        return None
    for count in range(1, len(terms) + 1):
        if agrees(terms[:count]):
            continue
        odd = terms[count - 1]
        partner = next((t for t in reversed(terms[: count - 1]) if agrees([s for s in terms[:count] if s != t])), None)
        return (partner or terms[0], odd)
    return None


def _lengths(equations: Equations, rows: list[Form]) -> list[Form]:
    """Paths whose dimension is left open are lengths."""
    settled = solve(rows) or {}
    names = {n for form in rows for n in form.row if n.startswith("path ")} - set(settled)
    return [Form({name: Fraction(1)}, times(equations.system.length, -1)) for name in sorted(names)]
