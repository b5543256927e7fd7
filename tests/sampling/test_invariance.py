"""Each move leaves the distribution of a path as it was: exact independent paths go in, exact moments must come out.

Paths are drawn by rejection from a Gaussian or from the free rotor, so their distribution is known without any Markov
chain; the moments come from quadrature over three sites, or from the transfer matrix of the circle. A test of
invariance, other than a long run, has no autocorrelation and also sees moves that are not ergodic on their own. Seeds
are fixed; every comparison allows 4.75 standard errors, so that all of them together fail by chance once in 4000.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
import pytest
from scipy.special import iv

from quarterturn.actions.expression import ONE, PI, Expression, PathAtom, Symbol, apply
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.sampling.moves.base import Move, Tuning
from quarterturn.sampling.moves.hamiltonian import HamiltonianMove
from quarterturn.sampling.moves.segment_flip import SegmentFlip
from quarterturn.sampling.moves.sign_flip import SignFlip
from quarterturn.sampling.moves.winding import WindingMove, ramp
from quarterturn.sampling.random import child, seed_key
from quarterturn.sampling.tuning import Recipe

Floats = np.ndarray
number = Expression.number
THETA = PathAtom("theta")
q, theta = Expression.of(PathAtom("q")), Expression.of(THETA)
SITES, A, PATHS, SIGMAS = 3, 0.8, 100_000, 4.75
GRID = 81

TUNINGS = {
    "one bold leapfrog": Recipe((1.5,), (0.0,), "leapfrog", 1, 1.5, True),
    "three leapfrogs off centre": Recipe((4.0,), (0.7,), "leapfrog", 3, 2.2, True),
    "minimum norm, much too stiff": Recipe((60.0,), (0.0,), "minimum norm", 2, 1.0, True),
    "too soft": Recipe((0.05,), (-0.2,), "leapfrog", 4, 0.6, True),
}
WELLS: dict[str, tuple[Expression, Callable[[Floats], Floats], bool]] = {
    "quartic": (q**2 + q**4, lambda x: x**2 + x**4, True),
    "double well": ((q**2 - ONE) ** 2 * number(2), lambda x: 2 * (x**2 - 1) ** 2, True),
    "skew": (q**4 + q**3 + q, lambda x: x**4 + x**3 + x, False),
}


def line_action(x: Floats, v: Callable[[Floats], Floats]) -> Floats:
    """Three sites or more, last axis."""
    return np.sum((np.roll(x, -1, -1) - x) ** 2 / (2 * A) + A * v(x), axis=-1)


MOMENTS: dict[str, Callable[[Floats], Floats]] = {
    "<q>": lambda x: x[..., 0],
    "<q^2>": lambda x: x[..., 1] ** 2,
    "<q0 q1>": lambda x: x[..., 0] * x[..., 1],
    "<q^4>": lambda x: x[..., 2] ** 4,
    "<q0^2 q1 q2>": lambda x: x[..., 0] ** 2 * x[..., 1] * x[..., 2],
    "<q0^3 q2>": lambda x: x[..., 0] ** 3 * x[..., 2],
    "<exp(-|q|)>": lambda x: np.exp(-np.abs(x[..., 0])),
}


def quadrature(v: Callable[[Floats], Floats]) -> dict[str, float]:
    """Exact moments on three sites: trapezoidal rule on a cube, exponentially convergent."""
    axis = np.linspace(-4, 4, GRID)
    cube = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1)
    weight = np.exp(-line_action(cube, v))
    return {name: float(np.sum(weight * f(cube)) / np.sum(weight)) for name, f in MOMENTS.items()}


def exact_paths(v: Callable[[Floats], Floats], count: int) -> Floats:
    """Independent paths (count, 3): Gaussian proposals of the kinetic term and a flat well, then rejection."""
    rng = np.random.default_rng(8)
    soft = 0.6
    axis = np.linspace(-12, 12, 20001)
    floor = np.min(v(axis) - 0.5 * soft * axis**2)
    shift = np.roll(np.eye(SITES), 1, axis=1)
    form = (2 * np.eye(SITES) - shift - shift.T) / A + A * soft * np.eye(SITES)
    root = np.linalg.cholesky(np.linalg.inv(form))
    kept: list[Floats] = []
    while sum(map(len, kept)) < count:
        x = rng.standard_normal((200_000, SITES)) @ root.T
        keep = np.log(rng.random(len(x))) < -A * np.sum(v(x) - 0.5 * soft * x**2 - floor, axis=-1)
        kept.append(x[keep])
    return np.concatenate(kept)[:count]


@pytest.fixture(scope="module", params=list(WELLS))
def well(request: pytest.FixtureRequest, target_of: Callable[..., Target]) -> Any:
    potential, v, even = WELLS[request.param]
    target = target_of(potential, SITES, symmetries=((-1,),) if even else ())
    return target, exact_paths(v, PATHS), quadrature(v)


def carrier(target: Target, kinds: tuple[Callable[[Target], Move], ...], sweeps: int) -> Callable[..., PathState]:
    """Some sweeps of the moves as one compiled function of paths, parameters and tuning."""
    moves = [kind(target) for kind in kinds]

    def carried(paths: PathState, p: Parameters, tuning: Tuning) -> tuple[PathState, jax.Array]:
        def sweep(state: PathState, number_: jax.Array) -> tuple[PathState, None]:
            keys = child(child(jnp.asarray(seed_key(99)), number_), jnp.arange(len(moves), dtype=jnp.uint32))
            for i, move in enumerate(moves):
                state, _ = move.step(keys[i], state, p, tuning)
            return state, None

        after, _ = jax.lax.scan(sweep, paths, jnp.arange(sweeps, dtype=jnp.uint32))
        return after, target.action(after, p)

    compiled = jax.jit(carried)

    def run(paths: PathState, p: Parameters, tuning: Tuning) -> PathState:
        after, action = compiled(paths, p, tuning)
        assert np.allclose(after.action, action, rtol=1e-9, atol=1e-9), "the kept action is out of date"
        return after

    return run


def compare(x: Any, exact: dict[str, float], moments: Mapping[str, Callable[[Any], Floats]]) -> None:
    for name, f in moments.items():
        values = f(x)
        error = np.std(values) / np.sqrt(len(values))
        assert abs(np.mean(values) - exact[name]) < SIGMAS * error, (name, np.mean(values), error, exact[name])


def test_the_paths_that_go_in_are_exact(well: Any) -> None:
    _, paths, exact = well
    compare(paths, exact, MOMENTS)


def start_of(target: Target, paths: Floats) -> tuple[PathState, Parameters]:
    p = target.parameters({}, A)
    return jax.jit(target.state)(jnp.asarray(paths[:, None, :]), jnp.zeros((len(paths), 1)), p), p


def test_hamiltonian_trajectories_leave_the_distribution_invariant(well: Any) -> None:
    """For every tuning, good or bad."""
    target, paths, exact = well
    with double():
        start, p = start_of(target, paths)
        run = carrier(target, (HamiltonianMove,), 3)
        for name, recipe in TUNINGS.items():
            after = run(start, p, recipe.tuning())
            assert np.mean(np.any(np.asarray(after.x) != np.asarray(start.x), axis=(1, 2))) > 0.05, name
            compare(np.asarray(after.x)[:, 0], exact, MOMENTS)


@pytest.mark.parametrize("well", [name for name, (_, _, even) in WELLS.items() if even], indirect=True)
@pytest.mark.parametrize("kinds", [(SignFlip,), (SegmentFlip,), (HamiltonianMove, SignFlip, SegmentFlip)])
def test_flips_leave_the_distribution_invariant(well: Any, kinds: tuple[Callable[[Target], Move], ...]) -> None:
    target, paths, exact = well
    with double():
        start, p = start_of(target, paths)
        after = carrier(target, kinds, 2)(start, p, TUNINGS["one bold leapfrog"].tuning())
    assert np.mean(np.asarray(after.x)[:, 0, 0] != paths[:, 0]) > 0.3
    compare(np.asarray(after.x)[:, 0], exact, MOMENTS)


# --- angles -------------------------------------------------------------------------------------------------------
RING_SITES, RING_A = 6, 1.0


def free_rotor_paths(rng: np.random.Generator, count: int, inertia: float) -> tuple[Floats, Floats]:
    """Lifted angles x (periodic part) and winding numbers of the free rotor, independent and exact."""
    beta = RING_SITES * RING_A
    turns = np.arange(-12, 13)
    weight = np.exp(-inertia * (2 * np.pi * turns) ** 2 / (2 * beta))
    winding = rng.choice(turns, size=count, p=weight / weight.sum())
    shift = np.roll(np.eye(RING_SITES), 1, axis=1)
    form = inertia * (2 * np.eye(RING_SITES) - shift - shift.T) / RING_A
    values, vectors = np.linalg.eigh(form)
    modes = rng.standard_normal((count, RING_SITES - 1)) / np.sqrt(values[1:])
    return modes @ vectors[:, 1:].T + rng.uniform(-np.pi, np.pi, (count, 1)), winding.astype(float)


RING_MOMENTS: dict[str, Callable[[tuple[Floats, Floats]], Floats]] = {
    "<Q^2>": lambda s: s[1] ** 2,
    "P(Q = 0)": lambda s: (s[1] == 0).astype(float),
    "<cos theta>": lambda s: np.cos(s[0][:, 0]),
    "<cos(theta_0 - theta_1)>": lambda s: np.cos(s[0][:, 1] - s[0][:, 0]),
    "<cos(theta_5 - theta_0)>": lambda s: np.cos(s[0][:, 5] - s[0][:, 0]),
    "<sin theta_0 sin theta_2>": lambda s: np.sin(s[0][:, 0]) * np.sin(s[0][:, 2]),
}


def circle_exact(strength: float, inertia: float) -> dict[str, float]:
    """From the transfer matrix in angular momentum: heat kernel times exp(a K cos theta), with a theta term for Q."""
    m = np.arange(-40, 41)
    multiply = iv(np.abs(m[:, None] - m[None, :]), RING_A * strength)
    cosine = 0.5 * (np.abs(m[:, None] - m[None, :]) == 1)
    up = (m[:, None] - m[None, :] == 1).astype(float)
    sine = (up - up.T) / 2j

    def step(vartheta: float) -> Floats:
        return np.exp(-RING_A * (m - vartheta / (2 * np.pi)) ** 2 / (2 * inertia))[:, None] * multiply

    def z(vartheta: float) -> float:
        return float(np.trace(np.linalg.matrix_power(step(vartheta), RING_SITES)).real)

    t, total = step(0.0), z(0.0)
    angles = 2 * np.pi * np.arange(64) / 64
    ratio = np.array([z(v) for v in angles]) / total
    weights = {n: float(np.mean(ratio * np.cos(n * angles))) for n in range(-8, 9)}
    power = [np.linalg.matrix_power(t, n) for n in range(RING_SITES + 1)]

    def pair(f: Floats, g: Floats, distance: int) -> float:
        return float(np.trace(f @ power[distance] @ g @ power[RING_SITES - distance]).real) / total

    return {
        "<Q^2>": sum(n**2 * w for n, w in weights.items()),
        "P(Q = 0)": weights[0],
        "<cos theta>": pair(cosine, np.eye(len(m)), 1),
        "<cos(theta_0 - theta_1)>": pair(cosine, cosine, 1) + pair(sine, sine, 1),
        "<cos(theta_5 - theta_0)>": pair(cosine, cosine, 1) + pair(sine, sine, 1),
        "<sin theta_0 sin theta_2>": pair(sine, sine, 2),
    }


@pytest.mark.parametrize("kinds", [(HamiltonianMove,), (WindingMove,), (HamiltonianMove, WindingMove, SignFlip)])
def test_moves_of_angles_leave_the_distribution_invariant(
    target_of: Callable[..., Target], kinds: tuple[Callable[[Target], Move], ...]
) -> None:
    """Pendulum -K cos(theta) with moment of inertia I; K = 0 is the free rotor."""
    inertia, rng = 0.5, np.random.default_rng(12)
    inertia_symbol, strength_symbol = (Expression.of(Symbol("coupling", name)) for name in "IK")
    target = target_of(
        -strength_symbol * apply("cos", theta),
        RING_SITES,
        variables=(THETA,),
        periods=(Expression.of(PI).scaled(2),),
        mass=((inertia_symbol,),),
        symmetries=((-1,),),
    )
    free, turns = free_rotor_paths(rng, 5 * PATHS, inertia)
    ramped = free + 2 * np.pi * turns[:, None] * np.arange(RING_SITES) / RING_SITES
    tuning = Recipe((0.5,), (0.1,), "leapfrog", 2, 1.5, False)
    with double():
        run, make, path = carrier(target, kinds, 3), jax.jit(target.state), jax.jit(target.path)
        for strength in (0.0, 0.8):
            keep = np.log(rng.random(len(free))) < RING_A * strength * np.sum(np.cos(ramped) - 1, axis=-1)
            x, winding = free[keep][:PATHS], turns[keep][:PATHS]
            exact, p = circle_exact(strength, inertia), target.parameters({"I": inertia, "K": strength}, RING_A)
            start = make(jnp.asarray(x[:, None, :] * np.sqrt(inertia)), jnp.asarray(winding[:, None]), p)
            compare(lifted(path(start, p), start), exact, RING_MOMENTS)
            after = run(start, p, tuning.tuning())
            moved = np.any(after.x != start.x, axis=(1, 2)) | np.any(after.winding != start.winding, axis=1)
            assert np.mean(moved) > 0.05
            compare(lifted(path(after, p), after), exact, RING_MOMENTS)


def lifted(path: jax.Array, state: PathState) -> tuple[Floats, Floats]:
    return np.asarray(path)[:, 0], np.asarray(state.winding)[:, 0]


def test_a_ramp_turns_once_over_its_links() -> None:
    """Site by site: the ramp rises by 1/length on its links, is flat elsewhere, and starts from zero at site 0."""
    sites = 8
    for start in range(sites):
        for length in (1, 2, 4, 8):
            share = np.asarray(ramp(jnp.array([start]), jnp.array([length]), sites))[0]
            closed = np.append(share, share[0] + 1)
            links = [(start + k) % sites for k in range(length)]
            expected = np.array([1 / length if i in links else 0.0 for i in range(sites)])
            assert share[0] == 0 and np.allclose(np.diff(closed), expected)
