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
import numpy as np
from jax import Array

from quarterturn.compiled.target import Parameters, PathState, Target, ahead
from quarterturn.sampling.moves.base import MoveInfo, Tuning
from quarterturn.sampling.moves.sign_flip import chosen_symmetry, flipped
from quarterturn.sampling.random import coins_and_uniforms, log

LINKS, CHOICES = 0, 1  # streams of random numbers
WORD = 32


def segment_flips(broken: Array, coins: Array, first: Array) -> Array:
    """Which sites flip, (chains, sites), given the broken links (link i joins sites i and i+1, periodically).

    Across a broken link the flip changes if its coin says so; the changes round the ring must be even in number, so
    the last broken link takes the parity of the others. With fair coins, and a fair one in `first` (chains,) for the
    first site, that is the uniform distribution over segment flips. Computed on 32 sites at a time, as bits of words.
    """
    sites = broken.shape[-1]
    breaks, change = _packed(broken, broken & coins)
    place = jnp.where(breaks != 0, jnp.arange(1, breaks.shape[-1] + 1), 0)
    final = (place == jnp.max(place, axis=-1, keepdims=True)) & (breaks != 0)
    last = jnp.where(final, np.uint32(1 << 31) >> jax.lax.clz(breaks), np.uint32(0))
    change = change & ~last
    odd = jnp.sum(jax.lax.population_count(change), axis=-1, keepdims=True) & 1 == 1
    change = change | jnp.where(odd, last, np.uint32(0))
    passed = change  # becomes the parity of the changes up to each bit
    for shift in (1, 2, 4, 8, 16):
        passed = passed ^ (passed << np.uint32(shift))
    words = (passed >> np.uint32(WORD - 1)).astype(jnp.int32)
    carried = (jnp.cumsum(words, axis=-1) - words + first[:, None]) & 1
    before = passed ^ change ^ jnp.where(carried == 1, np.uint32(0xFFFFFFFF), np.uint32(0))
    bits = (before[..., None] >> jnp.arange(WORD, dtype=jnp.uint32)) & np.uint32(1)
    return bits.reshape(*bits.shape[:-2], -1)[..., :sites] == 1


def _packed(low: Array, high: Array) -> tuple[Array, Array]:
    """Two arrays of flags (…, sites) as bits of 32-bit words, lowest first, (…, words); in one pass over both."""
    rest = [(0, 0)] * (low.ndim - 1) + [(0, -low.shape[-1] % WORD)]
    both = jnp.pad(low.astype(jnp.uint64) | (high.astype(jnp.uint64) << np.uint64(WORD)), rest)
    bits = both.reshape(*low.shape[:-1], -1, WORD) << jnp.arange(WORD, dtype=jnp.uint64)
    words = jnp.sum(bits, axis=-1, dtype=jnp.uint64)
    return words.astype(jnp.uint32), (words >> np.uint64(WORD)).astype(jnp.uint32)


@dataclass(frozen=True)
class SegmentFlip:
    """Cluster flips under one of the sign symmetries. Leaves exp(-Re S) invariant. Only for paths on the line."""

    target: Target

    @property
    def name(self) -> str:
        return "segment flips"

    def links(self, key: Array, x: Array, sigma: Array, p: Parameters) -> Array:
        """0 for a bonded link, 1 or 2 (the coin) for a broken one, (chains, sites).

        A link is broken with probability exp(-cost): when an exponential variable exceeds its cost.
        """
        coins, uniform = coins_and_uniforms(key, (x.shape[0], x.shape[2]), LINKS)
        following, mirror = ahead(x), flipped(self.target, x, sigma, p)
        cost = jnp.sum((following - mirror) ** 2 - (following - x) ** 2, axis=-2) / (2 * p.spacing)
        return jnp.where(-log(uniform) > cost, 1 + coins.astype(jnp.int32), 0)

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]:
        chains, _, sites = state.x.shape
        first, chance = coins_and_uniforms(key, (chains,), CHOICES)
        sigma = chosen_symmetry(self.target, chance[0])
        none = jnp.zeros((chains, sites), jnp.int32)
        # two conditions: what the first one makes is finished, site by site at full speed, before the second packs it
        links = jax.lax.cond(tuning.segments, lambda: self.links(key, state.x, sigma, p), lambda: none)

        def flip() -> PathState:
            turn = segment_flips(links > 0, links > 1, first)[:, None, :]
            x = jnp.where(turn, flipped(self.target, state.x, sigma, p), state.x)
            return self.target.state(x, state.winding, p)

        state = jax.lax.cond(tuning.segments, flip, lambda: state)
        return state, MoveInfo(jnp.ones(chains), jnp.zeros(chains))
