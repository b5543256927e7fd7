"""The driver of fields: start, warm up, forget the start, then draw as for paths."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping

import jax.numpy as jnp

from quarterturn.compiled.precision import double
from quarterturn.sampling.driver import MAIN, WARM, Chain, Floats, Request, draw, empty_chain
from quarterturn.sampling.fields.program import FieldProgram
from quarterturn.sampling.fields.start import start_field
from quarterturn.sampling.fields.warm_up import FieldWarmUp, tune_field
from quarterturn.sampling.random import seed_key


def run_fields(
    program: FieldProgram,
    couplings: Mapping[str, float],
    spacings: tuple[float, ...],
    request: Request,
    edges: tuple[Floats, ...],
    interrupted: Callable[[], bool] = lambda: False,
    satisfied: Callable[[Chain], bool] = lambda chain: False,
) -> Chain:
    """Warm up and draw until `satisfied`, which is asked at most four times a second.

    A force or action that isn't a number shows as rejected trajectories, counted in `Chain.nonfinite`.
    Raises ActionError where the kinetic form isn't positive, RequestError where no start with a finite action is found.
    """
    began = time.monotonic()
    with double():
        p = program.target.parameters(couplings, spacings, request.strength)
        state, recipe = start_field(program.target, p, program.chains, request.seed)
        warm_up = FieldWarmUp(program, p, jnp.asarray(seed_key(request.seed, WARM)), state, interrupted)
        recipe = tune_field(warm_up, recipe)
        agreed = warm_up.forget(recipe)
        chain = empty_chain(program, recipe, warm_up.draws, edges)
        chain.trials = tuple(warm_up.trials)
        chain.cut_in_warm_up = interrupted()
        chain.starts_agree = agreed
        chain.warm_up_seconds = time.monotonic() - began
        key = jnp.asarray(seed_key(request.seed, MAIN))
        draw(chain, warm_up.state, key, p, request, began, interrupted, satisfied)
    chain.seconds = time.monotonic() - began
    return chain
