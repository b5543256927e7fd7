"""Hamiltonian Monte Carlo with the reference quadratic form evolved exactly in Fourier space.

The velocity v has covariance D^-1 with D the reference form, so that H_0 = 1/2 (x-x0) D (x-x0) + 1/2 v D v rotates
each Fourier mode by the same angle and slow modes decorrelate as fast as fast ones; what is left of the action kicks
v by -D^-1 grad S_int, one pair of Fourier transforms a kick.

The mean of an angle has no place to rotate about: it drifts freely and is kicked by the whole force, so that the
trajectory commutes with shifts by whole periods. (Were it not so, bringing the mean back to [-P/2, P/2) between
trajectories would break detailed balance.)

Sources: Duane et al., Phys. Lett. B 195 (1987) 216; mass matrix as the form itself: Batrouni et al., Phys. Rev. D 32
(1985) 2736 (Fourier acceleration).
"""

from __future__ import annotations

from dataclasses import dataclass

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target, ahead
from quarterturn.sampling.moves.base import MoveInfo, Tuning, metropolis
from quarterturn.sampling.random import complex_normals, uniforms

JITTER = 0.15  # each trajectory's angles are scaled by 1 + JITTER u, u uniform in (-1, 1): no resonance survives
WAVES, CHANCES = 0, 1  # streams of random numbers


@dataclass(frozen=True)
class HamiltonianMove:
    """One trajectory and a Metropolis decision. Leaves exp(-Re S) invariant for every tuning."""

    target: Target

    @property
    def name(self) -> str:
        return "Hamiltonian trajectory"

    def velocities(self, key: Array, chains: int, form: Array) -> Array:
        """v with covariance D^-1, drawn mode by mode, (chains, C, sites)."""
        sites, half = self.target.sites, self.target.sites // 2 + 1
        lone = jnp.zeros(half, bool).at[0].set(True)  # modes without a partner, of which the real part alone counts
        if sites % 2 == 0:
            lone = lone.at[-1].set(True)
        amplitude = jnp.sqrt(jnp.where(lone, 1.0, 0.5) * sites / form)
        waves = complex_normals(key, (chains, self.target.components, half), WAVES)
        return jnp.fft.irfft(waves * amplitude, n=sites, axis=-1)

    def kinetic(self, v: Array, p: Parameters, tuning: Tuning) -> Array:
        """1/2 v D v in real space, (chains,)."""
        stretch = jnp.sum((ahead(v) - v) ** 2, axis=(-2, -1))  # plain sums first: factors inside are slower
        pull = jnp.sum(v * v, axis=-1) @ tuning.frequency_squared
        return 0.5 * (stretch / p.spacing + p.spacing * pull)

    def flow(self, state: PathState, v: Array, scale: Array, p: Parameters, tuning: Tuning) -> tuple[Array, Array]:
        """The whole trajectory, (x, v) at its end; `scale` (chains, 1, 1) stretches its angles.

        Reversible: negate v and run again. Preserves volume.
        """
        centre, omega2 = tuning.centre[:, None], tuning.frequency_squared[:, None]
        propagator = p.spacing / self.target.reference_form(tuning.frequency_squared, p)

        def rotate(y: Array, v: Array, angle: Array) -> tuple[Array, Array]:
            cosine, sine = jnp.cos(angle * scale), jnp.sin(angle * scale)
            turned, speed = y * cosine + v * sine, v * cosine - y * sine
            if self.target.angles:
                middle, drift = self.free_part(y), self.free_part(v)
                turned = turned + middle * (1 - cosine) + drift * (angle * scale - sine)
                speed = speed + middle * sine + drift * (1 - cosine)
            return turned, speed

        def kicked(i: Array, carry: tuple[Array, Array]) -> tuple[Array, Array]:
            y, v = carry
            bound = y - self.free_part(y) if self.target.angles else y
            slope = self.target.force(state._replace(x=y + centre), p) - omega2 * bound
            push = jnp.fft.irfft(jnp.fft.rfft(slope, axis=-1) * propagator, n=self.target.sites, axis=-1)
            return rotate(y, v - tuning.kicks[i] * scale * push, tuning.rotations[i + 1])

        y, v = rotate(state.x - centre, v, tuning.rotations[0])
        y, v = jax.lax.fori_loop(0, tuning.used, kicked, (y, v))
        return y + centre, v

    def free_part(self, y: Array) -> Array:
        """Means of the components that a whole turn of some angle shifts, zero for others, (chains, C, 1)."""
        shifted = jnp.asarray(np.any(self.target.coupled[:, list(self.target.angles)], axis=1))
        return jnp.where(shifted[:, None], jnp.mean(y, axis=-1, keepdims=True), 0.0)

    def recentred(self, state: PathState, p: Parameters) -> PathState:
        """Shift lifted angles by whole periods so that their mean is near zero; the physics does not change."""
        if not self.target.angles:
            return state
        periods = jnp.asarray(self.target.periods)
        q = self.target.path(state, p)
        safe = jnp.where(periods > 0, periods, 1.0)
        turns = jnp.where(periods > 0, jnp.round(jnp.mean(q, axis=-1) / safe) * safe, 0.0)
        return state._replace(x=state.x - self.target.to_whitened(turns[..., None], p))

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        chains = state.x.shape[0]
        chance = uniforms(key, (2, chains), CHANCES)
        state = self.recentred(state, p)
        v = self.velocities(key, chains, self.target.reference_form(tuning.frequency_squared, p))
        scale = 1 + JITTER * (2 * chance[0, :, None, None] - 1)
        x, final = self.flow(state, v, scale, p, tuning)
        proposal = self.target.state(x, state.winding, p)
        change = proposal.action - state.action + self.kinetic(final, p, tuning) - self.kinetic(v, p, tuning)
        return metropolis(chance[1], change, proposal, state)
