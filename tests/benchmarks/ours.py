"""The sampler as a run uses it: driver, compiled program, ledgers, measurement of <q> and <q^2>."""

from __future__ import annotations

import time
from fractions import Fraction

import jax
import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.expression import ONE, ZERO, Expression, PathAtom, Symbol
from quarterturn.actions.model import Bracket, EuclideanAction
from quarterturn.compiled.observables import Observables
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Target
from quarterturn.sampling.driver import Chain, Request, run_chains
from quarterturn.sampling.program import BLOCK, Program, default_chains, program_for
from quarterturn.sampling.random import seed_key
from quarterturn.sampling.tuning import Recipe

from .baselines import PathProblem

Floats = NDArray[np.float64]
Q = PathAtom("q")


def program(sites: int, chains: int | None = None) -> Program:
    """V = c2 q^2 + c4 q^4 with the symmetry q -> -q; numbers <q> and <q^2>."""
    q, now = Expression.of(Q), Fraction(0)
    c2, c4 = (Expression.of(Symbol("coupling", name)) for name in ("c2", "c4"))
    potential = c2 * q**2 + c4 * q**4
    action = EuclideanAction((Q,), (None,), ((ONE,),), potential, (ZERO,), (), ((-1,),), digest="benchmark")
    target = Target(action, sites, ("c2", "c4"))
    brackets = (Bracket("<q>", ((now, q),)), Bracket("<q^2>", ((now, q**2),)))
    observables = Observables(target, brackets, (), ((0,), (0,)))
    return program_for(target, observables, chains or default_chains(sites, 1))


def run(compiled: Program, problem: PathProblem, draws: int, seed: int) -> Chain:
    """A whole run of so many draws per chain."""
    couplings = {"c2": problem.c2, "c4": problem.c4}
    return run_chains(compiled, couplings, problem.spacing, Request(seed, draws), (np.zeros(1),))


def drawn(chain: Chain) -> tuple[Floats, float]:
    """Every draw, (chains, draws, 2), and the seconds of drawing; like the baselines' tuning, warm-up isn't counted."""
    assert chain.numbers.block == 1, "the ledger has averaged draws; fewer draws are needed to see each"
    return chain.numbers.values(), chain.seconds - chain.warm_up_seconds


def first_draw(compiled: Program, problem: PathProblem, seed: int) -> float:
    """Seconds from the call to the first block of draws."""
    began = time.perf_counter()
    run(compiled, problem, 1, seed)
    return time.perf_counter() - began


def sweep_cost(compiled: Program, problem: PathProblem, kicks: int, segments: str = "") -> float:
    """Nanoseconds a site and sweep of the compiled block, median of twenty."""
    target, chains = compiled.target, compiled.chains
    recipe = Recipe((4.3,), (0.0,), "leapfrog", kicks, 1.5, bool(segments))
    with double():
        p = target.parameters({"c2": problem.c2, "c4": problem.c4}, problem.spacing)
        paths = 0.3 * np.random.default_rng(0).standard_normal((chains, 1, problem.sites))
        state, key, tuning = target.state(paths, np.zeros((chains, 1)), p), seed_key(1), recipe.tuning()
        seconds = []
        for number in range(21):
            began = time.perf_counter()
            state, _ = jax.block_until_ready(compiled.advance(state, key, number * BLOCK, p, tuning))
            seconds.append(time.perf_counter() - began)
    return float(np.median(seconds[1:])) / (BLOCK * chains * problem.sites) * 1e9
