"""One compiled program: a block of sweeps over all chains of fields, with everything measured inside the loop.

Compiled once for an action, a lattice size, a set of measurements and a number of chains; couplings, spacings, sources
and tuning are traced. The key of a sweep comes from the run's key and the sweep's number alone.
"""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import dataclass, field
from typing import NamedTuple, Protocol

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array

from quarterturn.compiled.field_observables import FieldObservables
from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.compiled.precision import double
from quarterturn.sampling.fields.sign_flip import FieldSignFlip
from quarterturn.sampling.fields.trajectory import FieldTrajectory, FieldTuning
from quarterturn.sampling.moves.base import MoveInfo
from quarterturn.sampling.random import child

BLOCK = 8  # draws in one call of the compiled program
KEPT_PROGRAMS = 16
NUMBERS_AT_ONCE = 2**17  # of all chains: what fits the caches
MOST_CHAINS, FEWEST_CHAINS = 32, 8


class FieldMove(Protocol):
    """A Markov kernel that leaves the weight invariant."""

    @property
    def name(self) -> str: ...

    def step(
        self, key: Array, state: FieldState, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, MoveInfo]: ...


class FieldBlock(NamedTuple):
    """What one block of draws leaves behind."""

    numbers: Array  # (BLOCK, chains, count)
    curves: Array  # (chains, curves, steps), means over the block
    means: Array  # (BLOCK, chains, C), lattice means of the variables
    action: Array  # (BLOCK, chains)
    accepted: Array  # (moves,), means over draws and chains
    exp_change: Array  # (chains,), exp(-dH) of the trajectories, means over the block
    nonfinite: Array  # (), trajectories whose end has no finite energy


@dataclass
class FieldProgram:
    """The compiled block of one action on one lattice."""

    target: FieldTarget
    observables: FieldObservables
    chains: int
    moves: tuple[FieldMove, ...]
    compilations: int = 0  # how often the block has been traced
    _advance: object = field(default=None, repr=False)

    def __post_init__(self) -> None:
        self._advance = jax.jit(self._block)

    def advance(
        self, state: FieldState, key: Array, first: int, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, FieldBlock]:
        """BLOCK sweeps, numbered from `first`. Call inside `double()`."""
        return self._advance(state, key, np.uint32(first), p, tuning)  # type: ignore[operator]

    def _block(
        self, state: FieldState, key: Array, first: Array, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, FieldBlock]:
        self.compilations += 1  # runs only while tracing

        def sweep(carry: tuple[FieldState, Array], number: Array) -> tuple[tuple[FieldState, Array], tuple]:
            state, spectra = carry
            keys = child(child(key, number), jnp.arange(len(self.moves), dtype=jnp.uint32))
            infos: list[MoveInfo] = []
            for i, move in enumerate(self.moves):
                state, info = move.step(keys[i], state, p, tuning)
                infos.append(info)
            out = (
                self.observables.numbers(state, p),
                self.target.means(state.phi),
                state.action,
                jnp.stack([jnp.mean(info.accepted) for info in infos]),
                infos[0].energy_change,
            )
            return (state, spectra + self.observables.spectra(state, p)), out

        zero = jnp.zeros((self.chains, len(self.observables.free), self.observables.steps))
        numbers = first + jnp.arange(BLOCK, dtype=jnp.uint32)
        (state, spectra), out = jax.lax.scan(sweep, (state, zero), numbers)
        measured, means, action, accepted, change = out
        return state, FieldBlock(
            measured,
            self.observables.curves(spectra / BLOCK),
            means,
            action,
            jnp.mean(accepted, axis=0),
            jnp.mean(jnp.exp(-change), axis=0),
            jnp.sum(~jnp.isfinite(change)),
        )


def default_field_chains(sites: int, components: int) -> int:
    """Number of chains for a lattice: a power of two, 32 for small ones and 8 for large ones."""
    share = max(1, NUMBERS_AT_ONCE // (sites * components))
    return min(MOST_CHAINS, max(FEWEST_CHAINS, 1 << (share.bit_length() - 1)))


_programs: OrderedDict[tuple, FieldProgram] = OrderedDict()


def field_program_for(target: FieldTarget, observables: FieldObservables, chains: int) -> FieldProgram:
    """The compiled program of an action; the same object for the same structure, whatever the couplings."""
    lattice = target.lattice
    key = (
        lattice.euclidean.digest, lattice.euclidean.variables, lattice.extents, lattice.edges, target.names,
        observables.fixed, observables.free, observables.offsets, chains,
    )  # fmt: skip
    if key in _programs:
        _programs.move_to_end(key)
        return _programs[key]
    moves: list[FieldMove] = [FieldTrajectory(target)]
    if lattice.euclidean.symmetries:
        moves.append(FieldSignFlip(target))
    with double():
        program = FieldProgram(target, observables, chains, tuple(moves))
    _programs[key] = program
    while len(_programs) > KEPT_PROGRAMS:
        _programs.popitem(last=False)
    return program
