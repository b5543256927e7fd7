"""Bounces of a field: closed forms, the thin wall, published solitons, and an independent shooting."""

import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from values import value

from quarterturn.errors import SaddleError
from quarterturn.runs.declaration import action
from quarterturn.saddles.profile import RadialBounce, sphere, thin_wall_action
from quarterturn.saddles.radial import radial_bounce


def bounce(potential: str, dimension: int, **options: float) -> RadialBounce:
    declared = action(f"phi(t)\nLE = 1/2 phi'^2 + V(phi)\nV(phi) = {potential}")
    e = declared.euclidean
    return radial_bounce(e.potential, e.variables[0], {}, dimension, **options)


@pytest.mark.parametrize(("quarter", "key"), [("1/4", "a"), ("1/4!", "b")])
def test_the_bounce_without_a_scale_has_its_exact_action(quarter: str, key: str) -> None:
    found = bounce(f"-{quarter} phi^4" if "!" not in quarter else "-1/24 phi^4", 4)
    assert found.action == pytest.approx(float(value("fubini-lam1")["value"][key]), rel=1e-8)
    assert found.free_size
    # phi(r) = 1 / (1 + r^2 lam / 8) with phi(0) = 1
    coupling = 1.0 if key == "a" else 1 / 6
    assert found.phi == pytest.approx(1 / (1 + coupling * found.r**2 / 8), abs=1e-7)


def test_the_sextic_in_three_dimensions_is_conformal_too() -> None:
    """phi = (1 + r^2/3)^(-1/2) for V = -phi^6/6, of Lane and Emden with n = 5; S = (1/3) int phi'^2 = pi^2 sqrt(3) /
    4."""
    found = bounce("-1/6 phi^6", 3)
    assert found.phi == pytest.approx((1 + found.r**2 / 3) ** -0.5, abs=1e-7)
    assert found.action == pytest.approx(math.pi**2 * math.sqrt(3) / 4, rel=1e-8)


@pytest.mark.parametrize("dimension", [2, 3, 4])
def test_the_thin_wall_formula(dimension: int) -> None:
    entry = value("thinwall-e0.1-s1")
    expected = float(entry["value"][f"D{dimension}"])
    assert thin_wall_action(1.0, 0.1, dimension) == pytest.approx(expected, rel=1e-10)


@pytest.mark.parametrize("dimension", [2, 3, 4])
def test_bounces_tend_to_the_thin_wall(dimension: int) -> None:
    """Coleman, Phys. Rev. D 15 (1977) 2929: S and R with relative corrections that vanish with epsilon."""
    off = []
    for epsilon in (0.1, 0.05):
        found = bounce(f"1/8 (phi^2 - 1)^2 + {epsilon}/2 (phi - 1)", dimension)
        sigma = 2 / 3  # of the level potential, exactly
        off.append(abs(found.action / thin_wall_action(sigma, epsilon, dimension) - 1))
        assert found.radius == pytest.approx((dimension - 1) * sigma / epsilon, rel=1.5 * epsilon)
    assert off[1] < 0.5 * off[0] and off[1] < 0.05


def test_a_very_thin_wall_needs_no_luck() -> None:
    """epsilon = 0.02: R = 100 walls' widths; the negative mode is that of a sphere, -(D-1)/R^2."""
    found = bounce("1/8 (phi^2 - 1)^2 + 0.02/2 (phi - 1)", 4)
    assert found.action == pytest.approx(thin_wall_action(2 / 3, 0.02, 4), rel=4e-3)
    assert found.negative_mode == pytest.approx(-3 / found.radius**2, rel=0.01)
    assert found.errors["action"] < 1e-9 * found.action


def test_the_townes_soliton() -> None:
    """-phi'' - phi'/r + phi = phi^3 in the plane has int phi^2 = 2 pi x 1.86225 (Chiao, Garmire and Townes, Phys. Rev.
    Lett. 13 (1964) 479; Fibich and Gaeta, Physica D 140 (2000) 157); by Derrick and Pohozaev S is half of it."""
    found = bounce("1/2 phi^2 - 1/4 phi^4", 2, vacuum=0.0)
    assert found.action == pytest.approx(math.pi * 1.86225, rel=5e-6)
    assert found.centre == pytest.approx(2.20620, abs=1e-4) or found.centre == pytest.approx(-2.20620, abs=1e-4)


def shot(force, start: float, dimension: int, end: float) -> float:  # type: ignore[no-untyped-def]
    """Where the field ends up when released at rest from `start`: below zero it overshoots."""

    def equation(r: float, y: list[float]) -> list[float]:
        return [y[1], force(y[0]) - (dimension - 1) / r * y[1]]

    crossing = lambda r, y: y[0] + 1e-3  # noqa: E731
    turning = lambda r, y: y[1]  # noqa: E731
    crossing.terminal = turning.terminal = True  # type: ignore[attr-defined]
    turning.direction = 1  # type: ignore[attr-defined]
    r0 = 1e-4
    first = [start + force(start) * r0**2 / (2 * dimension), force(start) * r0 / dimension]
    done = solve_ivp(equation, (r0, end), first, method="DOP853", rtol=1e-12, atol=1e-14, events=[crossing, turning])
    return -1.0 if len(done.t_events[0]) else 1.0


@pytest.mark.parametrize("dimension", [2, 3, 4])
def test_thick_walls_agree_with_shooting(dimension: int) -> None:
    """phi(0) of V = phi^2/2 - phi^3/6 by bisection on overshooting, with SciPy's integrator and none of our code."""
    found = bounce("1/2 phi^2 - 1/6 phi^3", dimension)
    low, high = 3.0, 40.0  # V(3) = 0
    for _ in range(42):
        middle = (low + high) / 2
        over = shot(lambda phi: phi - phi**2 / 2, middle, dimension, 40.0) < 0
        low, high = (low, middle) if over else (middle, high)
    assert found.centre == pytest.approx((low + high) / 2, rel=1e-8)
    # S = (Omega / D) int r^(D-1) phi'^2 along the profile, by the trapezoidal rule on our nodes
    slope = np.gradient(found.phi, found.r, edge_order=2)
    by_hand = sphere(dimension) / dimension * np.trapezoid(found.r ** (dimension - 1) * slope**2, found.r)
    assert found.action == pytest.approx(by_hand, rel=1e-3)
    assert found.errors["action"] < 1e-9 * found.action


@pytest.mark.parametrize(
    ("potential", "dimension", "words"),
    [
        ("1/2 phi^2", 3, "no barrier"),
        ("1/4 phi^4", 3, "no mass"),
        ("-1/2 phi^2", 3, "no minimum"),
        ("(phi^2 - 1)^2", 3, "level"),
        ("1/2 phi^2 - phi^3", 5, "D = 2, 3 and 4"),
    ],
)
def test_what_has_no_bounce_is_refused_with_the_reason(potential: str, dimension: int, words: str) -> None:
    with pytest.raises(SaddleError, match=words):
        bounce(potential, dimension)
