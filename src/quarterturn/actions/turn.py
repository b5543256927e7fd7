"""The quarter turn: from a Lagrangian in real time to L_E in imaginary time.

With t = -i tau, d/dt = i d/d tau, and exp(i int dt L) = exp(-int d tau L_E) with L_E = -L(q, i q'). A term linear in
the velocity, A(q) q', becomes the phase -i A(q) q'. A Hamiltonian at most quadratic in its momenta is turned into its
Lagrangian first, by the Gaussian integral over the momenta (Feynman and Hibbs, Quantum Mechanics and Path Integrals,
1965, ch. 7).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from quarterturn.actions.expression import IMAGINARY, ZERO, Atom, Expression, Function, PathAtom, Power
from quarterturn.errors import ActionError

LARGEST_INVERSE = 4
Matrix = tuple[tuple[Expression, ...], ...]
HALF = Expression.number(1).scaled(1) * Expression.number(2).inverse()


@dataclass(frozen=True)
class Turned:
    """K, V and A of L_E = 1/2 q' K q' + V - i A q', and notes about what was dropped."""

    mass: Matrix
    potential: Expression
    drift: tuple[Expression, ...]
    notes: tuple[str, ...] = ()


def velocity(atom: PathAtom) -> PathAtom:
    return atom.derivative()


def at_rest(expression: Expression, variables: Sequence[PathAtom]) -> Expression:
    """The expression with all velocities (or momenta) zero."""
    still = set(variables)
    return expression.substitute(lambda atom: ZERO if atom in still else None)


def require_powers(expression: Expression, moving: Sequence[PathAtom], what: str) -> None:
    """Velocities or momenta stand in whole positive powers, not in functions: |q'| has a kink that no Gaussian has."""
    wanted = set(moving)
    for monomial, _ in expression.terms:
        for atom, power in monomial:
            inside = isinstance(atom, (Function, Power)) and Expression.of(atom).paths & wanted
            if inside or (atom in wanted and power < 0):
                raise ActionError(
                    f"a {what} inside a root, a modulus, a quotient or another function: the path integral over it is "
                    "not Gaussian"
                )


def split(lagrangian: Expression, variables: tuple[PathAtom, ...]) -> tuple[Matrix, tuple[Expression, ...], Expression]:
    """Kinetic matrix, linear coefficients and rest of a Lagrangian that is at most quadratic in the velocities."""
    moving = [velocity(v) for v in variables]
    require_powers(lagrangian, moving, "velocity")
    mass = tuple(tuple(lagrangian.diff(a).diff(b) for b in moving) for a in moving)
    for row in mass:
        for entry in row:
            if any(p.order for p in entry.paths):
                raise ActionError("a velocity in a higher power than the second: the weight is not Gaussian in it")
            if entry.paths:
                raise ActionError(
                    "a mass that depends on the path: its measure and operator ordering are not settled by the action"
                )
    linear = tuple(at_rest(lagrangian.diff(a), moving) for a in moving)
    return mass, linear, at_rest(lagrangian, moving)


def turn_lagrangian(lagrangian: Expression, variables: tuple[PathAtom, ...], circles: Sequence[bool]) -> Turned:
    """L in real time. Raises ActionError for what has no Gaussian kinetic term."""
    mass, linear, rest = split(lagrangian, variables)
    drift, notes = _without_total_derivative(linear, variables, circles)
    return Turned(mass, -rest, drift, notes)


def keep_euclidean(lagrangian: Expression, variables: tuple[PathAtom, ...]) -> Turned:
    """LE, taken as it stands."""
    mass, linear, rest = split(lagrangian, variables)
    if any(a.terms for a in linear):
        raise ActionError(
            "a real term linear in the velocity in LE: it would be a drift with a real exponent; write the action as "
            "L, where the turn makes it a phase"
        )
    return Turned(mass, rest, tuple(ZERO for _ in variables))


def lagrangian_of(
    hamiltonian: Expression, variables: tuple[PathAtom, ...], momenta: tuple[PathAtom, ...]
) -> Expression:
    """L = p q' - H at the momenta that the Gaussian integral picks: (q' - b) K (q' - b)/2 - V."""
    require_powers(hamiltonian, momenta, "momentum")
    inverse = tuple(tuple(hamiltonian.diff(a).diff(b) for b in momenta) for a in momenta)
    for row in inverse:
        for entry in row:
            if entry.paths:
                raise ActionError(
                    "the momenta must enter at most quadratically, with masses that do not depend on the path"
                )
    mass = inverted(inverse)
    linear = [at_rest(hamiltonian.diff(p), momenta) for p in momenta]
    moved = [Expression.of(velocity(v)) - b for v, b in zip(variables, linear, strict=True)]
    total = -at_rest(hamiltonian, momenta)
    for i, row in enumerate(mass):
        for j, entry in enumerate(row):
            total = total + HALF * entry * moved[i] * moved[j]
    return total


def inverted(matrix: Matrix) -> Matrix:
    """Inverse of a symmetric matrix of couplings: entry by entry if diagonal, else by cofactors."""
    size = len(matrix)
    if any(not matrix[i][i].terms for i in range(size)):
        raise ActionError("H needs a kinetic term for every momentum, such as p^2/(2 m)")
    if all(not matrix[i][j].terms for i in range(size) for j in range(size) if i != j):
        return tuple(tuple(matrix[i][i].inverse() if i == j else ZERO for j in range(size)) for i in range(size))
    if size > LARGEST_INVERSE:
        raise ActionError(f"coupled momenta of more than {LARGEST_INVERSE} variables: write the action as L")
    whole = _determinant(matrix).inverse()
    return tuple(tuple(_minor(matrix, j, i).scaled((-1) ** (i + j)) * whole for j in range(size)) for i in range(size))


def _minor(matrix: Matrix, row: int, column: int) -> Expression:
    return _determinant(
        tuple(tuple(e for j, e in enumerate(r) if j != column) for i, r in enumerate(matrix) if i != row)
    )


def _determinant(matrix: Matrix) -> Expression:
    if not matrix:
        return Expression.number(1)
    return sum((matrix[0][j].scaled((-1) ** j) * _minor(matrix, 0, j) for j in range(len(matrix))), ZERO)


def _without_total_derivative(
    linear: tuple[Expression, ...], variables: tuple[PathAtom, ...], circles: Sequence[bool]
) -> tuple[tuple[Expression, ...], tuple[str, ...]]:
    """A(q) q' whose curl vanishes on the line is a total derivative and drops out of a periodic path."""
    present = [a for a in linear if a.terms]
    if not present:
        return linear, ()
    on_circles = {v for v, circle in zip(variables, circles, strict=True) if circle}
    touches = any((circle and a.terms) or a.paths & on_circles for a, circle in zip(linear, circles, strict=True))
    curl = any(
        linear[i].diff(variables[j]) != linear[j].diff(variables[i])
        for i in range(len(linear)) for j in range(i)
    )  # fmt: skip
    if touches or curl:
        return linear, ()
    note = "the term linear in the velocity is a total derivative and drops out of a periodic path"
    return tuple(ZERO for _ in linear), (note,)


def euclidean_lagrangian(turned: Turned, variables: tuple[PathAtom, ...]) -> Expression:
    """L_E as one expression, with I for the imaginary unit."""
    parts = [turned.potential]
    moving = [Expression.of(velocity(v)) for v in variables]
    for i, row in enumerate(turned.mass):
        parts += [HALF * entry * moving[i] * moving[j] for j, entry in enumerate(row) if entry.terms]
    imaginary = Expression.of(IMAGINARY)
    parts += [-(imaginary * a * v) for a, v in zip(turned.drift, moving, strict=True) if a.terms]
    return Expression.collect(term for part in parts for term in part.terms)


def mirrored(expression: Expression, signs: dict[Atom, int]) -> Expression:
    """The expression with the signs of some atoms reversed."""
    return expression.substitute(lambda atom: Expression.of(atom).scaled(signs[atom]) if atom in signs else None)
