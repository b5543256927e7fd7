"""Warm-up on actions of all scales: the recipe it freezes accepts, decorrelates, and costs little.

One compiled program serves each family of potentials. What is asked here is efficiency, not a value, so a failure is
a worse choice and not a wrong answer; with the seeds given nothing is left to chance.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import jax.numpy as jnp
import numpy as np
import pytest

from quarterturn.actions.expression import PI, Expression, PathAtom, Symbol, apply
from quarterturn.actions.model import Bracket
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Target
from quarterturn.sampling.driver import Chain, Request, run_chains
from quarterturn.sampling.moves.base import TRAJECTORY_LIMIT
from quarterturn.sampling.points import PointAction
from quarterturn.sampling.program import BLOCK, Program
from quarterturn.sampling.reference import gaussian_reference
from quarterturn.sampling.tuning import Recipe, _efficiency

NO_EDGES = (np.zeros(0),)
POLYNOMIAL = {"c1": 0.0, "c2": 0.0, "c3": 0.0, "c4": 0.0, "m": 1.0}
TRAJECTORY = "Hamiltonian trajectory"


def autocorrelation_times(chain: Chain) -> np.ndarray:
    """tau = 1/2 + sum of autocorrelations of every number, up to the first below 2 %."""
    values = chain.numbers.values()
    centred = values - values.mean(axis=(0, 1))
    variance = (centred**2).mean(axis=(0, 1))
    tau, open_ = np.full(len(variance), 0.5), np.full(len(variance), True)
    for lag in range(1, values.shape[1] // 4):
        rho = (centred[:, lag:] * centred[:, :-lag]).mean(axis=(0, 1)) / variance
        open_ &= rho > 0.02
        tau += np.where(open_, rho, 0.0)
    return tau


def check(chain: Chain, longest: float) -> None:
    assert chain.acceptance is not None
    assert 0.6 < chain.acceptance[TRAJECTORY] <= 1, (chain.recipe, chain.acceptance)
    assert np.max(autocorrelation_times(chain)) < longest, (chain.recipe, autocorrelation_times(chain))
    assert chain.warm_up <= 60 * BLOCK
    assert chain.trials and chain.recipe in [t.recipe for t in chain.trials]


@pytest.mark.parametrize(
    ("couplings", "spacing", "longest"),
    [
        ({"c2": 0.5, "c3": 0.5, "c4": 0.3}, 0.25, 1.5),  # skew
        ({"c1": -100.0, "c2": 0.5}, 0.2, 1.5),  # centred at 100
        ({"c1": -20.0, "c2": 1e-3}, 0.2, 1.5),  # centred at 10000, and soft
        ({"c2": 0.5, "c4": 1.0, "m": 1e-6}, 0.2, 1.5),  # a very light particle: the fast scale is 1000 times shorter
        ({"c2": 0.5, "c4": 1.0, "m": 1e6}, 0.2, 1.5),  # a very heavy one: classical
        ({"c2": 0.5e6}, 0.2, 1.5),  # frequency 1000 at a coarse spacing
        ({"c2": 0.5e6}, 0.0002, 1.5),  # and at a fine one
        ({"c4": 100.0, "c2": 0.5}, 0.1, 1.5),  # strong coupling
        ({"c4": 1.0}, 0.0125, 1.5),  # beta = 0.5
        ({"c1": 0.3, "c2": -32.0, "c4": 4.0}, 0.25, 1.5),  # one of two unlike wells
    ],
)
def test_recipes_for_one_path_on_the_line(
    polynomial_program: Program, couplings: Mapping[str, float], spacing: float, longest: float
) -> None:
    chain = run_chains(polynomial_program, {**POLYNOMIAL, **couplings}, spacing, Request(3, 320), NO_EDGES)
    check(chain, longest)


@pytest.mark.parametrize(
    ("couplings", "spacing", "segments"),
    [
        ({"c2": 0.5, "c4": 1.0}, 0.25, False),  # a single well makes its own sign changes
        ({"c2": -4.0, "c4": 1.0}, 0.25, True),  # (q^2 - 2)^2, barrier of 4
        ({"c2": -32.0, "c4": 4.0}, 0.25, True),  # 4 (q^2 - 4)^2, barrier of 64
    ],
)
def test_recipes_for_one_or_two_wells(
    even_program: Program, couplings: Mapping[str, float], spacing: float, segments: bool
) -> None:
    chain = run_chains(even_program, couplings, spacing, Request(3, 320), (np.zeros(1),))
    check(chain, 2.0)
    assert chain.recipe.segments is segments
    assert chain.sectors is not None and min(chain.sectors.visits[0].values()) > 1000


def test_recipes_for_an_angle(target_of: Callable[..., Target], program_of: Callable[..., Program]) -> None:
    """Free rotor, shallow and deep pendulum."""
    theta = PathAtom("theta")
    angle, (k, i) = Expression.of(theta), (Expression.of(Symbol("coupling", n)) for n in ("K", "I"))
    circle = (Expression.of(PI).scaled(2),)
    target = target_of(-k * apply("cos", angle), 32, variables=(theta,), periods=circle, mass=((i,),))
    program = program_of(target, (Bracket("cos", ((0, apply("cos", angle)),)),))  # type: ignore[arg-type]
    for strength, inertia, spacing in ((0.0, 1.0, 0.25), (1.0, 1.0, 0.1), (50.0, 1.0, 0.05)):
        check(run_chains(program, {"K": strength, "I": inertia}, spacing, Request(3, 320), NO_EDGES), 6.0)


@pytest.mark.parametrize("sites", [3, 333])
def test_recipes_for_short_and_for_odd_paths(
    target_of: Callable[..., Target], program_of: Callable[..., Program], sites: int
) -> None:
    q = Expression.of(PathAtom("q"))
    target = target_of(q**4, sites, symmetries=((-1,),))
    program = program_of(target, (Bracket("q2", ((0, q**2),)),), (), 16)  # type: ignore[arg-type]
    chain = run_chains(program, {}, 10 / sites if sites > 3 else 0.3, Request(3, 160), (np.zeros(1),))
    check(chain, 1.5)


def test_the_variational_reference_of_a_harmonic_path_is_exact(polynomial_program: Program) -> None:
    """Frequency and centre of (q - 3)^2 8 with mass 4, at low and at high temperature."""
    for spacing in (0.5, 1e-4):
        with double():
            p = polynomial_program.target.parameters({**POLYNOMIAL, "c1": -48.0, "c2": 8.0, "m": 4.0}, spacing)
        omega2, centre = gaussian_reference(PointAction(polynomial_program.target, p))
        assert omega2[0] == pytest.approx(16 / 4, rel=0.05)
        assert centre[0] == pytest.approx(3 * 2, rel=0.02)  # whitened: sqrt(mass) times 3


def test_point_values_are_those_of_the_compiled_action(polynomial_program: Program) -> None:
    target, couplings = polynomial_program.target, {"c1": 1.0, "c2": 2.0, "c3": -0.5, "c4": 0.7, "m": 2.0}
    x = np.random.default_rng(5).standard_normal((3, 1, target.sites))
    with double():
        p = target.parameters(couplings, 0.3)
        points = PointAction(target, p)
        state = target.state(jnp.asarray(x), jnp.zeros((3, 1)), p)
        assert np.allclose(points.path_action(x), state.action, rtol=1e-12)
        assert np.allclose(points.gradient(np.moveaxis(x, 1, 0)), np.moveaxis(target.force(state, p), 1, 0), rtol=1e-12)
        h = 1e-5
        at = x[:, 0][None]
        slope = (points.gradient(at + h) - points.gradient(at - h)) / (2 * h)
        assert np.allclose(points.curvature(at), slope, rtol=1e-7, atol=1e-7)


def test_efficiency_of_a_series_is_that_of_its_slowest_column() -> None:
    """AR(1) series with tau = (1 + r) / (2 (1 - r)); the estimate is coarse but ordered."""
    rng, found = np.random.default_rng(6), []
    for r in (0.0, 0.5, 0.8):
        noise = rng.standard_normal((48, 64, 2))
        series = np.zeros_like(noise)
        series[0] = noise[0]
        for t in range(1, 48):
            series[t] = r * series[t - 1] + np.sqrt(1 - r**2) * noise[t]
        series[..., 0] = noise[..., 0]
        found.append(_efficiency(series))
        assert found[-1] == pytest.approx((1 - r) / (1 + r), rel=0.35)
    assert found[0] > found[1] > found[2]
    assert _efficiency(np.ones((48, 64, 2))) == 0.0


def test_a_recipe_stays_within_the_longest_trajectory() -> None:
    recipe = Recipe((1.0,), (0.0,), "minimum norm", 3, 1.5, True)
    assert recipe.kicks == 6 and recipe.cost > recipe.kicks
    assert recipe.with_kicks("leapfrog", 1000).kicks == TRAJECTORY_LIMIT
    assert recipe.with_kicks("minimum norm", 1).steps == 1
    assert recipe.scaled(2.0).frequency_squared == (4.0,)
    with double():
        tuning = recipe.tuning()
        assert int(tuning.used) == 6 and float(tuning.rotations.sum()) == pytest.approx(1.5)
