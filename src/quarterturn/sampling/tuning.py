"""Warm-up: equilibrate, measure the reference form, choose integrator, angle and moves by trial, then freeze.

Every decision follows from sampled data alone, never from a clock, so that a run is repeated bit for bit from its
seed. A candidate is scored by the smallest number of effective samples per unit of cost over a few slow probes and
the measured numbers. All candidates of one comparison start from the same paths and draw the same random numbers, so
that what is compared is their difference and not their luck.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, replace

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.compiled.target import Parameters, PathState
from quarterturn.sampling.integrators.leapfrog import LEAPFROG
from quarterturn.sampling.integrators.minimum_norm import MINIMUM_NORM
from quarterturn.sampling.moves.base import TRAJECTORY_LIMIT, Tuning
from quarterturn.sampling.moves.segment_flip import SegmentFlip
from quarterturn.sampling.points import PointAction, lowest_frequency_squared
from quarterturn.sampling.program import BLOCK, BlockOutput, Program

Floats = NDArray[np.float64]
FIXED_COST = 3.0  # a draw without kicks, in units of a kick (benchmarks: `sweep parts`); only the choice depends on it
SEGMENT_COST = 2.2
QUARTER = 1.5  # angle of a trajectory that forgets the reference paths: pi/2, a little less for the jitter
SETTLING = (0.6, 0.95)  # acceptance that settling aims at
STUCK = 0.02  # mean exp(-dH) of a chain over a block below which it has hardly moved
FEWEST_ACCEPTED = 0.8  # below it a score falls steeply: rare large dH make chains stick and <exp(-dH)> hard to check
SETTLING_BLOCKS = 24
RARE_KINKS = 0.9  # share of chains with kinks from which the trajectory may be left to make them
TRIAL_SAMPLES = 3072  # draws of all chains together that a trial counts
TRIAL_BLOCKS = 4  # the most blocks of a trial
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

    def with_kicks(self, integrator: str, kicks: int) -> Recipe:
        """The same trajectory with about so many kicks, at least one step."""
        per_step = len(INTEGRATORS[integrator].kicks)
        steps = max(1, min(kicks, TRAJECTORY_LIMIT) // per_step)
        return replace(self, integrator=integrator, steps=steps)

    def scaled(self, factor: float) -> Recipe:
        """The same trajectory with reference frequencies `factor` times as large."""
        return replace(self, frequency_squared=tuple(v * factor**2 for v in self.frequency_squared))


@dataclass(frozen=True)
class Trial:
    """One candidate of the warm-up, its acceptance, and the effective samples it gave per draw."""

    recipe: Recipe
    acceptance: float
    efficiency: float

    @property
    def score(self) -> float:
        return min(1.0, self.acceptance / FEWEST_ACCEPTED) ** 8 * self.efficiency / self.recipe.cost


class WarmUp:
    """Carries the chains through warm-up. `blocks` counts the blocks used; `interrupted` stops between blocks."""

    def __init__(
        self,
        program: Program,
        p: Parameters,
        points: PointAction,
        key: Array,
        state: PathState,
        interrupted: Callable[[], bool],
    ) -> None:
        self.program, self.p, self.points, self.key, self.state = program, p, points, key, state
        self.interrupted = interrupted
        self.blocks = 0
        self.trials: list[Trial] = []

    def run(self, recipe: Recipe, blocks: int) -> list[BlockOutput]:
        """Advance all chains by `blocks` blocks under a recipe; fewer when interrupted."""
        outputs = []
        tuning = recipe.tuning()
        for _ in range(blocks):
            if self.interrupted():
                break
            self.state, out = self.program.advance(self.state, self.key, self.blocks * BLOCK, self.p, tuning)
            self.blocks += 1
            outputs.append(jax.device_get(out))
        return outputs

    def settle(self, recipe: Recipe, fewest: int) -> Recipe:
        """Equilibrate with a step that follows the acceptance; on until it lies in the range and no chain is stuck.

        A chain that began high on a steep wall would be rejected for ever: it is freed by much shorter steps.
        """
        low, high = SETTLING
        for round_ in range(SETTLING_BLOCKS):
            out = self.run(recipe, 1)
            if not out:
                break
            accepted, stuck = float(out[0].accepted[0]), bool(np.any(out[0].exp_change < STUCK))
            if accepted >= low and not stuck and round_ >= fewest:
                break
            if accepted < low:
                recipe = _shorter(recipe, 2.0 if accepted < low / 3 else 1.4)
            elif stuck:
                careful = replace(recipe, angle=recipe.angle / 4, steps=min(2 * recipe.steps, TRAJECTORY_LIMIT // 2))
                self.run(careful, 1)
            elif accepted > high:
                recipe = _longer(recipe)
        return recipe

    def measure_reference(self, recipe: Recipe) -> Recipe:
        """Omega^2 = <(x - c) dV/dx> / <(x - c)^2>, the linear force that the samples show, and their centre.

        An angle has no centre, and its force no linear part: there the curvature serves.
        """
        target = self.program.target
        if target.angles:
            return self.local_reference(recipe)
        x = self._samples()
        mirrored = np.all(np.asarray(target.euclidean.symmetries).reshape(-1, target.components) < 0, axis=1).any()
        centre = np.zeros(target.components) if mirrored else x.mean(axis=(1, 2))
        y = x - centre[:, None, None]
        ratio = (y * self.points.gradient(x)).mean(axis=(1, 2)) / (y * y).mean(axis=(1, 2))
        return replace(self._referring(recipe, ratio), centre=tuple(float(v) for v in centre))

    def local_reference(self, recipe: Recipe) -> Recipe:
        """Omega^2 = <d^2 V/dx^2>, how paths vibrate where they are: larger than the linear force in separate wells."""
        return self._referring(recipe, self.points.curvature(self._samples()).mean(axis=(1, 2)))

    def _samples(self) -> Floats:
        """All points of all whitened paths, ramps included, (C, chains, sites)."""
        target, state = self.program.target, self.state
        ramp = np.asarray(state.winding)[..., None] * (target.periods[:, None] * np.arange(target.sites) / target.sites)
        whitening = np.linalg.inv(self.points.unwhitening)
        return np.moveaxis(np.asarray(state.x), 1, 0) + np.tensordot(whitening.T, np.moveaxis(ramp, 1, 0), axes=1)

    def _referring(self, recipe: Recipe, measured: Floats) -> Recipe:
        """The recipe with measured frequencies, not below the lowest useful ones; else the old."""
        old, lowest = np.array(recipe.frequency_squared), lowest_frequency_squared(self.points)
        usable = np.isfinite(measured) & ((measured > 0) | (lowest > 0))
        found = np.where(usable, np.maximum(measured, lowest), old)
        return replace(recipe, frequency_squared=tuple(float(v) for v in found))

    def crossing(self) -> float:
        """Share of chains whose path is on both sides of a sign symmetry; it is small where kinks are rare."""
        q = np.tensordot(self.points.unwhitening.T, np.moveaxis(np.asarray(self.state.x), 1, 0), axes=1)
        flipping = np.any(np.asarray(self.program.target.euclidean.symmetries) < 0, axis=0)
        return float(np.mean(np.any(q.min(axis=-1) * q.max(axis=-1) < 0, axis=0, where=flipping[:, None])))

    def try_all(self, candidates: Iterable[Recipe], best: Trial | None) -> Trial | None:
        """The best of the candidates and of `best`, each from the paths at hand and with the same random numbers.

        A candidate whose cost alone rules it out is not tried. The chains go on from the paths of the best one.
        """
        wanted = min(TRIAL_BLOCKS, max(2, -(-TRIAL_SAMPLES // (BLOCK * self.program.chains))))
        start, first = self.state, self.blocks
        kept, used = start, first
        for candidate in dict.fromkeys(candidates):
            if best is not None and 1 / candidate.cost <= best.score:
                continue
            self.state, self.blocks = start, first
            outputs = self.run(candidate, wanted)
            if len(outputs) < wanted:
                break
            series = np.concatenate([np.concatenate([o.probes, o.numbers], axis=-1) for o in outputs])
            trial = Trial(candidate, float(np.mean([o.accepted[0] for o in outputs])), _efficiency(series))
            self.trials.append(trial)
            used = max(used, self.blocks)
            if best is None or trial.score > best.score:
                best, kept = trial, self.state
        self.state, self.blocks = kept, max(used, self.blocks)
        return best


def _efficiency(series: Floats) -> float:
    """Effective samples per draw, 1 / (2 tau), of the slowest column of (draws, chains, columns).

    tau = 1/2 + sum of the autocorrelations, summed until they fall below what noise gives (1 / sqrt(samples)),
    which is also taken off each, so that equals are told apart by their cost.
    """
    centred = series - series.mean(axis=(0, 1))
    variance = (centred**2).mean(axis=(0, 1))
    moving = variance > 1e-24 * (1 + series.mean(axis=(0, 1)) ** 2)
    if not moving.any():
        return 0.0
    centred = centred[:, :, moving] / np.sqrt(variance[moving])
    noise = 1.0 / np.sqrt(series.shape[0] * series.shape[1])
    tau, open_ = np.full(centred.shape[2], 0.5), np.full(centred.shape[2], True)
    for lag in range(1, len(series) // 2):
        rho = np.mean(centred[lag:] * centred[:-lag], axis=(0, 1)) - noise
        open_ &= rho > 0
        tau += np.where(open_, rho, 0.0)
        if not open_.any():
            break
    return float(np.min(0.5 / tau))


def _shorter(recipe: Recipe, factor: float) -> Recipe:
    """Shorter steps: more of them, and where that ends, a shorter trajectory."""
    steps = int(np.ceil(recipe.steps * factor))
    if steps <= TRAJECTORY_LIMIT // 2:
        return replace(recipe, steps=steps)
    return replace(recipe, angle=recipe.angle / factor)


def _longer(recipe: Recipe) -> Recipe:
    if recipe.angle < QUARTER:
        return replace(recipe, angle=min(QUARTER, recipe.angle * 1.3))
    return replace(recipe, steps=max(1, recipe.steps * 3 // 4))


def _numbers_of_kicks(around: int) -> Iterator[int]:
    """Fewer and more kicks than `around`, in the order of trying."""
    yield from sorted({max(1, round(around * f)) for f in (0.4, 0.6, 0.8, 1.0, 1.3, 1.7)})


def _shapes(recipe: Recipe) -> list[Recipe]:
    """Leapfrogs of a full angle around a recipe that is known to be accepted."""
    full = replace(recipe, angle=QUARTER)
    kicks = min(TRAJECTORY_LIMIT, round(recipe.kicks * QUARTER / recipe.angle))
    return [recipe, *(full.with_kicks(LEAPFROG.name, n) for n in _numbers_of_kicks(kicks) if n <= TRAJECTORY_LIMIT)]


def tune(warm_up: WarmUp, first: Recipe) -> Recipe:
    """The whole warm-up; returns the recipe to freeze."""
    segments = any(isinstance(m, SegmentFlip) for m in warm_up.program.moves)
    recipe = warm_up.settle(replace(first, segments=segments), 6)
    recipe = warm_up.settle(warm_up.measure_reference(recipe), 3)
    recipe = warm_up.measure_reference(recipe)
    best = warm_up.try_all(_shapes(recipe), None)
    if best is None:  # interrupted
        return recipe
    recipe = best.recipe
    again, local = warm_up.measure_reference(recipe), warm_up.local_reference(recipe)
    references = [again.with_kicks(again.integrator, again.kicks - 1), again]
    references += [local] if _differ(local, recipe) else []
    references += [again.scaled(factor) for factor in (1.3, 0.8)]
    best = warm_up.try_all(references, best) or best
    recipe = best.recipe
    others = [recipe.with_kicks(LEAPFROG.name, recipe.kicks - 1)]
    others += [recipe.with_kicks(MINIMUM_NORM.name, n) for n in (recipe.kicks + 1, recipe.kicks * 2 // 3) if n > 1]
    others += [replace(recipe, angle=recipe.angle * factor) for factor in (0.75, 1.3)]
    best = warm_up.try_all(others, best) or best
    if segments and warm_up.crossing() > RARE_KINKS:
        best = warm_up.try_all([replace(best.recipe, segments=False)], best) or best
    return best.recipe


def _differ(a: Recipe, b: Recipe) -> bool:
    ratios = np.array(a.frequency_squared) / np.array(b.frequency_squared)
    return bool(np.any(ratios > 1.2) or np.any(ratios < 0.8))
