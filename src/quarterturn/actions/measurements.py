"""What a cell asks to measure: brackets of time-ordered products, and formulas that combine them.

Under the path integral the factors of an expectation value commute, so the order in which they are written does not
matter; what would need an ordering at equal times (q and its velocity or momentum) is refused with the reason.
Connected functions are cumulants, written out by the partitions of their factors (common practice).
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction

from quarterturn.actions.circles import changed_by_a_turn, phase_of
from quarterturn.actions.expression import ONE, ZERO, Expression, Function, Symbol
from quarterturn.actions.model import Bracket, Geometry, Measurement
from quarterturn.actions.printing import latex, notation, placeholder, typeset_name
from quarterturn.actions.scope import Scope, Value
from quarterturn.errors import NotationError, Span
from quarterturn.notation.statements import label_of
from quarterturn.notation.symbols import CONSTANTS, FUNCTIONS, GEOMETRY
from quarterturn.notation.tree import (
    Average,
    Call,
    Component,
    Dot,
    Factorial,
    Mean,
    MeasureItem,
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

MOST_FACTORS = 6
FREE = None
Time = Fraction | None
NOW = Fraction(0)
ENERGY = Symbol("observable", "energy")


def measurement_label(text: str) -> str:
    """How a measurement is called in results, whatever the spelling: < q² > is <q^2>."""
    try:
        return label_of(text)
    except NotationError:
        return text


@dataclass
class MeasureScope(Scope):
    """A scope in which angle brackets, gap, binder, charge and energy have a meaning."""

    geometry_of_lattice: Geometry | None = None
    defaults: dict[str, float] = field(default_factory=dict)  # of the couplings
    brackets: list[Bracket] = field(default_factory=list)

    def name(self, node: Name) -> Value:
        if node.name == "energy" and node.name not in self.local:
            return Expression.of(ENERGY) if self.whole_path else self.bracket(((NOW, Expression.of(ENERGY)),), "path")
        momentum = node.name == "p" or (node.name.startswith("p_") and node.name[2:] in self.paths)
        if momentum and node.name not in {*self.local, *self.paths, *self.definitions, *self.couplings}:
            raise self.error(
                "a momentum at the same time as its path needs an operator ordering, which a path integral does not "
                "carry; measure it through the energy or a correlator of q",
                node.span,
            )
        return super().name(node)

    def call(self, node: Call) -> Value:
        if node.name == "charge":
            charge = Expression.of(Function("charge", self.angle(node)))
            return charge if self.whole_path else self.bracket(((NOW, charge),), "path")
        if node.name == "binder":
            mean = Expression.of(Function("mean", self.only(node)))
            four, two = (self.bracket(((NOW, mean**n),), "path") for n in (4, 2))
            return ONE - four * (two * two).scaled(3).inverse()
        if node.name == "gap":
            raise self.error("gap(…) stands alone in a measurement; fit it, then combine the numbers", node.span)
        return super().call(node)

    def only(self, node: Call) -> Expression:
        if len(node.arguments) != 1:
            raise self.error(f"{node.name} takes one argument", node.span)
        return self.number(node.arguments[0])

    def angle(self, node: Call) -> Expression:
        argument = self.only(node)
        paths = list(argument.paths)
        if len(paths) == 1 and argument == Expression.of(paths[0]) and self.paths[paths[0].name].period is not None:
            return argument
        raise self.error("a winding number belongs to an angle, declared as theta(t) mod 2 pi", node.span)

    def bracket(self, groups: tuple[tuple[Time, Expression], ...], over: str = "sites") -> Expression:
        """The symbol of a bracket, entered once."""
        made = Bracket(_bracket_label(groups), groups, over)
        for i, known in enumerate(self.brackets):
            if (known.groups, known.over) == (groups, over):
                return Expression.of(Symbol("bracket", str(i)))
        self.brackets.append(made)
        return Expression.of(Symbol("bracket", str(len(self.brackets) - 1)))

    # --- averages -------------------------------------------------------------------------------------------
    def averaged(self, node: Average) -> Expression:
        if _mentions(node.body, (Mean,)) or names_in(node.body) & {"charge", "energy"}:
            return self.of_whole_path(node)
        if node.connected:
            factors = [self.timed(f) for f in _factors(node.body)]
            if len(factors) > MOST_FACTORS:
                raise self.error(f"a connected function of more than {MOST_FACTORS} factors", node.span)
            return self.cumulant(factors, node)
        return self.linear(node.body, node)

    def of_whole_path(self, node: Average) -> Expression:
        if node.connected:
            raise self.error("a connected function of whole-path means: write the difference out", node.span)
        if any(True for _ in _times_in(node.body, self)):
            raise self.error("times and whole-path means in one bracket: measure them apart", node.span)
        kept, self.whole_path = self.whole_path, True
        try:
            expression = self.number(node.body)
        finally:
            self.whole_path = kept
        if expression.paths - {p for a in expression.atoms() if isinstance(a, Function) for p in a.argument.paths}:
            raise self.error("a path beside its mean in one bracket: give the path a mean too", node.span)
        return self.bracket(((NOW, expression),), "path")

    def linear(self, node: Node, whole: Average) -> Expression:
        """Sums and multiples of brackets; products of factors at different times become one bracket."""
        times = set(_times_in(node, self))
        if times and _untimed(node, self):
            self.check_names(node)
            raise self.error(
                "some factors have a time and some have none: give each its time, such as q(0)", whole.span
            )
        if len(times) <= 1:
            return self.bracket(((NOW, self.checked(node)),))
        match node:
            case Sum():
                return sum((self.linear(term, whole) for term in node.terms), ZERO)
            case Negative():
                return -self.linear(node.body, whole)
            case Dot():
                return self.dotted_times(node, whole)
            case Quotient() if not set(_times_in(node.right, self)):
                return self.linear(node.left, whole) * self.number(node.right).inverse()
        return self.joint([self.timed(f) for f in _factors(node)], whole)

    def dotted_times(self, node: Dot, whole: Average) -> Expression:
        """r(t).r(0): the sum over components of products at the two times."""
        sides = []
        for side in (node.left, node.right):
            times, value = set(_times_in(side, self)), self.value(side)
            if len(times) != 1 or not isinstance(value, tuple):
                raise self.error("each side of a dot product at two times is a vector at one time", side.span)
            sides.append((next(iter(times)), value))
        (t1, left), (t2, right) = sides
        if len(left) != len(right):
            raise self.error(f"a dot product of {len(left)} with {len(right)} components", node.span)
        return sum((self.joint([(t1, a), (t2, b)], whole) for a, b in zip(left, right, strict=True)), ZERO)

    def timed(self, node: Node) -> tuple[Time | str, Expression]:
        """A factor with its one time; "" where it has none."""
        times = set(_times_in(node, self))
        if len(times) > 1:
            raise self.error("a factor that mixes several times: multiply the product out", node.span)
        if not times and self.number(node).paths:
            return "", self.checked(node)
        return (next(iter(times)) if times else "constant"), self.checked(node)

    def joint(self, factors: Sequence[tuple[Time | str, Expression]], whole: Average) -> Expression:
        """One bracket of factors, those of equal time multiplied."""
        number = ONE
        groups: dict[Time, Expression] = {}
        for time, e in factors:
            if time == "constant":
                number = number * e
            else:
                place: Time = NOW if time == "" else time  # type: ignore[assignment]
                groups[place] = groups.get(place, ONE) * e
        fixed = [time for time in groups if time is not None]
        if FREE in groups and not fixed:
            groups = {NOW: groups[FREE]}
        elif FREE in groups and NOW not in groups:
            raise self.error("beside the free time t one factor stands at 0, as in <q(t) q(0)>", whole.span)
        elif FREE not in groups and fixed:
            first = min(fixed)
            groups = {time - first: e for time, e in groups.items() if time is not None}
        self.check_times(groups, whole)
        ordered = sorted(groups.items(), key=lambda item: (item[0] is not None, item[0] or 0))
        return number * (self.bracket(tuple(ordered)) if ordered else ONE)

    def check_times(self, groups: dict[Time, Expression], whole: Average) -> None:
        if self.geometry_of_lattice is None:
            return
        beta = self.geometry_of_lattice.beta
        late = [time for time in groups if time is not None and abs(float(time)) >= beta]
        if late:
            raise self.error(f"the time {float(late[0]):g} is not before beta = {beta:g}", whole.span)

    def check_names(self, node: Node) -> None:  # q(s) is read as a product where s is no time
        known = {*self.paths, *self.couplings, *self.definitions, *FUNCTIONS, *CONSTANTS, *GEOMETRY, "t"}
        unknown = sorted(names_in(node) - known)
        if unknown:
            raise self.error(
                f"{unknown[0]} is no time here: a curve has one free time, t; the other times are numbers", node.span,
            )  # fmt: skip

    def single_valued(self, expression: Expression, span: Span) -> None:
        """On a circle an observable has one value at each point; cos(theta) has, theta^2 has not."""
        periods = {atom: path.period for path in self.paths.values() for atom in path.atoms}
        inner = [a.argument for a in expression.atoms() if isinstance(a, Function) and a.name == "mean"]
        whole = any(isinstance(a, Function) and a.name in ("mean", "charge") for a in expression.atoms())
        for part in inner if whole else [expression]:
            changed = changed_by_a_turn(part, periods, self.defaults)
            if changed is not None and (period := periods[changed]) is not None:
                name, wave = notation(Expression.of(changed)), notation(phase_of(changed, period))
                raise self.error(
                    f"{notation(part)} has no single value on the circle: {name} and {name} + {notation(period)} are "
                    f"the same point; measure cos({wave}), sin({wave}) or charge({name})", span, f"cos({wave})",
                )  # fmt: skip

    def checked(self, node: Node) -> Expression:
        """The expression of a factor; velocities are refused."""
        if _mentions(node, (Prime,)):
            raise self.error(
                "a velocity inside an expectation value: at equal times <q q'> needs an operator ordering, and <q'^2> "
                "grows like 1/(2a) without limit as a -> 0; measure energy instead",
                node.span, "energy",
            )  # fmt: skip
        return self.number(node)

    def cumulant(self, factors: list[tuple[Time | str, Expression]], whole: Average) -> Expression:
        total = ZERO
        for blocks in _partitions(list(range(len(factors)))):
            weight = (-1) ** (len(blocks) - 1) * math.factorial(len(blocks) - 1)
            product = ONE
            for block in blocks:
                product = product * self.joint([factors[i] for i in block], whole)
            total = total + product.scaled(weight)
        return total


def measurement_of(item: MeasureItem, scope: MeasureScope) -> Measurement:
    """A measurement from its notation. Raises ActionError with the place."""
    fresh = replace(scope, brackets=[], notes=scope.notes, used=scope.used)
    fresh.average = fresh.averaged
    body = item.body
    label = item.label or item.source
    if isinstance(body, Call) and body.name == "gap":
        operators = tuple(fresh.checked(a) for a in body.arguments)
        if not operators or any(not f.paths for f in operators):
            raise scope.error("gap needs operators made of paths, such as gap(q) or gap(q, q^3)", body.span)
        typeset = rf"\Delta E\left[{', '.join(map(latex, operators))}\right]"
        for operator in operators:
            fresh.single_valued(operator, item.span)
        return Measurement(label, typeset, "gap", (), ZERO, operators, item.source, item.span)
    formula = fresh.number(body)
    if formula.paths:
        raise scope.error("a path outside an expectation value: write <q^2>", item.span, f"<{item.source}>")
    for bracket in fresh.brackets:
        for _, expression in bracket.groups:
            fresh.single_valued(expression, item.span)
    kind = "curve" if any(b.free for b in fresh.brackets) else "number"
    return Measurement(
        label, _typeset(item, fresh, formula), kind, tuple(fresh.brackets), formula, (), item.source, item.span
    )


def _typeset(item: MeasureItem, scope: MeasureScope, formula: Expression) -> str:
    """The label typeset: a given label as it is, else the formula with its brackets."""
    if item.label:
        match = re.fullmatch(r"([A-Za-z]\w*)(\(t\))?", item.label)
        return typeset_name(match.group(1)) + (match.group(2) or "") if match else item.label
    if item.source == "energy":
        return "E"
    plain = Expression.of(Symbol("bracket", "0"))
    if formula == plain:
        return _typeset_bracket(scope.brackets[0])
    if isinstance(item.body, Average) and item.body.connected:
        inner = item.source.removesuffix(">_c").removeprefix("<")
        return rf"\langle {inner}\rangle_c"
    text = latex(formula)
    for i, bracket in enumerate(scope.brackets):
        text = text.replace(placeholder(i), _typeset_bracket(bracket))
    return text


def _typeset_bracket(bracket: Bracket) -> str:
    if len(bracket.groups) == 1:
        return rf"\langle {latex(bracket.groups[0][1])}\rangle"
    parts = [rf"{latex(e)}({'t' if time is None else f'{float(time):g}'})" for time, e in bracket.groups]
    return rf"\langle {' '.join(parts)}\rangle"


def _bracket_label(groups: tuple[tuple[Time, Expression], ...]) -> str:
    if len(groups) == 1:
        return f"<{notation(groups[0][1])}>"
    return f"<{' '.join(_at(e, time) for time, e in groups)}>"


def _at(expression: Expression, time: Time) -> str:
    """q(t), (q^2)(0)."""
    text = notation(expression)
    simple = len(expression.terms) == 1 and expression == Expression.of(next(iter(expression.paths), ENERGY))
    return (text if simple else f"({text})") + f"({'t' if time is None else f'{float(time):g}'})"


# --- looking into syntax trees --------------------------------------------------------------------------------------
def children(node: Node) -> tuple[Node, ...]:
    match node:
        case Sum():
            return node.terms
        case Negative() | Average() | Mean():
            return (node.body,)
        case Product() | Quotient() | Dot():
            return (node.left, node.right)
        case Raised():
            return (node.base, node.exponent)
        case Prime() | Component() | Factorial():
            return (node.base,)
        case Call():
            return node.arguments
    return ()


def _mentions(node: Node, kinds: tuple[type, ...]) -> bool:
    return isinstance(node, kinds) or any(_mentions(c, kinds) for c in children(node))


def names_in(node: Node) -> set[str]:
    own = {node.name} if isinstance(node, (Name, Call)) else set()
    return own.union(*(names_in(c) for c in children(node))) if children(node) else own


def _times_in(node: Node, scope: Scope) -> Iterator[Time]:
    """The times at which paths are evaluated inside a node."""
    if isinstance(node, Call) and node.name in scope.paths:
        if len(node.arguments) != 1:
            raise scope.error(f"{node.name} depends on one time", node.span)
        yield _time(node.arguments[0], scope)
        return
    for child in children(node):
        yield from _times_in(child, scope)


def _untimed(node: Node, scope: Scope) -> bool:
    """Whether a path stands in a node without a time."""
    if isinstance(node, Call) and node.name in scope.paths:
        return False
    if isinstance(node, Name):
        return node.name in scope.paths
    return any(_untimed(child, scope) for child in children(node))


def _time(node: Node, scope: Scope) -> Time:
    if isinstance(node, Name) and node.name == "t":
        return FREE
    sign = 1
    while isinstance(node, Negative):
        node, sign = node.body, -sign
    if isinstance(node, Number):
        return sign * node.value
    value = scope.number(node).constant if not names_in(node) else None
    if value is None:
        raise scope.error("a time is t or a number, as in q(t), q(0), q(1.5)", node.span)
    return sign * value


def _factors(node: Node) -> Iterator[Node]:
    """Factors of a product; whole powers of a factor repeat it."""
    match node:
        case Product():
            yield from _factors(node.left)
            yield from _factors(node.right)
        case Raised(exponent=Number() as exponent) if exponent.value.denominator == 1 and 1 < exponent.value <= 8:
            for _ in range(int(exponent.value)):
                yield from _factors(node.base)
        case _:
            yield node


def _partitions(items: list[int]) -> Iterator[list[list[int]]]:
    if not items:
        yield []
        return
    first, rest = items[0], items[1:]
    for partition in _partitions(rest):
        yield [[first], *partition]
        for i, block in enumerate(partition):
            yield [*partition[:i], [first, *block], *partition[i + 1 :]]
