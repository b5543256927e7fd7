"""The lattice action of fields as JAX functions of (field, parameters): action, force and phase.

Sites are one flat axis; a neighbour is a `take` with indices known beforehand. The force is the symbolic derivative of
the part on the site and of the two links that meet there, one forwards and one backwards, so that nothing is
differentiated through a shift. Couplings, spacings and sources are traced arguments.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.actions.model import Edge
from quarterturn.compiled.functions import FUNCTIONS
from quarterturn.lattice.field import CELL, FieldLattice, spacing_symbol
from quarterturn.lattice.sources import source_values

Indices = NDArray[np.int32]


class FieldParameters(NamedTuple):
    """What may change between runs without compiling."""

    couplings: Array  # (K,), in the order of `FieldTarget.names`
    spacings: Array  # (D,), time first
    sources: Array  # (S, sites), each source at each site, times its strength


class FieldState(NamedTuple):
    """Many configurations at once."""

    phi: Array  # (chains, C, sites)
    action: Array  # (chains,), Re S, kept so that no sweep computes it twice


@dataclass(frozen=True)
class FieldTarget:
    """exp(-Re S) of fields, as functions of a `FieldState` and `FieldParameters`."""

    lattice: FieldLattice
    names: tuple[str, ...]  # couplings, sorted

    @property
    def components(self) -> int:
        return len(self.lattice.euclidean.variables)

    @property
    def sites(self) -> int:
        return self.lattice.volume

    @cached_property
    def periods(self) -> NDArray[np.float64]:
        """(C,), circumference of each angle, 0 for other variables."""
        return np.array([0.0 if p is None else float(p.evaluate({}, np)) for p in self.lattice.euclidean.periods])

    def means(self, phi: Array) -> Array:
        """Lattice means of the variables, (…, C); of an angle that of its sine, in the same units."""
        if not self.periods.any():
            return jnp.mean(phi, axis=-1)
        turn = np.where(self.periods > 0, 2 * np.pi / np.where(self.periods > 0, self.periods, 1.0), 1.0)[:, None]
        circle = FUNCTIONS.sin(phi * turn) / turn
        return jnp.mean(jnp.where(self.periods[:, None] > 0, circle, phi), axis=-1)

    @property
    def is_complex(self) -> bool:
        return bool(self.lattice.phase.terms)

    def parameters(
        self, couplings: Mapping[str, float], spacings: tuple[float, ...], strength: float = 1.0
    ) -> FieldParameters:
        """Traced arguments from plain numbers; all sources are scaled by `strength`. Call inside `double()`."""
        euclidean = self.lattice.euclidean
        given = source_values(euclidean.sources, couplings, euclidean.coordinates, self.lattice.extents, spacings)
        values = np.array([couplings[name] for name in self.names], dtype=np.float64)
        flat = given.reshape(len(euclidean.sources), self.sites)
        return FieldParameters(jnp.asarray(values), jnp.asarray(spacings, jnp.float64), jnp.asarray(strength * flat))

    # --- neighbours -----------------------------------------------------------------------------------------
    def shifted_sites(self, offset: tuple[int, ...]) -> Indices:
        """Index of the site x + offset for each site x, periodic, (sites,)."""
        grid = np.arange(self.sites, dtype=np.int32).reshape(self.lattice.extents)
        return np.roll(grid, tuple(-n for n in offset), axis=tuple(range(len(offset)))).ravel()

    @cached_property
    def _forwards(self) -> tuple[Indices, ...]:
        return tuple(self.shifted_sites(_unit(mu, self.lattice.extents)) for mu in range(len(self.lattice.extents)))

    @cached_property
    def _backwards(self) -> tuple[Indices, ...]:
        return tuple(self.shifted_sites(_unit(mu, self.lattice.extents, -1)) for mu in range(len(self.lattice.extents)))

    def _crossing(self, mu: int, last: bool) -> NDArray[np.bool_]:
        """Sites from which a step forwards (last) or backwards leads over the edge, (sites,)."""
        n = self.lattice.extents[mu]
        coordinate = np.arange(n).reshape([-1 if k == mu else 1 for k in range(len(self.lattice.extents))])
        return np.broadcast_to(coordinate == (n - 1 if last else 0), self.lattice.extents).ravel()

    def _carried(self, phi: Array, mu: int, sign: int) -> Array:
        """The neighbours in one direction, over the edge as the boundary says, (…, C, sites)."""
        there = jnp.take(phi, (self._forwards if sign > 0 else self._backwards)[mu], axis=-1)
        edge = self.lattice.edges[mu]
        if edge.kind == "antiperiodic":
            return there * np.where(self._crossing(mu, sign > 0), -1.0, 1.0)
        if edge.kind == "twist":
            return _rotated(there, self._crossing(mu, sign > 0), sign * edge.values[0])
        return there

    def _open(self, mu: int, sign: int) -> NDArray[np.float64] | None:
        """0 where there is no link, for open edges; None where all links are there."""
        edge: Edge = self.lattice.edges[mu]
        return np.where(self._crossing(mu, sign > 0), 0.0, 1.0) if edge.kind == "open" else None

    # --- the action -----------------------------------------------------------------------------------------
    def scalars(self, p: FieldParameters) -> dict[Atom, Array]:
        values: dict[Atom, Array] = {Symbol("coupling", name): p.couplings[i] for i, name in enumerate(self.names)}
        for k in range(len(self.lattice.extents)):
            values[spacing_symbol(k)] = p.spacings[k]
        values[CELL] = jnp.prod(p.spacings)
        values[Symbol("geometry", "a")] = p.spacings[0]
        values[Symbol("geometry", "beta")] = p.spacings[0] * self.lattice.extents[0]
        values[Symbol("geometry", "vol")] = jnp.prod(p.spacings) * self.sites
        for k, source in enumerate(self.lattice.euclidean.sources):
            values[Symbol("source", source.name)] = p.sources[k]
        return values

    def lookup(self, phi: Array, p: FieldParameters) -> dict[Atom, Array]:
        """Values of the variables at each site and of all scalars."""
        values = self.scalars(p)
        for i, atom in enumerate(self.lattice.euclidean.variables):
            values[atom] = phi[..., i, :]
        return values

    def with_neighbours(self, phi: Array, p: FieldParameters, mu: int) -> dict[Atom, Array]:
        """The same with the neighbours forwards in direction mu."""
        values, there = self.lookup(phi, p), self._carried(phi, mu, 1)
        for i, atom in enumerate(self.lattice.euclidean.variables):
            values[atom.moved(mu)] = there[..., i, :]
        return values

    def local(self, expression: Expression, values: dict[Atom, Array], phi: Array) -> Array:
        """An expression at each site, (…, sites)."""
        shape = (*phi.shape[:-2], self.sites)
        return jnp.broadcast_to(jnp.asarray(expression.evaluate(values, FUNCTIONS), jnp.float64), shape)

    def action(self, phi: Array, p: FieldParameters) -> Array:
        """Re S of each configuration, (chains,)."""
        total = jnp.sum(self.local(self.lattice.onsite, self.lookup(phi, p), phi), axis=-1)
        for mu, link in enumerate(self.lattice.links):
            there = self.local(link, self.with_neighbours(phi, p, mu), phi)
            mask = self._open(mu, 1)
            total = total + jnp.sum(there if mask is None else there * mask, axis=-1)
        return total

    @cached_property
    def _slopes(self) -> tuple[tuple[Expression, tuple[tuple[Expression, Expression], ...]], ...]:
        """Per variable: the slope on the site, and per direction those of the link at its two ends."""
        found = []
        for v in self.lattice.euclidean.variables:
            ends = tuple((link.diff(v), link.diff(v.moved(mu))) for mu, link in enumerate(self.lattice.links))
            found.append((self.lattice.onsite.diff(v), ends))
        return tuple(found)

    def force(self, phi: Array, p: FieldParameters) -> Array:
        """dS/dphi, (chains, C, sites)."""
        here = self.lookup(phi, p)
        parts = [self.local(slope, here, phi) for slope, _ in self._slopes]
        variables = self.lattice.euclidean.variables
        for mu in range(len(self.lattice.links)):
            forwards, backwards = self._carried(phi, mu, 1), self._carried(phi, mu, -1)
            ahead, behind = dict(here), dict(here)
            for i, atom in enumerate(variables):
                ahead[atom.moved(mu)] = forwards[..., i, :]
                behind[atom], behind[atom.moved(mu)] = backwards[..., i, :], phi[..., i, :]
            masks = self._open(mu, 1), self._open(mu, -1)
            for i, (_, ends) in enumerate(self._slopes):
                for slope, values, mask in zip(ends[mu], (ahead, behind), masks, strict=True):
                    if slope.terms:
                        pull = self.local(slope, values, phi)
                        parts[i] = parts[i] + (pull if mask is None else pull * mask)
        return jnp.stack(parts, axis=-2)

    def phase(self, phi: Array, p: FieldParameters) -> Array:
        """-Im S: the angle of the weight, (chains,)."""
        return jnp.sum(self.local(self.lattice.phase, self.with_neighbours(phi, p, 0), phi), axis=-1)

    def work(self, phi: Array, p: FieldParameters) -> Array:
        """-dS/ds times s, for sources of strength s, (chains,)."""
        here, total = self.lookup(phi, p), jnp.zeros(phi.shape[:-2])
        for k, source in enumerate(self.lattice.euclidean.sources):
            slope = self.lattice.onsite.diff(Symbol("source", source.name))
            total = total - jnp.sum(p.sources[k] * self.local(slope, here, phi), axis=-1)
        return total

    def state(self, phi: Array, p: FieldParameters) -> FieldState:
        """A configuration with its action."""
        return FieldState(phi, self.action(phi, p))


def _unit(mu: int, extents: tuple[int, ...], sign: int = 1) -> tuple[int, ...]:
    return tuple(sign if k == mu else 0 for k in range(len(extents)))


def _rotated(there: Array, crossing: NDArray[np.bool_], angle: float) -> Array:
    """Complex fields, in pairs re, im, times exp(i angle) where a step crosses the edge."""
    cosine, sine = np.where(crossing, math.cos(angle), 1.0), np.where(crossing, math.sin(angle), 0.0)
    re, im = there[..., ::2, :], there[..., 1::2, :]
    pair = jnp.stack([re * cosine - im * sine, re * sine + im * cosine], axis=-2)
    return pair.reshape(there.shape)
