"""The syntax tree: what was written, and where. Spans do not take part in equality."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction

from quarterturn.errors import Span

NOWHERE = Span(1, 1, 1, 1)


@dataclass(frozen=True, slots=True)
class Number:
    value: Fraction
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Name:
    name: str
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Call:
    """A function of its arguments, or a path at a time: sin(q), V(r), q(0)."""

    name: str
    arguments: tuple[Node, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Sum:
    terms: tuple[Node, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Negative:
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Product:
    left: Node
    right: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Quotient:
    left: Node
    right: Node
    followed: bool = field(default=False, compare=False)  # a factor follows without a sign: a/b c
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Dot:
    left: Node
    right: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Raised:
    base: Node
    exponent: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Prime:
    """A derivative with respect to time."""

    base: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Component:
    base: Node
    index: int
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Factorial:
    base: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Average:
    """<body>, or the connected <body>_c."""

    body: Node
    connected: bool
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Mean:
    """mean body: the average over the whole path."""

    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


Node = (
    Number | Name | Call | Sum | Negative | Product | Quotient | Dot | Raised | Prime | Component | Factorial
    | Average | Mean
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class PathStatement:
    """q(t), r[2](t), theta(t) mod 2 pi; also what is read and refused later: space arguments, constraints."""

    name: str
    components: int
    coordinates: tuple[str, ...]
    period: Node | None
    kind: str  # real | complex | constrained | group
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Dynamics:
    form: str  # L | LE | H | SE
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Assignment:
    """name = body or name(parameters) = body: a coupling, a definition, or a source."""

    name: str
    parameters: tuple[str, ...]
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class LatticeStatement:
    extents: tuple[int, ...]
    settings: tuple[tuple[str, Node], ...]
    boundary: str
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class MeasureItem:
    label: str  # as given, or ""
    source: str  # the text of the item, its spelling made canonical
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Measure:
    items: tuple[MeasureItem, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Metric:
    signature: str  # such as +, -, +---, -+++
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Units:
    text: str
    span: Span = field(default=NOWHERE, compare=False, repr=False)


Statement = PathStatement | Dynamics | Assignment | LatticeStatement | Measure | Metric | Units
