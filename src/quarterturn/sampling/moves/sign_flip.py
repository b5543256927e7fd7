"""q -> sigma q for every site at once, sigma a sign vector that the symbolic action was found to have."""

from __future__ import annotations

from dataclasses import dataclass

import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.moves.base import MoveInfo, Tuning
from quarterturn.sampling.random import coins_and_uniforms


def flipped(target: Target, x: Array, sigma: Array, p: Parameters) -> Array:
    """G^T sigma G^-T x: the flip in whitened variables; an orthogonal map, since sigma K sigma = K."""
    if target.components == 1:
        return x * sigma[0]
    return target.to_whitened(target.from_whitened(x, p) * sigma[:, None], p)


def chosen_symmetry(target: Target, chance: Array) -> Array:
    """One of the sign symmetries, all equally likely, (C,); `chance` is uniform in (0, 1)."""
    signs = jnp.asarray(target.euclidean.symmetries, jnp.float64)
    return signs[(chance * len(signs)).astype(jnp.int32)]


@dataclass(frozen=True)
class SignFlip:
    """Applies one of the symmetries, or none, to each chain. Leaves exp(-Re S) invariant when S(sigma q) = S(q)."""

    target: Target

    @property
    def name(self) -> str:
        return "global sign flip"

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        chains = state.x.shape[0]
        flip, chance = coins_and_uniforms(key, (chains,))
        sigma = chosen_symmetry(self.target, chance[0])
        x = jnp.where(flip[:, None, None], flipped(self.target, state.x, sigma, p), state.x)
        winding = jnp.where(flip[:, None], state.winding * sigma, state.winding)
        return PathState(x, winding, state.action), MoveInfo(jnp.ones(chains), jnp.zeros(chains))
