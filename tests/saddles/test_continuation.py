"""Branches of periodic bounces: where they begin, where they turn, and that the grid does not matter."""

import math

import numpy as np
import pytest

from quarterturn.runs.declaration import action
from quarterturn.saddles.branch import Half, follow, newton, residual
from quarterturn.saddles.cosine import at, coefficients, kinetic, midpoints, resampled
from quarterturn.saddles.landscape import Landscape, survey
from quarterturn.saddles.problem import paths_problem
from quarterturn.saddles.search import chosen, escape


def land_of(potential: str, paths: str = "q(t)", kinetic_term: str = "1/2 q'^2") -> Landscape:
    return survey(paths_problem(action(f"{paths}\nLE = {kinetic_term} {potential}").euclidean, {}))


def test_a_cosine_series_is_exact_for_cosines() -> None:
    s = midpoints(32)
    x = np.cos(3 * np.pi * s)[None]
    assert coefficients(x)[0, 3] == pytest.approx(1, abs=1e-14)
    assert at(x, np.array([0.1]), order=1)[0, 0] == pytest.approx(-3 * np.pi * math.sin(0.3 * np.pi), abs=1e-11)
    assert kinetic(x, 2.0) == pytest.approx((3 * np.pi) ** 2 / 4, rel=1e-13)
    assert resampled(x, 64)[0] == pytest.approx(np.cos(3 * np.pi * midpoints(64)), abs=1e-13)


def test_bounces_begin_at_the_crossover() -> None:
    """Affleck, Phys. Rev. Lett. 46 (1981) 388: period 2 pi / omega_b at small amplitude."""
    land = land_of("+ 1/2 q^2 - q^3")
    vacuum = chosen(land, None)
    (barrier,) = land.barriers(vacuum)
    branch = follow(land.problem, barrier, vacuum, 20.0)
    assert 2 * branch.steps[0].length == pytest.approx(2 * math.pi / barrier.frequencies[0], rel=1e-2)
    assert not branch.turning
    assert all(np.max(np.abs(residual(land.problem, h))) < 1e-6 * h.length**2 for h in branch.steps)


def test_a_stiffening_barrier_has_a_turning_point_and_two_bounces_of_one_period() -> None:
    """V = -x^2/2 - x^4 + x^6, hardly tilted: 1/2 x^2 + x^4 stiffens, so the period first falls, then grows without
    end."""
    land = land_of("- 1/2 q^2 - q^4 + q^6 + 1/50 q")
    vacuum = chosen(land, None)
    (barrier,) = land.barriers(vacuum)
    found = follow(land.problem, barrier, vacuum, 10.0)
    (turn,) = found.turning
    critical = 2 * math.pi / float(barrier.frequencies[0])
    assert turn < 0.9 * critical
    both = [s for s in escape(land, vacuum, 0.5 * (turn + critical)) if s.kind == "thermal bounce"]
    assert len(both) == 2
    assert both[0].action < both[1].action
    assert sorted(s.modes.negative for s in both if s.modes) == [1, 2]


def test_the_path_does_not_depend_on_the_grid() -> None:
    land = land_of("+ 1/2 q^2 - q^3")
    half = Half(0.5 / np.cosh(8 * midpoints(128) / 2)[None] ** 2, 8.0)
    coarse = newton(land.problem, half)
    fine = newton(land.problem, Half(resampled(half.x, 256), 8.0))
    assert coarse is not None and fine is not None
    assert kinetic(coarse.x, 8.0) == pytest.approx(kinetic(fine.x, 8.0), rel=1e-12)


def test_masses_and_rotations_leave_the_action_alone() -> None:
    """One bounce in three sets of coordinates; the second has mass 4, the third mixes it with a spectator."""
    plain = escape(land_of("+ 1/2 q^2 (1 - q/3)"), _first("+ 1/2 q^2 (1 - q/3)"), None)[0]
    heavy_land = land_of("+ 1/2 (2 q)^2 (1 - 2 q/3)", kinetic_term="2 q'^2")
    heavy = escape(heavy_land, chosen(heavy_land, None), None)[0]
    mixed_land = land_of(
        "+ 1/2 (x + y)^2 (1 - (x + y)/3) + 2 (x - y)^2", "x(t)\ny(t)", "1/2 (x' + y')^2 + 1/2 (x' - y')^2"
    )
    mixed = escape(mixed_land, chosen(mixed_land, None), None)[0]
    assert plain.action == pytest.approx(4.8, rel=1e-10)
    assert heavy.action == pytest.approx(plain.action, rel=1e-10)
    assert mixed.action == pytest.approx(plain.action, rel=1e-9)
    for other in (heavy, mixed):
        assert plain.ratio is not None and other.ratio is not None
        assert other.ratio.ratio == pytest.approx(plain.ratio.ratio, rel=1e-7)


def _first(potential: str):  # type: ignore[no-untyped-def]
    return chosen(land_of(potential), None)
