"""A Euclidean action of fields on a lattice: a part on each site and, per direction, links to the next site.

From the continuum, S = sum_x cell [ V(phi) + sum_mu 1/2 K^mu_ij D_mu phi_i D_mu phi_j + sum_k B^k_i D_k phi_i ] with
D_mu phi = (phi(x + mu) - phi(x)) / a_mu the forward difference and B at the midpoint of the link; the leading artefact
is of order a^2 (Montvay and Muenster, Quantum Fields on a Lattice, 1994, section 2.1). The square of the difference of
two angles becomes the periodic 2 (1 - cos), in units of a turn. A lattice action SE is taken as it stands.

On a closed direction squares are multiplied out: phi(x + mu)^2 and phi(x)^2 have the same sum, so that only the product
of neighbours is left in the link, and of unit vectors nothing else at all. Cosines of differences become products of
cosines and sines of single sites, each of which is computed once.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from quarterturn.actions.expression import PI, ZERO, Atom, Expression, Function, PathAtom, Symbol, apply
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

    @property
    def symmetries(self) -> tuple[tuple[int, ...], ...]:
        """Sign vectors that leave the action and its edges unchanged: a twist turns re and im into each other."""
        twisted = any(edge.kind == "twist" for edge in self.edges)
        pairs = range(0, len(self.euclidean.variables) - 1, 2)
        kept = [s for s in self.euclidean.symmetries if not twisted or all(s[k] == s[k + 1] for k in pairs)]
        return tuple(kept)

    @cached_property
    def onsite(self) -> Expression:
        """S of one site, without its links."""
        if self.euclidean.links:
            return self.euclidean.potential
        total = Expression.of(CELL) * self.euclidean.potential
        for mu, edge in enumerate(self.edges):
            if edge.kind != "open":
                total = total + self._ends(mu)
        return total

    @cached_property
    def links(self) -> tuple[Expression, ...]:
        """S of the link that leads forwards from a site, per direction, in the variables and their `moved(mu)`."""
        if self.euclidean.links:
            return tuple(single_sites(link) for link in self.euclidean.links)
        found = []
        for mu, edge in enumerate(self.edges):
            link = self._stretched(mu) + self._tilted(mu)
            if edge.kind == "open":
                ends = self._ends(mu)
                link = link + (ends + ends.substitute(lambda a, mu=mu: _forwards(a, mu))) * HALF  # type: ignore[misc]
            found.append(link)
        return tuple(found)

    def _form(self, mu: int) -> tuple[tuple[Expression, ...], ...]:
        return self.euclidean.mass if mu == 0 else self.euclidean.stiffness[mu - 1]

    def _ends(self, mu: int) -> Expression:
        """K_ij phi_i phi_j / a^2 of one site: what the squares of both links of a direction leave there.

        Of a unit vector whose components are equally stiff it is a number, and left out.
        """
        total, form = ZERO, self._form(mu)
        equal = {i for ball in self.euclidean.spheres if _round(form, ball) for i in ball}
        for i, v in enumerate(self.euclidean.variables):
            for j, w in enumerate(self.euclidean.variables):
                if form[i][j].terms and self.euclidean.periods[i] is None and not (i == j and i in equal):
                    total = total + form[i][j] * Expression.of(v) * Expression.of(w)
        return total * Expression.of(CELL) * Expression.of(spacing_symbol(mu), -2)

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

    def _stretched(self, mu: int) -> Expression:
        """The products of neighbours in 1/2 K_ij D phi_i D phi_j; of angles the whole, periodic."""
        total, form = ZERO, self._form(mu)
        for i, v in enumerate(self.euclidean.variables):
            for j, w in enumerate(self.euclidean.variables):
                if not form[i][j].terms:
                    continue
                angles = self.euclidean.periods[i] is not None, self.euclidean.periods[j] is not None
                if i != j and any(angles):
                    raise ActionError(
                        "a kinetic term that mixes an angle with another field has no periodic difference"
                    )
                if any(angles):
                    total = total + form[i][j] * self._wrapped(i, mu)
                else:
                    across = Expression.of(v) * Expression.of(w.moved(mu)) + Expression.of(v.moved(mu)) * Expression.of(
                        w
                    )
                    total = total - form[i][j] * across
        return total * HALF * Expression.of(CELL) * Expression.of(spacing_symbol(mu), -2)

    def _wrapped(self, i: int, mu: int) -> Expression:
        """2 (1 - cos) of the difference of two angles in units of a turn."""
        period = self.euclidean.periods[i]
        assert period is not None
        turn = Expression.of(PI).scaled(2) * period.inverse()
        cosine = single_sites(apply("cos", turn * self._step(self.euclidean.variables[i], mu)))
        return (Expression.number(1) - cosine).scaled(2) * (turn * turn).inverse()

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


def _forwards(atom: Atom, mu: int) -> Expression | None:
    return Expression.of(atom.moved(mu)) if isinstance(atom, PathAtom) else None


def _round(form: tuple[tuple[Expression, ...], ...], ball: tuple[int, ...]) -> bool:
    """Whether a kinetic form does not tell the components of a unit vector apart."""
    return all(form[i][i] == form[ball[0]][ball[0]] for i in ball)


def single_sites(link: Expression) -> Expression:
    """cos and sin of a sum over two sites as products of those of single sites; the rest is left as it is."""
    return link.substitute(_split)


def _split(atom: Atom) -> Expression | None:
    if not isinstance(atom, Function) or atom.name not in ("cos", "sin"):
        return None
    terms = [Expression((term,)) for term in atom.argument.terms]
    places = [{q.neighbour for q in term.paths} for term in terms]
    if any(len(p) > 1 for p in places) or len(set().union(*places)) != 2:
        return None
    here = sum((term for term, p in zip(terms, places, strict=True) if not p - {0}), ZERO)
    there = atom.argument - here
    (c1, s1), (c2, s2) = ((apply("cos", part), apply("sin", part)) for part in (here, there))
    return c1 * c2 - s1 * s2 if atom.name == "cos" else s1 * c2 + c1 * s2


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
