"""The lattice action of fields as JAX functions of (field, parameters): action, force and phase.

The force is the symbolic derivative of the part on the site and of the two links that meet there, one forwards and one
backwards: a stencil in which every neighbour is taken by indices known beforehand, and nothing is differentiated
through a shift. A function of one site, such as cos(theta), is computed once and moved. Each variable is an array
(sites, chains): a site of all chains is a row, and rows move whole. Couplings, spacings and sources are traced
arguments: another value never compiles again.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any, NamedTuple

import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.actions.evaluation import atom_value, depends_on_path
from quarterturn.actions.expression import Atom, Compound, Expression, PathAtom, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.compiled.functions import FUNCTIONS
from quarterturn.lattice.field import CELL, FieldLattice, spacing_symbol
from quarterturn.lattice.sources import source_values

Indices = NDArray[np.int32]
Fields = tuple[Array, ...]  # one array (sites, chains) for each variable


class FieldParameters(NamedTuple):
    """What may change between runs without compiling."""

    couplings: Array  # (K,), in the order of `FieldTarget.names`
    spacings: Array  # (D,), time first
    sources: Array  # (S, sites), each source at each site, times its strength


class FieldState(NamedTuple):
    """Many configurations at once."""

    phi: Fields
    action: Array  # (chains,), Re S, kept so that no sweep computes it twice


@dataclass(frozen=True)
class FieldTarget:
    """exp(-Re S) of fields, as functions of a `FieldState` and `FieldParameters`."""

    lattice: FieldLattice
    names: tuple[str, ...]  # couplings, sorted

    @property
    def euclidean(self) -> EuclideanAction:
        return self.lattice.euclidean

    @property
    def variables(self) -> tuple[PathAtom, ...]:
        return self.lattice.euclidean.variables

    @property
    def components(self) -> int:
        return len(self.lattice.euclidean.variables)

    @property
    def sites(self) -> int:
        return self.lattice.volume

    @property
    def extents(self) -> tuple[int, ...]:
        return self.lattice.extents

    @property
    def dimension(self) -> int:
        return len(self.lattice.extents)

    @cached_property
    def periods(self) -> NDArray[np.float64]:
        """(C,), circumference of each angle, 0 for other variables."""
        return np.array([0.0 if p is None else float(p.evaluate({}, np)) for p in self.euclidean.periods])

    @property
    def is_complex(self) -> bool:
        return bool(self.lattice.phase.terms)

    def parameters(
        self, couplings: Mapping[str, float], spacings: tuple[float, ...], strength: float = 1.0
    ) -> FieldParameters:
        """Traced arguments from plain numbers; all sources are scaled by `strength`. Call inside `double()`."""
        given = source_values(self.euclidean.sources, couplings, self.euclidean.coordinates, self.extents, spacings)
        values = np.array([couplings[name] for name in self.names], dtype=np.float64)
        flat = given.reshape(len(self.euclidean.sources), self.sites)
        return FieldParameters(jnp.asarray(values), jnp.asarray(spacings, jnp.float64), jnp.asarray(strength * flat))

    # --- neighbours -----------------------------------------------------------------------------------------
    def shifted_sites(self, offset: tuple[int, ...]) -> Indices:
        """Index of the site x + offset for each site x, periodic, (sites,)."""
        grid = np.arange(self.sites, dtype=np.int32).reshape(self.extents)
        return np.roll(grid, tuple(-n for n in offset), axis=tuple(range(len(offset)))).ravel()

    def moved(self, values: Array, neighbour: int) -> Array:
        """A function of the sites (sites, chains) at the neighbour +-(mu + 1) of each, periodic."""
        direction, step = abs(neighbour) - 1, 1 if neighbour > 0 else -1
        index = self.shifted_sites(tuple(step if mu == direction else 0 for mu in range(self.dimension)))
        return jnp.take(values, index, axis=0, mode="clip")

    def crossing(self, neighbour: int) -> NDArray[np.bool_]:
        """Sites whose neighbour lies beyond the edge, (sites, 1)."""
        direction = abs(neighbour) - 1
        place = np.indices(self.extents)[direction].ravel()
        return (place == (self.extents[direction] - 1 if neighbour > 0 else 0))[:, None]

    # --- the action -----------------------------------------------------------------------------------------
    def scalars(self, p: FieldParameters) -> dict[Atom, Array]:
        """Couplings and geometry."""
        values: dict[Atom, Array] = {Symbol("coupling", name): p.couplings[i] for i, name in enumerate(self.names)}
        for mu in range(self.dimension):
            values[spacing_symbol(mu)] = p.spacings[mu]
        values[CELL] = jnp.prod(p.spacings)
        values[Symbol("geometry", "a")] = p.spacings[0]
        values[Symbol("geometry", "beta")] = p.spacings[0] * self.extents[0]
        values[Symbol("geometry", "vol")] = jnp.prod(p.spacings) * self.sites
        return values

    def values(self, phi: Fields, p: FieldParameters) -> SiteValues:
        """What the atoms of an expression are worth on every site."""
        return SiteValues(self, phi, p)

    @cached_property
    def slopes(self) -> tuple[tuple[Expression, tuple[tuple[Expression, Expression], ...]], ...]:
        """Per variable: dS/dphi of the part on the site, and per direction of the links ahead and behind."""
        found = []
        for v in self.variables:
            ends = []
            for mu, link in enumerate(self.lattice.links):
                behind = link.diff(v.moved(mu)).substitute(lambda a, mu=mu: _one_back(a, mu))  # type: ignore[misc]
                ends.append((link.diff(v), behind))
            found.append((self.lattice.onsite.diff(v), tuple(ends)))
        return tuple(found)

    def force(self, phi: Fields, p: FieldParameters) -> Fields:
        """dS/dphi of each variable at each site."""
        values = self.values(phi, p)
        return tuple(self._assembled(onsite, ends, values) for onsite, ends in self.slopes)

    def _assembled(
        self, onsite: Expression, ends: tuple[tuple[Expression, Expression], ...], values: SiteValues
    ) -> Array:
        """The part on a site and the links that meet there; beyond an open edge there is none."""
        total, cut = onsite, []
        for mu, (ahead, behind) in enumerate(ends):
            if self.lattice.edges[mu].kind == "open":
                cut += [(ahead, mu + 1), (behind, -mu - 1)]
            else:
                total = total + ahead + behind
        result = values.local(total)
        for part, neighbour in cut:
            if part.terms:
                result = result + jnp.where(self.crossing(neighbour), 0.0, values.local(part))
        return result

    def action(self, phi: Fields, p: FieldParameters) -> Array:
        """Re S of each configuration, (chains,)."""
        ends = tuple((link, Expression(())) for link in self.lattice.links)
        return jnp.sum(self._assembled(self.lattice.onsite, ends, self.values(phi, p)), axis=0)

    def phase(self, phi: Fields, p: FieldParameters) -> Array:
        """-Im S: the angle of the weight, (chains,)."""
        ends = ((self.lattice.phase, Expression(())), *((Expression(()),) * 2 for _ in range(self.dimension - 1)))
        return jnp.sum(self._assembled(Expression(()), ends, self.values(phi, p)), axis=0)

    def work(self, phi: Fields, p: FieldParameters) -> Array:
        """-dS/ds times s, for sources of strength s, (chains,)."""
        values, total = self.values(phi, p), jnp.zeros(phi[0].shape[-1])
        for k, source in enumerate(self.euclidean.sources):
            slope = self.lattice.onsite.diff(Symbol("source", source.name))
            total = total - p.sources[k] @ values.local(slope)
        return total

    def state(self, phi: Fields, p: FieldParameters) -> FieldState:
        """A configuration with its action."""
        return FieldState(phi, self.action(phi, p))

    def means(self, phi: Fields) -> Array:
        """Lattice means of the variables, (chains, C); of an angle that of its sine, in the same units."""
        columns = []
        for f, period in zip(phi, self.periods, strict=True):
            turn = 2 * math.pi / float(period) if period > 0 else 0.0
            columns.append(jnp.mean(FUNCTIONS.sin(f * turn) / turn if turn else f, axis=0))
        return jnp.stack(columns, axis=-1)


def _one_back(atom: Atom, mu: int) -> Expression | None:
    """Both ends of a link, one site back."""
    if not isinstance(atom, PathAtom):
        return None
    return Expression.of(atom.value if atom.neighbour else atom.moved(mu, -1))


class SiteValues:
    """Values of atoms on all sites, (sites, chains) or numbers; each is computed once."""

    def __init__(self, target: FieldTarget, phi: Fields, p: FieldParameters) -> None:
        self.target, self.phi, self.shape = target, phi, phi[0].shape
        self.known: dict[Atom, Any] = dict(target.scalars(p))
        for k, source in enumerate(target.euclidean.sources):
            self.known[Symbol("source", source.name)] = p.sources[k][:, None]
        for variable, f in zip(target.variables, phi, strict=True):
            self.known[variable] = f

    def __call__(self, atom: Atom) -> Any:
        if atom not in self.known:
            self.known[atom] = self._neighbour(atom) if isinstance(atom, PathAtom) else self._compound(atom)
        return self.known[atom]

    def local(self, expression: Expression) -> Array:
        """An expression at each site, (sites, chains)."""
        return jnp.broadcast_to(jnp.asarray(self.evaluate(expression), jnp.float64), self.shape)

    def evaluate(self, expression: Expression) -> Any:
        """The value of an expression; terms with a common scalar factor are summed before they meet it."""
        groups: dict[tuple, list[tuple[tuple, float]]] = {}
        for monomial, coefficient in expression.terms:
            scalar = tuple(item for item in monomial if not _local(item[0]))
            local = tuple(item for item in monomial if _local(item[0]))
            groups.setdefault(scalar, []).append((local, float(coefficient)))
        total: Any = 0.0
        for scalar, terms in groups.items():
            common: Any = abs(terms[0][1])
            inner: Any = 0.0
            for local, size in terms:
                inner = _plus(inner, size / common, self._product(local))
            for atom, power in scalar:
                common = common * self(atom) ** power
            total = total + common * inner
        return total

    def _product(self, monomial: tuple) -> Any:
        product: Any = None
        for atom, power in monomial:
            factor = self(atom) ** power if power != 1 else self(atom)
            product = factor if product is None else product * factor
        return 1.0 if product is None else product

    def _compound(self, atom: Atom) -> Any:
        """A function of one neighbour alone is computed on the site and moved, where its edge allows."""
        places = {q.neighbour for part in atom.inner for q in part.paths} if isinstance(atom, Compound) else set()
        if len(places) == 1 and 0 not in places:
            (place,) = places
            if self.target.lattice.edges[abs(place) - 1].kind in ("periodic", "open"):
                return self.target.moved(self.local(Expression.of(atom).substitute(_here)), place)
        return atom_value(atom, self, FUNCTIONS)

    def _neighbour(self, atom: PathAtom) -> Array:
        """A variable one site further, over the edge as the boundary says."""
        target, place = self.target, atom.neighbour
        edge, value = target.lattice.edges[abs(place) - 1], target.moved(self(atom.value), place)
        if edge.kind == "antiperiodic":
            return value * np.where(target.crossing(place), -1.0, 1.0)
        if edge.kind == "twist":
            angle = edge.values[0] if place > 0 else -edge.values[0]
            other = PathAtom(atom.name, atom.component, part="im" if atom.part == "re" else "re")
            sine = -math.sin(angle) if atom.part == "re" else math.sin(angle)
            turned = math.cos(angle) * value + sine * target.moved(self(other), place)
            return jnp.where(target.crossing(place), turned, value)
        return value


def _local(atom: Atom) -> bool:
    return depends_on_path(atom) or (isinstance(atom, Symbol) and atom.kind == "source")


def _plus(total: Any, coefficient: float, value: Any) -> Any:
    """total + coefficient value, without products by one or sums with zero."""
    if coefficient == -1.0 and not (isinstance(total, float) and total == 0.0):
        return total - value
    term = value if coefficient == 1.0 else coefficient * value
    return term if isinstance(total, float) and total == 0.0 else total + term


def _here(atom: Atom) -> Expression | None:
    return Expression.of(atom.value) if isinstance(atom, PathAtom) else None
