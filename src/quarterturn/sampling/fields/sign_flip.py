"""phi -> sigma phi for every site at once, sigma a sign vector that the symbolic action was found to have."""

from __future__ import annotations

from dataclasses import dataclass

import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.sampling.fields.trajectory import FieldTuning
from quarterturn.sampling.moves.base import MoveInfo
from quarterturn.sampling.random import uniforms


@dataclass(frozen=True)
class FieldSignFlip:
    """Applies one of the symmetries, or none, to each chain. Leaves the weight invariant: S(sigma phi) = S(phi)."""

    target: FieldTarget
    name: str = "global sign flip"

    def step(
        self, key: Array, state: FieldState, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, MoveInfo]:
        chains = state.phi.shape[0]
        signs = jnp.asarray(((1,) * self.target.components, *self.target.lattice.euclidean.symmetries), jnp.float64)
        chosen = (uniforms(key, (chains,)) * len(signs)).astype(jnp.int32)
        flipped = FieldState(state.phi * signs[chosen][..., None], state.action)
        return flipped, MoveInfo(jnp.ones(chains), jnp.zeros(chains))
