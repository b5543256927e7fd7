"""What a monomial is made of: symbols, paths, and functions and powers that do not expand.

Each atom has a `key`, by which atoms are put in order whatever their kind.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from quarterturn.actions.expression import Expression


@dataclass(frozen=True, slots=True)
class Symbol:
    """A named quantity that does not depend on the path.

    `kind`: coupling, constant (pi, I), bracket (an expectation value in a measurement's formula),
    geometry (vol, beta, a), observable (energy), source (J at the point), coordinate (t, x in the body of a source).
    """

    kind: str
    name: str

    @property
    def key(self) -> tuple[Any, ...]:
        return (0, self.kind, self.name)


@dataclass(frozen=True, slots=True)
class PathAtom:
    """A real variable at a point, its derivative, or its value one site further: q, q', d_x phi[2], phi(+x).

    `component` is 0 for a scalar, else 1, 2, …; `order` is the number of derivatives, all along `direction`: 0 for
    time, k for the k-th coordinate of space; `neighbour` is 0 for the point itself and +-(k + 1) for the next site
    forwards or backwards in direction k; `part` is re or im for the two real variables of a complex field.
    """

    name: str
    component: int = 0
    order: int = 0
    direction: int = 0
    neighbour: int = 0
    part: str = ""

    @property
    def key(self) -> tuple[Any, ...]:
        return (3, self.name, self.component, self.part, self.order, self.direction, self.neighbour)

    @property
    def value(self) -> PathAtom:
        """The variable itself, without derivatives, at the point itself."""
        return PathAtom(self.name, self.component, part=self.part)

    def derivative(self, direction: int = 0) -> PathAtom:
        """Its first derivative along a coordinate."""
        return PathAtom(self.name, self.component, 1, direction, part=self.part)

    def moved(self, direction: int, sign: int = 1) -> PathAtom:
        """Its value at the next site in a direction."""
        return PathAtom(self.name, self.component, neighbour=sign * (direction + 1), part=self.part)


@dataclass(frozen=True, slots=True)
class Function:
    """f(x): an elementary function, or `mean` (the lattice average) and `charge` inside a measurement."""

    name: str
    argument: Expression

    @property
    def key(self) -> tuple[Any, ...]:
        return (1, self.name, self.argument.key)

    @property
    def inner(self) -> tuple[Expression, ...]:
        return (self.argument,)


@dataclass(frozen=True, slots=True)
class Power:
    """base ^ exponent that does not expand: (1 + q^2)^(-1), sqrt(r[1]^2 + r[2]^2), x^n with a coupling n.

    An integer power of the whole is kept in the monomial: 1/(1+q^2)^2 is Power(1+q^2, -1) squared.
    """

    base: Expression
    exponent: Expression

    @property
    def key(self) -> tuple[Any, ...]:
        return (2, self.base.key, self.exponent.key)

    @property
    def inner(self) -> tuple[Expression, ...]:
        return (self.base, self.exponent)


@dataclass(frozen=True, slots=True)
class Cases:
    """The first value all of whose conditions hold, else `otherwise`; a condition (f, sign) says f < 0 or f <= 0."""

    branches: tuple[tuple[tuple[tuple[Expression, str], ...], Expression], ...]
    otherwise: Expression

    @property
    def key(self) -> tuple[Any, ...]:
        conditions = tuple(
            (tuple((f.key, sign) for f, sign in conditions), value.key) for conditions, value in self.branches
        )
        return (4, conditions, self.otherwise.key)

    @property
    def inner(self) -> tuple[Expression, ...]:
        parts = [e for conditions, value in self.branches for e in (*(f for f, _ in conditions), value)]
        return (*parts, self.otherwise)


@dataclass(frozen=True, slots=True)
class Tabulated:
    """A function given by points (x, y), interpolated; its derivative of some order at `argument`.

    `interpolation`: linear | cubic | monotone. Beyond the ends it goes on along its tangents.
    """

    points: tuple[tuple[Fraction, Fraction], ...]
    interpolation: str
    argument: Expression
    order: int = 0

    @property
    def key(self) -> tuple[Any, ...]:
        return (5, self.points, self.interpolation, self.order, self.argument.key)

    @property
    def inner(self) -> tuple[Expression, ...]:
        return (self.argument,)


Atom = Symbol | PathAtom | Function | Power | Cases | Tabulated
Compound = (Function, Power, Cases, Tabulated)  # atoms with expressions inside
Monomial = tuple[tuple[Atom, int], ...]
IMAGINARY = Symbol("constant", "I")
PI = Symbol("constant", "pi")


def monomial_key(monomial: Monomial) -> tuple[Any, ...]:
    return tuple((atom.key, power) for atom, power in monomial)
