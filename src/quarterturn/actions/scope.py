"""From syntax trees to canonical expressions: names are looked up, vectors, indices and definitions are resolved.

Formulas are evaluated on `Expression`s only; no text and no tree ever reaches Python's evaluator.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from functools import lru_cache

from quarterturn.actions.effort import spend
from quarterturn.actions.expression import IMAGINARY, ONE, PI, Expression, Function, PathAtom, Symbol, apply
from quarterturn.actions.indices import IndexRules, has_index
from quarterturn.actions.model import Path
from quarterturn.actions.pieces import cases, table
from quarterturn.actions.summation import along, component, gradient, neighbour, primed, sum_over, summed
from quarterturn.actions.unknown import applied_to_nothing, closest, refuse_other_places
from quarterturn.actions.values import (
    Slopes,
    Value,
    added,
    conjugate,
    contracted_slopes,
    dotted,
    mapped,
    scaled,
)
from quarterturn.errors import ActionError, QuarterturnError, Span
from quarterturn.notation.symbols import COMPLEX, FUNCTIONS
from quarterturn.notation.tree import (
    Array,
    Assignment,
    Average,
    Call,
    Cases,
    Component,
    Derivative,
    Dot,
    Factorial,
    Gradient,
    Mean,
    Name,
    Negative,
    Neighbour,
    Node,
    Number,
    Prime,
    Product,
    Quotient,
    Raised,
    Sum,
    SumOver,
    Text,
)

LARGEST_FACTORIAL = 20
DEEPEST_DEFINITION = 20


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
    coordinates: tuple[str, ...] = ("t",)
    signs: tuple[int, ...] = (1,)  # of the metric, time first; all 1 where the action is Euclidean
    heights: bool = True  # whether indices must stand once up and once down
    tensors: dict[str, tuple[int, ...]] = field(default_factory=dict)  # arrays of couplings and their shapes
    sources: dict[str, Assignment] = field(default_factory=dict)
    bound: dict[str, int] = field(default_factory=dict)  # indices that have a value, from 0
    on_lattice: bool = False  # whether phi(+mu) may stand here
    in_source: bool = False  # whether coordinates are quantities here
    files: dict[str, str] = field(default_factory=dict)  # SHA-256 of the files of tables

    def error(self, message: str, span: Span, repair: str | None = None) -> ActionError:
        return ActionError(message, span=span, text=self.text, repair=repair)

    @property
    def rules(self) -> IndexRules:
        return IndexRules(self.bound, self.heights, self.error)

    @property
    def is_complex(self) -> bool:
        return any(path.kind == "complex" for path in self.paths.values())

    # --- entry ----------------------------------------------------------------------------------------------
    def formula(self, node: Node) -> Expression:
        """A whole formula whose value is one number, without an index left over."""
        if has_index(node):
            self.rules.closed(node)
        return self.number(node)

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
        value = self.any_value(node)
        if isinstance(value, Slopes):
            raise self.error("d phi, all derivatives together, stands squared or in a dot product", node.span)
        return value

    def any_value(self, node: Node) -> Value | Slopes:
        spend(1)
        try:
            return self._value(node)
        except QuarterturnError as trouble:
            if trouble.span is None:
                trouble.span, trouble.text = node.span, self.text
            raise
        except ZeroDivisionError:
            raise self.error("division by zero", node.span) from None

    def _value(self, node: Node) -> Value | Slopes:
        match node:
            case Number():
                return Expression.number(node.value)
            case Name():
                return self.name(node)
            case Negative():
                return scaled(self.value(node.body), Expression.number(-1))
            case Sum():
                return added([self.value(term) for term in node.terms])
            case Product() | Quotient() | Dot() | Raised():
                return summed(self, node)
            case Prime():
                return primed(self, node)
            case Derivative():
                return along(self, node)
            case Gradient():
                return gradient(self, node)
            case Component():
                return component(self, node)
            case Neighbour():
                return neighbour(self, node)
            case SumOver():
                return sum_over(self, node)
            case Factorial():
                return self.factorial(node)
            case Call():
                return self.call(node)
            case Cases():
                return cases(self, node)
            case Array() | Text():
                raise self.error("a list of numbers or a text stands in a table or behind the name of a coupling",
                                 node.span)  # fmt: skip
            case Average():
                if self.average is None:
                    raise self.error("an expectation value belongs into 'measure', not into the action", node.span)
                return self.average(node)
            case Mean():
                if not self.whole_path:
                    raise self.error("'mean' stands inside an expectation value, as in <(mean q)^2>", node.span)
                return mapped(self.value(node.body), lambda e: Expression.of(Function("mean", e)))

    # --- names ----------------------------------------------------------------------------------------------
    def name(self, node: Name) -> Value:
        name = node.name
        if name in self.local:
            return self.local[name]
        if name in self.paths:
            return _of_path(self.paths[name])
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
        if name in self.tensors:
            return self.whole_tensor(node)
        if name in self.sources:
            return self.source(name)
        if name in self.geometry:
            return Expression.of(Symbol("geometry", name))
        if self.in_source and name in self.coordinates:
            return Expression.of(Symbol("coordinate", name))
        if name == "i" and self.is_complex:
            return Expression.of(IMAGINARY)
        raise closest(self, node)

    def source(self, name: str) -> Expression:
        """J at the point. Its couplings count as used."""
        self.inside_source(name)
        return Expression.of(Symbol("source", name))

    def inside_source(self, name: str) -> Expression:
        """The body of a source, in the coordinates."""
        kept, self.in_source = self.in_source, True
        try:
            return self.formula(self.sources[name].body)
        finally:
            self.in_source = kept

    def whole_tensor(self, node: Name) -> Value:
        shape = self.tensors[node.name]
        if len(shape) > 1:
            raise self.error(f"{node.name} has {len(shape)} indices: write {node.name}[a, b]", node.span)
        return tuple(self.entry(node.name, (i,)) for i in range(shape[0]))

    def entry(self, name: str, indices: tuple[int, ...]) -> Expression:
        """One coupling of a symmetric tensor, indices from 0."""
        coupling = entry_name(name, sorted(i + 1 for i in indices))
        self.used.add(coupling)
        return Expression.of(Symbol("coupling", coupling))

    def inside(self, definition: Assignment, arguments: dict[str, Value], span: Span) -> Value:
        """The body of a definition, with its parameters bound."""
        if self.depth >= DEEPEST_DEFINITION:
            raise self.error(
                f"{definition.name} is defined through itself, or through more than {DEEPEST_DEFINITION} others", span
            )
        if not arguments and definition.name in self.known:
            return self.known[definition.name]
        kept, self.local, self.depth = (self.local, self.bound), arguments, self.depth + 1
        self.bound = {}
        try:
            if has_index(definition.body):
                self.rules.closed(definition.body)
            value = self.value(definition.body)
        finally:
            (self.local, self.bound), self.depth = kept, self.depth - 1
        if not arguments:
            self.known[definition.name] = value
        return value

    # --- arithmetic -----------------------------------------------------------------------------------------
    def multiplied(self, node: Product | Quotient | Dot | Raised) -> Value:
        match node:
            case Product():
                return self.product(node)
            case Quotient():
                return self.quotient(node)
            case Dot():
                return self.dot(node)
        return self.raised(node)

    def product(self, node: Product) -> Value:
        left, right = self.value(node.left), self.value(node.right)
        if isinstance(left, tuple) and isinstance(right, tuple):
            raise self.error("two vectors side by side: a dot product is written with a dot", node.span, _dotted(node))
        if isinstance(right, tuple):
            assert isinstance(left, Expression)
            return scaled(right, left)
        return left if right == ONE else scaled(left, right)

    def quotient(self, node: Quotient) -> Value:
        below = self.number(node.right)
        if node.followed and isinstance(node.right, Name):
            self.notes.append(
                (f"a/b c is read as (a/b) c: what follows {node.right.name} stands above the line", node.span)
            )
        return scaled(self.value(node.left), below.inverse())

    def dot(self, node: Dot) -> Expression:
        left, right = self.any_value(node.left), self.any_value(node.right)
        if isinstance(left, Slopes) and isinstance(right, Slopes):
            return contracted_slopes(left, right, self.signs)
        if isinstance(left, Slopes) or isinstance(right, Slopes):
            raise self.error("d phi is dotted with another d chi, or squared", node.span)
        return dotted(left, right)

    def raised(self, node: Raised) -> Expression:
        exponent = self.number(node.exponent)
        if exponent.paths:
            raise self.error("a path in an exponent: write exp(…)", node.span)
        power = exponent.constant
        even = power is not None and power.denominator == 1 and power > 0 and power % 2 == 0
        if even and isinstance(node.base, Call) and node.base.name == "abs" and len(node.base.arguments) == 1:
            inner = self.any_value(node.base.arguments[0])
            return self.square(conjugated(inner), inner) ** (int(power or 0) // 2)
        base = self.any_value(node.base)
        if isinstance(base, Expression):
            return base.power(exponent)
        if power == 2:
            return self.square(base, base)
        what = "vector" if isinstance(base, tuple) else "gradient"
        raise self.error(f"only the square of a {what} has a meaning", node.span, _dotted(node))

    def square(self, left: Value | Slopes, right: Value | Slopes) -> Expression:
        if isinstance(left, Slopes) and isinstance(right, Slopes):
            return contracted_slopes(left, right, self.signs)
        assert not isinstance(left, Slopes) and not isinstance(right, Slopes)
        return dotted(left, right)

    # --- functions ------------------------------------------------------------------------------------------
    def factorial(self, node: Factorial) -> Expression:
        value = self.number(node.base).constant
        if value is None or value.denominator != 1 or not 0 <= value <= LARGEST_FACTORIAL:
            raise self.error(f"a factorial of a whole number from 0 to {LARGEST_FACTORIAL}", node.span)
        return Expression.number(math.factorial(int(value)))

    def call(self, node: Call) -> Value:
        name = node.name
        if name in self.paths or name in self.momenta or name in self.sources:
            refuse_other_places(self, node)
            return self.name(Name(name, node.span))
        if name in (*COMPLEX, "abs") and len(node.arguments) == 1:
            return self.of_complex(name, self.value(node.arguments[0]))
        if name == "table":
            return table(self, node)
        if name in FUNCTIONS:
            if len(node.arguments) != 1:
                raise self.error(f"{name} takes one argument, got {len(node.arguments)}", node.span)
            return apply(name, self.number(node.arguments[0]))
        if name in self.definitions:
            return self.defined(node, self.definitions[name])
        if self.special is not None:
            return self.special(node)
        raise applied_to_nothing(self, node)

    def defined(self, node: Call, definition: Assignment) -> Value:
        if len(definition.parameters) != len(node.arguments):
            raise self.error(
                f"{node.name} takes {len(definition.parameters)} arguments, got {len(node.arguments)}", node.span
            )
        bound = {p: self.value(a) for p, a in zip(definition.parameters, node.arguments, strict=True)}
        return self.inside(definition, bound, node.span)

    def of_complex(self, name: str, value: Value) -> Value:
        """conj, Re, Im and the modulus; of vectors component by component, but |r| is a length."""
        turned = conjugate(value)
        if name == "conj":
            return turned
        if name == "abs":
            if isinstance(value, Expression) and value == turned:
                return apply("abs", value)
            return apply("sqrt", dotted(turned, value))
        sign, half = (1, ONE.scaled(2).inverse()) if name == "Re" else (-1, (-Expression.of(IMAGINARY)) * HALF)
        both = [value, scaled(turned, Expression.number(sign))]
        return scaled(added(both), half)


HALF = Expression.number(2).inverse()


def conjugated(value: Value | Slopes) -> Value | Slopes:
    if isinstance(value, Slopes):
        return Slopes(tuple(conjugate(v) for v in value.along))
    return conjugate(value)


def entry_name(name: str, indices: list[int]) -> str:
    """g_12 for g[1,2]; g_1_12 where an index has two digits."""
    joint = "_" if any(i > 9 for i in indices) else ""
    return f"{name}_{joint.join(map(str, indices))}"


@lru_cache(maxsize=256)
def _of_path(path: Path) -> Value:
    if path.kind != "complex":
        return _atoms(path.atoms)
    pairs = zip(path.atoms[::2], path.atoms[1::2], strict=True)
    values = tuple(Expression.of(re) + Expression.of(IMAGINARY) * Expression.of(im) for re, im in pairs)
    return values if path.components else values[0]


def _atoms(atoms: tuple[PathAtom, ...]) -> Value:
    if len(atoms) == 1 and atoms[0].component == 0:
        return Expression.of(atoms[0])
    return tuple(Expression.of(a) for a in atoms)


def _dotted(node: Node) -> str | None:
    match node:
        case Raised(base=Name() as base):
            return f"{base.name}.{base.name}"
        case Product(left=Name() as left, right=Name() as right):
            return f"{left.name}.{right.name}"
        case Name():
            return f"{node.name}.{node.name}"
    return None
