"""The lattice action as JAX functions of (path, parameters), in whitened variables.

The kinetic matrix K = G G^T is removed once: x = G^T q makes the kinetic part 1/2 |x'|^2 whatever the masses, so that
one reference form serves all of them. Couplings and the spacing are traced arguments: another value never compiles
again. The force is the symbolic derivative of the potential, evaluated site by site; nothing is differentiated
through a shift.
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

from quarterturn.actions.expression import Atom, Expression, Symbol
from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import ActionError
from quarterturn.lattice.sources import source_values


class Parameters(NamedTuple):
    """What may change between runs without compiling."""

    couplings: Array  # (K,), in the order of `Target.names`
    spacing: Array  # (), a [time]
    whitening: Array  # (C, C), G of the mass matrix K = G G^T, lower triangular
    unwhitening: Array  # (C, C), its inverse
    sources: Array  # (S, sites), each source at each site, times its strength


class PathState(NamedTuple):
    """Many paths at once."""

    x: Array  # (chains, C, sites), whitened, periodic part of the path
    winding: Array  # (chains, C), whole numbers as floats; zero for variables on the line
    action: Array  # (chains,), Re S, kept so that no sweep computes it twice


def ahead(x: Array) -> Array:
    """The next site along the periodic last axis."""
    return jnp.concatenate([x[..., 1:], x[..., :1]], axis=-1)


@dataclass(frozen=True)
class Target:
    """exp(-Re S) on `sites` periodic points, as functions of a `PathState` and `Parameters`."""

    euclidean: EuclideanAction
    sites: int
    names: tuple[str, ...]  # couplings, sorted

    @property
    def components(self) -> int:
        return len(self.euclidean.variables)

    @cached_property
    def angles(self) -> tuple[int, ...]:
        """Indices of the variables that live on a circle."""
        return tuple(i for i, period in enumerate(self.euclidean.periods) if period is not None)

    @cached_property
    def periods(self) -> np.ndarray:
        """(C,), circumference of each angle, 0 for variables on the line."""
        lookup: dict[Atom, float] = {}
        return np.array([0.0 if p is None else float(p.evaluate(lookup, np)) for p in self.euclidean.periods])

    @cached_property
    def gradient(self) -> tuple[Expression, ...]:
        """dV/dq_c, symbolically."""
        euclidean = self.euclidean
        return tuple(euclidean.potential.diff(atom) for atom in euclidean.variables)

    def parameters(self, couplings: Mapping[str, float], spacing: float, strength: float = 1.0) -> Parameters:
        """Traced arguments from plain numbers; all sources are scaled by `strength`. Call inside `double()`.

        Raises ActionError where the mass matrix is not positive definite at these couplings.
        """
        lookup: dict[Atom, float] = {Symbol("coupling", name): float(couplings[name]) for name in self.names}
        mass = np.array([[float(k.evaluate(lookup, np)) for k in row] for row in self.euclidean.mass])
        try:
            factor = np.linalg.cholesky(mass)
        except np.linalg.LinAlgError as error:
            raise ActionError(f"the kinetic form is not positive at these couplings: masses {mass.tolist()}") from error
        values = np.array([couplings[name] for name in self.names], dtype=np.float64)
        given = source_values(self.euclidean.sources, couplings, ("t",), (self.sites,), (spacing,))
        arrays = (values, np.float64(spacing), factor, np.linalg.inv(factor), strength * given)
        return Parameters(*(jnp.asarray(array) for array in arrays))

    def scalars(self, p: Parameters) -> dict[Atom, Array]:
        return {Symbol("coupling", name): p.couplings[i] for i, name in enumerate(self.names)}

    # --- masses ---------------------------------------------------------------------------------------------
    @cached_property
    def coupled(self) -> np.ndarray:
        """(C, C), whether the masses mix two variables, directly or through others; G has no other entries."""
        mixed = np.array([[bool(k.terms) for k in row] for row in self.euclidean.mass]).astype(int)
        return np.linalg.matrix_power(mixed + np.eye(self.components, dtype=int), self.components) > 0

    def _mixed(self, matrix: Array, x: Array) -> Array:
        """matrix . x along the component axis (second to last), column by column: cheaper than a contraction."""
        if np.array_equal(self.coupled, np.eye(self.components)):
            return jnp.diagonal(matrix)[:, None] * x
        columns = [matrix[:, d, None] * x[..., d : d + 1, :] for d in range(self.components)]
        return sum(columns[1:], columns[0])

    def from_whitened(self, x: Array, p: Parameters) -> Array:
        """q = G^-T x along the component axis."""
        return self._mixed(p.unwhitening.T, x)

    def to_whitened(self, q: Array, p: Parameters) -> Array:
        """x = G^T q."""
        return self._mixed(p.whitening.T, q)

    # --- paths ----------------------------------------------------------------------------------------------
    def path(self, state: PathState, p: Parameters) -> Array:
        """q at each site, (chains, C, sites); angles with their winding ramp."""
        q = self.from_whitened(state.x, p)
        if not self.angles:
            return q
        ramp = jnp.arange(self.sites) / self.sites
        return q + (state.winding * self.periods)[..., None] * ramp

    def lookup(self, q: Array, p: Parameters) -> dict[Atom, Array]:
        """Values of every atom of the action for a path (…, C, sites)."""
        values: dict[Atom, Array] = dict(self.scalars(p))
        for k, source in enumerate(self.euclidean.sources):
            values[Symbol("source", source.name)] = p.sources[k]
        for i, atom in enumerate(self.euclidean.variables):
            values[atom] = q[..., i, :]
        return values

    # --- the action -----------------------------------------------------------------------------------------
    def potential(self, q: Array, p: Parameters) -> Array:
        """V(q_i), (…, sites)."""
        value = self.euclidean.potential.evaluate(self.lookup(q, p), jnp)
        return jnp.broadcast_to(jnp.asarray(value, jnp.float64), (*q.shape[:-2], self.sites))

    def force(self, state: PathState, p: Parameters) -> Array:
        """dV/dx_c at each site (without the factor a), (chains, C, sites)."""
        q = self.path(state, p)
        lookup = self.lookup(q, p)
        shape = q.shape[:-2] + q.shape[-1:]
        parts = [jnp.broadcast_to(g.evaluate(lookup, jnp), shape) for g in self.gradient]
        return self._mixed(p.unwhitening, jnp.stack(parts, axis=-2))

    def work(self, state: PathState, p: Parameters) -> Array:
        """-dS/ds times s, for sources of strength s: -sum_i a J_i dV/dJ_i, (chains,)."""
        q = self.path(state, p)
        lookup = self.lookup(q, p)
        total = jnp.zeros(q.shape[:-2])
        for k, source in enumerate(self.euclidean.sources):
            slope = self.euclidean.potential.diff(Symbol("source", source.name)).evaluate(lookup, jnp)
            total = total - p.spacing * jnp.sum(p.sources[k] * jnp.broadcast_to(slope, q[..., 0, :].shape), axis=-1)
        return total

    def winding_action(self, winding: Array, p: Parameters) -> Array:
        """Kinetic action of the winding ramp, 1/2 (PW)^T K (PW) / beta, (chains,)."""
        if not self.angles:
            return jnp.zeros(winding.shape[:-1])
        turned = self.to_whitened((winding * self.periods)[..., None], p)[..., 0]
        return 0.5 * jnp.sum(turned**2, axis=-1) / (self.sites * p.spacing)

    def kinetic_action(self, state: PathState, p: Parameters) -> Array:
        """sum_i |x_i+1 - x_i|^2 / (2a), the ramp of the winding included, (chains,)."""
        links = ahead(state.x) - state.x
        return jnp.sum(links**2, axis=(-2, -1)) / (2 * p.spacing) + self.winding_action(state.winding, p)

    def action(self, state: PathState, p: Parameters) -> Array:
        """Re S of each path, computed afresh, (chains,)."""
        v = self.potential(self.path(state, p), p)
        return self.kinetic_action(state, p) + p.spacing * (v @ jnp.ones(self.sites))  # faster than a sum

    def state(self, x: Array, winding: Array, p: Parameters) -> PathState:
        """A state with its action."""
        bare = PathState(x, winding, jnp.zeros(x.shape[:-2]))
        return bare._replace(action=self.action(bare, p))

    def phase(self, state: PathState, p: Parameters) -> Array:
        """-Im S: the angle of the weight of each path, sum_i A(q_mid) . (q_i+1 - q_i), (chains,)."""
        q = self.path(state, p)
        step = ahead(q) - q
        if self.angles:  # the last link closes on the next turn
            closing = jnp.zeros((*step.shape[:-1], self.sites)).at[..., -1].set(state.winding * self.periods)
            step = step + closing
        lookup = self.lookup(q + step / 2, p)
        total = jnp.zeros(q.shape[:-2])
        for i, drift in enumerate(self.euclidean.drift):
            if drift.terms:
                a = jnp.broadcast_to(drift.evaluate(lookup, jnp), step[..., i, :].shape)
                total = total + jnp.sum(a * step[..., i, :], axis=-1)
        return total

    def reference_form(self, frequency_squared: Array, p: Parameters) -> Array:
        """D(k) = (2/a)(1 - cos k) + a Omega_c^2 for the real Fourier modes, (C, sites // 2 + 1)."""
        k = 2 * math.pi * jnp.arange(self.sites // 2 + 1) / self.sites
        return (2 / p.spacing) * (1 - jnp.cos(k)) + p.spacing * frequency_squared[:, None]
