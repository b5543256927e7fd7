"""The driver loop: start, warm up, then blocks of draws until somebody is satisfied.

Knows programs and ledgers, not moves and not estimates. A run ends at the first of: the caller is satisfied, the
number of draws, the time, an interruption; what there is is kept.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.compiled.precision import double
from quarterturn.sampling.fields.program import FieldProgram
from quarterturn.sampling.fields.warm_up import FieldRecipe, FieldTrial
from quarterturn.sampling.ledger import Ledger
from quarterturn.sampling.points import PointAction
from quarterturn.sampling.program import BLOCK, BlockOutput, Program
from quarterturn.sampling.random import seed_key
from quarterturn.sampling.sectors import SectorCount
from quarterturn.sampling.start import first_recipe, start_state
from quarterturn.sampling.tuning import Recipe, Trial, WarmUp, tune

Floats = NDArray[np.float64]
CURVE_ENTRIES = 128  # entries a chain in the ledger of curves
THERMALISATION = 8  # blocks after tuning that are not measured
CHECK_SECONDS = 0.25
WARM, MAIN = 0, 1  # purposes of the keys made from the seed


@dataclass(frozen=True)
class Request:
    """When to stop. Draws are per chain, rounded up to whole blocks; seconds count from the call, with warm-up."""

    seed: int
    draws: int | None = None
    seconds: float | None = None
    strength: float = 1.0  # of the sources


@dataclass
class Chain:
    """A run of many chains: ledgers of what was measured, and how the moves fared."""

    program: Program | FieldProgram
    recipe: Recipe | FieldRecipe
    numbers: Ledger
    curves: Ledger  # columns: the numbers, then the curves flattened (curve, step); entries are means of a block
    warm_up: int  # draws per chain before the first measured one
    stop: str = ""  # satisfied | draws | time | interrupted
    acceptance: dict[str, float] | None = None
    sectors: SectorCount | None = None
    exp_change: tuple[float, float] = (1.0, 0.0)  # <exp(-dH)> and its error
    seconds: float = 0.0  # from the call, warm-up and any compilation included
    warm_up_seconds: float = 0.0
    nonfinite: int = 0  # trajectories that ended where action or force is not a finite number; all were rejected
    cut_in_warm_up: bool = False  # interrupted before the first measured draw: what was drawn since isn't equilibrated
    starts_agree: bool = True  # whether chains from unlike starts agreed before the first measured draw
    trials: tuple[Trial, ...] | tuple[FieldTrial, ...] = field(default=(), repr=False)  # what warm-up tried, in order

    @property
    def draws(self) -> int:
        return self.numbers.draws


def run_chains(
    program: Program,
    couplings: Mapping[str, float],
    spacing: float,
    request: Request,
    edges: tuple[Floats, ...],
    interrupted: Callable[[], bool] = lambda: False,
    satisfied: Callable[[Chain], bool] = lambda chain: False,
) -> Chain:
    """Warm up and draw until `satisfied`, which is asked at most four times a second.

    A force or action that isn't a number shows as rejected trajectories, counted in `Chain.nonfinite`.
    Raises ActionError where the masses aren't positive, RequestError where no start with a finite action is found.
    """
    began = time.monotonic()
    with double():
        p = program.target.parameters(couplings, spacing, request.strength)
        points = PointAction(program.target, p)
        recipe = first_recipe(points)
        state = start_state(points, program.chains, request.seed, recipe)
        warm_up = WarmUp(program, p, points, jnp.asarray(seed_key(request.seed, WARM)), state, interrupted)
        recipe = tune(warm_up, recipe)
        warm_up.run(recipe, THERMALISATION)
        chain = empty_chain(program, recipe, warm_up.blocks * BLOCK, edges)
        chain.trials = tuple(warm_up.trials)
        chain.cut_in_warm_up = interrupted()
        chain.warm_up_seconds = time.monotonic() - began
        draw(chain, warm_up.state, jnp.asarray(seed_key(request.seed, MAIN)), p, request, began, interrupted, satisfied)
    chain.seconds = time.monotonic() - began
    return chain


def empty_chain(
    program: Program | FieldProgram, recipe: Recipe | FieldRecipe, warm_up: int, edges: tuple[Floats, ...]
) -> Chain:
    """A chain before its first measured draw."""
    count = program.observables.count
    return Chain(
        program,
        recipe,
        Ledger(program.chains, count),
        Ledger(program.chains, count + program.curve_points, block=program.block, limit=CURVE_ENTRIES),
        warm_up,
        sectors=SectorCount(edges),
    )


def draw(
    chain: Chain,
    state: Any,
    key: Array,
    p: Any,
    request: Request,
    began: float,
    interrupted: Callable[[], bool],
    satisfied: Callable[[Chain], bool],
) -> None:
    """Blocks of draws until the first of the reasons to stop; state and parameters are those of the program."""
    tuning: Any = chain.recipe.tuning()
    accepted: list[Floats] = []
    changes: list[Floats] = []
    checked = time.monotonic()
    while not chain.stop:
        state, output = chain.program.advance(state, key, chain.draws, p, tuning)
        out = jax.device_get(output)
        _enter(chain, out)
        accepted.append(out.accepted)
        changes.append(out.exp_change)
        now = time.monotonic()
        if request.draws is not None and chain.draws >= request.draws:
            chain.stop = "draws"
        elif interrupted():
            chain.stop = "interrupted"
        elif request.seconds is not None and now - began >= request.seconds:
            chain.stop = "time"
        elif now - checked >= CHECK_SECONDS:
            _summarise(chain, accepted, changes)
            if satisfied(chain):
                chain.stop = "satisfied"
            checked = time.monotonic()
    _summarise(chain, accepted, changes)


def _enter(chain: Chain, out: BlockOutput) -> None:
    """File one block, NumPy arrays throughout."""
    curves = np.reshape(out.curves, (chain.program.chains, -1))
    chain.numbers.add(np.asarray(out.numbers))
    chain.curves.add(np.concatenate([np.mean(out.numbers, axis=0), curves], axis=-1)[None])
    chain.nonfinite += int(out.nonfinite)
    if chain.sectors is not None:
        means = np.asarray(out.probes)[..., : chain.program.target.components]
        chain.sectors.add(means, np.asarray(out.winding))


def _summarise(chain: Chain, accepted: list[Floats], changes: list[Floats]) -> None:
    rates, names = np.mean(accepted, axis=0), [move.name for move in chain.program.moves]
    chain.acceptance = {name: float(r) for name, r in zip(names, rates, strict=True)}
    values = np.mean(changes, axis=0)  # a mean for each chain: its draws may be correlated through a slow mode
    spread = float(np.std(values, ddof=1) / np.sqrt(len(values)))
    chain.exp_change = (float(np.mean(values)), spread)
