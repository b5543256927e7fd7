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
from quarterturn.sampling.moves.base import MoveInfo, Tuning


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
        keys = jax.random.split(key, 5)
        chains, sites = state.x.shape[0], self.target.sites
        angles, sizes = jnp.asarray(self.target.angles), jnp.asarray(self.lengths())
        which = angles[jax.random.randint(keys[0], (chains,), 0, len(angles))]
        length = sizes[jax.random.randint(keys[1], (chains,), 0, len(sizes))]
        start = jax.random.randint(keys[2], (chains,), 0, sites)
        sign = jnp.where(jax.random.bernoulli(keys[3], 0.5, (chains,)), 1.0, -1.0)
        one = jax.nn.one_hot(which, self.target.components, dtype=jnp.float64) * sign[:, None]
        shape = ramp(start, length, sites) - jnp.arange(sites) / sites
        bump = (one * jnp.asarray(self.target.periods))[..., None] * shape[:, None, :]
        proposal = PathState(state.x + self.target.to_whitened(bump, p), state.winding + one)
        change = self.target.action(proposal, p) - self.target.action(state, p)
        change = jnp.where(jnp.isfinite(change), change, jnp.inf)
        accept = jnp.log(jax.random.uniform(keys[4], (chains,), jnp.float64)) < -change
        x = jnp.where(accept[:, None, None], proposal.x, state.x)
        winding = jnp.where(accept[:, None], proposal.winding, state.winding)
        return PathState(x, winding), MoveInfo(accept.astype(jnp.float64), change)
