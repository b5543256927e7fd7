"""Measurements of given paths against the same averages written out, and where times fall on the lattice."""

from __future__ import annotations

from fractions import Fraction

import jax
import jax.numpy as jnp
import numpy as np
import pytest

from quarterturn.actions.expression import ONE, PI, ZERO, Expression, Function, PathAtom, Symbol, apply
from quarterturn.actions.model import Bracket, EuclideanAction
from quarterturn.compiled.observables import Observables, lattice_offsets
from quarterturn.compiled.precision import double
from quarterturn.compiled.target import Parameters, PathState, Target
from quarterturn.errors import RequestError

NOW = Fraction(0)
Q, THETA = PathAtom("q"), PathAtom("theta")
q, theta = Expression.of(Q), Expression.of(THETA)
lam = Expression.of(Symbol("coupling", "lam"))
A = 0.5


def symbol(kind: str, name: str) -> Expression:
    return Expression.of(Symbol(kind, name))


def mean(expression: Expression) -> Expression:
    return Expression.of(Function("mean", expression))


def measured(watch: Observables, state: PathState, p: Parameters) -> tuple[np.ndarray, np.ndarray]:
    both = jax.jit(lambda s, p: (watch.numbers(s, p), watch.curves(watch.spectra(s, p))))
    numbers, curves = both(state, p)
    return np.asarray(numbers), np.asarray(curves)


@pytest.mark.parametrize("sites", [8, 9])
def test_numbers_and_curves_are_the_averages_they_claim(sites: int) -> None:
    potential = lam * q**4
    target = Target(
        EuclideanAction((Q,), (None,), ((ONE.scaled(4),),), potential, (ZERO,), (), digest="o"), sites, ("lam",)
    )
    fixed = (
        Bracket("<q^2>", ((NOW, q**2),)),
        Bracket("<lam q(1) q^2(0) q(-1/2)>", ((Fraction(1), lam * q), (NOW, q**2), (Fraction(-1, 2), q))),
        Bracket("<(mean q^2)^2 vol>", ((NOW, mean(q**2) ** 2 * symbol("geometry", "vol")),), over="path"),
        Bracket("<a lam>", ((NOW, symbol("geometry", "a") * lam),), over="path"),
        Bracket("energy", ((NOW, symbol("observable", "energy")),), over="path"),
        Bracket("<3>", ((NOW, ONE.scaled(3)),)),
    )
    free = (
        Bracket("<q(t) q(0)>", ((None, q), (NOW, q))),
        Bracket("<q^3(t) q(0) q^2(1)>", ((None, q**3), (NOW, q), (Fraction(1), q**2))),
    )
    offsets = tuple(lattice_offsets(b, A, sites) for b in (*fixed, *free))
    watch = Observables(target, fixed, free, offsets)
    rng = np.random.default_rng(3)
    with double():
        p = target.parameters({"lam": 0.7}, A)
        state = jax.jit(target.state)(jnp.asarray(rng.standard_normal((5, 1, sites))), jnp.zeros((5, 1)), p)
        numbers, curves = measured(watch, state, p)
        path = np.asarray(target.path(state, p))[:, 0]

    def at(values: np.ndarray, steps: int) -> np.ndarray:
        return np.roll(values, -steps, axis=-1)

    expected = [
        np.mean(path**2, axis=-1),
        np.mean(0.7 * at(path, 2) * path**2 * at(path, -1), axis=-1),
        np.mean(path**2, axis=-1) ** 2 * A * sites,
        np.full(5, A * 0.7),
        np.mean(0.7 * path**4 + 0.5 * path * 4 * 0.7 * path**3, axis=-1),
        np.full(5, 3.0),
    ]
    assert watch.count == len(fixed) and np.allclose(numbers, np.stack(expected, axis=-1), rtol=1e-12)
    steps = range(sites // 2 + 1)
    for t in steps:
        pair = np.mean(at(path, t) * path, axis=-1)
        three = [np.mean(at(path**3, s) * path * at(path**2, 2), axis=-1) for s in (t, -t)]
        assert np.allclose(curves[:, 0, t], pair, rtol=1e-11)
        assert np.allclose(curves[:, 1, t], np.mean(three, axis=0), rtol=1e-11)
    assert curves.shape == (5, 2, len(steps)) and watch.steps == len(steps)


def test_a_complex_weight_multiplies_everything_by_the_phase() -> None:
    drift = (Expression.of(Symbol("coupling", "lam")),)
    circle = (Expression.of(PI).scaled(2),)
    target = Target(EuclideanAction((THETA,), circle, ((ONE,),), ZERO, drift, (), digest="c"), 6, ("lam",))
    charge = Expression.of(Function("charge", theta))
    fixed = (Bracket("<Q^2>", ((NOW, charge**2),), over="path"), Bracket("<cos>", ((NOW, apply("cos", theta)),)))
    free = (Bracket("C", ((None, apply("cos", theta)), (NOW, apply("cos", theta)))),)
    watch = Observables(target, fixed, free, ((0,), (0,), (0, 0)))
    rng = np.random.default_rng(4)
    winding = np.array([[0.0], [1.0], [-2.0]])
    with double():
        p = target.parameters({"lam": 0.3}, A)
        state = jax.jit(target.state)(jnp.asarray(rng.standard_normal((3, 1, 6))), jnp.asarray(winding), p)
        numbers, curves = measured(watch, state, p)
        angle = np.asarray(target.path(state, p))[:, 0]
    weight = np.cos(0.3 * 2 * np.pi * winding[:, 0])  # a constant A is a theta term: its phase counts the turns
    cosine = np.cos(angle)
    assert watch.count == 3
    columns = [weight, weight * winding[:, 0] ** 2, weight * cosine.mean(axis=-1)]
    assert np.allclose(numbers, np.stack(columns, axis=-1), rtol=1e-12)
    assert np.allclose(curves[:, 0, 1], weight * np.mean(cosine * np.roll(cosine, -1, axis=-1), axis=-1), rtol=1e-12)


def test_the_energy_estimator_is_the_logarithmic_derivative_of_z() -> None:
    """-d ln Z/d beta at fixed N by quadrature on three sites, averaged with the exact weight.

    The virial estimator of Herman, Bruskin and Berne, J. Chem. Phys. 76 (1982) 5150, on the lattice.
    """
    target = Target(
        EuclideanAction((Q,), (None,), ((ONE.scaled(2),),), lam * q**4 + q, (ZERO,), (), digest="e"), 3, ("lam",)
    )
    watch = Observables(target, (Bracket("E", ((NOW, symbol("observable", "energy")),), over="path"),), (), ((0,),))
    axis = np.linspace(-4.5, 4.5, 61)
    cube = np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 1, 3)

    def logarithm(a: float) -> tuple[float, float]:
        with double():
            p = target.parameters({"lam": 0.8}, a)
            state = target.state(jnp.asarray(cube * np.sqrt(2)), jnp.zeros((len(cube), 1)), p)
            weight = np.exp(-np.asarray(state.action))
            energy = np.sum(weight * np.asarray(watch.numbers(state, p))[:, 0]) / weight.sum()
        return float(np.log(weight.sum()) - 1.5 * np.log(a)), float(energy)

    a, h = 0.6, 1e-4
    slope = -(logarithm(a + h)[0] - logarithm(a - h)[0]) / (2 * h) / 3
    assert logarithm(a)[1] == pytest.approx(slope, rel=1e-6)


def test_times_fall_on_sites_or_are_refused() -> None:
    def offsets(*times: str | None) -> tuple[int, ...]:
        groups = tuple((None if t is None else Fraction(t), q) for t in times)
        return lattice_offsets(Bracket("<…>", groups), 0.1, 40)

    assert offsets("0", "0.3", "-1.2") == (0, 3, -12)
    assert offsets(None, "0.1") == (0, 1)
    for time, words in (("0.25", "0.2 and 0.3"), ("-0.25", "-0.3 and -0.2"), ("4", "beyond beta = 4")):
        with pytest.raises(RequestError, match=words):
            offsets(time, "0")
