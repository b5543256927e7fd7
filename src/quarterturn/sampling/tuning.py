"""Warm-up: equilibrate, measure the reference form, choose integrator, angle and moves by trial, then freeze.

Every decision follows from sampled data alone, never from a clock, so that a run is repeated bit for bit from its
seed. A candidate is scored by the smallest number of effective samples per unit of cost over a few slow probes and
the measured numbers; the cost of a draw is a fixed part (momenta, energies, measurements) and one part for each kick.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.compiled.target import Parameters, PathState
from quarterturn.sampling.integrators.leapfrog import LEAPFROG
from quarterturn.sampling.integrators.minimum_norm import MINIMUM_NORM
from quarterturn.sampling.integrators.splitting import Splitting
from quarterturn.sampling.moves.base import Tuning
from quarterturn.sampling.moves.segment_flip import SegmentFlip
from quarterturn.sampling.program import BLOCK, BlockOutput, Program

Floats = NDArray[np.float64]
FIXED_COST = 4.0  # a draw without kicks, in units of a kick (measured on two cores; only the choice depends on it)
SEGMENT_COST = 2.5
INTEGRATORS = {s.name: s for s in (LEAPFROG, MINIMUM_NORM)}


@dataclass(frozen=True)
class Recipe:
    """The tuned parameters, as plain numbers: what a record keeps."""

    frequency_squared: tuple[float, ...]
    centre: tuple[float, ...]
    integrator: str
    steps: int
    angle: float  # length of the whole trajectory [rad]; pi/2 decorrelates the reference form completely
    segments: bool

    def tuning(self) -> Tuning:
        """As traced arguments. Call inside `double()`."""
        turns, kicks, count = INTEGRATORS[self.integrator].trajectory(self.angle / self.steps, self.steps)
        return Tuning(
            jnp.asarray(np.array(self.frequency_squared)),
            jnp.asarray(np.array(self.centre)),
            jnp.asarray(turns),
            jnp.asarray(kicks),
            jnp.asarray(count, jnp.int32),
            jnp.asarray(self.segments),
        )

    @property
    def kicks(self) -> int:
        return self.steps * len(INTEGRATORS[self.integrator].kicks)

    @property
    def cost(self) -> float:
        return FIXED_COST + self.kicks + SEGMENT_COST * self.segments


class WarmUp:
    """Carries the chains through warm-up. `blocks` counts the blocks used; `interrupted` stops between blocks."""

    def __init__(
        self,
        program: Program,
        p: Parameters,
        key: Array,
        state: PathState,
        interrupted: Callable[[], bool],
    ) -> None:
        self.program, self.p, self.key, self.state = program, p, key, state
        self.interrupted = interrupted
        self.blocks = 0

    def run(self, recipe: Recipe, blocks: int) -> list[BlockOutput]:
        """Advance all chains by `blocks` blocks under a recipe; fewer when interrupted."""
        outputs = []
        tuning = recipe.tuning()
        for _ in range(blocks):
            if self.interrupted():
                break
            self.state, out = self.program.advance(self.state, self.key, self.blocks * BLOCK, self.p, tuning)
            self.blocks += 1
            outputs.append(out)
        return outputs

    def settle(self, recipe: Recipe, rounds: int) -> Recipe:
        """Equilibrate with a step that follows the acceptance up and down."""
        for _ in range(rounds):
            out = self.run(recipe, 1)
            if not out:
                break
            accepted = float(out[0].accepted[0])
            if accepted < 0.6:
                recipe = _shorter(recipe)
            elif accepted > 0.9:
                recipe = _longer(recipe)
        return recipe

    def measure_reference(self, recipe: Recipe) -> Recipe:
        """Omega^2 = <(x - c) dV/dx> / <(x - c)^2>, the linear force that the samples show, and their centre."""
        target = self.program.target
        x = np.asarray(self.state.x)
        slope = np.asarray(target.force(self.state, self.p))
        if target.angles:
            return recipe
        mirrored = np.all(np.asarray(target.euclidean.symmetries).reshape(-1, target.components) < 0, axis=1).any()
        centre = np.zeros(target.components) if mirrored else x.mean(axis=(0, 2))
        y = x - centre[None, :, None]
        ratio = (y * slope).mean(axis=(0, 2)) / (y * y).mean(axis=(0, 2))
        old = np.array(recipe.frequency_squared)
        measured = np.where(np.isfinite(ratio) & (ratio > 0), ratio, old)
        return replace(
            recipe,
            frequency_squared=tuple(float(v) for v in measured),
            centre=tuple(float(v) for v in centre),
        )

    def score(self, recipe: Recipe, blocks: int) -> float:
        """Effective samples per unit of cost of the slowest probe; the first block of a trial is not counted."""
        outputs = self.run(recipe, blocks + 1)[1:]
        if len(outputs) < blocks:
            return 0.0
        series = np.concatenate(
            [np.concatenate([np.asarray(o.probes), np.asarray(o.numbers)], axis=-1) for o in outputs]
        )
        return _efficiency(series) / recipe.cost


def _efficiency(series: Floats) -> float:
    """(1 - rho) / (1 + rho) of the slowest column of (draws, chains, columns), rho the lag-one autocorrelation.

    What noise alone would give, 1.5 / sqrt(samples), is taken off rho, so that equals are told apart by their cost.
    """
    centred = series - series.mean(axis=(0, 1))
    variance = (centred**2).mean(axis=(0, 1))
    lagged = (centred[1:] * centred[:-1]).mean(axis=(0, 1))
    moving = variance > 1e-24 * (1 + series.mean(axis=(0, 1)) ** 2)
    if not moving.any():
        return 0.0
    noise = 1.5 / np.sqrt(series.shape[0] * series.shape[1])
    rho = np.clip(lagged[moving] / variance[moving] - noise, 0.0, 1.0)
    return float(np.min((1 - rho) / (1 + rho)))


def _shorter(recipe: Recipe) -> Recipe:
    if recipe.kicks <= 20 and recipe.angle > 0.4:
        return replace(recipe, steps=recipe.steps + 1)
    return replace(recipe, angle=recipe.angle * 0.7)


def _longer(recipe: Recipe) -> Recipe:
    if recipe.angle < 1.5:
        return replace(recipe, angle=min(1.5, recipe.angle * 1.3))
    return replace(recipe, steps=max(1, recipe.steps - 1))


def _shapes(start: Recipe) -> Iterator[Recipe]:
    """Candidates of integrator, steps and angle around a recipe that is known to be accepted."""
    quarter = 1.5
    for integrator in (LEAPFROG, MINIMUM_NORM):
        per_step = len(integrator.kicks)
        for steps in sorted({1, 2, 3, max(1, start.kicks // per_step), max(1, start.kicks * 3 // (2 * per_step))}):
            for angle in sorted({quarter, min(quarter, start.angle)}):
                if _plausible(integrator, steps, angle, start):
                    yield replace(start, integrator=integrator.name, steps=steps, angle=angle)


def _plausible(integrator: Splitting, steps: int, angle: float, start: Recipe) -> bool:
    """Not far beyond the kick length that was accepted in settling, and within the limit of kicks."""
    kicks = steps * len(integrator.kicks)
    reach = 2.5 * start.angle / start.kicks
    return kicks <= 40 and angle / kicks <= max(reach, 0.1)


def tune(warm_up: WarmUp, first: Recipe) -> Recipe:
    """The whole warm-up; returns the recipe to freeze."""
    segments = any(isinstance(m, SegmentFlip) for m in warm_up.program.moves)
    recipe = warm_up.settle(replace(first, segments=segments), 8)
    recipe = warm_up.settle(warm_up.measure_reference(recipe), 4)
    recipe = warm_up.measure_reference(recipe)
    score, recipe = _best(warm_up, sorted(_shapes(recipe), key=lambda c: c.cost), 0.0, recipe)
    wider = [
        replace(recipe, frequency_squared=tuple(factor * v for v in recipe.frequency_squared))
        for factor in (1.6, 0.6, 2.5)
    ]
    score, recipe = _best(warm_up, wider, score, recipe)
    if segments:
        _, recipe = _best(warm_up, [replace(recipe, segments=False)], score, recipe)
    return recipe


def _best(warm_up: WarmUp, candidates: list[Recipe], score: float, recipe: Recipe) -> tuple[float, Recipe]:
    """The best of the candidates and of `recipe` with its `score`; one whose cost alone rules it out isn't tried."""
    for candidate in candidates:
        if 1 / candidate.cost <= score:
            continue
        trial = warm_up.score(candidate, 2)
        if trial > score:
            score, recipe = trial, candidate
    return score, recipe
