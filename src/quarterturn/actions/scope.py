"""Names in scope, and the reading of a formula as a canonical expression.

A vector path stands for the tuple of its components; sums of vectors, multiples of them and dot products are formed
here, and a vector where a number is needed is an error with its repair.
"""

from __future__ import annotations

import cmath
import difflib
import math
from collections.abc import Callable
from dataclasses import dataclass, field

from quarterturn.actions.expression import ONE, PI, ZERO, Expression, Function, PathAtom, Symbol, apply
from quarterturn.actions.model import Path
from quarterturn.errors import ActionError, QuarterturnError, Span
from quarterturn.notation.symbols import FUNCTIONS, LATER, MEASURES
from quarterturn.notation.tree import (
    Assignment,
    Average,
    Call,
    Component,
    Dot,
    Factorial,
    Mean,
    Name,
    Negative,
    Node,
    Number,
    Prime,
    Product,
    Quotient,
    Raised,
    Sum,
)

LARGEST_FACTORIAL = 20
DEEPEST_DEFINITION = 20
PYTHON_MODULES = frozenset({"np", "numpy", "math", "jnp", "scipy", "sp"})
Value = Expression | tuple[Expression, ...]


@dataclass
class Scope:
    """What a formula may mention. `used` collects the couplings that it did."""

    text: str
    paths: dict[str, Path]
    couplings: dict[str, Span]
    definitions: dict[str, Assignment]
    momenta: dict[str, tuple[PathAtom, ...]] = field(default_factory=dict)
    geometry: tuple[str, ...] = ()
    average: Callable[[Average], Expression] | None = None  # what an angle bracket means here
    special: Callable[[Call], Expression] | None = None  # gap, binder, charge
    whole_path: bool = False  # whether `mean f` may stand here
    used: set[str] = field(default_factory=set)
    notes: list[tuple[str, Span]] = field(default_factory=list)
    depth: int = 0
    local: dict[str, Value] = field(default_factory=dict)
    known: dict[str, Value] = field(default_factory=dict)  # definitions without arguments that have been read

    def error(self, message: str, span: Span, repair: str | None = None) -> ActionError:
        return ActionError(message, span=span, text=self.text, repair=repair)

    # --- entry ----------------------------------------------------------------------------------------------
    def number(self, node: Node) -> Expression:
        """A formula whose value is one number."""
        value = self.value(node)
        if isinstance(value, tuple):
            raise self.error(
                "a vector stands where a number is needed: form a dot product or take a component", node.span,
                _dotted(node),
            )  # fmt: skip
        return value

    def value(self, node: Node) -> Value:
        """A formula, number or vector. Complaints of the algebra get the place of the formula."""
        try:
            return self._value(node)
        except QuarterturnError as trouble:
            if trouble.span is None:
                trouble.span, trouble.text = node.span, self.text
            raise
        except ZeroDivisionError:
            raise self.error("division by zero", node.span) from None

    def _value(self, node: Node) -> Value:
        match node:
            case Number():
                return Expression.number(node.value)
            case Name():
                return self.name(node)
            case Negative():
                return _scaled(self.value(node.body), Expression.number(-1))
            case Sum():
                return self.sum(node)
            case Product():
                return self.product(node)
            case Quotient():
                return self.quotient(node)
            case Dot():
                return self.dot(node)
            case Raised():
                return self.raised(node)
            case Prime():
                return self.prime(node)
            case Component():
                return self.component(node)
            case Factorial():
                return self.factorial(node)
            case Call():
                return self.call(node)
            case Average():
                if self.average is None:
                    raise self.error("an expectation value belongs into 'measure', not into the action", node.span)
                return self.average(node)
            case Mean():
                if not self.whole_path:
                    raise self.error("'mean' stands inside an expectation value, as in <(mean q)^2>", node.span)
                return Expression.of(Function("mean", self.number(node.body)))
        raise self.error("this is not available yet", node.span)

    # --- names ----------------------------------------------------------------------------------------------
    def name(self, node: Name) -> Value:
        name = node.name
        if name in self.local:
            return self.local[name]
        if name in self.paths:
            return _atoms(self.paths[name].atoms)
        if name in self.momenta:
            return _atoms(self.momenta[name])
        if name == "pi":
            return Expression.of(PI)
        if name in self.definitions:
            definition = self.definitions[name]
            if definition.parameters:
                raise self.error(f"{name} needs its arguments: {name}({', '.join(definition.parameters)})", node.span)
            return self.inside(definition, {}, node.span)
        if name in self.couplings:
            self.used.add(name)
            return Expression.of(Symbol("coupling", name))
        if name in self.geometry:
            return Expression.of(Symbol("geometry", name))
        raise self.undeclared(node)

    def undeclared(self, node: Name) -> ActionError:
        name = node.name
        known = [*self.paths, *self.momenta, *self.couplings, *self.definitions, *self.geometry]
        near = difflib.get_close_matches(name, known, n=1, cutoff=0.6)
        if name in FUNCTIONS and self.follows(node.span).startswith(("^", "²", "³")):
            return self.error(f"a power stands behind the whole function, as in {name}(x)^2", node.span, f"{name}(…)^2")
        if name in FUNCTIONS:
            return self.error(f"{name} is a function and needs its argument in brackets", node.span, f"{name}(…)")
        if name in MEASURES:
            return self.error(f"{name} needs its argument, as in {MEASURES[name].rsplit(': ', 1)[-1]}", node.span)
        if name in LATER:
            return self.error(LATER[name], node.span)
        if name == "t":
            return self.error("an action that depends on time explicitly is not available yet", node.span)
        if name in ("i", "I", "j"):
            return self.error(
                "the action is written in real time and has no i: the turn to imaginary time adds it", node.span
            )
        if name == "hbar":
            return self.error("hbar = 1 in the units of this notation: leave it out", node.span)
        if name in self.derivatives():
            path = self.derivatives()[name]
            return self.error(
                f"{name} is not declared; the derivative in time is {path}' or d_t {path}", node.span, f"{path}'"
            )
        if name == "d" or name.startswith("d_"):
            path = next(iter(self.paths), "q")
            return self.error(
                f"a contraction such as (d {path})^2 belongs to a field; a path has one direction, time: {path}'^2",
                node.span, f"{path}'^2",
            )  # fmt: skip
        applied = next((f for f in FUNCTIONS if name.startswith(f) and name[len(f) :] in known), None)
        if applied:
            inner = name[len(applied) :]
            return self.error(f"{name} is not declared; a function has brackets", node.span, f"{applied}({inner})")
        split = _split_in_known(name, known)
        if name in PYTHON_MODULES:
            return self.error(f"{name} is a module of Python; functions stand alone, as in cosh(q)", node.span)
        if split:
            return self.error(f"{name} is not declared; a product needs a space between its factors", node.span, split)
        if near:
            return self.error(f"{name} is not declared; there is {near[0]}", node.span, near[0])
        if self.is_applied(node.span):
            functions = ", ".join(FUNCTIONS)
            return self.error(f"{name} is no function of the notation; there are {functions}", node.span)
        return self.error(
            f"{name} is not declared: a coupling needs a value, such as {name} = 1", node.span, f"{name} = 1"
        )

    def derivatives(self) -> dict[str, str]:
        """Other ways to write a velocity, and of which path: dq, qdot, q_dot, dt."""
        table = {word: path for path in self.paths for word in (f"d{path}", f"{path}dot", f"{path}_dot", f"{path}_t")}
        return table | dict.fromkeys(("dt",), next(iter(self.paths), "q"))

    def is_applied(self, span: Span) -> bool:
        """Whether a bracket follows at once, as after a function."""
        return self.follows(span).startswith("(")

    def follows(self, span: Span) -> str:
        """The rest of the line behind a place."""
        return self.text.split("\n")[span.end_line - 1][span.end_column - 1 :]

    def inside(self, definition: Assignment, arguments: dict[str, Value], span: Span) -> Value:
        """The body of a definition, with its parameters bound."""
        if self.depth >= DEEPEST_DEFINITION:
            raise self.error(
                f"{definition.name} is defined through itself, or through more than {DEEPEST_DEFINITION} others", span
            )
        if not arguments and definition.name in self.known:
            return self.known[definition.name]
        kept, self.local, self.depth = self.local, arguments, self.depth + 1
        try:
            value = self.value(definition.body)
        finally:
            self.local, self.depth = kept, self.depth - 1
        if not arguments:
            self.known[definition.name] = value
        return value

    # --- arithmetic -----------------------------------------------------------------------------------------
    def sum(self, node: Sum) -> Value:
        values = [self.value(term) for term in node.terms]
        vectors = [v for v in values if isinstance(v, tuple)]
        if not vectors:
            return Expression.collect(t for v in values for t in v.terms)  # type: ignore[union-attr]
        if len(vectors) < len(values) or len({len(v) for v in vectors}) > 1:
            raise self.error("a sum of a vector and a number, or of vectors of different length", node.span)
        return tuple(sum((v[i] for v in vectors), ZERO) for i in range(len(vectors[0])))

    def product(self, node: Product) -> Value:
        left, right = self.value(node.left), self.value(node.right)
        if isinstance(left, tuple) and isinstance(right, tuple):
            raise self.error("two vectors side by side: a dot product is written with a dot", node.span, _dotted(node))
        if isinstance(right, tuple):
            assert isinstance(left, Expression)
            return _scaled(right, left)
        return _scaled(left, right)

    def quotient(self, node: Quotient) -> Value:
        below = self.number(node.right)
        if node.followed and isinstance(node.right, Name):
            self.notes.append(
                (f"a/b c is read as (a/b) c: what follows {node.right.name} stands above the line", node.span)
            )
        return _scaled(self.value(node.left), below.inverse())

    def dot(self, node: Dot) -> Expression:
        left, right = self.value(node.left), self.value(node.right)
        if isinstance(left, tuple) and isinstance(right, tuple):
            if len(left) != len(right):
                raise self.error(f"a dot product of {len(left)} with {len(right)} components", node.span)
            return sum((a * b for a, b in zip(left, right, strict=True)), ZERO)
        if isinstance(left, tuple) or isinstance(right, tuple):
            raise self.error("a dot product needs a vector on both sides", node.span)
        return left * right

    def raised(self, node: Raised) -> Expression:
        base, exponent = self.value(node.base), self.number(node.exponent)
        if isinstance(base, tuple):
            if exponent.constant == 2:
                return sum((c * c for c in base), ZERO)
            raise self.error("only the square of a vector has a meaning", node.span, _dotted(node))
        if exponent.paths:
            raise self.error("a path in an exponent: write exp(…)", node.span)
        return base.power(exponent)

    def prime(self, node: Prime) -> Value:
        body = self.value(node.base)
        values = body if isinstance(body, tuple) else (body,)
        turned = []
        for value in values:
            atoms = [a for m, c in value.terms for a, p in m]
            if (
                len(value.terms) != 1
                or len(atoms) != 1
                or not isinstance(atoms[0], PathAtom)
                or value != Expression.of(atoms[0])
            ):
                raise self.error("a prime is the time derivative of a path, as in q'", node.span)
            atom = atoms[0]
            if atom.order >= 1:
                raise self.error(
                    "second time derivatives in the action are not available: integrate by parts", node.span
                )
            turned.append(Expression.of(atom.derivative()))
        return tuple(turned) if isinstance(body, tuple) else turned[0]

    def component(self, node: Component) -> Expression:
        body = self.value(node.base)
        if not isinstance(body, tuple):
            raise self.error("only a vector path such as r[2](t) has components", node.span)
        (index,) = node.indices
        assert isinstance(index, int)
        if not 1 <= index <= len(body):
            raise self.error(f"component {index} of a vector of {len(body)}: components count from 1", node.span)
        return body[index - 1]

    def factorial(self, node: Factorial) -> Expression:
        value = self.number(node.base).constant
        if value is None or value.denominator != 1 or not 0 <= value <= LARGEST_FACTORIAL:
            raise self.error(f"a factorial of a whole number from 0 to {LARGEST_FACTORIAL}", node.span)
        return Expression.number(math.factorial(int(value)))

    def call(self, node: Call) -> Value:
        name = node.name
        if name in LATER:
            raise self.error(LATER[name], node.span)
        if name in self.paths or name in self.momenta:
            return self.name(Name(name, node.span))
        if name in FUNCTIONS:
            if len(node.arguments) != 1:
                raise self.error(f"{name} takes one argument, got {len(node.arguments)}", node.span)
            return apply(name, self.number(node.arguments[0]))
        if name in self.definitions:
            definition = self.definitions[name]
            if len(definition.parameters) != len(node.arguments):
                raise self.error(
                    f"{name} takes {len(definition.parameters)} arguments, got {len(node.arguments)}", node.span
                )
            bound = {p: self.value(a) for p, a in zip(definition.parameters, node.arguments, strict=True)}
            return self.inside(definition, bound, node.span)
        if self.special is not None:
            return self.special(node)
        raise self.error(f"{name}(…) is a measurement and belongs after 'measure'", node.span)


def _atoms(atoms: tuple[PathAtom, ...]) -> Value:
    if len(atoms) == 1 and atoms[0].component == 0:
        return Expression.of(atoms[0])
    return tuple(Expression.of(a) for a in atoms)


def _scaled(value: Value, factor: Expression) -> Value:
    if isinstance(value, tuple):
        return tuple(v * factor for v in value)
    return value * factor if factor != ONE else value


def _dotted(node: Node) -> str | None:
    match node:
        case Raised(base=Name() as base):
            return f"{base.name}.{base.name}"
        case Product(left=Name() as left, right=Name() as right):
            return f"{left.name}.{right.name}"
        case Name():
            return f"{node.name}.{node.name}"
    return None


def _split_in_known(name: str, known: list[str]) -> str | None:
    for cut in range(1, len(name)):
        if name[:cut] in known and name[cut:] in known:
            return f"{name[:cut]} {name[cut:]}"
    return None


def constant_value(scope: Scope, node: Node, what: str) -> float:
    """The value of a formula of numbers only. Raises ActionError naming `what`."""
    expression = scope.number(node)
    if expression.paths or any(s.kind != "constant" for s in expression.symbols):
        raise scope.error(f"{what} must be a number, without paths and couplings", node.span)
    try:
        value = complex(expression.evaluate({}, _MATH))
    except (ValueError, OverflowError, ZeroDivisionError):
        value = complex("nan")
    if value.imag or not cmath.isfinite(value):
        raise scope.error(f"{what} is no finite real number", node.span)
    return value.real


class _Math:
    """Functions of numbers for `Expression.evaluate`, without NumPy."""

    pi = math.pi

    def __getattr__(self, name: str) -> Callable[[float], float]:
        return abs if name == "abs" else getattr(math, name)


_MATH = _Math()
