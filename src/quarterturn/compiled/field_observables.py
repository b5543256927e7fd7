"""Measurements of fields as JAX functions: what each draw of a chain leaves behind.

Numbers are averages over the lattice, one a draw. Curves are correlators along one direction at the separations
0 … N/2, averaged over all translations of the lattice and folded by reflection; they are summed over draws as Fourier
transforms along that direction. A factor under sum_x is summed over space first, so that a projection costs one
transform of a line. Where the weight is complex everything is multiplied by the cosine of the phase, and that itself is
the first number.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import jax.numpy as jnp
import numpy as np
from jax import Array

from quarterturn.actions.expression import Atom, Expression, Function, Symbol
from quarterturn.actions.model import Bracket
from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget, SiteValues
from quarterturn.errors import RequestError

SUMMED, AVERAGED = "sum", "mean"  # places in a bracket: over all sites of a direction, times its spacing or a mean
ZERO_MODE, LOWEST_MODE = "zero mode", "lowest mode"  # kinds of brackets that xi2 is made of
Place = int | str | None  # whole lattice steps, SUMMED or AVERAGED, None where free


@dataclass(frozen=True)
class FieldObservables:
    """The primary observables of a run; `places` has per bracket (fixed, then free) and group a `Place` each way."""

    target: FieldTarget
    fixed: tuple[Bracket, ...]
    free: tuple[Bracket, ...]
    places: tuple[tuple[tuple[Place, ...], ...], ...]

    @property
    def is_complex(self) -> bool:
        return self.target.is_complex

    @property
    def count(self) -> int:
        """Numbers a draw: the phase (if any) and the fixed brackets."""
        return len(self.fixed) + self.is_complex

    @cached_property
    def points(self) -> int:
        """Points of all curves together."""
        return sum(self.lengths)

    @cached_property
    def directions(self) -> tuple[int, ...]:
        """Along which direction each curve runs."""
        return tuple(_free_direction(places) for places in self.places[len(self.fixed) :])

    @cached_property
    def lengths(self) -> tuple[int, ...]:
        """Points of each curve."""
        return tuple(self.target.extents[d] // 2 + 1 for d in self.directions)

    def numbers(self, state: FieldState, p: FieldParameters) -> Array:
        """(chains, count)."""
        values, shape = self.target.values(state.phi, p), state.action.shape
        columns = [jnp.broadcast_to(self._fixed(i, b, values, p), shape) for i, b in enumerate(self.fixed)]
        if self.is_complex:
            weight = jnp.cos(self.target.phase(state.phi, p))
            columns = [weight, *(weight * c for c in columns)]
        return jnp.stack(columns, axis=-1) if columns else jnp.zeros((*shape, 0))

    def spectra(self, state: FieldState, p: FieldParameters) -> tuple[Array, ...]:
        """Fourier transforms of the curves, real, (length, chains) each: what is summed over draws."""
        values = self.target.values(state.phi, p)
        found = tuple(self._free(len(self.fixed) + i, b, values, p) for i, b in enumerate(self.free))
        if not self.is_complex:
            return found
        weight = jnp.cos(self.target.phase(state.phi, p))
        return tuple(weight * spectrum for spectrum in found)

    def nothing(self, chains: int) -> tuple[Array, ...]:
        """Spectra to begin a sum with."""
        return tuple(jnp.zeros((n, chains)) for n in self.lengths)

    def curves(self, spectra: Sequence[Array], chains: int) -> Array:
        """All curves one after another, (chains, points), from their (averaged) spectra."""
        rows = [
            jnp.fft.irfft(s, n=self.target.extents[d], axis=0)[:n].T
            for s, d, n in zip(spectra, self.directions, self.lengths, strict=True)
        ]
        return jnp.concatenate(rows, axis=-1) if rows else jnp.zeros((chains, 0))

    # --- one bracket ----------------------------------------------------------------------------------------
    def _local(self, expression: Expression, values: SiteValues) -> Array:
        """An expression at every site, (extents, chains)."""
        return values.local(expression).reshape(*self.target.extents, -1)

    def _placed(
        self, expression: Expression, places: tuple[Place, ...], values: SiteValues, p: FieldParameters
    ) -> Array:
        """f(x + place), summed over the directions that say so (one entry is left of them)."""
        f = self._local(expression, values)
        for direction, place in enumerate(places):
            if place == SUMMED:
                f = p.spacings[direction] * jnp.sum(f, axis=direction, keepdims=True)
            elif place == AVERAGED:
                f = jnp.mean(f, axis=direction, keepdims=True)
            elif isinstance(place, int) and place:
                f = jnp.roll(f, -place, axis=direction)
        return f

    def _product(self, index: int, bracket: Bracket, values: SiteValues, p: FieldParameters) -> Array:
        """Product of the groups that stand at fixed places, (extents, chains) or broadcastable."""
        total: Array | None = None
        for (_, expression), places in zip(bracket.groups, self.places[index], strict=True):
            if None not in places:
                factor = self._placed(expression, places, values, p)
                total = factor if total is None else total * factor
        assert total is not None
        return total

    def _fixed(self, index: int, bracket: Bracket, values: SiteValues, p: FieldParameters) -> Array:
        if bracket.over == "path":
            return self._whole(bracket.groups[0][1], values, p)
        if bracket.over in (ZERO_MODE, LOWEST_MODE):
            return self._power(self._local(bracket.groups[0][1], values), bracket.over)
        return jnp.mean(self._product(index, bracket, values, p), axis=tuple(range(self.target.dimension)))

    def _free(self, index: int, bracket: Bracket, values: SiteValues, p: FieldParameters) -> Array:
        """Spectrum along the free direction of the average over translations of f(x + n) g(x), even part in n."""
        direction = self.directions[index - len(self.fixed)]
        moving = next(i for i, places in enumerate(self.places[index]) if None in places)
        f = self._placed(bracket.groups[moving][1], self.places[index][moving], values, p)
        g = self._product(index, bracket, values, p)
        others = tuple(d for d in range(self.target.dimension) if d != direction)
        flat = tuple(d for d in others if f.shape[d] == 1)
        g = jnp.mean(g, axis=flat, keepdims=True)
        f_k, g_k = jnp.fft.rfft(f, axis=direction), jnp.fft.rfft(g, axis=direction)
        even = jnp.real(f_k) * jnp.real(g_k) + jnp.imag(f_k) * jnp.imag(g_k)
        return jnp.mean(even, axis=others) / self.target.extents[direction]

    def _whole(self, expression: Expression, values: SiteValues, p: FieldParameters) -> Array:
        scalars = self.target.scalars(p)

        def find(atom: Atom) -> Array:
            if isinstance(atom, Function) and atom.name == "mean":
                return jnp.mean(self._local(atom.argument, values), axis=tuple(range(self.target.dimension)))
            if atom == Symbol("observable", "work"):
                return self.target.work(values.phi, p)
            if atom in scalars:
                return scalars[atom]
            raise RequestError(f"{getattr(atom, 'name', 'this')} is not available for fields on space yet")

        return expression.evaluate(find, jnp)

    def _power(self, f: Array, kind: str) -> Array:
        """|sum_x f|^2 / V, or the same of the longest wave, averaged over the longest directions."""
        extents = self.target.extents
        if kind == ZERO_MODE:
            return jnp.sum(f, axis=tuple(range(len(extents)))) ** 2 / self.target.sites
        powers = []
        for mu in longest(extents):
            line = jnp.sum(f, axis=tuple(k for k in range(len(extents)) if k != mu))
            turn = 2 * math.pi * np.arange(extents[mu]) / extents[mu]
            powers.append((np.cos(turn) @ line) ** 2 + (np.sin(turn) @ line) ** 2)
        return sum(powers[1:], powers[0]) / (len(powers) * self.target.sites)


def longest(extents: tuple[int, ...]) -> tuple[int, ...]:
    """The directions with the most sites, which the second-moment correlation length looks along."""
    return tuple(d for d, n in enumerate(extents) if n == max(extents))


def _free_direction(places: tuple[tuple[Place, ...], ...]) -> int:
    return next(p.index(None) for p in places if None in p)


def field_places(
    bracket: Bracket, coordinates: tuple[str, ...], spacings: tuple[float, ...], extents: tuple[int, ...]
) -> tuple[tuple[Place, ...], ...]:
    """Whole lattice steps of each group's place.

    Raises RequestError where a number is not on the lattice or beyond its extent.
    """
    space = bracket.places or ((Fraction(0),) * (len(coordinates) - 1),) * len(bracket.groups)
    found = []
    for (time, _), rest in zip(bracket.groups, space, strict=True):
        row: list[Place] = []
        for place, name, a, n in zip((time, *rest), coordinates, spacings, extents, strict=True):
            row.append(place if place is None or isinstance(place, str) else _steps(bracket, place, name, a, n))
        found.append(tuple(row))
    return tuple(found)


def _steps(bracket: Bracket, place: Fraction, name: str, spacing: float, sites: int) -> int:
    steps = float(place) / spacing
    nearest = round(steps)
    if abs(steps - nearest) > 1e-6:
        below, above = spacing * (steps // 1), spacing * (steps // 1 + 1)
        raise RequestError(
            f"{bracket.label}: {name} = {float(place):g} is not on the lattice of spacing {spacing:g}; "
            f"its neighbours are {below:g} and {above:g}"
        )
    if abs(nearest) >= sites:
        raise RequestError(
            f"{bracket.label}: {name} = {float(place):g} is beyond the lattice, {sites * spacing:g} long"
        )
    return nearest
