"""The driver of fields: start, warm up, then blocks of draws until somebody is satisfied; what there is is kept."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import jax
import jax.numpy as jnp
import numpy as np
from numpy.typing import NDArray

from quarterturn.compiled.precision import double
from quarterturn.sampling.driver import CHECK_SECONDS, CURVE_ENTRIES, MAIN, WARM, Request
from quarterturn.sampling.fields.program import BLOCK, FieldBlock, FieldProgram
from quarterturn.sampling.fields.warm_up import (
    FieldRecipe,
    FieldWarmUp,
    first_field_recipe,
    start_fields,
    tune_fields,
)
from quarterturn.sampling.ledger import Ledger
from quarterturn.sampling.random import seed_key
from quarterturn.sampling.sectors import SectorCount

Floats = NDArray[np.float64]


@dataclass
class FieldChain:
    """A run of many chains of fields: ledgers of what was measured, and how the moves fared."""

    program: FieldProgram
    recipe: FieldRecipe
    numbers: Ledger
    curves: Ledger  # columns: the numbers, then the curves flattened (curve, step); entries are means of a block
    warm_up: int  # draws per chain before the first measured one
    sectors: SectorCount
    stop: str = ""  # satisfied | draws | time | interrupted
    acceptance: dict[str, float] | None = None
    exp_change: tuple[float, float] = (1.0, 0.0)  # <exp(-dH)> and its error
    seconds: float = 0.0
    warm_up_seconds: float = 0.0
    nonfinite: int = 0
    cut_in_warm_up: bool = False

    @property
    def draws(self) -> int:
        return self.numbers.draws


def run_fields(
    program: FieldProgram,
    couplings: Mapping[str, float],
    spacings: tuple[float, ...],
    request: Request,
    edges: tuple[Floats, ...],
    interrupted: Callable[[], bool] = lambda: False,
    satisfied: Callable[[FieldChain], bool] = lambda chain: False,
) -> FieldChain:
    """Warm up and draw until `satisfied`, which is asked at most four times a second.

    Raises RequestError where no start with a finite action is found.
    """
    began = time.monotonic()
    with double():
        target = program.target
        p = target.parameters(couplings, spacings, request.strength)
        state = start_fields(target, p, program.chains, request.seed)
        recipe = first_field_recipe(target, p, state)
        warm_up = FieldWarmUp(program, p, jnp.asarray(seed_key(request.seed, WARM)), state, interrupted)
        recipe = tune_fields(warm_up, recipe)
        count = program.observables.count
        columns = count + len(program.observables.free) * program.observables.steps
        chain = FieldChain(
            program,
            recipe,
            Ledger(program.chains, count),
            Ledger(program.chains, columns, block=BLOCK, limit=CURVE_ENTRIES),
            warm_up.blocks * BLOCK,
            SectorCount(edges),
            cut_in_warm_up=interrupted(),
            warm_up_seconds=time.monotonic() - began,
        )
        _draw(chain, warm_up, request, began, interrupted, satisfied)
    chain.seconds = time.monotonic() - began
    return chain


def _draw(
    chain: FieldChain,
    warm_up: FieldWarmUp,
    request: Request,
    began: float,
    interrupted: Callable[[], bool],
    satisfied: Callable[[FieldChain], bool],
) -> None:
    state, p, key = warm_up.state, warm_up.p, jnp.asarray(seed_key(request.seed, MAIN))
    tuning = chain.recipe.tuning()
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


def _enter(chain: FieldChain, out: FieldBlock) -> None:
    curves = np.reshape(out.curves, (chain.program.chains, -1))
    chain.numbers.add(np.asarray(out.numbers))
    chain.curves.add(np.concatenate([np.mean(out.numbers, axis=0), curves], axis=-1)[None])
    chain.nonfinite += int(out.nonfinite)
    means = np.asarray(out.means)
    chain.sectors.add(means, np.zeros(means.shape))


def _summarise(chain: FieldChain, accepted: list[Floats], changes: list[Floats]) -> None:
    rates = np.mean(accepted, axis=0)
    chain.acceptance = {move.name: float(r) for move, r in zip(chain.program.moves, rates, strict=True)}
    values = np.mean(changes, axis=0)  # a mean for each chain: its draws may be correlated through a slow mode
    spread = float(np.std(values, ddof=1) / np.sqrt(len(values)))
    chain.exp_change = (float(np.mean(values)), spread)
