"""Where chains begin: a first reference from the potential alone, and overdispersed starts around it."""

from __future__ import annotations

import jax.numpy as jnp
import numpy as np
from numpy.typing import NDArray

from quarterturn.compiled.target import PathState
from quarterturn.errors import RequestError
from quarterturn.sampling.points import PointAction
from quarterturn.sampling.reference import gaussian_reference
from quarterturn.sampling.tuning import Recipe

Floats = NDArray[np.float64]
SPREAD = 0.7  # starts are exp(-SPREAD) to exp(SPREAD) times the size of reference paths
SIDE = 1.5  # and displaced by up to so many widths of the reference
ATTEMPTS = 12  # halvings of size and displacement where the action is not finite


def first_recipe(points: PointAction) -> Recipe:
    """A reference from the potential alone, and a cautious trajectory."""
    omega2, centre = gaussian_reference(points)
    return Recipe(tuple(map(float, omega2)), tuple(map(float, centre)), "leapfrog", 3, 1.2, False)


def start_state(points: PointAction, chains: int, seed: int, recipe: Recipe) -> PathState:
    """Overdispersed starts: reference paths of half to twice their size, displaced to either side of the centre.

    Chains whose action is not finite there start closer to the centre. They only begin the warm-up, so NumPy's
    generator serves. Raises RequestError where even the constant path at the centre has no finite action.
    """
    rng = np.random.default_rng([seed & (2**64 - 1), chains])
    components = points.target.components
    omega2, centre = np.array(recipe.frequency_squared), np.array(recipe.centre)[:, None]
    waves = reference_waves(rng, points, chains, omega2)
    size = np.exp(SPREAD * rng.uniform(-1, 1, (chains, 1, 1)))
    side = SIDE * rng.uniform(-1, 1, (chains, components, 1))
    away = waves * size + side * ((4 * omega2) ** -0.25)[:, None]
    for attempt in range(ATTEMPTS + 1):
        action = points.path_action(centre + away)
        lost = ~np.isfinite(action)
        if not lost.any():
            winding = jnp.zeros((chains, components))
            return PathState(jnp.asarray(centre + away), winding, jnp.asarray(action))
        away[lost] *= 0.5 if attempt < ATTEMPTS - 1 else 0.0
    q = ", ".join(f"{v:.4g}" for v in (points.unwhitening.T @ centre)[:, 0])
    raise RequestError(
        f"no path with a finite action was found: even the constant path at {q} has none; "
        "is the potential defined there at these couplings?"
    )


def reference_waves(rng: np.random.Generator, points: PointAction, chains: int, omega2: Floats) -> Floats:
    """Paths of the reference form, (chains, C, sites)."""
    sites = points.target.sites
    noise = np.fft.rfft(rng.standard_normal((chains, points.target.components, sites)), axis=-1)
    k = 2 * np.pi * np.arange(sites // 2 + 1) / sites
    form = (2 / points.spacing) * (1 - np.cos(k)) + points.spacing * omega2[:, None]
    return np.fft.irfft(noise / np.sqrt(form), n=sites, axis=-1)
