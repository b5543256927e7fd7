"""The compiled action against the same sums written out site by site in NumPy."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from quarterturn.actions.expression import ONE, PI, ZERO, Expression, PathAtom, Symbol, apply
from quarterturn.actions.model import EuclideanAction
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Target
from quarterturn.errors import ActionError

number = Expression.number
X, Y, THETA = PathAtom("x"), PathAtom("y"), PathAtom("theta")
x, y, theta = (Expression.of(a) for a in (X, Y, THETA))
lam, m, k = (Expression.of(Symbol("coupling", name)) for name in ("lam", "m", "k"))
CIRCLE = Expression.of(PI).scaled(2)
SITES, A = 7, 0.3
COUPLINGS = {"k": 0.4, "lam": 1.7, "m": 2.5}


def magnetic_pair() -> Target:
    """Two paths with mixed masses, an anharmonic coupling, and the vector potential of a field across the plane."""
    potential = lam * x**4 + x * y**2 + apply("exp", y).scaled(1)
    drift = (-y * k, x * k)
    action = EuclideanAction((X, Y), (None, None), ((m, k), (k, ONE)), potential, drift, (), digest="pair")
    return Target(action, SITES, ("k", "lam", "m"))


def line_and_angle() -> Target:
    potential = -lam * apply("cos", theta) + x**2 + x * apply("sin", theta)
    drift = (ZERO, k + x)
    periods = (None, CIRCLE)
    action = EuclideanAction((X, THETA), periods, ((m, k), (k, ONE)), potential, drift, (), digest="mixed")
    return Target(action, SITES, ("k", "lam", "m"))


def potential_of(target: Target, q: np.ndarray) -> float:
    a, b = q
    if target.angles:
        return -COUPLINGS["lam"] * math.cos(b) + a**2 + a * math.sin(b)
    return COUPLINGS["lam"] * a**4 + a * b**2 + math.exp(b)


def drift_of(target: Target, q: np.ndarray) -> np.ndarray:
    a, b = q
    if target.angles:
        return np.array([0.0, COUPLINGS["k"] + a])
    return COUPLINGS["k"] * np.array([-b, a])


def written_out(target: Target, q: np.ndarray, winding: np.ndarray) -> tuple[float, float]:
    """(Re S, -Im S) of one path q (2, sites) on the line, whose last link closes after `winding` turns."""
    mass = np.array([[COUPLINGS["m"], COUPLINGS["k"]], [COUPLINGS["k"], 1.0]])
    real = imaginary = 0.0
    for i in range(SITES):
        here = q[:, i]
        there = q[:, i + 1] if i + 1 < SITES else q[:, 0] + 2 * np.pi * winding
        step = there - here
        real += step @ mass @ step / (2 * A) + A * potential_of(target, here)
        imaginary += drift_of(target, (here + there) / 2) @ step
    return real, imaginary


@pytest.fixture(params=[magnetic_pair, line_and_angle], ids=lambda f: f.__name__)
def target(request: pytest.FixtureRequest) -> Target:
    return request.param()


def some_state(target: Target, p: Any) -> tuple[Any, np.ndarray]:
    rng = np.random.default_rng(2)
    winding = np.zeros((4, 2))
    winding[:, list(target.angles)] = rng.integers(-2, 3, (4, len(target.angles)))
    state = jax.jit(target.state)(jnp.asarray(rng.standard_normal((4, 2, SITES))), jnp.asarray(winding), p)
    return state, winding


def test_action_and_phase_are_the_sums_over_sites_and_links(target: Target) -> None:
    with double():
        p = target.parameters(COUPLINGS, A)
        state, winding = some_state(target, p)
        paths = np.asarray(target.path(state, p))
        expected = np.array([written_out(target, q, w) for q, w in zip(paths, winding, strict=True)])
        assert np.allclose(state.action, expected[:, 0], rtol=1e-12)
        assert np.allclose(target.phase(state, p), expected[:, 1], rtol=1e-12)


def test_the_force_is_the_gradient_of_the_potential(target: Target) -> None:
    """Against automatic differentiation of the summed potential in the whitened path."""
    with double():
        p = target.parameters(COUPLINGS, A)
        state, _ = some_state(target, p)
        summed = jax.grad(lambda z: jnp.sum(target.potential(target.path(state._replace(x=z), p), p)))
        assert np.allclose(target.force(state, p), summed(state.x), rtol=1e-11, atol=1e-12)


def test_whitening_takes_the_mass_matrix_away(target: Target) -> None:
    with double():
        p = target.parameters(COUPLINGS, A)
        state, _ = some_state(target, p)
        q = target.from_whitened(state.x, p)
        mass = np.array([[COUPLINGS["m"], COUPLINGS["k"]], [COUPLINGS["k"], 1.0]])
        assert np.allclose(np.einsum("bcn,cd,bdn->bn", q, mass, q), np.sum(state.x**2, axis=1), rtol=1e-12)
        assert np.allclose(target.to_whitened(q, p), state.x, rtol=1e-12)


def test_the_reference_form_is_the_spectrum_of_its_matrix(target: Target) -> None:
    with double():
        form = np.asarray(target.reference_form(jnp.array([2.0, 0.5]), target.parameters(COUPLINGS, A)))
    shift = np.roll(np.eye(SITES), 1, axis=1)
    for c, omega2 in enumerate((2.0, 0.5)):
        dense = (2 * np.eye(SITES) - shift - shift.T) / A + A * omega2 * np.eye(SITES)
        modes = np.concatenate([form[c], form[c][1 : SITES // 2 + 1]])  # all but k = 0 come twice, 7 is odd
        assert np.allclose(np.sort(modes), np.linalg.eigvalsh(dense), rtol=1e-12)


def test_masses_that_do_not_mix_are_told_from_those_that_do() -> None:
    plain = EuclideanAction((X, Y), (None, None), ((m, ZERO), (ZERO, ONE)), ZERO, (ZERO, ZERO), (), digest="plain")
    assert np.array_equal(Target(plain, 5, ("m",)).coupled, np.eye(2))
    assert magnetic_pair().coupled.all()
    z = PathAtom("z")
    rows = ((ONE, k, ZERO), (k, ONE, ZERO), (ZERO, ZERO, ONE))
    three = EuclideanAction((X, Y, z), (None,) * 3, rows, ZERO, (ZERO,) * 3, (), digest="three")
    expected = np.array([[1, 1, 0], [1, 1, 0], [0, 0, 1]], bool)
    assert np.array_equal(Target(three, 5, ("k",)).coupled, expected)


@pytest.mark.parametrize("couplings", [{"k": 2.0, "lam": 1, "m": 1.0}, {"k": 0, "lam": 1, "m": -1.0}])
def test_masses_without_a_positive_form_are_refused(couplings: Mapping[str, float]) -> None:
    with double(), pytest.raises(ActionError, match="not positive"):
        magnetic_pair().parameters(couplings, A)


def test_double_precision_is_local() -> None:
    with double():
        assert jnp.ones(1).dtype == "float64"
    assert jnp.ones(1).dtype == "float32"
