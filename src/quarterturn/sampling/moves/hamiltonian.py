"""Hamiltonian Monte Carlo with the reference quadratic form evolved exactly in Fourier space.

The velocity v has covariance D^-1 with D the reference form, so that H_0 = 1/2 (x-x0) D (x-x0) + 1/2 v D v rotates
each Fourier mode by the same angle and slow modes decorrelate as fast as fast ones; what is left of the action kicks
v by -D^-1 grad S_int, one pair of Fourier transforms a kick.

Sources: Duane et al., Phys. Lett. B 195 (1987) 216; mass matrix as the form itself: Batrouni et al., Phys. Rev. D 32
(1985) 2736 (Fourier acceleration).
"""

from __future__ import annotations

from dataclasses import dataclass

import jax
import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target, ahead
from quarterturn.sampling.moves.base import MoveInfo, Tuning

JITTER = 0.15  # each trajectory's angles are scaled by 1 + JITTER u, u uniform in (-1, 1): no resonance survives


@dataclass(frozen=True)
class HamiltonianMove:
    """One trajectory and a Metropolis decision. Leaves exp(-Re S) invariant for every tuning."""

    target: Target

    @property
    def name(self) -> str:
        return "Hamiltonian trajectory"

    def velocities(self, key: Array, shape: tuple[int, ...], form: Array) -> tuple[Array, Array]:
        """v with covariance D^-1, drawn mode by mode, and 1/2 v D v, (chains,)."""
        sites, half = shape[-1], shape[-1] // 2 + 1
        normals = jax.random.normal(key, (2, *shape[:-1], half), dtype=jnp.float64)
        real, imaginary = normals[0], normals[1]
        lone = jnp.zeros(half, bool).at[0].set(True)
        if sites % 2 == 0:
            lone = lone.at[-1].set(True)
        imaginary = jnp.where(lone, 0.0, imaginary)
        amplitude = jnp.where(lone, jnp.sqrt(1.0 * sites), jnp.sqrt(sites / 2.0)) / jnp.sqrt(form)
        v = jnp.fft.irfft((real + 1j * imaginary) * amplitude, n=sites, axis=-1)
        return v, 0.5 * jnp.sum(real**2 + imaginary**2, axis=(-2, -1))

    def kinetic(self, v: Array, p: Parameters, tuning: Tuning) -> Array:
        """1/2 v D v in real space, (chains,)."""
        links = ahead(v) - v
        mass = p.spacing * tuning.frequency_squared[:, None]
        return 0.5 * jnp.sum(links**2 / p.spacing + mass * v**2, axis=(-2, -1))

    def flow(
        self, state: PathState, v: Array, scale: Array, p: Parameters, tuning: Tuning, inverse_form: Array
    ) -> tuple[PathState, Array]:
        """The whole trajectory; `scale` (chains, 1, 1) jitters its angles. Reversible: negate v and run again."""
        centre, omega2 = tuning.centre[:, None], tuning.frequency_squared[:, None]

        def rotate(y: Array, v: Array, angle: Array) -> tuple[Array, Array]:
            cosine, sine = jnp.cos(angle * scale), jnp.sin(angle * scale)
            return y * cosine + v * sine, v * cosine - y * sine

        def kicked(i: Array, carry: tuple[Array, Array]) -> tuple[Array, Array]:
            y, v = carry
            slope = self.target.force(PathState(y + centre, state.winding), p) - omega2 * y
            push = jnp.fft.irfft(jnp.fft.rfft(slope, axis=-1) * inverse_form, n=self.target.sites, axis=-1)
            return rotate(y, v - tuning.kicks[i] * scale * p.spacing * push, tuning.rotations[i + 1])

        y, v = rotate(state.x - centre, v, tuning.rotations[0])
        y, v = jax.lax.fori_loop(0, tuning.count, kicked, (y, v))
        return PathState(y + centre, state.winding), v

    def recentred(self, state: PathState, p: Parameters) -> PathState:
        """Shift lifted angles by whole periods so that their mean is near zero; the physics does not change."""
        if not self.target.angles:
            return state
        periods = jnp.asarray(self.target.periods)
        q = self.target.path(state, p)
        safe = jnp.where(periods > 0, periods, 1.0)
        turns = jnp.where(periods > 0, jnp.round(jnp.mean(q, axis=-1) / safe) * safe, 0.0)
        return PathState(state.x - self.target.to_whitened(turns[..., None], p), state.winding)

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        noise, jitter, decide = jax.random.split(key, 3)
        state = self.recentred(state, p)
        form = self.target.reference_form(tuning.frequency_squared, p)
        v, before = self.velocities(noise, state.x.shape, form)
        chains = state.x.shape[0]
        scale = 1 + JITTER * jax.random.uniform(jitter, (chains, 1, 1), jnp.float64, -1.0, 1.0)
        proposal, v = self.flow(state, v, scale, p, tuning, 1 / form)
        change = self.target.action(proposal, p) + self.kinetic(v, p, tuning) - self.target.action(state, p) - before
        change = jnp.where(jnp.isfinite(change), change, jnp.inf)
        accept = jnp.log(jax.random.uniform(decide, (chains,), jnp.float64)) < -change
        x = jnp.where(accept[:, None, None], proposal.x, state.x)
        return PathState(x, state.winding), MoveInfo(accept.astype(jnp.float64), change)
