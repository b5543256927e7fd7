"""One compiled program: a block of sweeps over all chains, with everything measured inside the loop.

A program is compiled once for an action, a number of sites, a set of measurements and a number of chains; couplings,
spacing and tuning are traced. The key of a sweep is derived from the run's key and the sweep's number alone, so that
the draws do not depend on how a run was cut into blocks.
"""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import dataclass, field
from typing import NamedTuple

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array

from quarterturn.compiled.observables import Observables
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.moves.base import Move, MoveInfo, Tuning
from quarterturn.sampling.random import child
from quarterturn.sampling.sweep import applicable_moves

BLOCK = 16  # draws in one call of the compiled program
KEPT_PROGRAMS = 24
MOST_CHAINS, FEWEST_CHAINS = 64, 8
SITES_AT_ONCE = 16384  # of all chains; more no longer fit the nearest caches and gain nothing (benchmarks: `chains`)


class BlockOutput(NamedTuple):
    """What one block of draws leaves behind."""

    numbers: Array  # (BLOCK, chains, count)
    curves: Array  # (chains, curves, steps), means over the block
    probes: Array  # (BLOCK, chains, probes), see `probes`
    accepted: Array  # (moves,), means over draws and chains
    exp_change: Array  # (chains,), exp(-dH) of the trajectories, means over the block
    nonfinite: Array  # (), trajectories whose end has no finite energy
    winding: Array  # (BLOCK, chains, C)


@dataclass
class Program:
    """The compiled block of one action on one number of sites."""

    target: Target
    observables: Observables
    chains: int
    moves: tuple[Move, ...]
    compilations: int = 0  # how often the block has been traced; one, unless shapes changed
    _advance: object = field(default=None, repr=False)

    def __post_init__(self) -> None:
        self._advance = jax.jit(self._block)

    @property
    def block(self) -> int:
        """Draws in one call of the compiled program."""
        return BLOCK

    @property
    def curve_points(self) -> int:
        """Numbers of all curves of one chain."""
        return len(self.observables.free) * self.observables.steps

    def advance(
        self, state: PathState, key: Array, first: int, p: Parameters, tuning: Tuning
    ) -> tuple[PathState, BlockOutput]:
        """BLOCK sweeps, numbered from `first`. Call inside `double()`."""
        return self._advance(state, key, np.uint32(first), p, tuning)  # type: ignore[operator]

    def probes(self, state: PathState) -> Array:
        """Slow things to tune by, (chains, 3 C): mean of x, of x^2, and the power of the longest wave."""
        x, sites = state.x, self.target.sites
        wave = jnp.cos(2 * jnp.pi * jnp.arange(sites) / sites)
        lowest = (jnp.sum(x * wave, axis=-1) / sites) ** 2
        return jnp.concatenate([jnp.mean(x, axis=-1), jnp.mean(x * x, axis=-1), lowest], axis=-1)

    def _block(
        self, state: PathState, key: Array, first: Array, p: Parameters, tuning: Tuning
    ) -> tuple[PathState, BlockOutput]:
        self.compilations += 1  # runs only while tracing

        def sweep(carry: tuple[PathState, Array], number: Array) -> tuple[tuple[PathState, Array], tuple]:
            state, spectra = carry
            keys = child(child(key, number), jnp.arange(len(self.moves), dtype=jnp.uint32))
            infos: list[MoveInfo] = []
            for i, move in enumerate(self.moves):
                state, info = move.step(keys[i], state, p, tuning)
                infos.append(info)
            out = (
                self.observables.numbers(state, p),
                self.probes(state),
                jnp.stack([jnp.mean(info.accepted) for info in infos]),
                infos[0].energy_change,
                state.winding,
            )
            return (state, spectra + self.observables.spectra(state, p)), out

        zero = jnp.zeros((self.chains, len(self.observables.free), self.observables.steps))
        numbers = first + jnp.arange(BLOCK, dtype=jnp.uint32)
        (state, spectra), out = jax.lax.scan(sweep, (state, zero), numbers)
        measured, probes, accepted, change, winding = out
        return state, BlockOutput(
            measured,
            self.observables.curves(spectra / BLOCK),
            probes,
            jnp.mean(accepted, axis=0),
            jnp.mean(jnp.exp(-change), axis=0),
            jnp.sum(~jnp.isfinite(change)),
            winding,
        )


def default_chains(sites: int, components: int) -> int:
    """Number of chains for a path: a power of two, 64 for short paths and fewer for long ones."""
    share = max(1, SITES_AT_ONCE // (sites * components))
    return min(MOST_CHAINS, max(FEWEST_CHAINS, 1 << (share.bit_length() - 1)))


_programs: OrderedDict[tuple, Program] = OrderedDict()


def program_for(target: Target, observables: Observables, chains: int) -> Program:
    """The compiled program of an action; the same object for the same structure, whatever the couplings."""
    key = (
        target.euclidean.digest,
        target.euclidean.variables,
        target.euclidean.symmetries,
        target.names,
        target.sites,
        observables.fixed,
        observables.free,
        observables.offsets,
        chains,
    )
    if key in _programs:
        _programs.move_to_end(key)
        return _programs[key]
    with double():
        program = Program(target, observables, chains, applicable_moves(target))
    _programs[key] = program
    while len(_programs) > KEPT_PROGRAMS:
        _programs.popitem(last=False)
    return program
