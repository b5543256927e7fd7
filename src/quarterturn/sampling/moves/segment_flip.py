"""Embedded-sign cluster flips along a path: whole segments between broken bonds change sign at once.

A link i is bonded with probability 1 - exp(-dS_i), dS_i >= 0 being what the link would cost if only one of its ends
were flipped; bonded sites flip together, each cluster with probability 1/2. In one dimension a cluster is a segment.
The potential does not change, since V(sigma q) = V(q), so every flip is accepted: kinks appear and move freely, and a
double well tunnels as often as it should.

Sources: Swendsen and Wang, Phys. Rev. Lett. 58 (1987) 86; embedding of signs in a continuous field: Brower and
Tamayo, Phys. Rev. Lett. 62 (1989) 1087.
"""

from __future__ import annotations

from dataclasses import dataclass

import jax
import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target, ahead
from quarterturn.sampling.moves.base import MoveInfo, Tuning
from quarterturn.sampling.moves.sign_flip import flipped


def segment_flips(key: Array, broken: Array) -> Array:
    """Which sites flip, (chains, sites), given the broken links (link i joins sites i and i+1, periodically).

    Across a broken link the flip changes with probability 1/2; the changes round the ring must be even in number, so
    the last broken link takes the parity of the others. That is the uniform distribution over segment flips.
    """
    change_key, first_key = jax.random.split(key)
    change = broken & jax.random.bernoulli(change_key, 0.5, broken.shape)
    behind = jnp.cumsum(broken[:, ::-1].astype(jnp.int32), axis=-1)[:, ::-1]
    last = broken & (behind == 1)
    others = jnp.sum(change & ~last, axis=-1, keepdims=True) % 2 == 1
    change = jnp.where(last, others, change)
    first = jax.random.bernoulli(first_key, 0.5, (broken.shape[0], 1))
    passed = jnp.cumsum(change.astype(jnp.int32), axis=-1)
    before = jnp.concatenate([jnp.zeros_like(passed[:, :1]), passed[:, :-1]], axis=-1)
    return (before % 2 == 1) ^ first


@dataclass(frozen=True)
class SegmentFlip:
    """Cluster flips under one of the sign symmetries. Leaves exp(-Re S) invariant. Only for paths on the line."""

    target: Target

    @property
    def name(self) -> str:
        return "segment flips"

    def flip(self, key: Array, state: PathState, p: Parameters) -> PathState:
        which, bonds, flips = jax.random.split(key, 3)
        signs = jnp.asarray(self.target.euclidean.symmetries, jnp.float64)
        sigma = signs[jax.random.randint(which, (), 0, len(signs))]
        mirror = flipped(self.target, state.x, sigma, p)
        near, far = ahead(state.x) - state.x, ahead(state.x) - mirror
        cost = jnp.sum(far**2 - near**2, axis=-2) / (2 * p.spacing)
        broken = jax.random.uniform(bonds, cost.shape, jnp.float64) < jnp.exp(-jnp.maximum(cost, 0.0))
        turn = segment_flips(flips, broken)
        return PathState(jnp.where(turn[:, None, :], mirror, state.x), state.winding)

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        state = jax.lax.cond(tuning.segments, lambda s: self.flip(key, s, p), lambda s: s, state)
        zero = jnp.zeros(state.x.shape[0])
        return state, MoveInfo(zero + 1, zero)
