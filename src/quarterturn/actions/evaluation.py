"""Numbers and arrays for the atoms of an expression, with functions from numpy or jax.numpy."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

from quarterturn.actions.atoms import IMAGINARY, PI, Atom, Cases, Compound, Function, PathAtom, Power, Tabulated
from quarterturn.actions.tables import interpolated

LOOKED_UP = ("mean", "charge")  # functions of the whole path, which only a measurement knows


def depends_on_path(atom: Atom) -> bool:
    if isinstance(atom, PathAtom):
        return True
    return isinstance(atom, Compound) and any(part.paths for part in atom.inner)


def atom_value(atom: Atom, find: Callable[[Atom], Any], module: Any) -> Any:
    """The value of one atom; `find` knows symbols and paths."""
    if atom == PI:
        return module.pi
    if atom == IMAGINARY:
        return 1j
    match atom:
        case Function() if atom.name not in LOOKED_UP:
            return getattr(module, atom.name)(atom.argument.evaluate(find, module))
        case Power():
            return _power(atom, find, module)
        case Cases():
            return _cases(atom, find, module)
        case Tabulated():
            x = atom.argument.evaluate(find, module)
            return interpolated(atom.points, atom.interpolation, atom.order, x, module)
    return find(atom)


def _power(atom: Power, find: Callable[[Atom], Any], module: Any) -> Any:
    base = atom.base.evaluate(find, module)
    value = atom.exponent.constant
    if value == Fraction(1, 2):
        return module.sqrt(base)
    if value == -1:
        return 1.0 / base
    return base ** (float(value) if value is not None else atom.exponent.evaluate(find, module))


def _cases(atom: Cases, find: Callable[[Atom], Any], module: Any) -> Any:
    result = atom.otherwise.evaluate(find, module)
    for conditions, value in reversed(atom.branches):
        holds: Any = True
        for f, sign in conditions:
            number = f.evaluate(find, module)
            holds = holds & ((number < 0) if sign == "<" else (number <= 0))
        result = module.where(holds, value.evaluate(find, module), result)
    return result
