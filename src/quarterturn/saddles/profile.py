"""The profile of a bounce of a field, and what is told of it: action, radius, thickness, tension, negative mode.

The action is had in two ways, whose difference is its error: as it stands, and from the gradient term alone, of which
by Derrick's theorem (J. Math. Phys. 5 (1964) 1252) it is the part 2/D. The other errors are differences between
solutions of two tolerances, or extrapolations from coarser meshes.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import cumulative_simpson, quad
from scipy.interpolate import PPoly
from scipy.linalg import eigh_tridiagonal
from scipy.optimize import brentq
from scipy.special import gamma

from quarterturn.saddles.landscape import Landscape
from quarterturn.saddles.problem import Problem
from quarterturn.saddles.rest import Rest

Floats = NDArray[np.float64]
MESHES = (2000, 3000, 4500)  # of the eigenvalue problem, each finer by RATIO
RATIO = 1.5


@dataclass(frozen=True, eq=False)
class RadialBounce:
    """phi(r) with its action above the false vacuum. `thin_wall` is Coleman's estimate, `tension` the sigma in it."""

    dimension: int
    r: Floats  # (K,)
    phi: Floats  # (K,)
    action: float
    radius: float  # where phi is half way between its centre and the false vacuum
    thickness: float | None  # root mean square distance from the mean radius, weighted with phi'^2; None: no wall
    centre: float  # phi(0)
    false_vacuum: float
    true_vacuum: float | None  # None where the potential falls without limit
    tension: float | None
    thin_wall: float | None
    negative_mode: float | None  # the lowest eigenvalue of the fluctuations without angular momentum
    errors: Mapping[str, float]  # numerical, of the fields of these names
    free_size: bool = False  # one of a family of every size


def sphere(dimension: float) -> float:
    """Surface of the unit sphere in `dimension` dimensions."""
    return float(2 * math.pi ** (dimension / 2) / gamma(dimension / 2))


def thin_wall_action(tension: float, difference: float, dimension: int) -> float:
    """Omega_D [sigma R^(D-1) - epsilon R^D / D] at its maximum R = (D - 1) sigma / epsilon (Coleman 1977)."""
    radius = (dimension - 1) * tension / difference
    return sphere(dimension) * radius ** (dimension - 1) * tension / dimension


@dataclass(frozen=True, eq=False)
class Profile:
    """A solution at one D; `wall` is the radius half way."""

    dimension: float
    r: Floats
    phi: Floats
    slope: Floats
    wall: float


def wall_radius(r: Floats, phi: Floats, false: float) -> float:
    level = (phi[0] + false) / 2
    k = int(np.argmax((phi - level) * np.sign(phi[0] - false) < 0))
    return float(r[k - 1] + (r[k] - r[k - 1]) * (level - phi[k - 1]) / (phi[k] - phi[k - 1]))


def bubble(land: Landscape, profiles: Sequence[Profile], false: Rest, barrier: Rest, dimension: int) -> RadialBounce:
    """What is told of the last of `profiles`; the one before, less precise, gives the errors."""
    coarse, fine = (_numbers(land.problem, profile, false, dimension) for profile in profiles[-2:])
    errors = {name: abs(fine[name] - coarse[name]) + 1e-13 * abs(fine[name]) for name in fine}
    errors["action"] = abs(fine["action"] - fine["direct"]) + 1e-12 * abs(fine["action"])
    profile, true = profiles[-1], _other_side(land, false, barrier)
    tension, estimate = _thin_wall(land.problem, false, true, dimension)
    negative, errors["negative_mode"] = _negative_mode(land.problem, profile, dimension)
    return RadialBounce(
        dimension=dimension,
        r=profile.r,
        phi=profile.phi,
        action=fine["action"],
        radius=fine["radius"],
        thickness=fine["thickness"],
        centre=fine["centre"],
        false_vacuum=float(false.x[0]),
        true_vacuum=None if true is None else float(true.x[0]),
        tension=tension,
        thin_wall=estimate,
        negative_mode=negative,
        errors=errors,
    )


def _numbers(problem: Problem, profile: Profile, false: Rest, dimension: int) -> dict[str, float]:
    r = profile.r
    fine = np.unique(np.concatenate([r + k / 6 * np.append(np.diff(r), 0.0) for k in range(6)]))
    piece = _interpolant(profile, problem, dimension)
    phi, slope = piece(fine), piece.derivative()(fine)
    weight = sphere(dimension) * fine ** (dimension - 1)
    gradient = float(cumulative_simpson(weight * slope**2 / 2, x=fine)[-1])
    height = float(cumulative_simpson(weight * (problem.value(phi[None]) - false.height), x=fine)[-1])
    mean = float(np.trapezoid(slope**2 * fine, fine) / np.trapezoid(slope**2, fine))
    spread = float(np.trapezoid(slope**2 * (fine - mean) ** 2, fine) / np.trapezoid(slope**2, fine))
    return {
        "action": 2 * gradient / dimension,
        "direct": gradient + height,
        "radius": _half_way(profile, piece, float(false.x[0])),
        "thickness": math.sqrt(spread),
        "centre": float(profile.phi[0]),
    }


def _half_way(profile: Profile, piece: PPoly, false: float) -> float:
    """Where phi is half way from its centre to the false vacuum."""
    level = (float(profile.phi[0]) + false) / 2
    k = int(np.searchsorted(profile.r, profile.wall))
    low, high = profile.r[max(k - 2, 0)], profile.r[min(k + 1, len(profile.r) - 1)]
    return float(brentq(lambda r: float(piece(r)) - level, low, high, xtol=1e-14))


def _interpolant(profile: Profile, problem: Problem, dimension: int) -> PPoly:
    """phi(r): quintic between nodes, from the values, slopes and the equation's second derivatives there."""
    force = problem.slope(profile.phi[None])[0]
    with np.errstate(all="ignore"):
        second = force - (dimension - 1) * profile.slope / profile.r
    second[0] = force[0] / dimension
    h = np.diff(profile.r)
    p, v, a = profile.phi[:-1], profile.slope[:-1] * h, second[:-1] * h**2 / 2
    rise = profile.phi[1:] - p - v - a
    turn = profile.slope[1:] * h - v - 2 * a
    bend = second[1:] * h**2 / 2 - a
    third, fourth, fifth = 10 * rise - 4 * turn + bend, 7 * turn - 15 * rise - 2 * bend, 6 * rise - 3 * turn + bend
    coefficients = [fifth / h**5, fourth / h**4, third / h**3, a / h**2, v / h, p]
    return PPoly(np.stack(coefficients), profile.r)


def _other_side(land: Landscape, false: Rest, barrier: Rest) -> Rest | None:
    """The minimum beyond the barrier, or None."""
    side = np.sign(barrier.x[0] - false.x[0])
    beyond = [m for m in land.minima if side * (m.x[0] - barrier.x[0]) > 0 and m.height < false.height]
    return min(beyond, key=lambda m: abs(float(m.x[0] - barrier.x[0])), default=None)


def _thin_wall(problem: Problem, false: Rest, true: Rest | None, dimension: int) -> tuple[float | None, float | None]:
    """The tension int sqrt(2 (V - V_f)) over the barrier, and Coleman's action."""
    if true is None:
        return None, None
    a, b = float(false.x[0]), float(true.x[0])
    epsilon = false.height - true.height

    def speed(s: float) -> float:
        phi = a + (b - a) * s
        level = false.height - epsilon * s  # the difference taken out evenly, so that both ends are at rest
        return math.sqrt(2 * max(float(problem.value(np.array([phi]))) - level, 0.0))

    tension = abs(b - a) * float(quad(speed, 0.0, 1.0, limit=200)[0])
    return tension, thin_wall_action(tension, epsilon, dimension)


def _negative_mode(problem: Problem, profile: Profile, dimension: int) -> tuple[float | None, float]:
    """The lowest eigenvalue of -d^2/dr^2 - (D-1)/r d/dr + V'', by finite volumes, extrapolated; and its error."""
    values, piece = [], _interpolant(profile, problem, dimension)
    for points in MESHES:
        h = profile.r[-1] / points
        middle, edge = (np.arange(points) + 0.5) * h, np.arange(points + 1) * h
        volume, area = (edge[1:] ** dimension - edge[:-1] ** dimension) / dimension, edge ** (dimension - 1)
        diagonal = (area[1:] + area[:-1]) / (h * volume) + problem.curvature(piece(middle)[None])[:, 0, 0]
        beside = -area[1:-1] / (h * np.sqrt(volume[1:] * volume[:-1]))
        values.append(float(eigh_tridiagonal(diagonal, beside, select="i", select_range=(0, 0))[0][0]))
    coarse, best = (fine + (fine - rough) / (RATIO**2 - 1) for rough, fine in pairwise(values))
    return (best if best < 0 else None), abs(best - coarse)
