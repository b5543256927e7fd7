"""Measurements as JAX functions: what each draw of a chain leaves behind.

Numbers are whole-path averages, one a draw; curves are translation-averaged correlators, by Fourier transform, at the
separations 0 … N/2 (time reversal folds the rest). Where the weight is complex everything is multiplied by the phase
e^{i phi} of the path, and the phase itself is the first number.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import jax.numpy as jnp
from jax import Array

from quarterturn.actions.expression import Atom, Expression, Function, Symbol
from quarterturn.actions.model import Bracket
from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.errors import RequestError


@dataclass(frozen=True)
class Observables:
    """The primary observables of a run. `fixed` are numbers, `free` are curves; `steps` are lattice separations."""

    target: Target
    fixed: tuple[Bracket, ...]
    free: tuple[Bracket, ...]
    offsets: tuple[tuple[int, ...], ...]  # per bracket, fixed then free: lattice offset of each group, 0 for a free one

    @property
    def is_complex(self) -> bool:
        return any(a.terms for a in self.target.euclidean.drift)

    @cached_property
    def steps(self) -> int:
        return self.target.sites // 2 + 1

    @property
    def count(self) -> int:
        """Numbers a draw: the phase (if any) and the fixed brackets."""
        return len(self.fixed) + self.is_complex

    def numbers(self, state: PathState, p: Parameters) -> Array:
        """(chains, count)."""
        q = self.target.path(state, p)
        values = [self._fixed(i, bracket, q, state, p) for i, bracket in enumerate(self.fixed)]
        columns = [jnp.broadcast_to(v, q.shape[:1]) for v in values]
        if self.is_complex:
            weight = jnp.cos(self.target.phase(state, p))
            columns = [weight, *(weight * c for c in columns)]
        return jnp.stack(columns, axis=-1) if columns else jnp.zeros((q.shape[0], 0))

    def spectra(self, state: PathState, p: Parameters) -> Array:
        """Fourier transforms of the curves, real, (chains, curves, sites // 2 + 1): what is summed over draws."""
        q = self.target.path(state, p)
        rows = [self._free(len(self.fixed) + i, bracket, q, p) for i, bracket in enumerate(self.free)]
        if not rows:
            return jnp.zeros((q.shape[0], 0, self.steps))
        stacked = jnp.stack(rows, axis=-2)
        if self.is_complex:
            stacked = stacked * jnp.cos(self.target.phase(state, p))[:, None, None]
        return stacked

    def curves(self, spectra: Array) -> Array:
        """The curves at the separations 0 … N/2, (chains, curves, steps), from their (averaged) spectra."""
        if not self.free:
            return spectra
        return jnp.fft.irfft(spectra, n=self.target.sites, axis=-1)[..., : self.steps]

    # --- one bracket ----------------------------------------------------------------------------------------
    def _local(self, expression: Expression, q: Array, p: Parameters) -> Array:
        value = expression.evaluate(self.target.lookup(q, p), jnp)
        return jnp.broadcast_to(jnp.asarray(value, jnp.float64), (q.shape[0], self.target.sites))

    def _fixed(self, index: int, bracket: Bracket, q: Array, state: PathState, p: Parameters) -> Array:
        if bracket.over == "path":
            return self._whole(bracket.groups[0][1], q, state, p)
        return jnp.mean(self._product(index, bracket, q, p), axis=-1)

    def _product(self, index: int, bracket: Bracket, q: Array, p: Parameters) -> Array:
        """Product over the groups at fixed times of f(q_{i+n}), (chains, sites)."""
        total: Array | None = None
        for (time, expression), offset in zip(bracket.groups, self.offsets[index], strict=True):
            if time is None:
                continue
            factor = jnp.roll(self._local(expression, q, p), -offset, axis=-1)
            total = factor if total is None else total * factor
        assert total is not None
        return total

    def _free(self, index: int, bracket: Bracket, q: Array, p: Parameters) -> Array:
        """Spectrum of (1/N) sum_i f(q_{i+t}) g(q_i), folded with -t: its real part is the part even in t."""
        moving = next(e for time, e in bracket.groups if time is None)
        f = jnp.fft.rfft(self._local(moving, q, p), axis=-1)
        fixed = [(t, e) for t, e in bracket.groups if t is not None]
        same = len(fixed) == 1 and fixed[0][1] == moving
        g = f if same else jnp.fft.rfft(self._product(index, bracket, q, p), axis=-1)
        return (jnp.real(f) * jnp.real(g) + jnp.imag(f) * jnp.imag(g)) / self.target.sites

    def _whole(self, expression: Expression, q: Array, state: PathState, p: Parameters) -> Array:
        lookup = self.target.lookup(q, p)

        def find(atom: Atom) -> Array:
            if isinstance(atom, Function) and atom.name == "mean":
                return jnp.mean(self._local(atom.argument, q, p), axis=-1)
            if isinstance(atom, Function) and atom.name == "charge":
                (angle,) = atom.argument.paths
                return state.winding[..., self.target.euclidean.variables.index(angle)]
            if atom == Symbol("observable", "energy"):
                return self._energy(q, state, p)
            if atom == Symbol("observable", "work"):
                return self.target.work(state, p)
            if atom == Symbol("geometry", "a"):
                return p.spacing
            if isinstance(atom, Symbol) and atom.kind == "geometry":
                return p.spacing * self.target.sites
            return lookup[atom]

        return expression.evaluate(find, jnp)

    def _energy(self, q: Array, state: PathState, p: Parameters) -> Array:
        """Virial estimator of the thermal energy, (chains,).

        On the line <V + 1/2 q . dV/dq>. With angles the centroid form C/(2 beta) + V + 1/2 (q - q_c) . dV/dq, less the
        kinetic action of the winding ramp over beta; equal to -d ln Z/d beta at fixed N by a change of variables.
        Source: Herman, Bruskin and Berne, J. Chem. Phys. 76 (1982) 5150.
        """
        potential = jnp.mean(self.target.potential(q, p), axis=-1)
        slope = self.target.force(state, p)
        if not self.target.angles:
            return potential + 0.5 * jnp.sum(jnp.mean(state.x * slope, axis=-1), axis=-1)
        displaced = state.x - jnp.mean(state.x, axis=-1, keepdims=True)
        virial = 0.5 * jnp.sum(jnp.mean(displaced * slope, axis=-1), axis=-1)
        beta = self.target.sites * p.spacing
        centroid = self.target.components / (2 * beta)
        return centroid + potential + virial - self.target.winding_action(state.winding, p) / beta


def lattice_offsets(bracket: Bracket, spacing: float, sites: int) -> tuple[int, ...]:
    """Whole lattice steps of each group's time.

    Raises RequestError where a time is not on the lattice or beyond its extent.
    """
    offsets = []
    for time, _ in bracket.groups:
        if time is None:
            offsets.append(0)
            continue
        steps = float(time) / spacing
        nearest = round(steps)
        if abs(steps - nearest) > 1e-6:
            below, above = spacing * (steps // 1), spacing * (steps // 1 + 1)
            raise RequestError(
                f"{bracket.label}: the time {float(time):g} is not on the lattice of spacing {spacing:g}; "
                f"its neighbours are {below:g} and {above:g}"
            )
        if abs(nearest) >= sites:
            raise RequestError(f"{bracket.label}: the time {float(time):g} is beyond beta = {sites * spacing:g}")
        offsets.append(nearest)
    return tuple(offsets)
