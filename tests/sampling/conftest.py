"""Actions built by hand, so that this room is tested without the notation."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from quarterturn.actions.expression import ONE, ZERO, Expression, PathAtom, Symbol
from quarterturn.actions.model import Bracket, EuclideanAction
from quarterturn.compiled.observables import Observables
from quarterturn.compiled.target import Target
from quarterturn.sampling.program import Program, program_for

Q = PathAtom("q")
q = Expression.of(Q)


def coupling(name: str) -> Expression:
    return Expression.of(Symbol("coupling", name))


def site_average(expression: Expression, label: str = "") -> Bracket:
    """<f>, averaged over sites."""
    return Bracket(label or repr(expression.key), ((0, expression),))  # type: ignore[arg-type]


def make_target(potential: Expression, sites: int, **given: Any) -> Target:
    """A target for a potential; one path q on the line with mass 1 unless said otherwise."""
    variables = given.get("variables", (Q,))
    count = len(variables)
    mass = given.get("mass", tuple(tuple(ONE if i == j else ZERO for j in range(count)) for i in range(count)))
    drift = given.get("drift", (ZERO,) * count)
    periods = given.get("periods", (None,) * count)
    symmetries = given.get("symmetries", ())
    symbols = [*potential.symbols, *(s for row in mass for k in row for s in k.symbols)]
    symbols += [s for a in drift for s in a.symbols]
    names = tuple(sorted({s.name for s in symbols if s.kind == "coupling"}))
    digest = repr((potential.key, [[k.key for k in row] for row in mass], [a.key for a in drift]))
    euclidean = EuclideanAction(variables, periods, mass, potential, drift, (), symmetries, digest)
    return Target(euclidean, sites, names)


def make_program(
    target: Target, fixed: tuple[Bracket, ...], free: tuple[Bracket, ...] = (), chains: int = 64
) -> Program:
    """A program whose brackets are all at time 0."""
    offsets = tuple(tuple(0 for _ in b.groups) for b in (*fixed, *free))
    return program_for(target, Observables(target, fixed, free, offsets), chains)


@pytest.fixture(scope="session")
def checks() -> Mapping[str, Any]:
    """The outside values by name."""
    path = Path(__file__).parent.parent / "outside" / "checks.json"
    return {entry["id"]: entry for entry in json.loads(path.read_text(encoding="utf-8"))}


@pytest.fixture(scope="session")
def target_of() -> Callable[..., Target]:
    return make_target


@pytest.fixture(scope="session")
def program_of() -> Callable[..., Program]:
    return make_program


@pytest.fixture(scope="session")
def polynomial() -> Expression:
    """V = c1 q + c2 q^2 + c3 q^3 + c4 q^4: many potentials, one compilation."""
    total = ZERO
    for power in range(1, 5):
        total = total + coupling(f"c{power}") * q**power
    return total


@pytest.fixture(scope="session")
def polynomial_program(polynomial: Expression) -> Program:
    """40 sites with mass m, q -> -q not used; measures <q>, <q^2>, <q^4>."""
    target = make_target(polynomial, 40, mass=((coupling("m"),),))
    return make_program(target, tuple(site_average(q**k) for k in (1, 2, 4)))


@pytest.fixture(scope="session")
def even_program() -> Program:
    """80 sites of V = c2 q^2 + c4 q^4 with the symmetry q -> -q; measures <q^2>, <q^4> and <q(t) q(0)>."""
    potential = coupling("c2") * q**2 + coupling("c4") * q**4
    target = make_target(potential, 80, symmetries=((-1,),))
    curve = Bracket("<q(t) q(0)>", ((None, q), (0, q)))  # type: ignore[arg-type]
    return make_program(target, (site_average(q**2), site_average(q**4)), (curve,))


def chain_mean(values: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Mean and its error over independent chains of (chains, draws, …)."""
    means = values.mean(axis=1)
    return means.mean(axis=0), means.std(axis=0, ddof=1) / np.sqrt(len(means))
