"""Hamiltonian Monte Carlo of fields in real space: minimum-norm steps, geodesic ones on spheres.

H = 1/2 sum m_c v^2 + S with one mass per component. Steps alternate drifts and kicks in the minimum-norm pattern
(Omelyan, Mryglod and Folk, Comput. Phys. Commun. 151 (2003) 272, eq. (31)), which begins and ends with a drift. A unit
vector drifts along its great circle and is kicked within its tangent plane (Byrne and Girolami, Scand. J. Stat. 40
(2013) 825), so that it stays on its sphere to rounding. Number and size of the steps are drawn anew for each
trajectory, independently of the state, so that no mode is in resonance (Mackenzie, Phys. Lett. B 226 (1989) 369).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import jax
import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.compiled.functions import sine_cosine
from quarterturn.sampling.integrators.minimum_norm import LAMBDA
from quarterturn.sampling.moves.base import MoveInfo
from quarterturn.sampling.random import complex_normals, uniforms

WAVES, CHANCES = 0, 1  # streams of random numbers
JITTER = 0.1  # of the size of the steps
SPREAD = 0.5  # of their number: uniform between (1 - SPREAD) and (1 + SPREAD) times the tuned one


class FieldTuning(NamedTuple):
    """What warm-up finds and then freezes; traced."""

    step: Array  # (), in units in which a mass-weighted field has frequencies of order 1
    steps: Array  # (), mean number of steps, as a float
    masses: Array  # (C,)


@dataclass(frozen=True)
class FieldTrajectory:
    """One trajectory and a Metropolis decision. Leaves exp(-Re S) invariant for every tuning."""

    target: FieldTarget
    name: str = "Hamiltonian trajectory"

    # --- the geometry of the variables ----------------------------------------------------------------------
    def tangent(self, phi: Array, v: Array) -> Array:
        """v without its part along the unit vectors."""

        def flat(n: Array, w: Array) -> Array:
            return w - jnp.sum(n * w, axis=1, keepdims=True) * n

        return self.by_sphere(flat, lambda n, w: w, phi, v)

    def by_sphere(self, on_sphere: Callable, elsewhere: Callable, phi: Array, v: Array) -> Array:
        """Two arrays of all variables combined, those of each unit vector together, the others as they are."""
        spheres = {group[0]: group for group in self.target.lattice.euclidean.spheres}
        parts, c = [], 0
        while c < self.target.components:
            rows = slice(c, c + len(spheres.get(c, (c,))))
            combine = on_sphere if c in spheres else elsewhere
            parts.append(combine(phi[:, rows], v[:, rows]))
            c = rows.stop
        return parts[0] if len(parts) == 1 else jnp.concatenate(parts, axis=1)

    def drift(self, phi: Array, v: Array, time: Array) -> tuple[Array, Array]:
        """Free motion: straight, or along great circles."""
        if not self.target.lattice.euclidean.spheres:
            return phi + time * v, v

        def turned(n: Array, w: Array) -> tuple[Array, Array]:
            rate = jnp.sqrt(jnp.sum(w * w, axis=1, keepdims=True))
            sine, cosine = sine_cosine(rate * time)
            shape = sine / jnp.where(rate > 0, rate, 1.0)  # 0 where nothing moves
            return n * cosine + w * shape, w * cosine - n * rate * sine

        moved = self.by_sphere(lambda n, w: turned(n, w)[0], lambda n, w: n + time * w, phi, v)
        return moved, self.by_sphere(lambda n, w: turned(n, w)[1], lambda n, w: w, phi, v)

    def tidied(self, phi: Array) -> Array:
        """Unit vectors brought back to length 1, against rounding; angles shifted by whole periods to about zero."""
        lattice = self.target.lattice
        if lattice.euclidean.spheres:
            phi = self.by_sphere(
                lambda n, _: n / jnp.sqrt(jnp.sum(n * n, axis=1, keepdims=True)), lambda n, _: n, phi, phi
            )
        if any(p is not None for p in lattice.euclidean.periods):
            periods = jnp.asarray(self.target.periods)[:, None]
            safe = jnp.where(periods > 0, periods, 1.0)
            turns = jnp.round(jnp.mean(phi, axis=-1, keepdims=True) / safe) * safe
            phi = phi - jnp.where(periods > 0, turns, 0.0)
        return phi

    # --- the trajectory -------------------------------------------------------------------------------------
    def velocities(self, key: Array, phi: Array, tuning: FieldTuning) -> Array:
        """v with variance 1/m, tangent to the spheres, (chains, C, sites)."""
        chains, components, sites = phi.shape
        count = components * sites
        waves = complex_normals(key, (chains, (count + 1) // 2), WAVES)
        normals = jnp.concatenate([jnp.real(waves), jnp.imag(waves)], axis=-1)[:, :count]
        v = normals.reshape(phi.shape) / jnp.sqrt(tuning.masses)[:, None]
        return self.tangent(phi, v)

    def kinetic(self, v: Array, tuning: FieldTuning) -> Array:
        return 0.5 * jnp.sum(jnp.sum(v * v, axis=-1) * tuning.masses, axis=-1)

    def flow(
        self, phi: Array, v: Array, step: Array, steps: Array, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[Array, Array]:
        """`steps` minimum-norm steps of size `step`. Reversible: negate v and run again. Preserves volume."""

        def kick(phi: Array, v: Array) -> Array:
            push = self.target.force(phi, p) / tuning.masses[:, None]
            return v - 0.5 * step * self.tangent(phi, push)

        def one(_: Array, carry: tuple[Array, Array]) -> tuple[Array, Array]:
            phi, v = carry
            phi, v = self.drift(phi, kick(phi, v), (1 - 2 * LAMBDA) * step)
            return self.drift(phi, kick(phi, v), 2 * LAMBDA * step)

        phi, v = self.drift(phi, v, LAMBDA * step)
        phi, v = jax.lax.fori_loop(0, steps, one, (phi, v))
        return self.drift(phi, v, -LAMBDA * step)

    def step(
        self, key: Array, state: FieldState, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, MoveInfo]:
        chains = state.phi.shape[0]
        chance = uniforms(key, (chains + 2,), CHANCES)
        step = tuning.step * (1 + JITTER * (2 * chance[0] - 1))
        count = jnp.round(tuning.steps * (1 + SPREAD * (2 * chance[1] - 1)))
        steps = jnp.maximum(count, 1.0).astype(jnp.int32)
        v = self.velocities(key, state.phi, tuning)
        phi, final = self.flow(state.phi, v, step, steps, p, tuning)
        phi = self.tidied(phi)
        proposal = self.target.state(phi, p)
        change = proposal.action - state.action + self.kinetic(final, tuning) - self.kinetic(v, tuning)
        accepted = jnp.log(chance[2:]) < -change  # nan compares false: such a trajectory is rejected
        phi = jnp.where(accepted[:, None, None], proposal.phi, state.phi)
        action = jnp.where(accepted, proposal.action, state.action)
        return FieldState(phi, action), MoveInfo(accepted.astype(jnp.float64), change)
