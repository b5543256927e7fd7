"""The quarter turn: from a Lagrangian in real time to L_E in imaginary time.

With t = -i tau, d/dt = i d/d tau, and exp(i int dt L) = exp(-int d tau L_E) with L_E = -L(q, i q', d_k q). A term that
is linear in the velocity, A(q) q', becomes the phase -i A(q) q'; derivatives in space are left as they are. From a
Hamiltonian at most quadratic in its momenta the Lagrangian comes first, by the Gaussian integral over the momenta
(Feynman and Hibbs, Quantum Mechanics and Path Integrals, 1965, ch. 7).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from quarterturn.actions.expression import IMAGINARY, ZERO, Atom, Compound, Expression, PathAtom
from quarterturn.errors import ActionError

LARGEST_INVERSE = 4
Matrix = tuple[tuple[Expression, ...], ...]
HALF = Expression.number(1).scaled(1) * Expression.number(2).inverse()


@dataclass(frozen=True)
class Turned:
    """K, V, A of L_E = 1/2 q' K q' + V - i A q', G^k and B^k of the derivatives in space, and what was dropped."""

    mass: Matrix
    potential: Expression
    drift: tuple[Expression, ...]
    notes: tuple[str, ...] = ()
    stiffness: tuple[Matrix, ...] = ()
    tilt: tuple[tuple[Expression, ...], ...] = ()


@dataclass(frozen=True)
class Parts:
    """A Lagrangian sorted by derivatives: quadratic and linear coefficients per direction, time first, and the rest."""

    quadratic: tuple[Matrix, ...]
    linear: tuple[tuple[Expression, ...], ...]
    rest: Expression


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
            inside = isinstance(atom, Compound) and Expression.of(atom).paths & wanted
            if inside or (atom in wanted and power < 0):
                raise ActionError(
                    f"a {what} inside a root, a modulus, a quotient or another function: the path integral over it is "
                    "not Gaussian"
                )


def split(lagrangian: Expression, variables: tuple[PathAtom, ...], dimension: int) -> Parts:
    """Sort a Lagrangian by derivatives. Raises ActionError where it is more than quadratic in them."""
    moving = tuple(tuple(v.derivative(k) for v in variables) for k in range(dimension))
    every = [atom for along in moving for atom in along]
    require_powers(lagrangian, every, "velocity" if dimension == 1 else "derivative")
    _refuse_mixed(lagrangian, every)
    quadratic = tuple(tuple(tuple(lagrangian.diff(a).diff(b) for b in along) for a in along) for along in moving)
    for matrix in quadratic:
        for entry in (e for row in matrix for e in row):
            if any(p.order for p in entry.paths):
                raise ActionError("a velocity in a higher power than the second: the weight is not Gaussian in it")
            if entry.paths:
                raise ActionError(
                    "a mass that depends on the path: its measure and operator ordering are not settled by the action"
                )
    linear = tuple(tuple(at_rest(lagrangian.diff(a), every) for a in along) for along in moving)
    return Parts(quadratic, linear, at_rest(lagrangian, every))


def _refuse_mixed(lagrangian: Expression, every: list[PathAtom]) -> None:
    for monomial, _ in lagrangian.terms:
        directions = {atom.direction for atom, _ in monomial if isinstance(atom, PathAtom) and atom.order}
        if len(directions) > 1 and 0 in directions:
            raise ActionError(
                "a derivative in time times one in space: after the turn it is imaginary and quadratic, and no phase "
                "of a positive weight"
            )
        if len(directions) > 1:
            raise ActionError("derivatives along two directions in one term: choose axes along which they separate")


def turn_lagrangian(
    lagrangian: Expression, variables: tuple[PathAtom, ...], circles: Sequence[bool], dimension: int = 1
) -> Turned:
    """L in real time. Raises ActionError for what has no Gaussian kinetic term."""
    parts = split(lagrangian, variables, dimension)
    drift, notes = _without_total_derivative(parts.linear[0], variables, circles)
    tilt = [_without_total_derivative(along, variables, circles) for along in parts.linear[1:]]
    notes += tuple(note for _, found in tilt for note in found)
    stiffness = tuple(tuple(tuple(-e for e in row) for row in matrix) for matrix in parts.quadratic[1:])
    tilts = tuple(tuple(-b for b in along) for along, _ in tilt)
    return Turned(parts.quadratic[0], -parts.rest, drift, tuple(dict.fromkeys(notes)), stiffness, tilts)


def keep_euclidean(
    lagrangian: Expression, variables: tuple[PathAtom, ...], circles: Sequence[bool] = (), dimension: int = 1
) -> Turned:
    """LE, taken as it stands."""
    parts = split(lagrangian, variables, dimension)
    if any(a.terms for a in parts.linear[0]):
        raise ActionError(
            "a real term linear in the velocity in LE: it would be a drift with a real exponent; write the action as "
            "L, where the turn makes it a phase"
        )
    tilt = [_without_total_derivative(along, variables, circles) for along in parts.linear[1:]]
    notes = tuple(dict.fromkeys(note for _, found in tilt for note in found))
    nothing = tuple(ZERO for _ in variables)
    tilts = tuple(along for along, _ in tilt)
    return Turned(parts.quadratic[0], parts.rest, nothing, notes, parts.quadratic[1:], tilts)


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
    sourced = any(s.kind == "source" for a in linear for s in a.symbols)
    curl = any(
        linear[i].diff(variables[j]) != linear[j].diff(variables[i])
        for i in range(len(linear)) for j in range(i)
    )  # fmt: skip
    if touches or curl or sourced:
        return linear, ()
    note = "the term linear in the velocity is a total derivative and drops out of a periodic path"
    return tuple(ZERO for _ in linear), (note,)


def euclidean_lagrangian(turned: Turned, variables: tuple[PathAtom, ...]) -> Expression:
    """L_E as one expression, with I for the imaginary unit."""
    parts = [turned.potential]
    imaginary = Expression.of(IMAGINARY)
    for k, matrix in enumerate((turned.mass, *turned.stiffness)):
        moving = [Expression.of(v.derivative(k)) for v in variables]
        for i, row in enumerate(matrix):
            parts += [HALF * entry * moving[i] * moving[j] for j, entry in enumerate(row) if entry.terms]
    moving = [Expression.of(velocity(v)) for v in variables]
    parts += [-(imaginary * a * v) for a, v in zip(turned.drift, moving, strict=True) if a.terms]
    for k, along in enumerate(turned.tilt, start=1):
        parts += [b * Expression.of(v.derivative(k)) for b, v in zip(along, variables, strict=True) if b.terms]
    return Expression.collect(term for part in parts for term in part.terms)


def mirrored(expression: Expression, signs: dict[Atom, int]) -> Expression:
    """The expression with the signs of some variables reversed, at every site."""

    def turned(atom: Atom) -> Expression | None:
        sign = signs.get(atom.value) if isinstance(atom, PathAtom) else None
        return Expression.of(atom).scaled(sign) if sign is not None else None

    return expression.substitute(turned)
