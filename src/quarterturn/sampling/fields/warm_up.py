"""Warm-up of fields: equilibrate from unlike starts, find scale, step and length of a trajectory by trial, then freeze.

The natural scale of a variable is 1/sqrt(<(dS/dphi)^2>), since by parts <(dS/dphi)^2> = <d^2 S/dphi^2> in equilibrium.
As for paths every decision follows from sampled data alone, never from a clock. A candidate is scored by how far its
slowest probe moves in a draw: near a critical point no trial is long enough to see an autocorrelation die out, but the
mean square of a jump is seen at once (Pasarica and Gelman, Statist. Sinica 20 (2010) 343).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace

import jax
import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.compiled.field_target import FieldParameters, FieldState
from quarterturn.sampling.fields.program import FieldProgram
from quarterturn.sampling.fields.trajectory import FieldTuning
from quarterturn.sampling.program import BlockOutput
from quarterturn.sampling.tuning import FEWEST_ACCEPTED, STUCK

Floats = NDArray[np.float64]
FIXED_COST = 4.0  # of a draw without kicks, in kicks: momenta, the action, what is measured
WANTED = (0.8, 0.93)  # acceptance at which the step is left as it is
SETTLING_ROUNDS = 40
SETTLED_ROUNDS = 6  # at the least
TRIAL_DRAWS = 64  # of each chain
LONGEST = 200  # steps of a trajectory on average
STEPS_LENGTHS = (0.6, 1.0, 1.6, 2.5, 4.0, 6.4, 10.0)  # trial lengths, in the natural scale
AGREEMENT = 1.1  # ratio of the spread of all draws to that within chains at which starts are forgotten
LONGEST_WAIT = 12  # rounds of 64 draws until starts must be forgotten


@dataclass(frozen=True)
class FieldRecipe:
    """The tuned parameters, as plain numbers: what a record keeps."""

    scale: tuple[float, ...]
    step: float
    steps: int  # of a trajectory, on average
    clusters: int = 0  # cluster flips of each symmetry in a sweep

    def tuning(self) -> FieldTuning:
        """As traced arguments. Call inside `double()`."""
        fewest = max(1, (self.steps + 1) // 2)
        return FieldTuning(
            jnp.asarray(np.array(self.scale)),
            jnp.asarray(self.step),
            jnp.asarray(fewest, jnp.int32),
            jnp.asarray(2 * self.steps - fewest, jnp.int32),
            jnp.asarray(self.clusters, jnp.int32),
        )

    @property
    def kicks(self) -> int:
        """In a trajectory, on average."""
        return 2 * self.steps

    @property
    def length(self) -> float:
        """Of a trajectory, on average, in the natural scale."""
        return self.step * self.steps

    @property
    def cost(self) -> float:
        return FIXED_COST + self.kicks

    def of_length(self, length: float) -> FieldRecipe:
        """The same step and another length."""
        return replace(self, steps=int(min(LONGEST, max(1, round(length / self.step)))))

    def stepping(self, factor: float) -> FieldRecipe:
        """The same length in steps `factor` times as long."""
        return replace(self, step=self.step * factor).of_length(self.length)


@dataclass(frozen=True)
class FieldTrial:
    """One candidate of the warm-up, its acceptance, and the effective samples it gave per draw."""

    recipe: FieldRecipe
    acceptance: float
    efficiency: float

    @property
    def score(self) -> float:
        return min(1.0, self.acceptance / FEWEST_ACCEPTED) ** 8 * self.efficiency / self.recipe.cost


class FieldWarmUp:
    """Carries the chains through warm-up. `draws` counts the draws used; `interrupted` stops between blocks."""

    def __init__(
        self,
        program: FieldProgram,
        p: FieldParameters,
        key: Array,
        state: FieldState,
        interrupted: Callable[[], bool],
    ) -> None:
        self.program, self.p, self.key, self.state = program, p, key, state
        self.interrupted = interrupted
        self.draws = 0
        self.trials: list[FieldTrial] = []
        self._squares = jax.jit(lambda phi, p: jnp.stack([jnp.mean(f * f) for f in program.target.force(phi, p)]))

    def run(self, recipe: FieldRecipe, draws: int) -> list[BlockOutput]:
        """Advance all chains by `draws` draws or a little more; fewer when interrupted."""
        outputs = []
        tuning = recipe.tuning()
        for _ in range(-(-draws // self.program.block)):
            if self.interrupted():
                break
            self.state, out = self.program.advance(self.state, self.key, self.draws, self.p, tuning)
            self.draws += self.program.block
            outputs.append(jax.device_get(out))
        return outputs

    def rescaled(self, recipe: FieldRecipe) -> FieldRecipe:
        """Natural scales from the forces at hand; those of a unit vector are one."""
        squares = np.array(self._squares(self.state.phi, self.p))
        for ball in self.program.target.euclidean.spheres:
            squares[list(ball)] = squares[list(ball)].mean()
        usable = np.isfinite(squares) & (squares > 0)
        scale = np.where(usable, 1 / np.sqrt(np.where(usable, squares, 1.0)), recipe.scale)
        return replace(recipe, scale=tuple(float(s) for s in scale))

    def settle(self, recipe: FieldRecipe) -> FieldRecipe:
        """Equilibrate with scales that follow the force, and a step that follows the acceptance."""
        low, high = WANTED
        for round_ in range(SETTLING_ROUNDS):
            if round_ < 2 * SETTLED_ROUNDS:
                recipe = self.rescaled(recipe)
            out = self.run(recipe, 8)
            if not out:
                break
            accepted = float(np.mean([o.accepted[0] for o in out]))
            stuck = bool(np.any(np.mean([o.exp_change for o in out], axis=0) < STUCK))
            if low <= accepted <= high and not stuck and round_ >= SETTLED_ROUNDS:
                break
            if accepted < low:
                recipe = recipe.stepping(0.5 if accepted < low / 3 else 0.8)
            elif stuck:
                self.run(replace(recipe, step=recipe.step / 8), 8)
            elif accepted > high:
                recipe = recipe.stepping(1.2)
        return recipe

    def try_all(self, candidates: Iterable[FieldRecipe], best: FieldTrial | None) -> FieldTrial | None:
        """The best of the candidates and of `best`, each from the same configurations and random numbers.

        A candidate whose cost alone rules it out is not tried. The chains go on from those of the best one.
        """
        start, first = self.state, self.draws
        kept, used = start, first
        for candidate in dict.fromkeys(candidates):
            if best is not None and 1 / candidate.cost <= best.score:
                continue
            self.state, self.draws = start, first
            outputs = self.run(candidate, TRIAL_DRAWS)
            if sum(len(o.probes) for o in outputs) < TRIAL_DRAWS:
                break
            series = np.concatenate([o.probes for o in outputs])
            series = np.concatenate([series, np.concatenate([o.numbers for o in outputs])], axis=-1)
            trial = FieldTrial(candidate, float(np.mean([o.accepted[0] for o in outputs])), mobility(series))
            self.trials.append(trial)
            used = max(used, self.draws)
            if best is None or trial.score > best.score:
                best, kept = trial, self.state
        self.state, self.draws = kept, max(used, self.draws)
        return best

    def forget(self, recipe: FieldRecipe) -> bool:
        """Draw until chains from unlike starts agree in every probe; whether they do."""
        for _ in range(LONGEST_WAIT):
            outputs = self.run(recipe, TRIAL_DRAWS)
            if not outputs:
                return False
            series = np.concatenate([o.probes for o in outputs])
            if spread_of_chains(series) < AGREEMENT:
                return True
        return False


def mobility(series: Floats) -> float:
    """Effective samples per draw, (1 - rho)/(1 + rho) with rho the correlation of neighbouring draws, at most 1.

    Of the slowest column of (draws, chains, columns): exact for an autoregressive column of first order.
    """
    centred = series - series.mean(axis=(0, 1))
    variance = (centred**2).mean(axis=(0, 1))
    moving = variance > 1e-24 * (1 + series.mean(axis=(0, 1)) ** 2)
    if not moving.any():
        return 0.0
    jump = (np.diff(series, axis=0) ** 2).mean(axis=(0, 1))[moving] / (2 * variance[moving])
    return float(np.min(np.minimum(1.0, jump / np.maximum(2 - jump, 1e-12))))


def spread_of_chains(series: Floats) -> float:
    """sqrt of the variance of all draws over that within chains, of the worst column of (draws, chains, columns).

    Source: Gelman and Rubin, Statist. Sci. 7 (1992) 457.
    """
    within = series.var(axis=0, ddof=1).mean(axis=0)
    between = series.mean(axis=0).var(axis=0, ddof=1)
    moving = within > 1e-24 * (1 + series.mean(axis=(0, 1)) ** 2)
    if not moving.any():
        return 1.0
    return float(np.sqrt(1 + np.max(between[moving] / within[moving])))


def tune_field(warm_up: FieldWarmUp, first: FieldRecipe) -> FieldRecipe:
    """The whole warm-up; returns the recipe to freeze."""
    recipe = warm_up.rescaled(warm_up.settle(first))
    best = warm_up.try_all([recipe.of_length(length) for length in STEPS_LENGTHS], None)
    if best is None:  # interrupted
        return recipe
    recipe = best.recipe
    others = [recipe.stepping(factor) for factor in (1.2, 0.85)]
    others += [recipe.of_length(recipe.length * factor) for factor in (1.3, 0.8)]
    best = warm_up.try_all(others, best) or best
    return best.recipe
