"""The polynomial action of one path as an oscillator and its perturbation, with every number exact.

A coupling that was given as 0.1 stands for 1/10: the decimal number that was written, not the float nearest to it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction

from quarterturn.actions.expression import Atom, Expression, PathAtom, Power, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.actions.printing import notation
from quarterturn.errors import SpectrumError
from quarterturn.imaginary.perturbation import PerturbedOscillator


def written(value: float) -> Fraction:
    """The decimal number that a float prints as."""
    return Fraction(repr(float(value)))


def perturbed_oscillator(
    euclidean: EuclideanAction, couplings: Mapping[str, float], coupling: str
) -> tuple[PerturbedOscillator, int]:
    """The action as a polynomial in its path and in coupling^(1/unit); and `unit`.

    Raises
    ------
    SpectrumError
        More than one path, an angle, a potential that is no polynomial with rational coefficients, a mass that
        depends on the coupling, or no oscillator at zero coupling.
    """
    if len(euclidean.variables) != 1 or euclidean.dimension != 1:
        raise SpectrumError(
            f"a series is made for one path; here are {len(euclidean.variables)} degrees of freedom: sample them, or "
            "solve for the levels"
        )
    if euclidean.periods[0] is not None:
        raise SpectrumError("a series is made for a path on the line, not for an angle; its levels can be solved for")
    (path,) = euclidean.variables
    values = {name: written(value) for name, value in couplings.items() if name != coupling}
    mass = _exact(euclidean.mass[0][0], values).constant
    if mass is None:
        raise SpectrumError(f"the mass must be a rational number that does not depend on {coupling}")
    powers = [(_powers(monomial, path, coupling), c) for monomial, c in _exact(euclidean.potential, values).terms]
    unit = math.lcm(*(p.denominator for (p, _), _ in powers)) if powers else 1
    terms: dict[tuple[int, int], Fraction] = {}
    for (p, k), c in powers:
        key = (int(p * unit), k)
        terms[key] = terms.get(key, Fraction(0)) + c
    if not any(p for p, _ in terms):
        raise SpectrumError(f"the potential does not depend on {coupling}: there is no series in it")
    return PerturbedOscillator(mass, terms), unit


def _exact(expression: Expression, values: Mapping[str, Fraction]) -> Expression:
    """With all couplings but one replaced by their numbers."""

    def number(atom: Atom) -> Expression | None:
        if isinstance(atom, Symbol) and atom.kind == "coupling" and atom.name in values:
            return Expression.number(values[atom.name])
        return None

    try:
        return expression.substitute(number)
    except ZeroDivisionError:
        raise SpectrumError("a coefficient of the potential is divided by a coupling that is zero") from None


def _powers(monomial: tuple[tuple[Atom, int], ...], path: PathAtom, coupling: str) -> tuple[Fraction, int]:
    """Power of the coupling and of the path in one term."""
    symbol = Symbol("coupling", coupling)
    of_coupling, of_path = Fraction(0), 0
    for atom, power in monomial:
        if atom == path:
            of_path += power
        elif atom == symbol:
            of_coupling += power
        elif isinstance(atom, Power) and atom.base == Expression.of(symbol) and atom.exponent.constant is not None:
            of_coupling += power * atom.exponent.constant
        else:
            raise SpectrumError(
                f"a series needs a polynomial with rational coefficients; {notation(Expression.of(atom))} is none"
            )
    if of_path < 0 or of_coupling < 0:
        what = notation(Expression(((monomial, Fraction(1)),)))
        raise SpectrumError(f"a series needs a polynomial in the path and in {coupling}; {what} is none")
    return of_coupling, of_path
