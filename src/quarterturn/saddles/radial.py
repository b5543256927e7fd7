"""Bounces of one scalar field with the symmetry O(D), without shooting.

phi'' + (D - 1)/r phi' = V'(phi), phi'(0) = 0, phi -> the false vacuum (Coleman, Phys. Rev. D 15 (1977) 2929). At D =
1 this is the bounce of a path, which the rest of this room finds; from there D is raised as a real number, and each
equation is solved by Newton's method with collocation on a mesh that adapts, from the solution before, moved to where
the radius of its wall will be. No initial value is guessed, so that nothing over- or undershoots, and thin walls are
as good as thick ones. The radius is extrapolated along the way; where Newton's method does not settle, the step in D
is halved.

The end of the mesh is joined to the exact solution of the linear equation, phi - phi_f ~ r^(1 - D/2) K_{D/2-1}(omega
r). The action is had in two ways, whose difference is its error: as it stands, and from the gradient term alone, of
which by Derrick's theorem (J. Math. Phys. 5 (1964) 1252) it is the part 2/D.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import cumulative_simpson, quad, solve_bvp, solve_ivp
from scipy.optimize import brentq
from scipy.special import gamma, kve

from quarterturn.actions.expression import Expression, PathAtom
from quarterturn.errors import SaddleError
from quarterturn.saddles.branch import follow, prolonged, rests_at
from quarterturn.saddles.cosine import midpoints
from quarterturn.saddles.landscape import Landscape
from quarterturn.saddles.problem import Problem, field_problem
from quarterturn.saddles.rest import Rest, curved_minima, rest_points
from quarterturn.saddles.search import chosen

Floats = NDArray[np.float64]
BEYOND = 16.0  # omega r beyond the wall, where the mesh is joined to the linear solution
TOLERANCE = 1e-9
LOOSE = 1e-5  # on the way
MOST_NODES = 40_000
FIRST_STEP = 0.1  # in D
LARGEST_STEP = 1.0
SMALLEST_STEP = 1e-5
DIMENSIONS = (2, 3, 4)


@dataclass(frozen=True, eq=False)
class RadialBounce:
    """phi(r) with its action above the false vacuum. `thin_wall` is Coleman's estimate, `tension` the sigma in it."""

    dimension: int
    r: Floats  # (K,)
    phi: Floats  # (K,)
    action: float
    action_error: float
    radius: float  # where phi is half way between its centre and the false vacuum
    thickness: float  # root mean square distance from the mean radius, weighted with phi'^2
    centre: float  # phi(0)
    false_vacuum: float
    true_vacuum: float | None  # None where the potential falls without limit
    tension: float | None
    thin_wall: float | None
    negative_mode: float | None  # the lowest eigenvalue of the fluctuations without angular momentum
    free_size: bool = False  # one of a family of every size


def sphere(dimension: float) -> float:
    """Surface of the unit sphere in `dimension` dimensions."""
    return float(2 * math.pi ** (dimension / 2) / gamma(dimension / 2))


def thin_wall_action(tension: float, difference: float, dimension: int) -> float:
    """Omega_D [sigma R^(D-1) - epsilon R^D / D] at its maximum R = (D - 1) sigma / epsilon (Coleman 1977)."""
    radius = (dimension - 1) * tension / difference
    return sphere(dimension) * radius ** (dimension - 1) * tension / dimension


def radial_bounce(
    potential: Expression,
    atom: PathAtom,
    couplings: Mapping[str, float],
    dimension: int,
    vacuum: float | None = None,
) -> RadialBounce:
    """The bounce of S = int d^D x [1/2 (d phi)^2 + V(phi)] with the symmetry O(D).

    Parameters
    ----------
    potential
        V, of the field `atom` and couplings.
    couplings
        Their values.
    dimension
        D, 2 to 4.
    vacuum
        The minimum next to it is the false vacuum; by default the one that is not the lowest.

    Raises
    ------
    SaddleError
        No false vacuum, no barrier, a false vacuum without mass, or a solution that did not settle.
    """
    if dimension not in DIMENSIONS:
        raise SaddleError(f"bounces of a field are solved for in D = 2, 3 and 4, not in D = {dimension}")
    problem = field_problem(potential, atom, couplings)
    conformal = _conformal(problem, dimension)
    if conformal is not None:
        return conformal
    land = _surveyed(problem)
    false = chosen(land, None if vacuum is None else (vacuum,))
    if len(land.level_with(false)) > 1:
        raise SaddleError(
            "the minima are level: a bubble of one inside the other never grows, so there is no bounce; in D = 1 the "
            "instanton between them is a path, which saddle gives for an action of q(t)"
        )
    barriers = land.barriers(false)
    if not barriers:
        raise SaddleError(
            f"no barrier leads out of the minimum at phi = {float(false.x[0]):.6g}: there is nothing to tunnel to"
        )
    best: RadialBounce | None = None
    for barrier in barriers:
        found = _over(land, false, barrier, dimension)
        if found is not None and (best is None or found.action < best.action):
            best = found
    if best is None:
        raise SaddleError(
            f"no bounce leads out of the minimum at phi = {float(false.x[0]):.6g}: beyond its barriers "
            "nothing is lower; give vacuum=… to start from a higher minimum"
        )
    return best


def _surveyed(problem: Problem) -> Landscape:
    points = rest_points(problem)
    try:
        return Landscape(problem, points, curved_minima(problem, points))
    except SaddleError as reason:
        if any(p.flat for p in points):
            raise SaddleError(
                "the false vacuum has no mass (V'' vanishes there), so that the field has no exponential tail; only "
                "potentials -c phi^p with p = 2D/(D-2), which have no scale, are handled then: add a mass term"
            ) from reason
        raise SaddleError("the potential has no minimum, so that there is no false vacuum to decay") from reason


# --- from one dimension to D ------------------------------------------------------------------------------------
@dataclass(frozen=True, eq=False)
class _Profile:
    """A solution at one D; `wall` is the radius half way."""

    dimension: float
    r: Floats
    phi: Floats
    slope: Floats
    wall: float


def _over(land: Landscape, false: Rest, barrier: Rest, dimension: int) -> RadialBounce | None:
    start = _one_dimensional(land, false, barrier)
    if start is None:
        return None
    profile = _raised(land.problem, start, false, float(dimension))
    exact = _solved(land.problem, profile, false, float(dimension), 0.0, TOLERANCE)
    if exact is None:
        raise SaddleError("the bounce was reached but could not be sharpened: its wall is too thin for the mesh")
    return _reported(land, exact, false, barrier, dimension)


def _one_dimensional(land: Landscape, false: Rest, barrier: Rest) -> _Profile | None:
    """The bounce of the path, as a function of the distance from its turning point; None where there is none."""
    omega = float(false.frequencies[0])
    branch = follow(land.problem, barrier, false, BEYOND / omega, 1.0)
    if not (branch.steps and rests_at(branch.steps[-1], false)):
        return None
    half = prolonged(land.problem, branch.steps[-1], false, max(BEYOND / omega + branch.steps[-1].length, 0.0))
    if half is None:
        return None
    x = half.x[0] if abs(half.x[0, -1] - false.x[0]) < abs(half.x[0, 0] - false.x[0]) else half.x[0, ::-1]
    r = half.length * midpoints(half.points)
    r, phi = np.concatenate([[0.0], r]), np.concatenate([[x[0]], x])
    return _Profile(1.0, r, phi, np.gradient(phi, r), _wall(r, phi, float(false.x[0])))


def _wall(r: Floats, phi: Floats, false: float) -> float:
    level = (phi[0] + false) / 2
    k = int(np.argmax((phi - level) * np.sign(phi[0] - false) < 0))
    return float(r[k - 1] + (r[k] - r[k - 1]) * (level - phi[k - 1]) / (phi[k] - phi[k - 1]))


def _raised(problem: Problem, start: _Profile, false: Rest, dimension: float) -> _Profile:
    """Follow the bounce from D = 1 to `dimension`."""
    here, before, step = start, None, FIRST_STEP
    width = float(np.ptp(start.phi) / np.max(np.abs(start.slope)))
    while here.dimension < dimension:
        step = min(step, dimension - here.dimension)
        pace = 0.0 if before is None else (here.wall - before.wall) / (here.dimension - before.dimension)
        found = _solved(problem, here, false, here.dimension + step, pace * step, LOOSE)
        if found is not None and abs(found.wall - here.wall - pace * step) < 2 * width:
            here, before, step = found, here, min(1.7 * step, LARGEST_STEP)
            continue
        step /= 2.5
        if step < SMALLEST_STEP:
            raise SaddleError(
                f"the bounce was lost on the way from D = 1 to {dimension:g}, at D = {here.dimension:.4g}: the "
                "radius of its "
                f"wall, {here.wall:.4g}, grows too fast for its thickness"
            )
    return here


def _solved(
    problem: Problem, guess: _Profile, false: Rest, dimension: float, moved: float, tolerance: float
) -> _Profile | None:
    """The solution at `dimension` next to `guess` with its wall moved outwards by `moved`; None where lost."""
    omega, vacuum = float(false.frequencies[0]), float(false.x[0])
    end = max(guess.wall + moved, 0.0) + BEYOND / omega
    r, phi, slope = _moved(guess, moved, end, omega, vacuum)
    order = dimension / 2 - 1
    rate = omega * kve(order + 1, omega * end) / kve(order, omega * end)

    def equation(r: Floats, y: Floats) -> Floats:
        return np.stack([y[1], problem.slope(y[:1])[0]])

    def ends(inner: Floats, outer: Floats) -> Floats:
        return np.array([inner[1], outer[1] + rate * (outer[0] - vacuum)])

    def equation_slope(r: Floats, y: Floats) -> Floats:
        curvature = problem.curvature(y[:1])[:, 0, 0]
        matrix = np.zeros((2, 2, len(r)))
        matrix[0, 1], matrix[1, 0] = 1.0, curvature
        return matrix

    singular = np.array([[0.0, 0.0], [0.0, 1.0 - dimension]])
    with np.errstate(all="ignore"):
        try:
            found = solve_bvp(
                equation, ends, r, np.stack([phi, slope]), S=singular, fun_jac=equation_slope, tol=tolerance,
                max_nodes=MOST_NODES,
            )  # fmt: skip
        except (np.linalg.LinAlgError, RuntimeError, ValueError):
            return None
    if not found.success or not np.isfinite(found.y).all():
        return None
    phi = found.y[0]
    if np.max(np.abs(phi - vacuum)) < 0.2 * np.max(np.abs(guess.phi - vacuum)):
        return None  # the false vacuum itself
    return _Profile(dimension, found.x, phi, found.y[1], _wall(found.x, phi, vacuum))


def _moved(guess: _Profile, moved: float, end: float, omega: float, vacuum: float) -> tuple[Floats, Floats, Floats]:
    inside = np.linspace(0.0, moved, 40, endpoint=False) if moved > 0 else np.empty(0)
    r = np.concatenate([inside, guess.r + moved])
    keep = (r >= 0) & (r <= end)
    r = r[keep]
    r = np.concatenate([[0.0], r]) if r[0] > 0 else r
    if r[-1] < end:
        r = np.concatenate([r, np.linspace(r[-1], end, 12)[1:]])
    phi = np.interp(r - moved, guess.r, guess.phi)
    slope = np.interp(r - moved, guess.r, guess.slope)
    outside = r - moved > guess.r[-1]
    fall = np.exp(-omega * (r[outside] - moved - guess.r[-1]))
    phi[outside] = vacuum + (guess.phi[-1] - vacuum) * fall
    slope[outside] = -omega * (guess.phi[-1] - vacuum) * fall
    slope[0] = 0.0
    return r, phi, slope


# --- what is told of it -----------------------------------------------------------------------------------------
def _reported(land: Landscape, profile: _Profile, false: Rest, barrier: Rest, dimension: int) -> RadialBounce:
    problem, r, vacuum = land.problem, profile.r, float(false.x[0])
    area = sphere(dimension)
    fine = np.unique(np.concatenate([r + k / 6 * np.append(np.diff(r), 0.0) for k in range(6)]))
    phi, slope = _hermite(profile, fine, problem, dimension)
    weight = area * fine ** (dimension - 1)
    gradient = float(cumulative_simpson(weight * slope**2 / 2, x=fine)[-1])
    height = float(cumulative_simpson(weight * (problem.value(phi[None]) - false.height), x=fine)[-1])
    by_virial = 2 * gradient / dimension
    mean = float(np.trapezoid(slope**2 * fine, fine) / np.trapezoid(slope**2, fine))
    thickness = math.sqrt(float(np.trapezoid(slope**2 * (fine - mean) ** 2, fine) / np.trapezoid(slope**2, fine)))
    true = _other_side(land, false, barrier)
    tension, estimate = _thin_wall(problem, false, true, dimension)
    return RadialBounce(
        dimension=dimension,
        r=profile.r,
        phi=profile.phi,
        action=by_virial,
        action_error=abs(by_virial - gradient - height) + 1e-12 * by_virial,
        radius=profile.wall,
        thickness=thickness,
        centre=float(profile.phi[0]),
        false_vacuum=vacuum,
        true_vacuum=None if true is None else float(true.x[0]),
        tension=tension,
        thin_wall=estimate,
        negative_mode=_negative_mode(problem, fine, phi, dimension),
    )


def _hermite(profile: _Profile, r: Floats, problem: Problem, dimension: int) -> tuple[Floats, Floats]:
    """phi and phi' between the nodes: quintic, from the values, slopes and the equation's second derivatives there."""
    from scipy.interpolate import BPoly

    force = problem.slope(profile.phi[None])[0]
    with np.errstate(all="ignore"):
        second = force - (dimension - 1) * profile.slope / profile.r
    second[0] = force[0] / dimension
    piece = BPoly.from_derivatives(profile.r, np.stack([profile.phi, profile.slope, second], axis=1))
    return np.asarray(piece(r)), np.asarray(piece.derivative()(r))


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


def _negative_mode(problem: Problem, r: Floats, phi: Floats, dimension: int) -> float | None:
    """The lowest eigenvalue of -d^2/dr^2 - (D-1)/r d/dr + V'', by finite volumes on two uniform meshes."""
    from scipy.linalg import eigh_tridiagonal

    values = []
    for points in (3000, 4500):
        h = r[-1] / points
        middle, edge = (np.arange(points) + 0.5) * h, np.arange(points + 1) * h
        volume, area = (edge[1:] ** dimension - edge[:-1] ** dimension) / dimension, edge ** (dimension - 1)
        curvature = problem.curvature(np.interp(middle, r, phi)[None])[:, 0, 0]
        diagonal = (area[1:] + area[:-1]) / (h * volume) + curvature
        beside = -area[1:-1] / (h * np.sqrt(volume[1:] * volume[:-1]))
        values.append(float(eigh_tridiagonal(diagonal, beside, select="i", select_range=(0, 0))[0][0]))
    best = values[1] + (values[1] - values[0]) / (1.5**2 - 1)
    return best if best < 0 else None


# --- potentials without a scale ---------------------------------------------------------------------------------
def _conformal(problem: Problem, dimension: int) -> RadialBounce | None:
    """The bounce with phi(0) = 1 of V = -c |phi|^p with p = 2D/(D-2), which has one of every size; None for other V.

    Its action does not depend on the size (Fubini, Nuovo Cim. A 34 (1976) 521; Lipatov, Sov. Phys. JETP 45 (1977) 216).
    It is an initial-value problem; the tail beyond the last radius is phi ~ A r^(2-D), which is free.
    """
    if dimension < 3:
        return None
    power = 2 * dimension // (dimension - 2)
    size = np.array([0.03, 0.4, 1.0, 7.0])
    ratio = problem.value(size[None]) / size**power
    if not (np.ptp(ratio) < 1e-10 * abs(ratio[0]) and ratio[0] < 0):
        return None

    def equation(r: float, y: Floats) -> list[float]:
        force = float(problem.slope(y[:1])[0])
        return [y[1], force - (dimension - 1) * y[1] / r, *_densities(problem, r, y, dimension)]

    start = 1e-3 / math.sqrt(abs(ratio[0]))
    force = float(problem.slope(np.array([1.0]))[0])
    first = [1 + force * start**2 / (2 * dimension), force * start / dimension, 0.0, 0.0]
    end = 1e4 / math.sqrt(abs(ratio[0]))
    found = solve_ivp(equation, (start, end), first, method="DOP853", rtol=1e-12, atol=1e-16, dense_output=False)
    r, (phi, slope, gradient, height) = found.t, found.y
    area = sphere(dimension)
    tail = area * slope[-1] ** 2 / 2 * end**dimension / (dimension - 2)  # of the gradient term, phi' ~ r^(1-D)
    first_volume = area * start**dimension / dimension * float(problem.value(np.array([1.0])))
    by_virial = 2 * (gradient[-1] + tail) / dimension
    direct = gradient[-1] + tail + height[-1] + first_volume
    wall = float(brentq(lambda s: float(np.interp(s, r, phi)) - 0.5, r[0], r[-1]))
    return RadialBounce(
        dimension, r[r < 40 * wall], phi[r < 40 * wall], by_virial, abs(direct - by_virial) + 1e-11 * by_virial, wall,
        wall, 1.0, 0.0, None, None, None, None, free_size=True,
    )  # fmt: skip


def _densities(problem: Problem, r: float, y: Any, dimension: int) -> list[float]:
    weight = sphere(dimension) * r ** (dimension - 1)
    return [weight * y[1] ** 2 / 2, weight * float(problem.value(y[:1]))]
