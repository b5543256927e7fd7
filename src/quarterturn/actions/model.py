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


@dataclass(frozen=True, slots=True)
class Path:
    """A degree of freedom: q(t), r[2](t), theta(t) mod 2 pi."""

    name: str
    components: int = 0  # 0: a scalar path; n: a vector r[1..n]
    period: Expression | None = None  # the circumference of an angle; a constant
    span: Span | None = field(default=None, compare=False)

    @property
    def atoms(self) -> tuple[PathAtom, ...]:
        if self.components == 0:
            return (PathAtom(self.name),)
        return tuple(PathAtom(self.name, i + 1) for i in range(self.components))


@dataclass(frozen=True, slots=True)
class Coupling:
    """A named number of the action and its default; `dimension` is in powers of mass, None where undetermined."""

    name: str
    default: float
    dimension: Fraction | None = None
    span: Span | None = field(default=None, compare=False)


@dataclass(frozen=True, slots=True)
class Geometry:
    """`sites` points in imaginary time, `spacing` apart, periodic."""

    sites: int
    spacing: float

    @property
    def beta(self) -> float:
        return self.sites * self.spacing


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

    @property
    def free(self) -> bool:
        return any(time is None for time, _ in self.groups)


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
    form: str  # L | LE | H
    lagrangian: Expression  # in real time for L and H (after the momentum integral), in imaginary time for LE
    couplings: Mapping[str, Coupling]
    geometry: Geometry | None  # None: no lattice statement
    measurements: tuple[Measurement, ...]
    euclidean: EuclideanAction = field(compare=False)
    digest: str = ""  # SHA-256 of the canonical notation, hexadecimal
    canonical: str = ""  # canonical notation; parses back to the same digest
    latex: str = ""  # the action as written in real time, typeset, without dollar signs

    @property
    def findings(self) -> tuple[Finding, ...]:
        return self.euclidean.findings


@dataclass(frozen=True)
class EuclideanAction:
    """L_E = 1/2 sum_ij K_ij q_i' q_j' + V(q) - i sum_i A_i(q) q_i', after t = -i tau; weight exp(-S_E)."""

    variables: tuple[PathAtom, ...]  # the C real variables, in order
    periods: tuple[Expression | None, ...]  # per variable
    mass: tuple[tuple[Expression, ...], ...]  # K, symmetric C x C, functions of the couplings
    potential: Expression  # V(q)
    drift: tuple[Expression, ...]  # A_i(q); zero where the action is real
    findings: tuple[Finding, ...]  # at the default couplings
    symmetries: tuple[tuple[int, ...], ...] = ()  # sign vectors (not the identity) that leave L_E unchanged
    digest: str = ""  # equal for the same physics, in whichever convention it was written
    latex: str = ""

    @property
    def phase(self) -> Expression | None:
        """The imaginary part of L_E, -sum A_i q_i', or None where the weight is real."""
        total = Expression(())
        for atom, a in zip(self.variables, self.drift, strict=True):
            total = total - a * Expression.of(PathAtom(atom.name, atom.component, 1))
        return total if total.terms else None
