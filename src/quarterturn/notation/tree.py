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
class Derivative:
    """d_x phi, d_mu phi, d^mu phi: along a coordinate, or with an index that is contracted with the metric."""

    base: Node
    index: str  # t, x, y, z, or the name of an index
    up: bool = False
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Gradient:
    """d phi, all derivatives together: (d phi)^2 and d phi . d chi are contracted with the metric."""

    base: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Component:
    """r[2], n[a], g[1,2], g[a,b]: numbers, or letters that are summed over where they occur twice."""

    base: Node
    indices: tuple[int | str, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Neighbour:
    """phi(+mu), phi(-x), n[a](+mu): the field one site further in a direction of the lattice."""

    base: Node
    direction: str  # an index such as mu, or a coordinate
    sign: int
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class SumOver:
    """sum_a f, sum_mu f, sum_x f: over components, directions, or the sites of space."""

    index: str
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Array:
    """[[1, 0.5], [0.5, 2]]: numbers in rows, for tensors of couplings and tables."""

    items: tuple[Node, ...]
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Text:
    """ "well.csv": the name of a file that holds a table."""

    value: str
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Comparison:
    left: Node
    sign: str  # < | <= | > | >=
    right: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Cases:
    """{f where |q| < 1, g otherwise}: the first piece all of whose conditions hold."""

    pieces: tuple[tuple[Node, tuple[Comparison, ...]], ...]
    otherwise: Node
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
    Number | Name | Call | Sum | Negative | Product | Quotient | Dot | Raised | Prime | Derivative | Gradient
    | Component | Neighbour | SumOver | Array | Text | Cases | Factorial | Average | Mean
)  # fmt: skip


@dataclass(frozen=True, slots=True)
class PathStatement:
    """q(t), phi[4](t,x), theta(t) mod 2 pi, psi(t,x) complex, A(t,x) in su(2)."""

    name: str
    components: int  # 0: a scalar
    coordinates: tuple[str, ...]
    period: Node | None
    kind: str  # real | complex | group
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Constraint:
    """n.n = 1"""

    name: str
    value: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Dynamics:
    form: str  # L | LE | H | SE
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Assignment:
    """name = body, name(parameters) = body, name[indices] = body: a coupling or a tensor, a definition, a source.

    A source is told by its parameters, which are coordinates: J(t) = …, J(t,x) = …
    """

    name: str
    parameters: tuple[str, ...]
    body: Node
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Boundary:
    """periodic, open, antiperiodic t, twist x = 0.3, fixed q(0) = -1, q(beta) = 1; no coordinate means all."""

    kind: str
    coordinate: str = ""
    values: tuple[tuple[str, Node, Node], ...] = ()  # (field, place, value) of fixed ends
    angle: Node | None = None  # of a twist
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class LatticeStatement:
    """lattice 64 x 64, a = 0.1, a_t = 0.05; lattice beta = vacuum 1e-6, a = 0.1 has a `vacuum` tolerance."""

    extents: tuple[int, ...]
    settings: tuple[tuple[str, Node], ...]  # a, a_t, a_x, …, beta
    boundaries: tuple[Boundary, ...] = ()
    vacuum: Node | None = None
    span: Span = field(default=NOWHERE, compare=False, repr=False)
    temperature: str = ""  # an amount such as 300 K, in the place of beta


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
    signature: str  # such as +, -, +---, -+++, mostly minus, mostly plus
    span: Span = field(default=NOWHERE, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class Units:
    names: tuple[str, ...]  # empty or ("natural",): hbar = c = 1
    span: Span = field(default=NOWHERE, compare=False, repr=False)


Statement = PathStatement | Constraint | Dynamics | Assignment | LatticeStatement | Measure | Metric | Units
