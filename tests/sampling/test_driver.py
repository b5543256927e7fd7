"""Whole runs: repeatable, compiled once, honest about what they saw; and their values against outside ones.

Statistical comparisons allow 4.5 standard errors of independent chains: false alarm rate 7e-6 each.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

import jax
import numpy as np
import pytest

from quarterturn.actions.expression import ONE, PI, ZERO, Expression, Function, PathAtom, Symbol, apply
from quarterturn.actions.model import Bracket
from quarterturn.compiled.observables import Observables
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Target
from quarterturn.errors import ActionError, RequestError
from quarterturn.sampling.driver import Chain, Request, run_chains
from quarterturn.sampling.program import BLOCK, KEPT_PROGRAMS, Program, default_chains, program_for
from quarterturn.sampling.random import seed_key
from quarterturn.sampling.tuning import Recipe

SIGMAS = 4.5
number = Expression.number
NOW = Fraction(0)
X, Y, THETA = PathAtom("x"), PathAtom("y"), PathAtom("theta")
q, x, y, theta = (Expression.of(a) for a in (PathAtom("q"), X, Y, THETA))
QUARTIC = {"c2": 0.5, "c4": 1.0}


def coupling(name: str) -> Expression:
    return Expression.of(Symbol("coupling", name))


def run(program: Program, couplings: Mapping[str, float], spacing: float, draws: int = 320, **given: Any) -> Chain:
    edges = given.pop("edges", tuple(np.zeros(1) for _ in program.target.euclidean.variables))
    request = Request(given.pop("seed", 5), draws, given.pop("seconds", None))
    return run_chains(program, couplings, spacing, request, edges, **given)


def agree(chain: Chain, expected: Mapping[int, float], ledger: str = "numbers") -> None:
    """Columns of a ledger against exact values."""
    values = getattr(chain, ledger).values()
    means = values.mean(axis=1)
    for column, exact in expected.items():
        error = means[:, column].std(ddof=1) / np.sqrt(len(means))
        pull = (means[:, column].mean() - exact) / error
        assert abs(pull) < SIGMAS, (column, means[:, column].mean(), exact, pull)
    mean, error = chain.exp_change
    assert abs(mean - 1) < SIGMAS * error + 1e-9, chain.exp_change


# --- repeatable -----------------------------------------------------------------------------------------------------
@pytest.fixture(scope="module")
def chain(even_program: Program) -> Chain:
    return run(even_program, QUARTIC, 0.1)


def test_the_same_seed_gives_the_same_bits_and_another_seed_does_not(even_program: Program, chain: Chain) -> None:
    again, other = run(even_program, QUARTIC, 0.1), run(even_program, QUARTIC, 0.1, seed=6)
    assert again.recipe == chain.recipe and again.acceptance == chain.acceptance
    assert np.array_equal(again.numbers.values(), chain.numbers.values())
    assert np.array_equal(again.curves.values(), chain.curves.values())
    assert not np.array_equal(other.numbers.values(), chain.numbers.values())


def test_a_run_that_stops_early_is_the_beginning_of_a_longer_one(even_program: Program, chain: Chain) -> None:
    short = run(even_program, QUARTIC, 0.1, draws=5 * BLOCK)
    assert short.draws == 5 * BLOCK
    assert np.array_equal(short.numbers.values(), chain.numbers.values()[:, : 5 * BLOCK])


def test_every_sweep_draws_its_own_numbers(even_program: Program) -> None:
    """The same paths under the same key go elsewhere in another sweep, and there again in the same sweep."""
    target, chains = even_program.target, even_program.chains
    with double():
        p = target.parameters(QUARTIC, 0.1)
        paths = 0.3 * np.random.default_rng(1).standard_normal((chains, 1, target.sites))
        state = jax.jit(target.state)(paths, np.zeros((chains, 1)), p)
        tuning = Recipe((4.0,), (0.0,), "leapfrog", 2, 1.5, True).tuning()
        key = jax.numpy.asarray(seed_key(1, 5))
        first, second, again = (even_program.advance(state, key, n, p, tuning)[1].numbers for n in (0, BLOCK, 0))
    assert np.array_equal(first, again)
    assert not np.any(np.isclose(first, second, rtol=1e-9))


def test_a_changed_coupling_or_spacing_or_seed_never_compiles_again(even_program: Program, chain: Chain) -> None:
    cached = even_program._advance._cache_size()  # type: ignore[attr-defined]
    for couplings, spacing in ((QUARTIC, 0.3), ({"c2": -4.0, "c4": 1.0}, 0.1)):
        run(even_program, couplings, spacing, draws=BLOCK, seed=7)
    assert even_program.compilations == 1
    assert even_program._advance._cache_size() == cached == 1  # type: ignore[attr-defined]


def test_settings_of_jax_and_numpy_are_left_alone(even_program: Program) -> None:
    settings, errors = dict(jax.config.values), np.geterr()
    run(even_program, QUARTIC, 0.1, draws=BLOCK)
    assert dict(jax.config.values) == settings and np.geterr() == errors
    assert jax.numpy.ones(2).dtype == "float32" and jax.numpy.arange(2).dtype == "int32"


def test_a_program_is_kept_for_the_same_structure(even_program: Program) -> None:
    target, observables = even_program.target, even_program.observables
    same = Target(target.euclidean, target.sites, target.names)
    assert program_for(same, observables, even_program.chains) is even_program
    for chains in range(1, KEPT_PROGRAMS):  # others come and go, the one in use stays
        program_for(same, observables, chains)
    assert program_for(same, observables, even_program.chains) is even_program


def test_default_chains_are_a_power_of_two_from_8_to_64() -> None:
    for sites in (3, 50, 200, 256, 257, 800, 1600, 4001, 10**6):
        for components in (1, 2, 6):
            count = default_chains(sites, components)
            assert 8 <= count <= 64 and count & (count - 1) == 0
    assert default_chains(200, 1) == 64 and default_chains(10**5, 1) == 8


# --- stopping -------------------------------------------------------------------------------------------------------
def test_a_run_ends_at_the_first_of_what_was_asked(even_program: Program) -> None:
    assert run(even_program, QUARTIC, 0.1, draws=BLOCK + 1).draws == 2 * BLOCK
    timed = run(even_program, QUARTIC, 0.1, draws=10**9, seconds=0.1)
    assert timed.stop == "time" and timed.draws >= BLOCK
    asked: list[int] = []

    def enough(chain: Chain) -> bool:
        asked.append(chain.draws)
        assert chain.acceptance is not None
        return True

    assert run(even_program, QUARTIC, 0.1, draws=10**9, satisfied=enough).stop == "satisfied" and len(asked) == 1
    stopped = run(even_program, QUARTIC, 0.1, draws=10**9, interrupted=lambda: True)
    assert stopped.stop == "interrupted"


# --- values ---------------------------------------------------------------------------------------------------------
def test_double_well_agrees_with_the_transfer_matrix(polynomial_program: Program, checks: Mapping[str, Any]) -> None:
    """`tm-dw-1-1-a0.2-N40`: V = (x^2 - 1)^2."""
    exact = checks["tm-dw-1-1-a0.2-N40"]["value"]
    chain = run(polynomial_program, {"c1": 0, "c2": -2, "c3": 0, "c4": 1, "m": 1}, 0.2, 640)
    agree(chain, {0: 0.0, 1: exact["x2"], 2: exact["x4"]})


@pytest.fixture(scope="module")
def oscillator(target_of: Callable[..., Target]) -> Program:
    """20 sites, m and w: site averages, pairs and four points at fixed times, energy, <(mean x)^2>; two curves."""
    m, w = coupling("m"), coupling("w")
    target = target_of(m * w**2 * q**2 * number(2).inverse(), 20, mass=((m,),), symmetries=((-1,),))
    mean = Expression.of(Function("mean", q))
    fixed = (
        Bracket("x2", ((NOW, q**2),)),
        Bracket("x4", ((NOW, q**4),)),
        Bracket("C1", ((Fraction(1, 2), q), (NOW, q))),
        Bracket("C4", ((NOW, q), (Fraction(-2), q))),
        Bracket("E", ((NOW, Expression.of(Symbol("observable", "energy"))),), over="path"),
        Bracket("m2", ((NOW, mean * mean),), over="path"),
        Bracket("4-point", ((Fraction(1, 2), q), (Fraction(2), q), (Fraction(0), q), (Fraction(9, 2), q))),
    )
    free = (Bracket("C", ((None, q), (NOW, q))), Bracket("C3", ((None, q**3), (NOW, q), (Fraction(1, 2), q**2))))
    offsets = ((0,), (0,), (1, 0), (0, -4), (0,), (0,), (1, 4, 0, 9), (0, 0), (0, 0, 1))
    return program_for(target, Observables(target, fixed, free, offsets), 64)


def test_oscillator_agrees_with_its_closed_form(oscillator: Program, checks: Mapping[str, Any]) -> None:
    """`ho-lattice-a0.5-w1-N20-m1` (Creutz and Freedman, Ann. Phys. 132 (1981) 427); n points by Wick's theorem."""
    exact = {k: float(v) for k, v in checks["ho-lattice-a0.5-w1-N20-m1"]["value"].items()}
    chain = run(oscillator, {"m": 1, "w": 1}, 0.5, 640)
    k = 2 * np.pi * np.arange(20) / 20
    c = np.fft.ifft(1 / (4 * (1 - np.cos(k)) + 0.5)).real
    assert c[[0, 1, 4]] == pytest.approx([exact["x2"], exact["C1"], exact["C4"]], rel=1e-12)
    four = c[3] * c[9] + c[1] * c[5] + c[8] * c[4]
    numbers = [exact["x2"], exact["x4"], exact["C1"], exact["C4"], exact["E_virial"], c.mean(), four]
    agree(chain, dict(enumerate(numbers)))

    # <q^3(t) q(0) q^2(1)>, folded with -t
    def six(t: int) -> float:
        a, b, s = c[t % 20], c[(t - 1) % 20], c[1]
        return 3 * c[0] * (a * c[0] + 2 * b * s) + 6 * a * b * b

    curves = {7 + t: c[t] for t in range(11)}
    curves |= {18 + t: (six(t) + six(-t)) / 2 for t in range(11)}
    agree(chain, curves, "curves")
    assert chain.curves.block == BLOCK * (2 ** round(np.log2(chain.curves.block / BLOCK)))


def test_oscillator_of_another_mass_and_frequency_agrees(oscillator: Program, checks: Mapping[str, Any]) -> None:
    """The same program at other couplings: a = 0.25, w = 2, m = 1/2, but 20 sites; mode sum."""
    chain = run(oscillator, {"m": 0.5, "w": 2}, 0.25, 320)
    k = 2 * np.pi * np.arange(20) / 20
    x2 = float(np.mean(1 / (0.5 * (2 / 0.25 * (1 - np.cos(k)) + 0.25 * 4))))
    agree(chain, {0: x2, 1: 3 * x2**2, 4: 0.5 * 4 * x2})


def test_two_paths_with_mixed_masses_have_the_exact_covariance(target_of: Callable[..., Target]) -> None:
    """K = [[2, 1/2], [1/2, 1]], V = x^2 + c x y + y^2: Gaussian, mode by mode."""
    half = number(2).inverse()
    target = target_of(
        x**2 + coupling("c") * x * y + y**2,
        17,
        variables=(X, Y),
        mass=((number(2), half), (half, ONE)),
        symmetries=((-1, -1),),
    )
    brackets = tuple(Bracket(str(i), ((NOW, f),)) for i, f in enumerate((x**2, x * y, y**2, x**2 * y**2)))
    program = program_for(target, Observables(target, brackets, (), ((0,),) * 4), 64)
    chain = run(program, {"c": 1.0}, 0.4)
    mass, hessian = np.array([[2, 0.5], [0.5, 1]]), np.array([[2.0, 1], [1, 2]])
    k = 2 * np.pi * np.arange(17) / 17
    cov = np.mean([np.linalg.inv(mass * (2 / 0.4) * (1 - np.cos(kk)) + 0.4 * hessian) for kk in k], axis=0)
    agree(chain, {0: cov[0, 0], 1: cov[0, 1], 2: cov[1, 1], 3: cov[0, 0] * cov[1, 1] + 2 * cov[0, 1] ** 2})
    assert max(chain.recipe.frequency_squared) > 0


@pytest.fixture(scope="module")
def rotor(target_of: Callable[..., Target]) -> Program:
    """Free rotor of 8 sites with a theta term vartheta/(2 pi) theta'."""
    target = target_of(
        ZERO,
        8,
        variables=(THETA,),
        periods=(Expression.of(PI).scaled(2),),
        mass=((coupling("I"),),),
        drift=(coupling("vartheta") * Expression.of(PI).scaled(2).inverse(),),
    )
    charge = Expression.of(Function("charge", theta))
    brackets = (
        Bracket("Q2", ((NOW, charge**2),), over="path"),
        Bracket("E", ((NOW, Expression.of(Symbol("observable", "energy"))),), over="path"),
        Bracket("cos", ((NOW, apply("cos", theta)),)),
    )
    return program_for(target, Observables(target, brackets, (), ((0,),) * 3), 64)


@pytest.mark.parametrize("name", ["rotor-chit-I0.25-b2", "rotor-chit-I1-b20", "rotor-chit-I0.25-b20"])
def test_rotor_has_the_exact_topological_susceptibility(rotor: Program, checks: Mapping[str, Any], name: str) -> None:
    """A free rotor has no lattice artefact, so eight sites do; energy sum_m E_m exp(-beta E_m) / Z."""
    given = checks[name]["parameters"]
    inertia, beta = float(given["I"]), float(given["beta"])
    chain = run(rotor, {"I": inertia, "vartheta": 0.0}, beta / 8, 640)
    m = np.arange(-60, 61)
    levels = m**2 / (2 * inertia)
    weight = np.exp(-beta * levels)
    energy = np.sum(levels * weight) / weight.sum()
    susceptibility = float(checks[name]["value"]["chi"])
    agree(chain, {1: beta * susceptibility, 2: energy, 3: 0.0})
    assert chain.sectors is not None and sum(chain.sectors.windings.values()) > 100


def test_average_phase_of_a_theta_term_is_the_ratio_of_partition_functions(rotor: Program) -> None:
    """Z(vartheta)/Z(0) from the levels (m - vartheta/2 pi)^2 / 2I; <Q^2> and energy by reweighting."""
    inertia, beta, vartheta = 0.5, 4.0, 1.2
    chain = run(rotor, {"I": inertia, "vartheta": vartheta}, beta / 8, 640)
    m = np.arange(-60, 61)

    def z(v: float, b: float = beta) -> float:
        return float(np.sum(np.exp(-b * (m - v / (2 * np.pi)) ** 2 / (2 * inertia))))

    turns = np.arange(-30, 31)
    sectors = np.exp(-inertia * (2 * np.pi * turns) ** 2 / (2 * beta))
    moment = np.sum(turns**2 * sectors * np.cos(vartheta * turns)) / sectors.sum()
    slope = -(z(vartheta, beta + 1e-5) - z(vartheta, beta - 1e-5)) / 2e-5 / z(0.0)
    agree(chain, {0: z(vartheta) / z(0.0), 1: moment, 2: slope})


# --- what goes wrong ------------------------------------------------------------------------------------------------
def test_a_potential_without_value_somewhere_is_sampled_where_it_has_one(target_of: Callable[..., Target]) -> None:
    """V = q - 2 log q on q > 0: paths that end beyond are rejected and counted; <q> from the transfer matrix."""
    target = target_of(q - apply("log", q).scaled(2), 16)
    program = program_for(target, Observables(target, (Bracket("q", ((NOW, q),)),), (), ((0,),)), 64)
    chain = run(program, {}, 0.25, 640)
    assert np.all(np.isfinite(chain.numbers.values())) and np.all(chain.numbers.values() > 0)
    assert chain.nonfinite > 0 and chain.acceptance is not None
    assert 0.5 < chain.acceptance["Hamiltonian trajectory"] < 1 - chain.nonfinite / (64 * chain.draws)
    x_, width = np.linspace(0, 24, 481)[1:], 0.05
    v = x_ - 2 * np.log(x_)
    kernel = np.exp(-((x_[:, None] - x_) ** 2) / 0.5 - 0.125 * (v[:, None] + v)) * width  # dense near 0, where it is 0
    values, vectors = np.linalg.eigh(kernel)
    weight = (values / values[-1]) ** 16
    exact = np.sum(weight * (x_ @ vectors**2)) / weight.sum()
    means = chain.numbers.values()[..., 0].mean(axis=1)
    assert abs(means.mean() - exact) < SIGMAS * means.std(ddof=1) / np.sqrt(len(means))


def test_a_potential_without_value_anywhere_is_refused(target_of: Callable[..., Target]) -> None:
    target = target_of(apply("sqrt", -(q**2) - ONE), 8)
    program = program_for(target, Observables(target, (Bracket("q", ((NOW, q),)),), (), ((0,),)), 8)
    with pytest.raises(RequestError, match="finite action"):
        run(program, {}, 0.5, 16)


def test_a_mass_that_is_not_positive_is_refused(oscillator: Program) -> None:
    with pytest.raises(ActionError, match="not positive"):
        run(oscillator, {"m": -1.0, "w": 1.0}, 0.5, 16)


def test_chains_stuck_in_one_well_are_counted(polynomial_program: Program) -> None:
    """Two unlike wells behind a high barrier and no symmetry: nobody crosses, and the count says so."""
    wells = {"c1": 0.3, "c2": -32.0, "c3": 0.0, "c4": 4.0, "m": 1.0}
    chain = run(polynomial_program, wells, 0.25, 160)
    assert chain.sectors is not None
    assert min(chain.sectors.visits[0].get(side, 0) for side in (0, 1)) == 0
    assert sum(chain.sectors.visits[0].values()) < 10


def test_a_double_well_with_its_symmetry_is_visited_on_both_sides(even_program: Program) -> None:
    chain = run(even_program, {"c2": -32.0, "c4": 4.0}, 0.25, 160)
    assert chain.sectors is not None and min(chain.sectors.visits[0][side] for side in (0, 1)) > 1000
    assert chain.recipe.segments
