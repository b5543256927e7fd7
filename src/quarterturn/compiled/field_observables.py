"""Measurements of fields as JAX functions: what each draw leaves behind.

Numbers are averages over all sites, functions of lattice means, and powers of the lowest Fourier modes; curves are
correlators in time, translation-averaged by Fourier transform, at a fixed distance in space or summed over it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import jax.numpy as jnp
import numpy as np
from jax import Array

from quarterturn.actions.expression import Atom, Expression, Function, PathAtom, Symbol
from quarterturn.actions.model import Bracket
from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.errors import RequestError

SUMMED = "sum"
ZERO_MODE, LOWEST_MODE = "zero mode", "lowest mode"  # kinds of brackets that xi2 is made of


@dataclass(frozen=True)
class FieldObservables:
    """The primary observables of a run of fields. `fixed` are numbers, `free` are curves in time."""

    target: FieldTarget
    fixed: tuple[Bracket, ...]
    free: tuple[Bracket, ...]
    offsets: tuple[tuple[tuple[int, ...], ...], ...]  # per bracket and group: lattice steps, 0 where free or summed

    @property
    def is_complex(self) -> bool:
        return self.target.is_complex

    @cached_property
    def steps(self) -> int:
        return self.target.lattice.extents[0] // 2 + 1

    @property
    def count(self) -> int:
        """Numbers a draw: the phase (if any) and the fixed brackets."""
        return len(self.fixed) + self.is_complex

    def numbers(self, state: FieldState, p: FieldParameters) -> Array:
        """(chains, count)."""
        values = [self._fixed(i, bracket, state.phi, p) for i, bracket in enumerate(self.fixed)]
        columns = [jnp.broadcast_to(v, state.action.shape) for v in values]
        if self.is_complex:
            weight = jnp.cos(self.target.phase(state.phi, p))
            columns = [weight, *(weight * c for c in columns)]
        return jnp.stack(columns, axis=-1) if columns else jnp.zeros((*state.action.shape, 0))

    def spectra(self, state: FieldState, p: FieldParameters) -> Array:
        """Fourier transforms in time of the curves, real, (chains, curves, T // 2 + 1)."""
        rows = [self._free(len(self.fixed) + i, bracket, state.phi, p) for i, bracket in enumerate(self.free)]
        if not rows:
            return jnp.zeros((*state.action.shape, 0, self.steps))
        stacked = jnp.stack(rows, axis=-2)
        if self.is_complex:
            stacked = stacked * jnp.cos(self.target.phase(state.phi, p))[:, None, None]
        return stacked

    def curves(self, spectra: Array) -> Array:
        """The curves at the separations 0 … T/2, (chains, curves, steps)."""
        if not self.free:
            return spectra
        return jnp.fft.irfft(spectra, n=self.target.lattice.extents[0], axis=-1)[..., : self.steps]

    # --- one bracket ----------------------------------------------------------------------------------------
    def _local(self, expression: Expression, phi: Array, p: FieldParameters) -> Array:
        values = self.target.lookup(phi, p)
        for mu in sorted({abs(a.neighbour) - 1 for a in expression.paths if a.neighbour}):
            values |= self.target.with_neighbours(phi, p, mu)
        return self.target.local(_forwards(expression), values, phi)

    def _shifted(self, values: Array, offset: tuple[int, ...]) -> Array:
        if not any(offset):
            return values
        return jnp.take(values, self.target.shifted_sites(offset), axis=-1)

    def _fixed(self, index: int, bracket: Bracket, phi: Array, p: FieldParameters) -> Array:
        if bracket.over == "path":
            return self._whole(bracket.groups[0][1], phi, p)
        if bracket.over in (ZERO_MODE, LOWEST_MODE):
            return self._power(self._local(bracket.groups[0][1], phi, p), bracket.over)
        return jnp.mean(self._product(index, bracket, phi, p), axis=-1)

    def _product(self, index: int, bracket: Bracket, phi: Array, p: FieldParameters) -> Array:
        """Product over the groups at fixed points, (chains, sites)."""
        total: Array | None = None
        for k, (time, expression) in enumerate(bracket.groups):
            if time is None:
                continue
            factor = self._shifted(self._local(expression, phi, p), self.offsets[index][k])
            total = factor if total is None else total * factor
        assert total is not None
        return total

    def _power(self, values: Array, kind: str) -> Array:
        """|sum_x f|^2 / V, or the same of the longest wave, averaged over the longest directions."""
        extents = self.target.lattice.extents
        if kind == ZERO_MODE:
            return jnp.sum(values, axis=-1) ** 2 / self.target.sites
        grid = values.reshape(*values.shape[:-1], *extents)
        longest = [mu for mu, n in enumerate(extents) if n == max(extents)]
        total = jnp.zeros(values.shape[:-1])
        for mu in longest:
            others = tuple(k - len(extents) for k in range(len(extents)) if k != mu)
            line = jnp.sum(grid, axis=others) if others else grid
            turn = 2 * np.pi * np.arange(extents[mu]) / extents[mu]
            total = total + (line @ np.cos(turn)) ** 2 + (line @ np.sin(turn)) ** 2
        return total / (len(longest) * self.target.sites)

    def _free(self, index: int, bracket: Bracket, phi: Array, p: FieldParameters) -> Array:
        """Spectrum in time of <f(t) g(0)>, folded with -t: its real part is the part even in t."""
        place = next(k for k, (time, _) in enumerate(bracket.groups) if time is None)
        extents = self.target.lattice.extents
        f = self._local(bracket.groups[place][1], phi, p)
        g = self._product(index, bracket, phi, p)
        if not bracket.places or SUMMED in bracket.places[place]:
            f = jnp.sum(f.reshape(*f.shape[:-1], extents[0], -1), axis=-1)
            g = jnp.sum(g.reshape(*g.shape[:-1], extents[0], -1), axis=-1)
            a, b = jnp.fft.rfft(f, axis=-1), jnp.fft.rfft(g, axis=-1)
            cell = jnp.prod(p.spacings[1:])
            return (jnp.real(a) * jnp.real(b) + jnp.imag(a) * jnp.imag(b)) * cell / self.target.sites
        f = self._shifted(f, self.offsets[index][place]).reshape(*f.shape[:-1], extents[0], -1)
        a, b = jnp.fft.rfft(f, axis=-2), jnp.fft.rfft(g.reshape(f.shape), axis=-2)
        return jnp.sum(jnp.real(a) * jnp.real(b) + jnp.imag(a) * jnp.imag(b), axis=-1) / self.target.sites

    def _whole(self, expression: Expression, phi: Array, p: FieldParameters) -> Array:
        scalars = self.target.scalars(p)

        def find(atom: Atom) -> Array:
            if isinstance(atom, Function) and atom.name == "mean":
                return jnp.mean(self._local(atom.argument, phi, p), axis=-1)
            if atom == Symbol("observable", "work"):
                return self.target.work(phi, p)
            if atom in scalars:
                return scalars[atom]
            raise RequestError(f"{getattr(atom, 'name', 'this')} is not available for fields on space yet")

        return expression.evaluate(find, jnp)


def _forwards(expression: Expression) -> Expression:
    """Averages over sites do not see a common shift, so that phi phi(-x) is phi(+x) phi."""
    if any(a.neighbour < 0 for a in expression.paths):
        places = {a.neighbour for a in expression.paths}
        if len(places - {0}) > 1:
            raise RequestError("a product of neighbours on both sides is not available in a measurement")
        (place,) = places - {0}

        def step(atom: Atom) -> Expression | None:
            if not isinstance(atom, PathAtom):
                return None
            return Expression.of(atom.value if atom.neighbour else atom.moved(-place - 1))

        return expression.substitute(step)
    return expression


def field_offsets(
    bracket: Bracket, coordinates: tuple[str, ...], extents: tuple[int, ...], spacings: tuple[float, ...]
) -> tuple[tuple[int, ...], ...]:
    """Whole lattice steps of each group in each direction; 0 where it is free or summed over.

    Raises RequestError where a place is not on the lattice, or for a curve along space.
    """
    found = []
    for k, (time, _) in enumerate(bracket.groups):
        places = bracket.places[k] if bracket.places else (0,) * (len(extents) - 1)
        if any(place is None for place in places):
            raise RequestError(f"{bracket.label}: a curve runs along t; sum over space with sum_x, or fix the place")
        steps = []
        for name, place, n, a in zip(coordinates, (time, *places), extents, spacings, strict=True):
            if place is None or place == SUMMED:
                steps.append(0)
                continue
            exact = float(place) / a
            if abs(exact - round(exact)) > 1e-6 or abs(round(exact)) >= n:
                raise RequestError(f"{bracket.label}: {name} = {float(place):g} is not on the lattice of spacing {a:g}")
            steps.append(round(exact))
        found.append(tuple(steps))
    return tuple(found)
