"""What an action is: paths, couplings, geometry, measurements; and the turned action with its findings.

All values are immutable. `Action` is what was written, `EuclideanAction` what is left after t = -i tau; their digests
depend on meaning only.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from quarterturn.actions.expression import Expression, PathAtom
from quarterturn.errors import Span
from quarterturn.units.quantity import UNKNOWN, Quantity
from quarterturn.units.system import System, system


@dataclass(frozen=True, slots=True)
class Path:
    """A degree of freedom, a path or a field: q(t), r[2](t), theta(t) mod 2 pi, psi(t,x) complex, n[3](t), n.n = 1."""

    name: str
    components: int = 0  # 0: a scalar; n: a vector r[1..n]
    period: Expression | None = None  # the circumference of an angle; a constant
    span: Span | None = field(default=None, compare=False)
    kind: str = "real"  # real | complex | unit (a vector of length 1)
    quantity: Quantity = field(default=UNKNOWN, compare=False)  # what its values count

    @property
    def atoms(self) -> tuple[PathAtom, ...]:
        """Its real variables; those of a complex field in the order re, im of each component."""
        numbers = tuple(range(1, self.components + 1)) or (0,)
        parts = ("re", "im") if self.kind == "complex" else ("",)
        return tuple(PathAtom(self.name, n, part=part) for n in numbers for part in parts)


@dataclass(frozen=True, slots=True)
class Source:
    """J(t), J(t,x): a given function of the coordinates of the Euclidean lattice, Symbol("source", name) in V.

    `body` is made of Symbol("coordinate", "t"), …, couplings and constants. The origin of each coordinate is the middle
    of a periodic lattice: t runs from -beta/2 to beta/2.
    """

    name: str
    coordinates: tuple[str, ...]
    body: Expression
    span: Span | None = field(default=None, compare=False)


@dataclass(frozen=True, slots=True)
class Edge:
    """What joins the two ends of a direction: kind periodic | antiperiodic | twist | open | fixed.

    `values`: the angle of a twist; the values of the variables at the two fixed ends, first those at 0.
    """

    kind: str = "periodic"
    values: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True)
class UnitSystem:
    """The units of a cell, such as amu, angstrom, 1/cm, in the order of `units.system`; one name: a natural scale."""

    names: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Coupling:
    """A named number of the action and its default; `dimension` is in powers of mass, None where undetermined."""

    name: str
    default: float
    dimension: Fraction | None = None
    span: Span | None = field(default=None, compare=False)
    quantity: Quantity = UNKNOWN  # what its number counts


@dataclass(frozen=True, slots=True)
class Geometry:
    """`sites` points in imaginary time, `spacing` apart, and as many directions of space as the fields have.

    `edges` holds one `Edge` per direction, time first; empty means periodic everywhere. `vacuum` is a tolerance for
    exp(-beta gap); then `sites` is 0 until the gap is known.
    """

    sites: int
    spacing: float
    space: tuple[tuple[int, float], ...] = ()  # (sites, spacing) of each direction of space
    edges: tuple[Edge, ...] = ()
    vacuum: float | None = None

    @property
    def beta(self) -> float:
        return self.sites * self.spacing

    @property
    def extents(self) -> tuple[int, ...]:
        """Sites in every direction, time first."""
        return (self.sites, *(n for n, _ in self.space))

    @property
    def spacings(self) -> tuple[float, ...]:
        """The spacing of every direction, time first."""
        return (self.spacing, *(a for _, a in self.space))


@dataclass(frozen=True, slots=True)
class Bracket:
    """One expectation value.

    over="sites": the product of `groups`, each an expression of the paths at one time (Fraction: a fixed time
    [time units]; None: the free variable t of a curve), averaged over translations. One group at time 0 is a
    plain site average; at most one group is free.
    over="path": a single group at time 0, a function of whole-path quantities: Function("mean", f),
    Function("charge", theta), Symbol("observable", "energy").
    """

    label: str
    groups: tuple[tuple[Fraction | None, Expression], ...]
    over: str = "sites"
    places: tuple[tuple[Fraction | str | None, ...], ...] = ()  # of fields: where in space each group stands; a number,
    # None for a free coordinate, "sum" for one that sum_x sums over; empty for paths and for site averages

    @property
    def free(self) -> bool:
        return any(time is None for time, _ in self.groups) or any(None in place for place in self.places)


@dataclass(frozen=True, slots=True)
class Measurement:
    """What to report. `formula` combines Symbol("bracket", "0"), … and couplings, vol, beta, a.

    kind: number | curve (a formula with a free t) | gap (lowest level that `operators` create).
    """

    label: str
    latex: str
    kind: str
    brackets: tuple[Bracket, ...]
    formula: Expression
    operators: tuple[Expression, ...] = ()
    source: str = ""  # canonical notation of the whole item, such as G(t) = <q(t) q(0)>
    span: Span | None = field(default=None, compare=False)
    quantity: Quantity = field(default=UNKNOWN, compare=False)  # what its number counts


@dataclass(frozen=True, slots=True)
class Finding:
    """Something the turn found out. severity: fatal (the integral diverges) | unconfined (it does on a ring) | note."""

    severity: str
    topic: str  # kinetic | bounded | period | phase | couplings | ordering | notation
    message: str
    span: Span | None = field(default=None, compare=False)


@dataclass(frozen=True)
class Action:
    """An action as it was written."""

    name: str
    text: str  # the body of the cell, as typed
    paths: tuple[Path, ...]
    metric: str  # canonical, such as "+" (mostly minus) in 0+1 dimensions
    form: str  # L | LE | SE
    lagrangian: Expression  # in real time for L and H (after the momentum integral), in imaginary time for LE
    couplings: Mapping[str, Coupling]
    geometry: Geometry | None  # None: no lattice statement
    measurements: tuple[Measurement, ...]
    euclidean: EuclideanAction = field(compare=False)
    digest: str = ""  # SHA-256 of the canonical notation, hexadecimal
    canonical: str = ""  # canonical notation; parses back to the same digest
    latex: str = ""  # the action as written in real time, typeset, without dollar signs
    units: UnitSystem | None = None  # None: natural, hbar = c = 1
    files: Mapping[str, str] = field(default_factory=dict)  # SHA-256 of each file that a table was read from
    places: tuple[tuple[Expression, Span], ...] = field(default=(), compare=False, repr=False)  # see actions.places

    @property
    def findings(self) -> tuple[Finding, ...]:
        return self.euclidean.findings

    @property
    def system(self) -> System:
        """The units of its numbers."""
        return system(self.units.names if self.units else ())

    @property
    def coordinates(self) -> tuple[str, ...]:
        """("t",) for paths, ("t", "x", …) for fields."""
        return self.euclidean.coordinates


@dataclass(frozen=True)
class EuclideanAction:
    """The action after t = -i tau; weight exp(-S_E).

    L_E = 1/2 sum_ij [K_ij d_t q_i d_t q_j + sum_k G^k_ij d_k q_i d_k q_j] + V(q)
          - i sum_i A_i(q) d_t q_i + sum_k,i B^k_i(q) d_k q_i

    A lattice action (SE) has `links` in the place of K, G, A and B: V is its on-site part, and links[mu] the part that
    joins a site to its neighbour in direction mu, written in the variables and their `moved(mu)`; both per site.
    """

    variables: tuple[PathAtom, ...]  # the C real variables, in order
    periods: tuple[Expression | None, ...]  # per variable
    mass: tuple[tuple[Expression, ...], ...]  # K, symmetric C x C, functions of the couplings
    potential: Expression  # V(q)
    drift: tuple[Expression, ...]  # A_i(q); zero where the action is real
    findings: tuple[Finding, ...]  # at the default couplings
    symmetries: tuple[tuple[int, ...], ...] = ()  # sign vectors (not the identity) that leave L_E unchanged
    digest: str = ""  # equal for the same physics, in whichever convention it was written
    latex: str = ""
    coordinates: tuple[str, ...] = ("t",)
    stiffness: tuple[tuple[tuple[Expression, ...], ...], ...] = ()  # G^k, one matrix per direction of space
    tilt: tuple[tuple[Expression, ...], ...] = ()  # B^k_i
    links: tuple[Expression, ...] = ()  # of SE, one per direction, time first
    spheres: tuple[tuple[int, ...], ...] = ()  # indices of the variables that are together a unit vector
    sources: tuple[Source, ...] = ()

    @property
    def dimension(self) -> int:
        """D, the number of coordinates."""
        return len(self.coordinates)

    @property
    def phase(self) -> Expression | None:
        """The imaginary part of L_E, -sum A_i q_i', or None where the weight is real."""
        total = Expression(())
        for atom, a in zip(self.variables, self.drift, strict=True):
            total = total - a * Expression.of(atom.derivative())
        return total if total.terms else None
