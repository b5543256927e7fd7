"""Warm-up of fields: starts that differ, steps tuned to an acceptance, trajectories as long as the slowest mode wants.

One third of the chains begins cold (all fields zero), one hot (random), one displaced (a constant field drawn anew for
each chain). After tuning, sweeps go on until the mean actions of the three groups agree, which is looked for and not
assumed; what does not agree in time shows later as chains that disagree.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import jax.numpy as jnp
import numpy as np
from jax import Array
from numpy.typing import NDArray

from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.errors import RequestError
from quarterturn.sampling.fields.program import BLOCK, FieldBlock, FieldProgram
from quarterturn.sampling.fields.trajectory import FieldTuning

Floats = NDArray[np.float64]
ACCEPTANCE = 0.85  # wanted; minimum-norm integrators are cheapest about there
GAIN = 1.5  # of the logarithm of the step per unit of missing acceptance, falling with the number of blocks
ROUNDS, BLOCKS = 5, 6  # of tuning: lengths are set between rounds, steps after every block
MOST_STEPS = 60.0
QUARTER = 0.8 * math.pi / 2  # angle of the slowest mode in one trajectory, on average
SETTLING, MOST_SETTLING = 6, 60  # blocks in one look at whether the starts agree; looks
AGREE = 3.0  # standard errors


@dataclass(frozen=True)
class FieldRecipe:
    """The tuned numbers, as plain values."""

    step: float
    steps: float
    masses: tuple[float, ...]

    def tuning(self) -> FieldTuning:
        return FieldTuning(jnp.asarray(self.step), jnp.asarray(self.steps), jnp.asarray(self.masses))


@dataclass
class FieldWarmUp:
    """Chains on their way to equilibrium."""

    program: FieldProgram
    p: FieldParameters
    key: Array
    state: FieldState
    interrupted: Callable[[], bool]
    blocks: int = 0

    def run(self, recipe: FieldRecipe) -> FieldBlock:
        self.state, out = self.program.advance(self.state, self.key, self.blocks * BLOCK, self.p, recipe.tuning())
        self.blocks += 1
        return out


def start_fields(target: FieldTarget, p: FieldParameters, chains: int, seed: int) -> FieldState:
    """Cold, hot and displaced starts in turn, (chains, C, sites). Raises RequestError where no start has an action."""
    rng = np.random.default_rng([seed & (2**64 - 1), chains, target.sites])
    shape = (chains, target.components, target.sites)
    phi = np.zeros(shape)
    phi[1::3] = 0.5 * rng.standard_normal(phi[1::3].shape)
    phi[2::3] = rng.standard_normal((*phi[2::3].shape[:2], 1))
    for i, period in enumerate(target.lattice.euclidean.periods):
        if period is not None:
            phi[1::3, i] = float(period.evaluate({}, np)) * rng.uniform(size=phi[1::3, i].shape)
    for group in target.lattice.euclidean.spheres:
        rows = list(group)
        phi[0::3, rows[-1]] = 1.0
        phi[:, rows] += 1e-12 * rng.standard_normal(phi[:, rows].shape)
        phi[:, rows] /= np.linalg.norm(phi[:, rows], axis=1, keepdims=True)
    for _ in range(12):
        state = target.state(jnp.asarray(phi), p)
        lost = ~np.isfinite(np.asarray(state.action))
        if not lost.any():
            return state
        phi[lost] *= 0.5
    raise RequestError("no field with a finite action was found: is the potential defined about zero fields?")


def first_field_recipe(target: FieldTarget, p: FieldParameters, state: FieldState) -> FieldRecipe:
    """Masses from the curvature of the action at the starts, so that the fastest frequencies are of order 1."""
    phi, width = state.phi, 1e-4
    curvature = np.zeros(target.components)
    checkers = jnp.asarray((-1.0) ** np.arange(target.sites))
    for c in range(target.components):
        bent = jnp.zeros_like(phi).at[:, c].set(width * checkers)
        change = (target.force(phi + bent, p) - target.force(phi - bent, p))[:, c] * checkers / (2 * width)
        curvature[c] = float(jnp.median(jnp.mean(jnp.where(jnp.isfinite(change), change, 0.0), axis=-1)))
    pull = np.asarray(jnp.sqrt(jnp.nanmean(target.force(phi[1::3], p) ** 2, axis=(0, 2))))
    masses = np.maximum(curvature, 1e-3 * max(1.0, float(np.max(np.abs(curvature)))))
    for group in target.lattice.euclidean.spheres:
        masses[list(group)] = max(float(np.max(pull[list(group)])), 1e-3)
    return FieldRecipe(0.4, 4.0, tuple(float(m) for m in masses))


def tune_fields(warm_up: FieldWarmUp, recipe: FieldRecipe) -> FieldRecipe:
    """Steps to the wanted acceptance, lengths to the slowest lattice mean; then settling until the starts agree."""
    for round_ in range(ROUNDS):
        means = []
        for block in range(BLOCKS):
            out = warm_up.run(recipe)
            means.append(np.asarray(out.means))
            missing = float(out.accepted[0]) - ACCEPTANCE
            gain = GAIN / math.sqrt(1 + round_ * BLOCKS + block)
            recipe = FieldRecipe(min(recipe.step * math.exp(gain * missing), 2.0), recipe.steps, recipe.masses)
            if warm_up.interrupted():
                return recipe
        recipe = _longer(warm_up.program.target, recipe, np.concatenate(means[BLOCKS // 2 :]))
    _settle(warm_up, recipe)
    return recipe


def _longer(target: FieldTarget, recipe: FieldRecipe, means: Floats) -> FieldRecipe:
    """As many steps as turn the slowest lattice mean by about a quarter; `means` (draws, chains, C)."""
    square = np.maximum(np.mean((means - means.mean(axis=0)) ** 2, axis=(0, 1)), 1e-300)
    masses = np.asarray(recipe.masses)
    frequency = 1 / np.sqrt(square * target.sites * masses)
    wanted = float(QUARTER / np.min(frequency))
    steps = min(max(wanted, 1.0) / recipe.step, MOST_STEPS)
    return FieldRecipe(recipe.step, max(0.5 * (recipe.steps + steps), 1.0), recipe.masses)


def _settle(warm_up: FieldWarmUp, recipe: FieldRecipe) -> None:
    agreed = 0
    for _ in range(MOST_SETTLING):
        found = np.concatenate([np.asarray(warm_up.run(recipe).action) for _ in range(SETTLING)]).mean(axis=0)
        groups = [found[k::3] for k in range(3)]
        errors = [g.std(ddof=1) ** 2 / len(g) if len(g) > 1 else np.inf for g in groups]
        pairs = [(0, 1), (0, 2), (1, 2)]
        apart = [abs(groups[a].mean() - groups[b].mean()) > AGREE * math.sqrt(errors[a] + errors[b]) for a, b in pairs]
        agreed = 0 if any(apart) else agreed + 1
        if agreed == 2 or warm_up.interrupted():
            return
