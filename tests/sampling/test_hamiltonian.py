"""The trajectory as a map: reversible, volume preserving, of second order; its velocities as a distribution."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from scipy.special import erfc

from quarterturn.actions.expression import ONE, PI, Expression, PathAtom, apply
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.integrators.leapfrog import LEAPFROG
from quarterturn.sampling.integrators.minimum_norm import MINIMUM_NORM
from quarterturn.sampling.integrators.splitting import Splitting
from quarterturn.sampling.moves.base import TRAJECTORY_LIMIT, Tuning
from quarterturn.sampling.moves.hamiltonian import HamiltonianMove
from quarterturn.sampling.random import seed_key
from quarterturn.sampling.tuning import Recipe

Floats = np.ndarray
number = Expression.number
X, Y, THETA = PathAtom("x"), PathAtom("y"), PathAtom("theta")
q, x, y, theta = (Expression.of(a) for a in (PathAtom("q"), X, Y, THETA))
PAIR: dict[str, Any] = {"variables": (X, Y), "mass": ((number(2), ONE), (ONE, number(3)))}
CIRCLE: dict[str, Any] = {"variables": (THETA,), "periods": (Expression.of(PI).scaled(2),)}
ACTIONS: dict[str, tuple[Expression, dict[str, Any], tuple[float, ...]]] = {
    "quartic": (q**2 + q**4, {}, (4.0,)),
    "double well": ((q**2 - number(2)) ** 2, {}, (6.0,)),
    "coupled pair": (x**2 + x * y + y**4, PAIR, (1.0, 2.0)),
    "pendulum": (-apply("cos", theta).scaled(3), CIRCLE, (2.0,)),
}
SPACING = 0.25


@pytest.fixture(params=list(ACTIONS))
def case(request: pytest.FixtureRequest, target_of: Callable[..., Target]) -> tuple[Target, tuple[float, ...]]:
    potential, given, omega2 = ACTIONS[request.param]
    return target_of(potential, 5, **given), omega2


def recipe(omega2: tuple[float, ...], integrator: Splitting = LEAPFROG, steps: int = 3, angle: float = 1.2) -> Recipe:
    return Recipe(omega2, tuple(0.1 for _ in omega2), integrator.name, steps, angle, False)


def some_paths(target: Target, p: Parameters, chains: int = 6) -> tuple[PathState, jax.Array]:
    rng = np.random.default_rng(3)
    shape = (chains, target.components, target.sites)
    winding = np.zeros(shape[:2])
    winding[:, list(target.angles)] = rng.integers(-1, 2, (chains, len(target.angles)))
    state = jax.jit(target.state)(jnp.asarray(rng.standard_normal(shape)), jnp.asarray(winding), p)
    return state, jnp.asarray(rng.standard_normal(shape))


@pytest.mark.parametrize("integrator", [LEAPFROG, MINIMUM_NORM], ids=lambda s: s.name)
def test_a_trajectory_runs_backwards(case: tuple[Target, tuple[float, ...]], integrator: Splitting) -> None:
    target, omega2 = case
    with double():
        move, p = HamiltonianMove(target), target.parameters({}, SPACING)
        tuning = recipe(omega2, integrator).tuning()
        state, v = some_paths(target, p)
        scale = jnp.linspace(0.9, 1.1, 6)[:, None, None]
        flow = jax.jit(move.flow)
        there, final = flow(state, v, scale, p, tuning)
        back, reversed_ = flow(state._replace(x=there), -final, scale, p, tuning)
        assert np.max(np.abs(there - state.x)) > 0.3
        assert np.allclose(back, state.x, atol=1e-11) and np.allclose(reversed_, -v, atol=1e-11)


@pytest.mark.parametrize("integrator", [LEAPFROG, MINIMUM_NORM], ids=lambda s: s.name)
def test_a_trajectory_preserves_volume(case: tuple[Target, tuple[float, ...]], integrator: Splitting) -> None:
    """Determinant of the Jacobian in all positions and velocities."""
    target, omega2 = case
    with double():
        move, p = HamiltonianMove(target), target.parameters({}, SPACING)
        tuning = recipe(omega2, integrator, steps=2)
        state, v = some_paths(target, p, chains=1)
        size = state.x.size

        def mapped(z: jax.Array) -> jax.Array:
            start = state._replace(x=z[:size].reshape(state.x.shape))
            ends = move.flow(start, z[size:].reshape(v.shape), jnp.ones((1, 1, 1)), p, tuning.tuning())
            return jnp.concatenate([end.ravel() for end in ends])

        jacobian = np.asarray(jax.jit(jax.jacfwd(mapped))(jnp.concatenate([state.x.ravel(), v.ravel()])))
    assert not np.allclose(jacobian, np.eye(2 * size), atol=0.1)
    assert abs(np.linalg.det(jacobian) - 1) < 1e-10


def test_trajectories_of_angles_commute_with_whole_turns(target_of: Callable[..., Target]) -> None:
    """Otherwise bringing the mean back to its interval between trajectories would break detailed balance.

    An angle whose mass is coupled to a path on the line, and that path's own mean, which a turn then shifts too.
    """
    mixed = {"variables": (X, THETA), "periods": (None, CIRCLE["periods"][0]), "mass": PAIR["mass"]}
    target = target_of(x**2 - apply("cos", theta) * number(2) + x * apply("sin", theta), 5, **mixed)
    with double():
        move, p = HamiltonianMove(target), target.parameters({}, SPACING)
        tuning, scale = recipe((2.0, 3.0)).tuning(), jnp.ones((6, 1, 1))
        state, v = some_paths(target, p)
        turn = target.to_whitened(jnp.array([0.0, 2 * np.pi])[:, None] * jnp.ones(5), p)
        flow = jax.jit(move.flow)
        plain, final = flow(state, v, scale, p, tuning)
        turned, same = flow(state._replace(x=state.x + turn), v, scale, p, tuning)
        assert np.max(np.abs(turn[0])) > 1
        assert np.allclose(turned, plain + turn, atol=1e-11) and np.allclose(final, same, atol=1e-11)
        back = move.recentred(state._replace(x=state.x + 3 * turn), p)
        means = jnp.mean(target.path(back, p), axis=-1)[:, 1]
        assert np.all(np.abs(means) <= np.pi + 1e-9)
        assert np.allclose(target.action(back, p), state.action, rtol=1e-12)


def energy_errors(target: Target) -> Callable[[Tuning, Parameters, tuple[PathState, jax.Array]], jax.Array]:
    """dH of trajectories without jitter, as one compiled function of their tuning."""
    move = HamiltonianMove(target)

    def errors(tuning: Tuning, p: Parameters, paths: tuple[PathState, jax.Array]) -> jax.Array:
        state, v = paths
        x_, final = move.flow(state, v, jnp.ones((state.x.shape[0], 1, 1)), p, tuning)
        after = target.action(state._replace(x=x_), p) + move.kinetic(final, p, tuning)
        return after - state.action - move.kinetic(v, p, tuning)

    return jax.jit(errors)


def test_energy_errors_fall_with_the_square_of_the_step(target_of: Callable[..., Target]) -> None:
    """Fitted slope of log rms(dH) against log h at fixed length; the minimum norm is the more accurate one."""
    target = target_of(q**2 + q**4, 16)
    steps = np.array([8, 12, 16, 24])
    rms = {}
    with double():
        p = target.parameters({}, SPACING)
        paths = some_paths(target, p, chains=64)
        run = energy_errors(target)
        for integrator in (LEAPFROG, MINIMUM_NORM):
            errors = [np.asarray(run(recipe((4.0,), integrator, s, 1.0).tuning(), p, paths)) for s in steps]
            rms[integrator.name] = np.sqrt([np.mean(e**2) for e in errors])
            slope = np.polyfit(np.log(1 / steps), np.log(rms[integrator.name]), 1)[0]
            assert abs(slope - 2) < 0.1, (integrator.name, slope)
    assert np.all(rms["minimum norm"][:2] < rms["leapfrog"][[0, 1]] / 4)


def test_a_harmonic_path_is_evolved_exactly(target_of: Callable[..., Target]) -> None:
    """With the reference equal to the action a single step of any length keeps the energy to rounding."""
    target = target_of(q**2 * number(2), 9)
    with double():
        p = target.parameters({}, SPACING)
        tuning = Recipe((4.0,), (0.0,), "leapfrog", 1, 2.9, False).tuning()
        assert np.max(np.abs(energy_errors(target)(tuning, p, some_paths(target, p)))) < 1e-11


@pytest.mark.parametrize("sites", [4, 5])
def test_velocities_have_the_inverse_reference_form_as_covariance(target_of: Callable[..., Target], sites: int) -> None:
    """All entries of the covariance within 5 sigma, false alarm rate 2e-5; kinetic() against the dense matrix."""
    target, omega2, count = target_of(x**2 + y**2, sites, **PAIR), (1.0, 9.0), 100_000
    with double():
        p, move = target.parameters({}, SPACING), HamiltonianMove(target)
        form = target.reference_form(jnp.asarray(omega2), p)
        v = np.asarray(move.velocities(jnp.asarray(seed_key(4)), count, form))
        kinetic = np.asarray(move.kinetic(jnp.asarray(v[:5]), p, recipe(omega2).tuning()))
    shift = np.roll(np.eye(sites), 1, axis=1)
    dense = [(2 * np.eye(sites) - shift - shift.T) / SPACING + SPACING * w2 * np.eye(sites) for w2 in omega2]
    expected = np.zeros((2 * sites, 2 * sites))
    for c, matrix in enumerate(dense):
        expected[c * sites : (c + 1) * sites, c * sites : (c + 1) * sites] = np.linalg.inv(matrix)
    flat = v.reshape(count, -1)
    found, diagonal = flat.T @ flat / count, np.diag(expected)
    error = np.sqrt((np.outer(diagonal, diagonal) + expected**2) / count)
    assert np.all(np.abs(found - expected) < 5 * error)
    energies = 0.5 * sum(np.einsum("bi,ij,bj->b", v[:5, c], dense[c], v[:5, c]) for c in range(2))
    assert np.allclose(kinetic, energies, rtol=1e-12)


def test_splittings_are_symmetric_and_complete() -> None:
    """Fractions are palindromes that sum to one, and a trajectory has the asked length whatever its steps."""
    for splitting in (LEAPFROG, MINIMUM_NORM):
        assert splitting.rotations == splitting.rotations[::-1] and splitting.kicks == splitting.kicks[::-1]
        assert sum(splitting.rotations) == pytest.approx(1) and sum(splitting.kicks) == pytest.approx(1)
        turns, kicks, count = splitting.trajectory(0.3, 5)
        assert turns.sum() == pytest.approx(1.5) and kicks.sum() == pytest.approx(1.5)
        assert count == 5 * len(splitting.kicks) and not kicks[count:].any() and not turns[count + 1 :].any()
        with pytest.raises(ValueError):
            splitting.trajectory(0.1, TRAJECTORY_LIMIT + 1)


def test_acceptance_follows_from_the_mean_energy_error(target_of: Callable[..., Target], checks: Any) -> None:
    """P = erfc(sqrt(<dH>)/2) and <dH> = Var(dH)/2 for a long path in equilibrium.

    Gupta, Irback, Karsch and Petersson, Phys. Lett. B 242 (1990) 437; the formula's value at <dH> = 0.5 is the one
    of the check `hmc-identities`. Tolerances are 5 standard errors of 4096 trajectories plus 2 % for the finite path.
    """
    assert erfc(np.sqrt(0.5) / 2) == pytest.approx(checks["hmc-identities"]["value"]["P_acc at <dH>=0.5"], abs=1e-12)
    sites, chains = 400, 256
    target = target_of(q**2 * number(1), sites)
    with double():
        p = target.parameters({}, 0.05)
        tuning = Recipe((40.0,), (0.0,), "leapfrog", 2, 1.5, False).tuning()
        move = HamiltonianMove(target)
        form = target.reference_form(jnp.asarray([2.0]), p)  # the exact distribution of a harmonic path
        step = jax.jit(lambda key, state: move.step(key, state, p, tuning)[1])
        infos = []
        for n in range(16):
            exact = move.velocities(jnp.asarray(seed_key(n, 1)), chains, form)
            infos.append(step(jnp.asarray(seed_key(n, 2)), target.state(exact, jnp.zeros((chains, 1)), p)))
    change = np.concatenate([i.energy_change for i in infos])
    accepted = np.concatenate([i.accepted for i in infos])
    assert 0.2 < change.mean() < 2
    assert abs(np.mean(np.exp(-change)) - 1) < 4.5 * np.std(np.exp(-change)) / np.sqrt(len(change))
    predicted = erfc(np.sqrt(change.mean()) / 2)
    assert abs(accepted.mean() - predicted) < 0.02 + 5 * np.sqrt(predicted * (1 - predicted) / len(accepted))
    assert abs(change.mean() - change.var() / 2) < 0.05 * change.mean() + 5 * change.std() / np.sqrt(len(change))
