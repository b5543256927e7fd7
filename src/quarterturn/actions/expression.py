"""The canonical expression: a sum of monomials with exact rational coefficients.

Every formula of an action is kept in one normal form, so that equal meanings are equal objects: a sum of terms, a
term being a rational number times integer powers of atoms. Atoms are paths and their time derivatives, couplings,
constants, and functions or powers that can't be expanded, whose arguments are again in normal form. The imaginary
unit is the atom `I` and is reduced by I^2 = -1. Nothing here evaluates text.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import Any

from quarterturn.actions.atoms import IMAGINARY as IMAGINARY
from quarterturn.actions.atoms import PI as PI
from quarterturn.actions.atoms import Atom as Atom
from quarterturn.actions.atoms import Cases as Cases
from quarterturn.actions.atoms import Compound as Compound
from quarterturn.actions.atoms import Function as Function
from quarterturn.actions.atoms import Monomial as Monomial
from quarterturn.actions.atoms import PathAtom as PathAtom
from quarterturn.actions.atoms import Power as Power
from quarterturn.actions.atoms import Symbol as Symbol
from quarterturn.actions.atoms import Tabulated as Tabulated
from quarterturn.actions.atoms import monomial_key
from quarterturn.actions.effort import checked_number, spend
from quarterturn.actions.evaluation import atom_value, depends_on_path
from quarterturn.actions.roots import rational_root
from quarterturn.errors import ActionError

TERM_LIMIT = 2000  # a product that expands to more terms is refused: no cell may hang the kernel
LARGEST_POWER = 128  # of one atom in one term, for the same reason
ODD_FUNCTIONS = frozenset({"sin", "tan", "sinh", "tanh"})
EVEN_FUNCTIONS = frozenset({"cos", "cosh", "abs"})
AT_ZERO = {"sin": 0, "tan": 0, "sinh": 0, "tanh": 0, "cos": 1, "cosh": 1, "exp": 1, "abs": 0}


def _merge(left: Monomial, right: Monomial) -> tuple[Monomial, int]:
    """Product of two monomials and the sign that I^2 = -1 leaves."""
    powers: dict[Atom, int] = dict(left)
    for atom, power in right:
        powers[atom] = powers.get(atom, 0) + power
        if abs(powers[atom]) > LARGEST_POWER:
            raise ActionError(f"a power beyond {LARGEST_POWER}")
    sign = 1
    if IMAGINARY in powers:
        turns = powers.pop(IMAGINARY) % 4
        sign = -1 if turns in (2, 3) else 1
        if turns % 2:
            powers[IMAGINARY] = 1
    items = sorted(((a, p) for a, p in powers.items() if p), key=lambda item: item[0].key)
    return tuple(items), sign


@dataclass(frozen=True)
class Expression:
    """A sum of (monomial, coefficient), sorted, without zero coefficients. Built by `number`, `of`, arithmetic."""

    terms: tuple[tuple[Monomial, Fraction], ...]

    # --- building -------------------------------------------------------------------------------------------
    @staticmethod
    def collect(pairs: Iterable[tuple[Monomial, Fraction]]) -> Expression:
        """Sum the coefficients of equal monomials and sort."""
        total: dict[Monomial, Fraction] = {}
        found = tuple(pairs)
        spend(1 + len(found) // 3)
        for monomial, coefficient in found:
            total[monomial] = total.get(monomial, Fraction(0)) + coefficient
            if len(total) > TERM_LIMIT:
                raise ActionError(f"the expression expands to more than {TERM_LIMIT} terms")
        kept = [(m, checked_number(c)) for m, c in total.items() if c]
        return Expression(tuple(sorted(kept, key=lambda item: monomial_key(item[0]))))

    @staticmethod
    def number(value: int | Fraction) -> Expression:
        return Expression((((), Fraction(value)),) if value else ())

    @staticmethod
    def of(atom: Atom, power: int = 1) -> Expression:
        if isinstance(atom, Compound):
            spend(sum(part.size for part in atom.inner))
        return Expression(((((atom, power),), Fraction(1)),))

    # --- questions ------------------------------------------------------------------------------------------
    @cached_property
    def key(self) -> tuple[Any, ...]:
        return tuple((monomial_key(m), c) for m, c in self.terms)

    @cached_property
    def size(self) -> int:
        """Atoms in the whole tree, those inside functions included, each counted where it stands."""
        plain = sum(1 + len(monomial) for monomial, _ in self.terms)
        inner = (part.size for m, _ in self.terms for a, _p in m if isinstance(a, Compound) for part in a.inner)
        return plain + sum(inner)

    @cached_property
    def _hash(self) -> int:
        return hash(self.terms)

    def __hash__(self) -> int:
        return self._hash

    @property
    def constant(self) -> Fraction | None:
        """The rational number that this is, or None."""
        if not self.terms:
            return Fraction(0)
        if len(self.terms) == 1 and self.terms[0][0] == ():
            return self.terms[0][1]
        return None

    def atoms(self) -> Iterator[Atom]:
        """Every atom, also those inside functions and powers; with repetitions."""
        for monomial, _ in self.terms:
            for atom, _power in monomial:
                yield atom
                if isinstance(atom, Compound):
                    for part in atom.inner:
                        yield from part.atoms()

    @cached_property
    def paths(self) -> frozenset[PathAtom]:
        return frozenset(a for a in self.atoms() if isinstance(a, PathAtom))

    @cached_property
    def symbols(self) -> frozenset[Symbol]:
        return frozenset(a for a in self.atoms() if isinstance(a, Symbol))

    # --- arithmetic -----------------------------------------------------------------------------------------
    def __add__(self, other: Expression) -> Expression:
        return Expression.collect((*self.terms, *other.terms))

    def __neg__(self) -> Expression:
        return Expression(tuple((m, -c) for m, c in self.terms))

    def __sub__(self, other: Expression) -> Expression:
        return self + (-other)

    def __mul__(self, other: Expression) -> Expression:
        if len(self.terms) * len(other.terms) > 50 * TERM_LIMIT:
            raise ActionError(f"the expression expands to more than {TERM_LIMIT} terms")
        spend(len(self.terms) * len(other.terms))
        pairs = []
        for left, a in self.terms:
            for right, b in other.terms:
                monomial, sign = _merge(left, right)
                pairs.append((monomial, sign * a * b))
        return Expression.collect(pairs)._reduced()

    def scaled(self, factor: int | Fraction) -> Expression:
        spend(1 + len(self.terms) // 10)
        return Expression(tuple((m, checked_number(c * factor)) for m, c in self.terms)) if factor else ZERO

    def __pow__(self, exponent: int) -> Expression:
        """Integer power; a negative power of a sum stays a `Power`."""
        if abs(exponent) > 64:
            raise ActionError(f"the exponent {exponent} is too large; the largest is 64")
        if exponent < 0:
            return self.inverse() ** (-exponent)
        result = ONE
        for _ in range(exponent):
            result = result * self
        return result

    def inverse(self) -> Expression:
        """1 / self; raises ZeroDivisionError where self is zero."""
        if not self.terms:
            raise ZeroDivisionError
        if len(self.terms) == 1:
            monomial, coefficient = self.terms[0]
            flipped, sign = _merge(tuple((a, -p) for a, p in monomial), ())
            return Expression(((flipped, sign / coefficient),))._reduced()
        lead = self.terms[0][1]  # a common factor outside, so that 1/(2+2q) and (1/2)/(1+q) are equal
        return Expression.of(Power(self.scaled(1 / lead), MINUS_ONE)).scaled(1 / lead)

    def power(self, exponent: Expression) -> Expression:
        """General power: expanded where it is an integer, kept as an atom otherwise."""
        value = exponent.constant
        if value is not None and value.denominator == 1:
            return self ** int(value)
        if value is not None:
            root = rational_root(self.constant, value)
            if root is not None:
                return Expression.number(root)
            unit = Fraction(1, value.denominator)
            return Expression.of(Power(self, Expression.number(unit)), value.numerator)._reduced()
        return Expression.of(Power(self, exponent))

    def _reduced(self) -> Expression:
        """Whole powers hidden in atoms expand: sqrt(x)^2 = x, ((1+q)^-1)^-1 = 1+q."""
        for monomial, coefficient in self.terms:
            for atom, power in monomial:
                whole = _whole_power(atom, power)
                if whole is None:
                    continue
                rest = tuple(item for item in monomial if item[0] != atom)
                others = Expression(tuple(t for t in self.terms if t[0] != monomial))
                inner, left = whole
                term = Expression(((rest, coefficient),)) * inner
                if left:
                    term = term * Expression.of(atom, left)
                return (others + term)._reduced()
        return self

    # --- calculus -------------------------------------------------------------------------------------------
    def diff(self, atom: Atom) -> Expression:
        """Partial derivative with respect to an atom, by the chain rule through functions and powers."""
        pairs: list[tuple[Monomial, Fraction]] = []
        direct, compound = self._places
        for place in sorted({*direct.get(atom, ()), *compound}):
            monomial, coefficient = self.terms[place]
            for inner, power in monomial:
                slope = _derivative(inner, atom)
                if not slope.terms:
                    continue
                rest = tuple((a, p - (a == inner)) for a, p in monomial if p - (a == inner))
                term = Expression(((rest, coefficient * power),))
                pairs += (term if slope is ONE else term * slope).terms
        return Expression.collect(pairs)

    @cached_property
    def _places(self) -> tuple[dict[Atom, list[int]], list[int]]:
        """In which terms each atom stands, and in which there are atoms with expressions inside."""
        direct: dict[Atom, list[int]] = {}
        compound: list[int] = []
        for place, (monomial, _) in enumerate(self.terms):
            for atom, _power in monomial:
                direct.setdefault(atom, []).append(place)
            if any(isinstance(atom, Compound) for atom, _power in monomial):
                compound.append(place)
        return direct, compound

    def substitute(self, replace: Callable[[Atom], Expression | None]) -> Expression:
        """Rebuild with atoms replaced where `replace` gives an expression, inside functions and powers too."""
        pairs: list[tuple[Monomial, Fraction]] = []
        for monomial, coefficient in self.terms:
            term = Expression.number(coefficient)
            for atom, power in monomial:
                new = _substituted(atom, replace)
                term = term * (new if power == 1 else new**power)
            pairs += term.terms
        return Expression.collect(pairs)

    # --- numbers --------------------------------------------------------------------------------------------
    def evaluate(self, lookup: Mapping[Atom, Any] | Callable[[Atom], Any], module: Any) -> Any:
        """Value with atoms looked up and functions taken from `module` (numpy or jax.numpy).

        Path-independent factors are multiplied first, so that arrays meet one scalar per term.
        """
        find = lookup if callable(lookup) else lookup.__getitem__
        total: Any = 0.0
        for monomial, coefficient in self.terms:
            scalar: Any = float(coefficient)
            array: Any = None
            for atom, power in monomial:
                factor = atom_value(atom, find, module) ** power
                if depends_on_path(atom):
                    array = factor if array is None else array * factor
                else:
                    scalar = scalar * factor
            total = total + (scalar if array is None else scalar * array)
        return total


ZERO = Expression(())
ONE = Expression.number(1)
MINUS_ONE = Expression.number(-1)


def apply(name: str, argument: Expression) -> Expression:
    """An elementary function of an expression, with parity and the value at zero made canonical."""
    if name == "sqrt":
        return argument.power(Expression.number(Fraction(1, 2)))
    if argument.constant == 0 and name in AT_ZERO:
        return Expression.number(AT_ZERO[name])
    if argument.constant == 1 and name == "log":
        return ZERO
    negative = bool(argument.terms) and argument.terms[0][1] < 0
    if negative and name in EVEN_FUNCTIONS:
        return Expression.of(Function(name, -argument))
    if negative and name in ODD_FUNCTIONS:
        return -Expression.of(Function(name, -argument))
    return Expression.of(Function(name, argument))


Branches = tuple[tuple[tuple[tuple[Expression, str], ...], Expression], ...]


def chosen(branches: Branches, otherwise: Expression) -> Expression:
    """The first value whose conditions hold, else `otherwise`; one value where all are equal.

    A condition (f, sign) says f < 0 or f <= 0; it is scaled so that the first coefficient of f has modulus 1.
    """
    if all(value == otherwise for _, value in branches):
        return otherwise
    scaled = tuple(
        (tuple((f.scaled(1 / abs(f.terms[0][1])) if f.terms else f, sign) for f, sign in conditions), value)
        for conditions, value in branches
    )
    return Expression.of(Cases(scaled, otherwise))


def _whole_power(atom: Atom, power: int) -> tuple[Expression, int] | None:
    """(expanded part, power of the atom that is left), or None where nothing expands."""
    if not isinstance(atom, Power):
        return None
    value = atom.exponent.constant
    if value is None:
        return None
    if value == -1 and power < 0:
        return atom.base ** (-power), 0
    if value.denominator > 1 and abs(power) >= value.denominator:
        whole = int(power / value.denominator)
        return atom.base**whole, power - whole * value.denominator
    return None


def _derivative(atom: Atom, variable: Atom) -> Expression:
    if atom == variable:
        return ONE
    if isinstance(atom, Function):
        inner = atom.argument.diff(variable)
        return _function_slope(atom) * inner if inner.terms else ZERO
    if isinstance(atom, Power):
        base = atom.base.diff(variable)
        exponent = atom.exponent.diff(variable)
        slope = ZERO
        if base.terms:
            slope = slope + atom.exponent * atom.base.power(atom.exponent - ONE) * base
        if exponent.terms:
            slope = slope + Expression.of(atom) * apply("log", atom.base) * exponent
        return slope
    if isinstance(atom, Cases):
        branches = tuple((conditions, value.diff(variable)) for conditions, value in atom.branches)
        return chosen(branches, atom.otherwise.diff(variable))
    if isinstance(atom, Tabulated):
        inner = atom.argument.diff(variable)
        if not inner.terms:
            return ZERO
        return Expression.of(Tabulated(atom.points, atom.interpolation, atom.argument, atom.order + 1)) * inner
    return ZERO


def _function_slope(atom: Function) -> Expression:
    x = atom.argument
    match atom.name:
        case "exp":
            return Expression.of(atom)
        case "log":
            return x.inverse()
        case "sin":
            return apply("cos", x)
        case "cos":
            return -apply("sin", x)
        case "tan":
            return ONE + Expression.of(atom, 2)
        case "sinh":
            return apply("cosh", x)
        case "cosh":
            return apply("sinh", x)
        case "tanh":
            return ONE - Expression.of(atom, 2)
        case "abs":
            return Expression.of(Function("sign", x))
        case "sign":
            return ZERO
    raise ActionError(f"{atom.name} has no derivative here")


def _substituted(atom: Atom, replace: Callable[[Atom], Expression | None]) -> Expression:
    new = replace(atom)
    if new is not None:
        return new
    if isinstance(atom, Function):
        return apply(atom.name, atom.argument.substitute(replace))
    if isinstance(atom, Power):
        return atom.base.substitute(replace).power(atom.exponent.substitute(replace))
    if isinstance(atom, Cases):
        branches = tuple(
            (tuple((f.substitute(replace), sign) for f, sign in conditions), value.substitute(replace))
            for conditions, value in atom.branches
        )
        return chosen(branches, atom.otherwise.substitute(replace))
    if isinstance(atom, Tabulated):
        return Expression.of(Tabulated(atom.points, atom.interpolation, atom.argument.substitute(replace), atom.order))
    return Expression.of(atom)
