"""phi -> sigma phi for every site at once, sigma a sign vector that the symbolic action was found to have."""

from __future__ import annotations

from dataclasses import dataclass

import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.sampling.fields.trajectory import FieldTuning
from quarterturn.sampling.moves.base import MoveInfo
from quarterturn.sampling.random import coins_and_uniforms


@dataclass(frozen=True)
class FieldSignFlip:
    """Applies one of the symmetries, or none, to each chain. Leaves exp(-Re S) invariant when S(sigma phi) = S(phi)."""

    target: FieldTarget
    name: str = "global sign flip"

    def step(
        self, key: Array, state: FieldState, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, MoveInfo]:
        chains = state.action.shape[0]
        flip, chance = coins_and_uniforms(key, (chains,))
        signs = jnp.asarray(self.target.lattice.symmetries, jnp.float64)
        sigma = jnp.where(flip[:, None], signs[(chance * len(signs)).astype(jnp.int32)], 1.0)  # (chains, C)
        phi = tuple(sigma[:, c] * f for c, f in enumerate(state.phi))
        return FieldState(phi, state.action), MoveInfo(jnp.ones(chains), jnp.zeros(chains))
