"""Expressions as notation that parses back to themselves, and as LaTeX."""

from __future__ import annotations

import re
from fractions import Fraction

from quarterturn.actions.expression import (
    Atom,
    Cases,
    Compound,
    Expression,
    Function,
    Monomial,
    PathAtom,
    Power,
    Symbol,
    Tabulated,
)
from quarterturn.notation.symbols import COORDINATES, LATEX_NAMES

LATEX_FUNCTIONS = frozenset({"exp", "log", "sin", "cos", "tan", "sinh", "cosh", "tanh"})


# --- notation ---------------------------------------------------------------------------------------------------
def notation(expression: Expression) -> str:
    """Canonical notation of an expression; parses back to an equal one."""
    if not expression.terms:
        return "0"
    parts: list[str] = []
    for monomial, coefficient in expression.terms:
        text = _monomial(monomial, abs(coefficient))
        if parts:
            parts.append(("- " if coefficient < 0 else "+ ") + text)
        else:
            parts.append(("-" if coefficient < 0 else "") + text)
    return " ".join(parts)


def _monomial(monomial: Monomial, coefficient: Fraction) -> str:
    factors = [_raised(atom, power) for atom, power in monomial]
    if coefficient == 1 and factors:
        return " ".join(factors)
    number = str(coefficient.numerator)
    if coefficient.denominator != 1:
        number += f"/{coefficient.denominator}"
    return " ".join([number, *factors])


def _raised(atom: Atom, power: int) -> str:
    if power != 1 and isinstance(atom, PathAtom) and atom.order and atom.direction:
        return f"({_atom(atom)})^{power}"
    if isinstance(atom, Power):
        value = atom.exponent.constant
        exponent = f"({notation(atom.exponent.scaled(power))})" if value is None else _exponent(value * power)
        return f"({notation(atom.base)})^{exponent}"
    return _atom(atom) + ("" if power == 1 else f"^{power}")


def _exponent(value: Fraction) -> str:
    return str(value.numerator) if value.denominator == 1 else f"({value.numerator}/{value.denominator})"


def _atom(atom: Atom) -> str:
    match atom:
        case Symbol():
            return atom.name
        case PathAtom():
            return _path_atom(atom)
        case Function():
            return f"{atom.name}({notation(atom.argument)})"
        case Cases():
            return _cases(atom)
        case Tabulated():
            points = ", ".join(f"[{decimal(x)}, {decimal(y)}]" for x, y in atom.points)
            slope = "'" * atom.order
            return f"table{slope}([{points}], {notation(atom.argument)}, {atom.interpolation})"
    raise AssertionError(atom)


def _path_atom(atom: PathAtom) -> str:
    text = atom.name + (f"[{atom.component}]" if atom.component else "")
    if atom.neighbour:
        text += f"({'+' if atom.neighbour > 0 else '-'}{COORDINATES[abs(atom.neighbour) - 1]})"
    if atom.part:
        text = f"{atom.part.capitalize()}({text})"
    if not atom.order:
        return text
    return text + "'" * atom.order if atom.direction == 0 else f"d_{COORDINATES[atom.direction]} {text}"


def _cases(atom: Cases) -> str:
    pieces = [
        f"{notation(value)} where {' and '.join(f'{notation(f)} {sign} 0' for f, sign in conditions)}"
        for conditions, value in atom.branches
    ]
    return f"{{{', '.join(pieces)}, {notation(atom.otherwise)} otherwise}}"


def decimal(value: Fraction) -> str:
    """A rational number as notation: a decimal where it is one of double precision, else a quotient."""
    near = float(value)
    if Fraction(repr(near)) == value:
        return repr(near).removesuffix(".0")
    return f"{value.numerator}/{value.denominator}"


# --- LaTeX ------------------------------------------------------------------------------------------------------
def latex(expression: Expression) -> str:
    """An expression typeset, without dollar signs: derivatives first, then by ascending degree in the paths."""
    if not expression.terms:
        return "0"
    parts: list[str] = []
    for monomial, coefficient in sorted(expression.terms, key=_typeset_order):
        text = _typeset(monomial, abs(coefficient))
        sign = "-" if coefficient < 0 else "+" if parts else ""
        parts.append(f"{sign} {text}" if parts else sign + text)
    return " ".join(parts)


def _typeset_order(term: tuple[Monomial, Fraction]) -> tuple:
    monomial, _ = term
    derivatives = sum(p for a, p in monomial if isinstance(a, PathAtom) and a.order)
    degree = sum(p for a, p in monomial if isinstance(a, PathAtom) and not a.order)
    return (-derivatives, degree, tuple((a.key, p) for a, p in monomial))


def _typeset(monomial: Monomial, coefficient: Fraction) -> str:
    ordered = sorted(monomial, key=lambda item: (isinstance(item[0], Compound), 0))
    ordered = sorted(ordered, key=lambda item: isinstance(item[0], PathAtom) or _mentions_path(item[0]))
    above = [_typeset_raised(a, p) for a, p in ordered if p > 0]
    below = [_typeset_raised(a, -p) for a, p in ordered if p < 0 and not isinstance(a, Power)]
    above += [_typeset_raised(a, p) for a, p in ordered if p < 0 and isinstance(a, Power)]
    top, bottom = coefficient.numerator, coefficient.denominator
    if not below:
        number = "" if coefficient == 1 and above else str(top) if bottom == 1 else rf"\tfrac{{{top}}}{{{bottom}}}"
        return r"\,".join(part for part in (number, *above) if part)
    numerator = r"\,".join(([str(top)] if top != 1 or not above else []) + above)
    denominator = r"\,".join(([str(bottom)] if bottom != 1 else []) + below)
    return rf"\frac{{{numerator}}}{{{denominator}}}"


def _mentions_path(atom: Atom) -> bool:
    return bool(Expression.of(atom).paths)


def _typeset_raised(atom: Atom, power: int) -> str:
    if isinstance(atom, Power):
        return _typeset_power(atom, power)
    if isinstance(atom, Function) and atom.name in LATEX_FUNCTIONS and power > 1:
        return rf"\{atom.name}^{{{power}}}\left({latex(atom.argument)}\right)"
    text = _typeset_atom(atom)
    if power != 1 and isinstance(atom, PathAtom) and (atom.part or atom.direction):
        return rf"\left({text}\right)^{{{power}}}"
    return text if power == 1 else rf"{text}^{{{power}}}"


def _typeset_power(atom: Power, power: int) -> str:
    value, base = atom.exponent.constant, latex(atom.base)
    if value == Fraction(1, 2) and power == 1:
        return rf"\sqrt{{{base}}}"
    if value is not None:
        total = value * power
        if total < 0:
            down = "" if total == -1 else _typeset_exponent(-total)
            inner = rf"\sqrt{{{base}}}" if total == Fraction(-1, 2) else rf"\left({base}\right){down}"
            return rf"\frac{{1}}{{{base if total == -1 else inner}}}"
        return rf"\left({base}\right){_typeset_exponent(total)}"
    return rf"\left({base}\right)^{{{latex(atom.exponent.scaled(power))}}}"


def _typeset_exponent(value: Fraction) -> str:
    return rf"^{{{value.numerator}}}" if value.denominator == 1 else rf"^{{{value.numerator}/{value.denominator}}}"


def _typeset_atom(atom: Atom) -> str:
    match atom:
        case Symbol(kind="bracket"):
            return placeholder(int(atom.name))
        case Symbol():
            return "i" if atom.name == "I" and atom.kind == "constant" else typeset_name(atom.name)
        case PathAtom():
            return _typeset_path(atom)
        case Cases():
            return _typeset_cases(atom)
        case Tabulated():
            slope = "'" * atom.order
            return rf"\mathrm{{table}}{slope}\left({latex(atom.argument)}\right)"
        case Function(name="abs"):
            return rf"\left|{latex(atom.argument)}\right|"
        case Function(name="mean"):
            return rf"\overline{{{latex(atom.argument)}}}"
        case Function(name="charge"):
            return "Q"
        case Function():
            return rf"\{atom.name}\left({latex(atom.argument)}\right)"
    raise AssertionError(atom)


def _typeset_path(atom: PathAtom) -> str:
    name = typeset_name(atom.name)
    if atom.order and atom.direction == 0:
        name = rf"\dot{{{name}}}"
    name += f"_{{{atom.component}}}" if atom.component else ""
    if atom.neighbour:
        sign = "+" if atom.neighbour > 0 else "-"
        name += rf"(x{sign}\hat{{{COORDINATES[abs(atom.neighbour) - 1]}}})"
    if atom.part:
        name = rf"\mathrm{{{atom.part.capitalize()}}}\,{name}"
    return rf"\partial_{COORDINATES[atom.direction]} {name}" if atom.order and atom.direction else name


def _typeset_cases(atom: Cases) -> str:
    rows = []
    for conditions, value in atom.branches:
        tests = [latex(f) + (" < 0" if sign == "<" else r" \le 0") for f, sign in conditions]
        rows.append(latex(value) + " & " + r",\ ".join(tests))
    rows.append(latex(atom.otherwise) + r" & \text{otherwise}")
    return r"\begin{cases} " + r" \\ ".join(rows) + r" \end{cases}"


def typeset_name(name: str) -> str:
    """A name in LaTeX: Greek letters, trailing digits as an index, longer words upright."""
    match = re.fullmatch(r"([A-Za-z]+?)_?(\d*|[A-Za-z0-9]*)", name)
    stem, index = (match.group(1), match.group(2)) if match else (name, "")
    if name in LATEX_NAMES or (match and not index.isdigit() and "_" not in name):
        stem, index = name, ""
    letter = LATEX_NAMES.get(stem, stem if len(stem) == 1 else rf"\mathrm{{{stem}}}".replace("_", r"\_"))
    return letter + (f"_{{{index}}}" if index else "")


def placeholder(number: int) -> str:
    """What stands in LaTeX for a bracket of a measurement until it is filled in."""
    return rf"\bracket{{{number}}}"
