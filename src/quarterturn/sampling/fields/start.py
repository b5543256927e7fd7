"""Where chains of fields begin: hot, cold and displaced, so that their agreement means something."""

from __future__ import annotations

from collections.abc import Callable

import jax
import jax.numpy as jnp
import numpy as np
from numpy.typing import NDArray

from quarterturn.compiled.field_target import FieldParameters, FieldState, FieldTarget
from quarterturn.errors import RequestError
from quarterturn.sampling.fields.warm_up import FieldRecipe

Floats = NDArray[np.float64]
SIZES = tuple(2.0**k for k in range(12, -21, -1))
ATTEMPTS = 12


def start_field(target: FieldTarget, p: FieldParameters, chains: int, seed: int) -> tuple[FieldState, FieldRecipe]:
    """Starts of four kinds in turn, and a cautious recipe: independent sites; near zero; near one side; near the other.

    Their size is the largest at which independent sites still have an action of the order of their number. Raises
    RequestError where no size has a finite action.
    """
    rng = np.random.default_rng([seed & (2**64 - 1), chains])
    measured = jax.jit(target.action)

    def action(phi: Floats) -> Floats:
        return np.asarray(measured(tuple(jnp.asarray(f) for f in phi), p))

    noise = rng.standard_normal((target.components, target.sites, chains))
    size = _size(target, action, noise)
    kind = np.arange(chains) % 4
    side = size * np.where(kind == 2, 1.0, np.where(kind == 3, -1.0, 0.0)) * rng.uniform(0.5, 1.5, chains)
    width = size * np.where(kind == 0, 1.0, 0.2)
    phi = _on_manifolds(target, side + width * noise, rng)
    for attempt in range(ATTEMPTS + 1):
        values = action(phi)
        lost = ~np.isfinite(values)
        if not lost.any():
            scale = (size,) * target.components
            return FieldState(tuple(jnp.asarray(f) for f in phi), jnp.asarray(values)), FieldRecipe(scale, 0.3, 4)
        phi[..., lost] *= 0.5 if attempt < ATTEMPTS - 1 else 0.0
        phi = _on_spheres(target, phi)
    raise RequestError("no configuration with a finite action was found; is the action defined near zero?")


def _size(target: FieldTarget, action: Callable[[Floats], Floats], noise: Floats) -> float:
    """The largest power of two at which noise costs no more than a few units of action a variable."""
    zero = action(np.zeros_like(noise))
    base = np.where(np.isfinite(zero), zero, 0.0)
    for size in SIZES:
        cost = (action(size * noise) - base) / (target.sites * target.components)
        if np.all(np.isfinite(cost)) and np.all(cost < 1.0):
            return float(size)
    return 1.0


def _on_manifolds(target: FieldTarget, phi: Floats, rng: np.random.Generator) -> Floats:
    """Angles within their period; unit vectors in all directions, or nearly along one."""
    chains = phi.shape[-1]
    for i in np.flatnonzero(target.periods):
        period = target.periods[i]
        hot = np.arange(chains) % 2 == 0
        around = rng.uniform(-0.5, 0.5, (1, chains)) + np.where(hot, 1.0, 0.05) * rng.uniform(-0.5, 0.5, phi.shape[1:])
        phi[i] = period * around
    for ball in target.euclidean.spheres:
        index = list(ball)
        one = rng.standard_normal((len(ball), 1, chains))
        one /= np.sqrt(np.sum(one**2, axis=0))
        hot = np.arange(chains) % 2 == 0
        phi[index] = np.where(hot, 0.0, 1.0) * one + np.where(hot, 1.0, 0.1) * rng.standard_normal(phi[index].shape)
    return _on_spheres(target, phi)


def _on_spheres(target: FieldTarget, phi: Floats) -> Floats:
    for ball in target.euclidean.spheres:
        index = list(ball)
        length = np.sqrt(np.sum(phi[index] ** 2, axis=0))
        phi[index] = np.where(length > 0, phi[index] / np.where(length > 0, length, 1.0), len(ball) ** -0.5)
    return phi
