"""One compiled program of fields: a block of sweeps over all chains, with everything measured inside the loop.

As for paths, a program is compiled once for an action, a lattice, a set of measurements and a number of chains;
couplings, spacings and tuning are traced, and the key of a sweep depends on the run's key and the sweep's number alone.
"""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import dataclass, field
from typing import Protocol

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array

from quarterturn.compiled.field_observables import FieldObservables, longest
from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.compiled.precision import double
from quarterturn.sampling.fields.sign_flip import FieldSignFlip
from quarterturn.sampling.fields.trajectory import FieldTrajectory, FieldTuning
from quarterturn.sampling.moves.base import MoveInfo
from quarterturn.sampling.program import BLOCK, BlockOutput
from quarterturn.sampling.random import child

KEPT_PROGRAMS = 16
MOST_CHAINS, FEWEST_CHAINS = 32, 8
NUMBERS_AT_ONCE = 65536  # of all chains; more leave the nearest caches
BLOCK_NUMBERS = 1 << 22  # of all draws of a block; longer blocks answer to nobody for too long


class FieldMove(Protocol):
    """A Markov kernel that leaves the weight invariant. Frozen and hashable."""

    @property
    def name(self) -> str: ...

    def step(
        self, key: Array, state: FieldState, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, MoveInfo]: ...


@dataclass
class FieldProgram:
    """The compiled block of one action on one lattice."""

    target: FieldTarget
    observables: FieldObservables
    chains: int
    moves: tuple[FieldMove, ...]
    compilations: int = 0  # how often the block has been traced; one, unless shapes changed
    _advance: object = field(default=None, repr=False)

    def __post_init__(self) -> None:
        self._advance = jax.jit(self._block)

    @property
    def block(self) -> int:
        """Draws in one call of the compiled program."""
        numbers = self.target.components * self.target.sites * self.chains
        return max(1, min(BLOCK, BLOCK_NUMBERS // numbers))

    @property
    def curve_points(self) -> int:
        """Numbers of all curves of one chain."""
        return self.observables.points

    def advance(
        self, state: FieldState, key: Array, first: int, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, BlockOutput]:
        """A block of sweeps, numbered from `first`. Call inside `double()`."""
        return self._advance(state, key, np.uint32(first), p, tuning)  # type: ignore[operator]

    def probes(self, state: FieldState) -> Array:
        """Slow things to tune by, (chains, 4 C): mean, its square, mean square, and the power of the longest wave."""
        target = self.target
        mean = target.means(state.phi)
        direction = longest(target.extents)[0]
        n = target.extents[direction]
        wave = np.cos(2 * np.pi * np.indices(target.extents)[direction].ravel() / n) / target.sites
        lowest = jnp.stack([jnp.asarray(wave) @ f for f in state.phi], axis=-1)
        square = jnp.stack([jnp.mean(f * f, axis=0) for f in state.phi], axis=-1)
        return jnp.concatenate([mean, mean**2, square, lowest**2], axis=-1)

    def _block(
        self, state: FieldState, key: Array, first: Array, p: FieldParameters, tuning: FieldTuning
    ) -> tuple[FieldState, BlockOutput]:
        self.compilations += 1  # runs only while tracing

        def sweep(carry: tuple[FieldState, tuple[Array, ...]], number: Array) -> tuple[tuple, tuple]:
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
            )
            more = self.observables.spectra(state, p)
            return (state, tuple(a + b for a, b in zip(spectra, more, strict=True))), out

        numbers = first + jnp.arange(self.block, dtype=jnp.uint32)
        start = (state, self.observables.nothing(self.chains))
        (state, spectra), (measured, probes, accepted, change) = jax.lax.scan(sweep, start, numbers)
        return state, BlockOutput(
            measured,
            self.observables.curves([s / self.block for s in spectra], self.chains),
            probes,
            jnp.mean(accepted, axis=0),
            jnp.mean(jnp.exp(-change), axis=0),
            jnp.sum(~jnp.isfinite(change)),
            jnp.zeros((self.block, self.chains, self.target.components)),
        )


def field_moves(target: FieldTarget) -> tuple[FieldMove, ...]:
    """The moves of one sweep, the trajectory first."""
    moves: list[FieldMove] = [FieldTrajectory(target)]
    if target.lattice.symmetries:
        moves.append(FieldSignFlip(target))
    return tuple(moves)


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
        observables.fixed, observables.free, observables.places, chains,
    )  # fmt: skip
    if key in _programs:
        _programs.move_to_end(key)
        return _programs[key]
    with double():
        program = FieldProgram(target, observables, chains, field_moves(target))
    _programs[key] = program
    while len(_programs) > KEPT_PROGRAMS:
        _programs.popitem(last=False)
    return program
