"""The driver loop: start, warm up, then blocks of draws until somebody is satisfied.

Knows programs and ledgers, not moves and not estimates. A run ends at the first of: the caller is satisfied, the number of
draws, the time, an interruption; what there is is kept.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import jax
import jax.numpy as jnp
import numpy as np
from numpy.typing import NDArray

from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.ledger import Ledger
from quarterturn.sampling.moves.hamiltonian import HamiltonianMove
from quarterturn.sampling.program import BLOCK, BlockOutput, Program
from quarterturn.sampling.reference import gaussian_reference
from quarterturn.sampling.tuning import Recipe, WarmUp, tune

Floats = NDArray[np.float64]
CURVE_ENTRIES = 128  # entries a chain in the ledger of curves
THERMALISATION = 8  # blocks after tuning that are not measured
CHECK_SECONDS = 0.25


@dataclass(frozen=True)
class Request:
    """When to stop. Draws are per chain and rounded up to whole blocks; seconds count from the call, warm-up included."""

    seed: int
    draws: int | None = None
    seconds: float | None = None


@dataclass
class Chain:
    """A run of many chains: ledgers of what was measured, and how the moves fared."""

    program: Program
    recipe: Recipe
    numbers: Ledger
    curves: Ledger  # columns: the numbers, then the curves flattened (curve, step); entries are means of a block
    warm_up: int  # draws per chain before the first measured one
    stop: str = ""  # satisfied | draws | time | interrupted
    acceptance: dict[str, float] | None = None
    sectors: SectorCount | None = None
    exp_change: tuple[float, float] = (1.0, 0.0)  # <exp(-dH)> and its error
    seconds: float = 0.0

    @property
    def draws(self) -> int:
        return self.numbers.draws


class SectorCount:
    """Visits to sectors: the basin of the path's mean for each variable, and the winding number.

    A visit begins where a chain is in another sector than at its last draw. `edges` are the values of each whitened
    variable that part the basins.
    """

    def __init__(self, edges: tuple[Floats, ...]) -> None:
        self.edges = edges
        self._last: NDArray[np.int64] | None = None
        self.visits: list[dict[int, int]] = [{} for _ in edges]
        self.windings: dict[tuple[int, ...], int] = {}
        self._last_winding: NDArray[np.int64] | None = None

    def add(self, means: Floats, winding: Floats) -> None:
        """means, winding: (draws, chains, C)."""
        where = np.stack([np.digitize(means[..., c], e) for c, e in enumerate(self.edges)], axis=-1)
        turns = winding.astype(np.int64)
        before = where[:1] if self._last is None else self._last[None]
        chain = np.concatenate([before, where])
        for c, visits in enumerate(self.visits):
            entered = chain[1:, :, c][chain[1:, :, c] != chain[:-1, :, c]]
            for sector in entered:
                visits[int(sector)] = visits.get(int(sector), 0) + 1
            if self._last is None:
                for sector in np.unique(where[0, :, c]):
                    visits.setdefault(int(sector), 0)
        earlier = turns[:1] if self._last_winding is None else self._last_winding[None]
        both = np.concatenate([earlier, turns])
        moved = np.any(both[1:] != both[:-1], axis=-1)
        for values in both[1:][moved]:
            name = tuple(int(v) for v in values)
            self.windings[name] = self.windings.get(name, 0) + 1
        if self._last_winding is None:
            for values in turns[0]:
                self.windings.setdefault(tuple(int(v) for v in values), 0)
        self._last, self._last_winding = where[-1], turns[-1]


def start_state(program: Program, key: jax.Array, p: Parameters, recipe: Recipe) -> PathState:
    """Overdispersed starts: reference paths of half to twice their size, displaced to either side of the centre."""
    shape = (program.chains, program.target.components, program.target.sites)
    wave_key, size_key, side_key = jax.random.split(key, 3)
    move = HamiltonianMove(program.target)
    form = program.target.reference_form(jnp.asarray(np.array(recipe.frequency_squared)), p)
    x, _ = move.velocities(wave_key, shape, form)
    size = jnp.exp(jax.random.uniform(size_key, (shape[0], 1, 1), jnp.float64, -0.7, 0.7))
    width = (4 * jnp.asarray(np.array(recipe.frequency_squared))) ** -0.25
    side = jax.random.uniform(side_key, (*shape[:2], 1), jnp.float64, -1.5, 1.5) * width[:, None]
    return PathState(jnp.asarray(np.array(recipe.centre))[:, None] + x * size + side, jnp.zeros(shape[:2], jnp.float64))


def first_recipe(program: Program, couplings: Mapping[str, float], p: Parameters, beta: float) -> Recipe:
    """A reference from the potential alone, and a cautious trajectory."""
    target = program.target
    omega2, centre = gaussian_reference(_PointPotential(target, p), target.components, beta)
    if target.angles:
        omega2 = np.maximum(omega2, 1 / beta**2)
    return Recipe(tuple(map(float, omega2)), tuple(map(float, centre)), "leapfrog", 3, 1.2, False)


class _PointPotential:
    """V at whitened points (C, points), in NumPy."""

    def __init__(self, target: Target, p: Parameters) -> None:
        self.target = target
        factor = np.asarray(target.mass_factor(p))
        self.unwhiten = np.linalg.inv(factor).T
        self.scalars = {atom: float(value) for atom, value in target.scalars(p).items()}

    def __call__(self, x: Floats) -> Floats:
        q = self.unwhiten @ x
        lookup = {**self.scalars, **dict(zip(self.target.euclidean.variables, q, strict=True))}
        value = self.target.euclidean.potential.evaluate(lookup, np)
        return np.broadcast_to(np.asarray(value, float), x.shape[1:])


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

    Raises nothing of its own; a NaN force shows as rejected trajectories and an acceptance of zero.
    """
    began = time.monotonic()
    with double():
        p = program.target.parameters(couplings, spacing)
        start_key, warm_key, main_key = jax.random.split(jax.random.key(request.seed), 3)
        recipe = first_recipe(program, couplings, p, spacing * program.target.sites)
        warm_up = WarmUp(program, p, warm_key, start_state(program, start_key, p, recipe), interrupted)
        recipe = tune(warm_up, recipe)
        warm_up.run(recipe, THERMALISATION)
        chain = Chain(
            program,
            recipe,
            Ledger(program.chains, program.observables.count),
            Ledger(program.chains, _curve_columns(program), block=BLOCK, limit=CURVE_ENTRIES),
            warm_up.blocks * BLOCK,
            sectors=SectorCount(edges),
        )
        _draw(chain, warm_up.state, main_key, p, request, began, interrupted, satisfied)
    chain.seconds = time.monotonic() - began
    return chain


def _curve_columns(program: Program) -> int:
    observables = program.observables
    return observables.count + len(observables.free) * observables.steps


def _draw(
    chain: Chain,
    state: PathState,
    key: jax.Array,
    p: Parameters,
    request: Request,
    began: float,
    interrupted: Callable[[], bool],
    satisfied: Callable[[Chain], bool],
) -> None:
    tuning = chain.recipe.tuning()
    accepted: list[Floats] = []
    changes: list[Floats] = []
    checked = time.monotonic()
    while not chain.stop:
        state, out = chain.program.advance(state, key, chain.draws, p, tuning)
        _enter(chain, out)
        accepted.append(np.asarray(out.accepted))
        changes.append(np.asarray(out.exp_change).mean(axis=0))
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
    numbers = np.asarray(out.numbers)
    curves = np.asarray(out.curves).reshape(numbers.shape[1], -1)
    chain.numbers.add(numbers)
    chain.curves.add(np.concatenate([numbers.mean(axis=0), curves], axis=-1)[None])
    if chain.sectors is not None:
        means = np.asarray(out.probes)[..., : chain.program.target.components]
        chain.sectors.add(means, np.asarray(out.winding))


def _summarise(chain: Chain, accepted: list[Floats], changes: list[Floats]) -> None:
    rates = np.mean(accepted, axis=0)
    chain.acceptance = {move.name: float(r) for move, r in zip(chain.program.moves, rates, strict=True)}
    values = np.concatenate(changes)
    spread = float(np.std(values) / np.sqrt(len(values))) if len(values) > 1 else 0.0
    chain.exp_change = (float(np.mean(values)), spread)
