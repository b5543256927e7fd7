"""Hamiltonian Monte Carlo of fields in real space: minimum-norm steps, geodesic ones on spheres.

H = 1/2 sum p^2 + S, each variable measured in its natural scale s: it drifts by s p and is kicked by s dS/dphi, so that
one step size serves variables of unlike stiffness. Steps alternate drifts and kicks in the minimum-norm pattern
(Omelyan, Mryglod and Folk, Comput. Phys. Commun. 151 (2003) 272, eq. (31)), which begins and ends with a drift. A unit
vector drifts along its great circle and is kicked within its tangent plane (Byrne and Girolami, Scand. J. Stat. 40
(2013) 825), so that it stays on its sphere to rounding. Number and size of the steps are drawn anew for each
trajectory, independently of the state, so that no mode is in resonance (Mackenzie, Phys. Lett. B 226 (1989) 369).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import jax
import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.field_target import FieldParameters, Fields, FieldState, FieldTarget
from quarterturn.compiled.functions import sine_cosine
from quarterturn.sampling.integrators.minimum_norm import LAMBDA
from quarterturn.sampling.moves.base import MoveInfo
from quarterturn.sampling.random import complex_normals, log, uniforms

CHANCES = 1 << 20  # stream of random numbers; those below are the momenta of the variables
JITTER = 0.1  # of the size of the steps, chain by chain


class FieldTuning(NamedTuple):
    """What warm-up finds and then freezes; traced."""

    scale: Array  # (C,), natural size of a change of each variable; equal for the components of a unit vector
    step: Array  # (), in units of that scale
    fewest: Array  # (), int32, and
    most: Array  # (), int32: steps of a trajectory, every number between them equally likely
    clusters: Array  # (), how many cluster flips of each symmetry a sweep makes, int32


@dataclass(frozen=True)
class FieldTrajectory:
    """One trajectory and a Metropolis decision. Leaves exp(-Re S) invariant for every tuning."""

    target: FieldTarget
    name: str = "Hamiltonian trajectory"

    # --- the geometry of the variables ----------------------------------------------------------------------
    def tangent(self, phi: Fields, p: Fields) -> Fields:
        """p without its part along the unit vectors."""
        flat = list(p)
        for ball in self.target.euclidean.spheres:
            along = _dot(phi, p, ball)
            for c in ball:
                flat[c] = p[c] - along * phi[c]
        return tuple(flat)

    def drift(self, phi: Fields, p: Fields, time: Array, scale: Array) -> tuple[Fields, Fields]:
        """Free motion for a time (chains,): straight, or along great circles."""
        spheres = self.target.euclidean.spheres
        curved = {c for ball in spheres for c in ball}
        moved = [f if c in curved else f + (time * scale[c]) * v for c, (f, v) in enumerate(zip(phi, p, strict=True))]
        turned = list(p)
        for ball in spheres:
            rate = jnp.sqrt(_dot(p, p, ball))
            sine, cosine = sine_cosine(rate * (time * scale[ball[0]]))
            shape = sine / jnp.where(rate > 0, rate, 1.0)  # 0 where nothing moves
            for c in ball:
                moved[c], turned[c] = phi[c] * cosine + p[c] * shape, p[c] * cosine - phi[c] * (rate * sine)
        return tuple(moved), tuple(turned)

    def kick(self, phi: Fields, p: Fields, time: Array, scale: Array, parameters: FieldParameters) -> Fields:
        """p changed by the force of a time (chains,)."""
        force = self.target.force(phi, parameters)
        push = self.tangent(phi, tuple((time * s) * f for s, f in zip(scale, force, strict=True)))
        return tuple(v - f for v, f in zip(p, push, strict=True))

    def tidied(self, phi: Fields) -> Fields:
        """Unit vectors brought back to length 1, against rounding; angles to within half a period of zero."""
        found = list(phi)
        for c, period in enumerate(self.target.periods):
            if period > 0:
                found[c] = phi[c] - float(period) * jnp.round(phi[c] / float(period))
        for ball in self.target.euclidean.spheres:
            length = jnp.sqrt(_dot(phi, phi, ball))
            for c in ball:
                found[c] = phi[c] / length
        return tuple(found)

    # --- the trajectory -------------------------------------------------------------------------------------
    def momenta(self, key: Array, phi: Fields) -> Fields:
        """Standard normal, tangent to the spheres."""
        sites, chains = phi[0].shape
        half = (sites + 1) // 2
        waves = [complex_normals(key, (half, chains), c) for c in range(len(phi))]
        return self.tangent(phi, tuple(jnp.concatenate([jnp.real(z), jnp.imag(z)])[:sites] for z in waves))

    def kinetic(self, p: Fields) -> Array:
        """1/2 sum p^2, (chains,)."""
        return 0.5 * jnp.sum(_dot(p, p, range(len(p))), axis=0)

    def flow(
        self, phi: Fields, p: Fields, step: Array, steps: Array, parameters: FieldParameters, scale: Array
    ) -> tuple[Fields, Fields]:
        """`steps` minimum-norm steps of sizes `step` (chains,). Reversible: negate p and run again. Keeps volume."""

        def one(_: Array, carry: tuple[Fields, Fields]) -> tuple[Fields, Fields]:
            phi, p = carry
            phi, p = self.drift(phi, self.kick(phi, p, 0.5 * step, scale, parameters), (1 - 2 * LAMBDA) * step, scale)
            return self.drift(phi, self.kick(phi, p, 0.5 * step, scale, parameters), 2 * LAMBDA * step, scale)

        phi, p = self.drift(phi, p, LAMBDA * step, scale)
        phi, p = jax.lax.fori_loop(0, steps, one, (phi, p))
        return self.drift(phi, p, -LAMBDA * step, scale)

    def step(
        self, key: Array, state: FieldState, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, MoveInfo]:
        chains = state.action.shape[0]
        chance = uniforms(key, (3, chains), CHANCES)
        span = (tuning.most - tuning.fewest + 1).astype(jnp.float64)
        steps = tuning.fewest + (chance[2, 0] * span).astype(jnp.int32)
        step = tuning.step * (1 + JITTER * (2 * chance[0] - 1))
        momenta = self.momenta(key, state.phi)
        phi, final = self.flow(state.phi, momenta, step, steps, p, tuning.scale)
        proposal = self.target.state(self.tidied(phi), p)
        change = proposal.action - state.action + self.kinetic(final) - self.kinetic(momenta)
        return metropolis(chance[1], change, proposal, state)


def metropolis(chance: Array, change: Array, proposal: FieldState, state: FieldState) -> tuple[FieldState, MoveInfo]:
    """The proposal with probability min(1, exp(-change)), chain by chain; never where `change` isn't a number."""
    change = jnp.where(jnp.isfinite(change), change, jnp.inf)
    accept = log(chance) < -change
    phi = tuple(jnp.where(accept, new, old) for new, old in zip(proposal.phi, state.phi, strict=True))
    return FieldState(phi, jnp.where(accept, proposal.action, state.action)), MoveInfo(
        accept.astype(jnp.float64), change
    )


def _dot(a: Fields, b: Fields, components: tuple[int, ...] | range) -> Array:
    first, *rest = components
    total = a[first] * b[first]
    for c in rest:
        total = total + a[c] * b[c]
    return total
