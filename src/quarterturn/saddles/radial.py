"""Bounces of one scalar field with the symmetry O(D), without shooting.

phi'' + (D - 1)/r phi' = V'(phi), phi'(0) = 0, phi -> the false vacuum (Coleman, Phys. Rev. D 15 (1977) 2929). At D =
1 this is the bounce of a path, which the rest of this room finds; from there D is raised as a real number, and each
equation is solved by Newton's method with collocation on a mesh that adapts, from the solution before, moved to where
the radius of its wall will be. No initial value is guessed, so that nothing over- or undershoots, and thin walls are
as good as thick ones. The radius is extrapolated along the way; where Newton's method does not settle, the step in D
is halved.

The end of the mesh is joined to the exact solution of the linear equation, phi - phi_f ~ r^(1 - D/2) K_{D/2-1}(omega
r).
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import solve_bvp
from scipy.special import kve

from quarterturn.actions.expression import Expression, PathAtom
from quarterturn.errors import SaddleError
from quarterturn.saddles.branch import follow, prolonged, rests_at
from quarterturn.saddles.conformal import conformal_bounce
from quarterturn.saddles.cosine import midpoints
from quarterturn.saddles.landscape import Landscape
from quarterturn.saddles.problem import Problem, field_problem
from quarterturn.saddles.profile import Profile, RadialBounce, bubble, wall_radius
from quarterturn.saddles.rest import Rest, curved_minima, rest_points
from quarterturn.saddles.search import chosen
from quarterturn.saddles.turning import run_back

Floats = NDArray[np.float64]
BEYOND = 16.0  # omega r beyond the wall, where the mesh is joined to the linear solution
TOLERANCES = (1e-7, 1e-9)  # their difference gives the errors
LOOSE = 1e-5  # on the way
MOST_NODES = 40_000
FIRST_STEP = 0.1  # in D
LARGEST_STEP = 1.0
SMALLEST_STEP = 1e-5
DIMENSIONS = (2, 3, 4)


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
    scaleless = conformal_bounce(problem, dimension)
    if scaleless is not None:
        return scaleless
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
def _over(land: Landscape, false: Rest, barrier: Rest, dimension: int) -> RadialBounce | None:
    start = _one_dimensional(land, false, barrier)
    if start is None:
        return None
    profile = _raised(land.problem, start, false, float(dimension))
    sharpened = []
    for tolerance in TOLERANCES:
        exact = _solved(land.problem, profile, false, float(dimension), 0.0, tolerance)
        if exact is None:
            raise SaddleError("the bounce was reached but could not be sharpened: its wall is too thin for the mesh")
        sharpened.append(exact)
    return bubble(land, sharpened, false, barrier, dimension)


def _one_dimensional(land: Landscape, false: Rest, barrier: Rest) -> Profile | None:
    """The bounce of the path, as a function of the distance from its turning point; None where there is none."""
    omega = float(false.frequencies[0])
    branch = follow(land.problem, barrier, false, BEYOND / omega)
    half = None
    if branch.steps and rests_at(branch.steps[-1], false):
        half = prolonged(land.problem, branch.steps[-1], false, BEYOND / omega + branch.steps[-1].length)
    if half is None:  # several barriers in a row
        way = run_back(land, false, float(np.sign(barrier.x[0] - false.x[0])), 2 * BEYOND / omega)
        if way is None:
            return None
        half = way[0]
    x = half.x[0] if abs(half.x[0, -1] - false.x[0]) < abs(half.x[0, 0] - false.x[0]) else half.x[0, ::-1]
    r = half.length * midpoints(half.points)
    r, phi = np.concatenate([[0.0], r]), np.concatenate([[x[0]], x])
    return Profile(1.0, r, phi, np.gradient(phi, r), wall_radius(r, phi, float(false.x[0])))


def _raised(problem: Problem, start: Profile, false: Rest, dimension: float) -> Profile:
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
    problem: Problem, guess: Profile, false: Rest, dimension: float, moved: float, tolerance: float
) -> Profile | None:
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
    return Profile(dimension, found.x, phi, found.y[1], wall_radius(found.x, phi, vacuum))


def _moved(guess: Profile, moved: float, end: float, omega: float, vacuum: float) -> tuple[Floats, Floats, Floats]:
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
