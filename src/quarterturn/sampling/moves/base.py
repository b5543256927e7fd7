"""What a Markov move is: `step(key, state, p, tuning) -> (state, info)`, leaving exp(-Re S) invariant.

Moves compose: a sweep is a tuple of moves applied in order. Each move is a frozen object whose fields are fixed at
compile time; everything that may change between runs arrives as an argument. A move hands on a state whose action is
that of its path.
"""

from typing import NamedTuple, Protocol

import jax.numpy as jnp
from jax import Array

from quarterturn.compiled.target import Parameters, PathState
from quarterturn.sampling.random import log

TRAJECTORY_LIMIT = 48  # kicks in the longest trajectory


class Tuning(NamedTuple):
    """What warm-up decides and then freezes. All traced: no value here compiles anything."""

    frequency_squared: Array  # (C,), Omega^2 of the reference form
    centre: Array  # (C,), the point about which the reference flow rotates, whitened
    rotations: Array  # (TRAJECTORY_LIMIT + 1,), angles of the exact flow [rad]
    kicks: Array  # (TRAJECTORY_LIMIT,), weights of the kicks [rad]
    used: Array  # (), number of kicks in use
    segments: Array  # (), whether the segment flip is used


class MoveInfo(NamedTuple):
    """What one step of a move reports, each (chains,)."""

    accepted: Array  # 0 or 1
    energy_change: Array  # dH or dS of the proposal, inf where it isn't a number; 0 where a move always accepts


class Move(Protocol):
    """One Markov kernel. Frozen and hashable."""

    @property
    def name(self) -> str: ...

    def step(self, key: Array, state: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, MoveInfo]: ...


def metropolis(chance: Array, change: Array, proposal: PathState, state: PathState) -> tuple[PathState, MoveInfo]:
    """The proposal with probability min(1, exp(-change)), chain by chain; never where `change` isn't a number."""
    change = jnp.where(jnp.isfinite(change), change, jnp.inf)
    accept = log(chance) < -change
    chosen = PathState(
        jnp.where(accept[:, None, None], proposal.x, state.x),
        jnp.where(accept[:, None], proposal.winding, state.winding),
        jnp.where(accept, proposal.action, state.action),
    )
    return chosen, MoveInfo(accept.astype(jnp.float64), change)
