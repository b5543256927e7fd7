"""A Euclidean action of fields on a lattice: a part on each site and, per direction, links to the next site.

From the continuum, S = sum_x cell [ V(phi) + sum_mu 1/2 K^mu_ij D_mu phi_i D_mu phi_j + sum_k B^k_i D_k phi_i ] with
D_mu phi = (phi(x + mu) - phi(x)) / a_mu the forward difference and B at the midpoint of the link; the leading artefact
is of order a^2 (Montvay and Muenster, Quantum Fields on a Lattice, 1994, section 2.1). The square of the difference of
two angles becomes the periodic 2 (1 - cos), in units of a turn. A lattice action SE is taken as it stands.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from quarterturn.actions.expression import PI, ZERO, Atom, Expression, PathAtom, Symbol, apply
from quarterturn.actions.model import Edge, EuclideanAction
from quarterturn.errors import ActionError, RequestError

SMALLEST = 3  # sites of a periodic direction: two would count each link twice
HALF = Expression.number(2).inverse()
CELL = Symbol("geometry", "cell")  # product of all spacings


def spacing_symbol(direction: int) -> Symbol:
    """The spacing of one direction, time first."""
    return Symbol("geometry", f"a{direction}")


@dataclass(frozen=True)
class FieldLattice:
    """The turned action on a lattice of `extents` sites; spacings are quantities of the expressions."""

    euclidean: EuclideanAction
    extents: tuple[int, ...]
    edges: tuple[Edge, ...]

    @property
    def volume(self) -> int:
        """Number of sites."""
        total = 1
        for n in self.extents:
            total *= n
        return total

    @cached_property
    def onsite(self) -> Expression:
        """S of one site, without its links."""
        if self.euclidean.links:
            return self.euclidean.potential
        return Expression.of(CELL) * self.euclidean.potential

    @cached_property
    def links(self) -> tuple[Expression, ...]:
        """S of the link that leads forwards from a site, per direction, in the variables and their `moved(mu)`."""
        if self.euclidean.links:
            return self.euclidean.links
        matrices = (self.euclidean.mass, *self.euclidean.stiffness)
        return tuple(self._stretched(mu, matrix) + self._tilted(mu) for mu, matrix in enumerate(matrices))

    @cached_property
    def phase(self) -> Expression:
        """-Im S of the link forwards in time: A at the midpoint times the step; zero where the weight is real."""
        total = ZERO
        for drift, v in zip(self.euclidean.drift, self.euclidean.variables, strict=True):
            if drift.terms:
                total = total + self._at_middle(drift, 0) * self._step(v, 0)
        return total * Expression.of(CELL) * Expression.of(spacing_symbol(0), -1)

    def _step(self, v: PathAtom, mu: int) -> Expression:
        return Expression.of(v.moved(mu)) - Expression.of(v)

    def _stretched(self, mu: int, matrix: tuple[tuple[Expression, ...], ...]) -> Expression:
        total = ZERO
        for i, v in enumerate(self.euclidean.variables):
            for j, w in enumerate(self.euclidean.variables):
                if not matrix[i][j].terms:
                    continue
                if i != j and (self.euclidean.periods[i] is not None or self.euclidean.periods[j] is not None):
                    raise ActionError(
                        "a kinetic term that mixes an angle with another field has no periodic difference"
                    )
                total = total + matrix[i][j] * (
                    self._wrapped(i, mu) if i == j else self._step(v, mu) * self._step(w, mu)
                )
        return total * HALF * Expression.of(CELL) * Expression.of(spacing_symbol(mu), -2)

    def _wrapped(self, i: int, mu: int) -> Expression:
        """The squared difference of neighbours; periodic for an angle."""
        step, period = self._step(self.euclidean.variables[i], mu), self.euclidean.periods[i]
        if period is None:
            return step * step
        turn = Expression.of(PI).scaled(2) * period.inverse()
        return (Expression.number(1) - apply("cos", turn * step)).scaled(2) * (turn * turn).inverse()

    def _tilted(self, mu: int) -> Expression:
        total = ZERO
        for b, v in zip(self.euclidean.tilt[mu - 1] if mu else (), self.euclidean.variables, strict=False):
            if b.terms:
                total = total + self._at_middle(b, mu) * self._step(v, mu)
        return total * Expression.of(CELL) * Expression.of(spacing_symbol(mu), -1)

    def _at_middle(self, expression: Expression, mu: int) -> Expression:
        def middle(atom: Atom) -> Expression | None:
            if not isinstance(atom, PathAtom):
                return None
            return (Expression.of(atom) + Expression.of(atom.moved(mu))) * HALF

        return expression.substitute(middle)


def put_on_lattice(euclidean: EuclideanAction, extents: tuple[int, ...], edges: tuple[Edge, ...]) -> FieldLattice:
    """Put a turned action of fields on a lattice.

    Raises
    ------
    RequestError
        A direction of fewer than three sites, which would double its links.
    ActionError
        A boundary that the action does not allow, or that is not available.
    """
    names = euclidean.coordinates
    if len(extents) != len(names):
        raise RequestError(f"the fields have {len(names)} coordinates and the lattice {len(extents)} extents")
    for name, n, edge in zip(names, extents, edges or (Edge(),) * len(extents), strict=True):
        if n < SMALLEST:
            raise RequestError(f"direction {name} has {n} sites; at least {SMALLEST} are needed, two double each link")
        if edge.kind == "fixed":
            raise ActionError("fixed ends of a field are not available yet")
        if edge.kind == "antiperiodic" and tuple([-1] * len(euclidean.variables)) not in euclidean.symmetries:
            raise ActionError(f"antiperiodic in {name}: the action changes when all fields change their sign")
        if edge.kind == "twist" and not _turns(euclidean):
            raise ActionError(f"a twist in {name} needs complex fields whose phase the action does not see")
    if any(p is not None for p in euclidean.periods) and any(a.terms for a in euclidean.drift):
        raise ActionError("a phase that is linear in the velocity of an angle on space is not available yet")
    return FieldLattice(euclidean, extents, edges or (Edge(),) * len(extents))


def _turns(euclidean: EuclideanAction) -> bool:
    """Whether every variable belongs to a complex field and V is invariant under a common change of phase."""
    v = euclidean.variables
    if any(a.part == "" for a in v) or euclidean.links:
        return False
    total = ZERO
    for re, im in zip(v[::2], v[1::2], strict=True):
        total = (
            total + Expression.of(re) * euclidean.potential.diff(im) - Expression.of(im) * euclidean.potential.diff(re)
        )
    matrices = (euclidean.mass, *euclidean.stiffness)
    return not total.terms and all(
        m[2 * k][2 * k] == m[2 * k + 1][2 * k + 1] for m in matrices for k in range(len(v) // 2)
    )
