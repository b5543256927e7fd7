"""Polynomials of several variables that are decided exactly: over the rationals, without a tolerance.

Three procedures. Variables that enter through the square of one vector only are one radius. A form that is quadratic in
the squares of its variables is bounded below if its matrix is copositive (Hadeler, Linear Algebra Appl. 49 (1983) 79;
for potentials of several scalars Kannike, Eur. Phys. J. C 72 (2012) 2093). A form in two variables is a polynomial in
one, whose real roots of odd order are counted by Sturm chains (Basu, Pollack and Roy, Algorithms in Real Algebraic
Geometry, 2006, section 2.2).
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import combinations, pairwise

from quarterturn.actions.expression import Expression, PathAtom

Polynomial = list[Fraction]  # coefficients, the lowest first, the last not zero
MOST_COPOSITIVE = 8  # variables; the test looks at all their subsets
HIGHEST_DEGREE = 24  # of a form in two variables


# --- radii ------------------------------------------------------------------------------------------------------
def radial(potential: Expression, group: Sequence[PathAtom]) -> Expression | None:
    """The potential with the vector replaced by its first component, where it depends on the length only; else None."""
    first, *others = group
    zero = Expression(())
    along = potential.substitute(lambda a: zero if a in others else None)
    if any(p % 2 for m, _ in along.terms for a, p in m if a == first):
        return None
    square = sum((Expression.of(a, 2) for a in group), zero)
    back = zero
    for monomial, coefficient in along.terms:
        power = next((p for a, p in monomial if a == first), 0)
        rest = tuple((a, p) for a, p in monomial if a != first)
        back = back + Expression(((rest, coefficient),)) * square ** (power // 2)
    return along if back == potential else None


# --- copositive matrices ----------------------------------------------------------------------------------------
def least_copositive(matrix: Sequence[Sequence[Fraction]]) -> tuple[str, tuple[Fraction, ...] | None]:
    """positive | zero | negative: the sign of the least of x.M.x over x >= 0, x != 0; and such an x where not positive.

    A matrix fails to be strictly copositive exactly where some principal submatrix has M y = s (1, …, 1) with s <= 0
    and y > 0, or is singular with a positive null vector; both are looked for on all subsets.
    """
    size = len(matrix)
    worst: tuple[str, tuple[Fraction, ...] | None] = ("positive", None)
    for count in range(1, size + 1):
        for rows in combinations(range(size), count):
            found = _on_face([[matrix[i][j] for j in rows] for i in rows])
            if found is None:
                continue
            sign, y = found
            x = tuple(y[rows.index(i)] if i in rows else Fraction(0) for i in range(size))
            if sign == "negative":
                return sign, x
            worst = ("zero", x)
    return worst


def _on_face(matrix: list[list[Fraction]]) -> tuple[str, list[Fraction]] | None:
    """A stationary point of x.M.x in the inside of a face where it is not positive."""
    ones = _solved(matrix, [Fraction(1)] * len(matrix))
    if ones is not None and (all(v > 0 for v in ones) or all(v < 0 for v in ones)):
        return None if ones[0] > 0 else ("negative", [-v for v in ones])
    null = _null_vector(matrix)
    if null is not None and (all(v > 0 for v in null) or all(v < 0 for v in null)):
        return "zero", [abs(v) for v in null]
    return None


def _solved(matrix: list[list[Fraction]], right: list[Fraction]) -> list[Fraction] | None:
    """The solution of M x = b, None where M is singular."""
    rows = [[*row, b] for row, b in zip(matrix, right, strict=True)]
    size = len(rows)
    for i in range(size):
        pivot = next((k for k in range(i, size) if rows[k][i]), None)
        if pivot is None:
            return None
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [v / rows[i][i] for v in rows[i]]
        for k in range(size):
            if k != i and rows[k][i]:
                rows[k] = [a - rows[k][i] * b for a, b in zip(rows[k], rows[i], strict=True)]
    return [row[-1] for row in rows]


def _null_vector(matrix: list[list[Fraction]]) -> list[Fraction] | None:
    """The null vector where there is exactly one direction of them."""
    size = len(matrix)
    rows, pivots = [list(row) for row in matrix], []
    done = 0
    for column in range(size):
        pivot = next((k for k in range(done, size) if rows[k][column]), None)
        if pivot is None:
            continue
        rows[done], rows[pivot] = rows[pivot], rows[done]
        rows[done] = [v / rows[done][column] for v in rows[done]]
        for k in range(size):
            if k != done and rows[k][column]:
                rows[k] = [a - rows[k][column] * b for a, b in zip(rows[k], rows[done], strict=True)]
        pivots.append(column)
        done += 1
    free = [c for c in range(size) if c not in pivots]
    if len(free) != 1:
        return None
    found = [Fraction(0)] * size
    found[free[0]] = Fraction(1)
    for row, column in zip(rows, pivots, strict=False):
        found[column] = -row[free[0]]
    return found


# --- forms in two variables -------------------------------------------------------------------------------------
def least_binary(coefficients: Polynomial) -> str:
    """positive | zero | negative: the sign of the least of sum c_k x^k y^(n-k) on the circle, n even."""
    degree = len(coefficients) - 1
    polynomial = _trimmed(coefficients)
    at_infinity = coefficients[degree]  # the form at (1, 0)
    if not polynomial or at_infinity < 0 or coefficients[0] < 0:
        return "zero" if not polynomial else "negative"
    if polynomial[-1] < 0 or (len(polynomial) - 1) % 2:
        return "negative"
    if _odd_roots(polynomial):
        return "negative"
    touches = at_infinity == 0 or _real_roots(polynomial) > 0
    return "zero" if touches else "positive"


def _trimmed(polynomial: Polynomial) -> Polynomial:
    kept = list(polynomial)
    while kept and kept[-1] == 0:
        kept.pop()
    return kept


def _slope(p: Polynomial) -> Polynomial:
    return [k * c for k, c in enumerate(p)][1:]


def _remainder(a: Polynomial, b: Polynomial) -> Polynomial:
    rest = list(a)
    while len(rest) >= len(b):
        factor, shift = rest[-1] / b[-1], len(rest) - len(b)
        rest = [c - (factor * b[i - shift] if i >= shift else 0) for i, c in enumerate(rest)][:-1]
        rest = _trimmed(rest)
        if not rest:
            break
    return rest


def _quotient(a: Polynomial, b: Polynomial) -> Polynomial:
    rest, found = list(a), [Fraction(0)] * max(len(a) - len(b) + 1, 1)
    for shift in range(len(a) - len(b), -1, -1):
        factor = rest[shift + len(b) - 1] / b[-1]
        found[shift] = factor
        for i, c in enumerate(b):
            rest[shift + i] -= factor * c
    return _trimmed(found)


def _common(a: Polynomial, b: Polynomial) -> Polynomial:
    while b:
        a, b = b, _remainder(a, b)
    return [c / a[-1] for c in a]


def _real_roots(p: Polynomial) -> int:
    """Distinct real roots, by the changes of sign of the Sturm chain at both ends."""
    chain = [p, _slope(p)]
    while chain[-1]:
        chain.append([-c for c in _remainder(chain[-2], chain[-1])])
    chain.pop()

    right = [q[-1] > 0 for q in chain]
    left = [(q[-1] > 0) == ((len(q) - 1) % 2 == 0) for q in chain]
    before, after = (sum(a != b for a, b in pairwise(signs)) for signs in (left, right))
    return before - after


def _odd_roots(p: Polynomial) -> int:
    """Distinct real roots of odd order: those of the factors of odd order in the square-free decomposition (Yun)."""
    total, order = 0, 1
    divisor = _common(p, _slope(p))
    simple = _quotient(p, divisor)
    while len(simple) > 1:
        shared = _common(simple, divisor) if len(divisor) > 1 else [Fraction(1)]
        factor = _quotient(simple, shared)
        if order % 2 and len(factor) > 1:
            total += _real_roots(factor)
        simple, divisor = shared, _quotient(divisor, shared)
        order += 1
    return total
