"""q -> sigma q for every site at once, sigma a sign vector that the symbolic action was found to have."""

from __future__ import annotations

from dataclasses import dataclass

import jax
import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.moves.base import MoveInfo, Tuning


def flipped(target: Target, x: Array, sigma: Array, p: Parameters) -> Array:
    """G^T sigma G^-T x: the flip in whitened variables; an orthogonal map, since sigma K sigma = K."""
    if target.components == 1:
        return x * sigma[0]
    return target.to_whitened(target.from_whitened(x, p) * sigma[:, None], p)


@dataclass(frozen=True)
class SignFlip:
    """Applies one of the symmetries, or none, to each chain. Leaves exp(-Re S) invariant when S(sigma q) = S(q)."""

    target: Target

    @property
    def name(self) -> str:
        return "global sign flip"

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        which, whether = jax.random.split(key)
        signs = jnp.asarray(self.target.euclidean.symmetries, jnp.float64)
        sigma = signs[jax.random.randint(which, (), 0, len(signs))]
        chains = state.x.shape[0]
        flip = jax.random.bernoulli(whether, 0.5, (chains,))
        x = jnp.where(flip[:, None, None], flipped(self.target, state.x, sigma, p), state.x)
        winding = jnp.where(flip[:, None], state.winding * sigma, state.winding)
        zero = jnp.zeros(chains)
        return PathState(x, winding), MoveInfo(zero + 1, zero)
