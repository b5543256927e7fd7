"""Winding moves for angles: one more or one less turn, spread over a segment of the path.

The lifted angle gains a ramp from 0 to +-P over `length` consecutive links and stays at +-P after it, which a
periodic potential does not feel; so only the ramp itself costs action. Short ramps insert a kink, the longest one
turns the whole path. The proposal is symmetric, the decision is Metropolis.
"""

from __future__ import annotations

from dataclasses import dataclass

import jax
import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.moves.base import MoveInfo, Tuning, metropolis
from quarterturn.sampling.random import uniforms


def ramp(start: Array, length: Array, sites: int) -> Array:
    """Share of the turn made before each site, (chains, sites); links start .. start+length-1 carry it."""
    j = jnp.arange(sites)
    first = jnp.clip(j - start[:, None], 0, length[:, None])
    wrapped = jnp.clip(j - start[:, None] + sites, 0, length[:, None])
    origin = jnp.clip(sites - start[:, None], 0, length[:, None])
    return (first + wrapped - origin) / length[:, None]


@dataclass(frozen=True)
class WindingMove:
    """W -> W +- 1 for one angle of each chain. Leaves exp(-Re S) invariant."""

    target: Target

    @property
    def name(self) -> str:
        return "winding move"

    def lengths(self) -> list[int]:
        """Halvings of the whole path, down to a few links."""
        sizes = [self.target.sites]
        while sizes[-1] > 4:
            sizes.append(max(2, sizes[-1] // 2))
        return sizes

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        chains, sites = state.x.shape[0], self.target.sites
        angles, sizes = jnp.asarray(self.target.angles), jnp.asarray(self.lengths())
        chance = uniforms(key, (5, chains))
        which = angles[(chance[0] * len(angles)).astype(jnp.int32)]
        length = sizes[(chance[1] * len(sizes)).astype(jnp.int32)]
        start = (chance[2] * sites).astype(jnp.int32)
        sign = jnp.where(chance[3] < 0.5, 1.0, -1.0)
        one = jax.nn.one_hot(which, self.target.components, dtype=jnp.float64) * sign[:, None]
        shape = ramp(start, length, sites) - jnp.arange(sites) / sites
        bump = (one * jnp.asarray(self.target.periods))[..., None] * shape[:, None, :]
        proposal = self.target.state(state.x + self.target.to_whitened(bump, p), state.winding + one, p)
        return metropolis(chance[4], proposal.action - state.action, proposal, state)
