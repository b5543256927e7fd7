"""What a cell asks to measure: brackets of time-ordered products, and formulas that combine them.

Under the path integral the factors of an expectation value commute, so the order in which they are written does not
matter; what would need an ordering at equal times (q and its velocity or momentum) is refused with the reason.
Connected functions are cumulants, written out by the partitions of their factors (common practice).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from itertools import product as combinations

from quarterturn.actions.circles import changed_by_a_turn, phase_of
from quarterturn.actions.couplings import names_in as names_in
from quarterturn.actions.expression import IMAGINARY, ONE, ZERO, Expression, Function, Symbol
from quarterturn.actions.labels import ENERGY, bracket_label, typeset
from quarterturn.actions.labels import measurement_label as measurement_label
from quarterturn.actions.model import Bracket, Geometry, Measurement
from quarterturn.actions.points import (
    FREE,
    SUMMED,
    Point,
    mentions,
    partitions,
    points_in,
    shifted,
    single_factors,
    time_of,
    untimed,
)
from quarterturn.actions.printing import latex, notation, typeset_name
from quarterturn.actions.scope import Scope
from quarterturn.actions.values import Value
from quarterturn.errors import Span
from quarterturn.notation.symbols import CONSTANTS, FUNCTIONS, GEOMETRY
from quarterturn.notation.tree import (
    Average,
    Call,
    Derivative,
    Dot,
    Gradient,
    Mean,
    MeasureItem,
    Name,
    Negative,
    Node,
    Prime,
    Quotient,
    Sum,
    SumOver,
)

MOST_FACTORS = 6
ALONE = ("gap", "xi2", "log Z")


@dataclass
class MeasureScope(Scope):
    """A scope in which angle brackets, gap, binder, charge and energy have a meaning."""

    geometry_of_lattice: Geometry | None = None
    defaults: dict[str, float] = field(default_factory=dict)  # of the couplings
    brackets: list[Bracket] = field(default_factory=list)
    summing: bool = False  # whether free places in space are summed over

    @property
    def here(self) -> Point:
        return (Fraction(0),) * len(self.coordinates)

    def name(self, node: Name) -> Value:
        if node.name == "energy" and node.name not in self.local:
            return Expression.of(ENERGY) if self.whole_path else self.whole(Expression.of(ENERGY))
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
            return charge if self.whole_path else self.whole(charge)
        if node.name == "binder":
            mean = Expression.of(Function("mean", self.only(node)))
            four, two = (self.whole(mean**n) for n in (4, 2))
            return ONE - four * (two * two).scaled(3).inverse()
        if node.name in ALONE:
            words = f"{node.name}(…) stands alone in a measurement; fit it, then combine the numbers"
            raise self.error(words, node.span)
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

    def bracket(self, groups: tuple[tuple[Point, Expression], ...], over: str = "sites") -> Expression:
        """The symbol of a bracket, entered once; a complex one as the sum of its real and imaginary parts."""
        if any(IMAGINARY in e.atoms() for _, e in groups):
            return self.complex_bracket(groups, over)
        places = tuple(point[1:] for point, _ in groups) if len(groups) > 1 and len(self.coordinates) > 1 else ()
        plain = tuple((time_of(point), e) for point, e in groups)
        made = Bracket(bracket_label(groups), plain, over, places)
        for i, known in enumerate(self.brackets):
            if (known.groups, known.over, known.places) == (plain, over, places):
                return Expression.of(Symbol("bracket", str(i)))
        self.brackets.append(made)
        return Expression.of(Symbol("bracket", str(len(self.brackets) - 1)))

    def whole(self, expression: Expression) -> Expression:
        """The bracket of a quantity of the whole lattice."""
        return self.bracket(((self.here, expression),), "path")

    def complex_bracket(self, groups: tuple[tuple[Point, Expression], ...], over: str) -> Expression:
        total = ZERO
        sides = [(self.of_complex("Re", e), self.of_complex("Im", e)) for _, e in groups]
        for choice in combinations((0, 1), repeat=len(groups)):
            chosen = tuple(
                (point, sides[i][part]) for i, ((point, _), part) in enumerate(zip(groups, choice, strict=True))
            )
            if all(isinstance(e, Expression) and e.terms for _, e in chosen):
                total = total + Expression.of(IMAGINARY) ** sum(choice) * self.bracket(chosen, over)  # type: ignore[arg-type]
        return total

    # --- averages -------------------------------------------------------------------------------------------
    def averaged(self, node: Average) -> Expression:
        if mentions(node.body, (Mean,)) or names_in(node.body) & {"charge", "energy"}:
            return self.of_whole_path(node)
        if node.connected:
            factors = [self.timed(f) for f in single_factors(node.body)]
            if len(factors) > MOST_FACTORS:
                raise self.error(f"a connected function of more than {MOST_FACTORS} factors", node.span)
            return self.cumulant(factors, node)
        return self.linear(node.body, node)

    def of_whole_path(self, node: Average) -> Expression:
        if node.connected:
            raise self.error("a connected function of whole-path means: write the difference out", node.span)
        if any(True for _ in points_in(node.body, self)):
            raise self.error("times and whole-path means in one bracket: measure them apart", node.span)
        kept, self.whole_path = self.whole_path, True
        try:
            expression = self.number(node.body)
        finally:
            self.whole_path = kept
        if expression.paths - {p for a in expression.atoms() if isinstance(a, Function) for p in a.argument.paths}:
            raise self.error("a path beside its mean in one bracket: give the path a mean too", node.span)
        return self.whole(expression)

    def linear(self, node: Node, whole: Average) -> Expression:
        """Sums and multiples of brackets; products of factors at different times become one bracket."""
        times = set(points_in(node, self))
        if times and untimed(node, self):
            self.check_names(node)
            raise self.error(
                "some factors have a time and some have none: give each its time, such as q(0)", whole.span
            )
        if len(times) <= 1:
            return self.bracket(((self.here, self.checked(node)),))
        match node:
            case SumOver() if node.index in self.coordinates:
                return self.over_space(node, whole)
            case Sum():
                return sum((self.linear(term, whole) for term in node.terms), ZERO)
            case Negative():
                return -self.linear(node.body, whole)
            case Dot():
                return self.dotted_times(node, whole)
            case Quotient() if not set(points_in(node.right, self)):
                return self.linear(node.left, whole) * self.number(node.right).inverse()
        return self.joint([self.timed(f) for f in single_factors(node)], whole)

    def over_space(self, node: SumOver, whole: Average) -> Expression:
        """sum_x: over all sites of space, times the volume of a cell of space."""
        if node.index == "t" or self.summing:
            raise self.error("sum_x sums over all of space, once", node.span)
        kept, self.summing = self.summing, True
        try:
            return self.linear(node.body, whole)
        finally:
            self.summing = kept

    def dotted_times(self, node: Dot, whole: Average) -> Expression:
        """r(t).r(0): the sum over components of products at the two times."""
        sides = []
        for side in (node.left, node.right):
            times, value = set(points_in(side, self)), self.value(side)
            if len(times) != 1 or not isinstance(value, tuple):
                raise self.error("each side of a dot product at two times is a vector at one time", side.span)
            sides.append((next(iter(times)), value))
        (t1, left), (t2, right) = sides
        if len(left) != len(right):
            raise self.error(f"a dot product of {len(left)} with {len(right)} components", node.span)
        return sum((self.joint([(t1, a), (t2, b)], whole) for a, b in zip(left, right, strict=True)), ZERO)

    def timed(self, node: Node) -> tuple[Point | str, Expression]:
        """A factor with its one point; "" where it has none."""
        times = set(points_in(node, self))
        if len(times) > 1:
            raise self.error("a factor that mixes several times: multiply the product out", node.span)
        if not times and self.number(node).paths:
            return "", self.checked(node)
        return (next(iter(times)) if times else "constant"), self.checked(node)

    def joint(self, factors: Sequence[tuple[Point | str, Expression]], whole: Average) -> Expression:
        """One bracket of factors, those at equal points multiplied."""
        number = ONE
        groups: dict[Point, Expression] = {}
        for point, e in factors:
            if point == "constant":
                number = number * e
            else:
                place: Point = self.here if isinstance(point, str) else point
                groups[place] = groups.get(place, ONE) * e
        self.note_order(factors, whole)
        fixed = [point for point in groups if all(isinstance(p, Fraction) for p in point)]
        moving = [point for point in groups if point not in fixed]
        if len(moving) > 1:
            raise self.error("one factor may stand at a free time or place; the others stand at numbers", whole.span)
        if moving and not fixed:
            groups = {self.here: groups[moving[0]]}
        elif moving and self.here not in groups:
            raise self.error("beside the free time t one factor stands at 0, as in <q(t) q(0)>", whole.span)
        elif fixed and not moving:
            first = min(fixed)
            groups = {shifted(point, first): e for point, e in groups.items()}
        for point in groups:
            self.check_point(point, whole)
        ordered = sorted(
            groups.items(), key=lambda item: (item[0] not in moving, [p or 0 for p in item[0] if p != SUMMED])
        )
        return number * (self.bracket(tuple(ordered)) if ordered else ONE)

    def note_order(self, factors: Sequence[tuple[Point | str, Expression]], whole: Average) -> None:
        """Said once: factors stand in any order."""
        times = [p[0] for p, _ in factors if not isinstance(p, str)]
        ranks = [float("inf") if time is FREE else float(time) for time in times if not isinstance(time, str)]
        if ranks != sorted(ranks, reverse=True):
            words = (
                "expectation values are those of time-ordered products: the order in which factors are written does "
                "not matter"
            )
            self.notes.append((words, whole.span))

    def check_point(self, point: Point, whole: Average) -> None:
        if sum(p is FREE for p in point) > 1:
            raise self.error(
                "a curve has one free coordinate: fix the others, or sum over space with sum_x", whole.span
            )
        if self.geometry_of_lattice is None or not self.geometry_of_lattice.sites:
            return
        beta = self.geometry_of_lattice.beta
        if isinstance(point[0], Fraction) and abs(float(point[0])) >= beta:
            raise self.error(f"the time {float(point[0]):g} is not before beta = {beta:g}", whole.span)
        for p, name, (sites, spacing) in zip(
            point[1:], self.coordinates[1:], self.geometry_of_lattice.space, strict=False
        ):
            if isinstance(p, Fraction) and abs(float(p)) >= sites * spacing:
                raise self.error(f"{name} = {float(p):g} is not on a lattice of length {sites * spacing:g}", whole.span)

    def check_names(self, node: Node) -> None:  # q(s) is read as a product where s is no time
        known = {*self.paths, *self.couplings, *self.definitions, *FUNCTIONS, *CONSTANTS, *GEOMETRY, *self.coordinates}
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
        if mentions(node, (Prime, Derivative, Gradient)):
            raise self.error(
                "a velocity inside an expectation value: at equal times <q q'> needs an operator ordering, and <q'^2> "
                "grows like 1/(2a) without limit as a -> 0; measure energy instead",
                node.span, "energy",
            )  # fmt: skip
        return self.formula(node)

    def cumulant(self, factors: list[tuple[Point | str, Expression]], whole: Average) -> Expression:
        total = ZERO
        for blocks in partitions(list(range(len(factors)))):
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
    if isinstance(body, Call) and body.name in ALONE:
        return _alone(item, body, fresh)
    formula = fresh.number(body)
    if IMAGINARY in formula.atoms():
        words = "this expectation value is complex: measure its real and imaginary parts apart"
        raise scope.error(words, item.span, f"Re({item.source})")
    if formula.paths:
        raise scope.error("a path outside an expectation value: write <q^2>", item.span, f"<{item.source}>")
    for bracket in fresh.brackets:
        for _, expression in bracket.groups:
            fresh.single_valued(expression, item.span)
    kind = "curve" if any(b.free for b in fresh.brackets) else "number"
    return Measurement(
        label, typeset(item, fresh.brackets, formula), kind, tuple(fresh.brackets), formula, (), item.source, item.span
    )


def _alone(item: MeasureItem, body: Call, scope: MeasureScope) -> Measurement:
    """gap, xi2 and log Z: quantities that are no average of something on the lattice."""
    label = item.label or item.source
    if body.name == "log Z":
        name = body.arguments[0].name if len(body.arguments) == 1 and isinstance(body.arguments[0], Name) else ""
        if name not in scope.sources:
            raise scope.error("log Z[J] needs a source that is declared, such as J(t) = exp(-t^2)", body.span)
        source = Expression.of(Symbol("source", name))
        return Measurement(label, rf"\log Z[{typeset_name(name)}]", "functional", (), ZERO, (source,), item.source,
                           item.span)  # fmt: skip
    operators = tuple(scope.checked(a) for a in body.arguments)
    if not operators or any(not f.paths for f in operators):
        first = next(iter(scope.paths), "q")
        raise scope.error(f"{body.name} needs operators made of paths, such as {body.name}({first})", body.span)
    for operator in operators:
        scope.single_valued(operator, item.span)
        if IMAGINARY in operator.atoms():
            raise scope.error(f"{body.name} needs a real operator, such as Re or Im of the field", body.span)
    if body.name == "xi2":
        if len(scope.coordinates) < 2 or len(operators) > 1:
            raise scope.error("xi2 is the correlation length of one field on space: xi2(phi)", body.span)
        return Measurement(label, rf"\xi_2\left[{latex(operators[0])}\right]", "xi2", (), ZERO, operators, item.source,
                           item.span)  # fmt: skip
    typeset = rf"\Delta E\left[{', '.join(map(latex, operators))}\right]"
    return Measurement(label, typeset, "gap", (), ZERO, operators, item.source, item.span)
