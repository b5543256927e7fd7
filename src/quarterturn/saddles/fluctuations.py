"""Determinants and lowest modes of -d^2/dt^2 + V''(x(t)) about a stationary path.

Two roads. The first follows the solutions of the fluctuation equation through time (Gelfand and Yaglom, J. Math.
Phys. 1 (1960) 48; for periodic paths Forman, Invent. Math. 88 (1987) 447): the equation is carried over many short
steps by the Gauss-Legendre rule of order six, and the determinant of all steps with the conditions at the ends is
that of one sparse matrix, which does not suffer from growing solutions. With k^2 added to the operator it is an
analytic function D(k^2); its Taylor coefficients are had by Cauchy's integral over a circle about zero, the one of
k^0 being zero where there is a zero mode and the one of k^2 then the determinant without that mode (relative to D of
the harmonic oscillator of the minimum).

The second writes the operator as a matrix on a lattice of second differences, divides its determinant by the
eigenvalue of the zero mode, and extrapolates three spacings to zero. The two share the path and nothing else.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import sqrtm
from scipy.sparse import bmat, coo_matrix, csc_matrix, diags, kron
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import eigsh, splu

from quarterturn.errors import SaddleError

Floats = NDArray[np.float64]
Numbers = NDArray[Any]
Curvature = Callable[[Floats], Floats]  # times (K,) -> d2V (K, n, n)

STEP = 0.08  # of a Gauss-Legendre step, times the largest frequency
CIRCLE = 12  # points of Cauchy's integral
RADIUS = 0.02  # of its circle, over the smallest curvature of the minimum
ZERO = 1e-3  # |D(0)| over |D| on the circle, below which there is a zero mode
LATTICES = (800, 1200, 1800)  # finer ones lose the eigenvalue of the zero mode to rounding
MODES = 6
ROOT15 = np.sqrt(15.0)
NODES = np.array([0.5 - ROOT15 / 10, 0.5, 0.5 + ROOT15 / 10])
STAGES = np.array(
    [
        [5 / 36, 2 / 9 - ROOT15 / 15, 5 / 36 - ROOT15 / 30],
        [5 / 36 + ROOT15 / 24, 2 / 9, 5 / 36 - ROOT15 / 24],
        [5 / 36 + ROOT15 / 30, 2 / 9 + ROOT15 / 15, 5 / 36],
    ]
)
WEIGHTS = np.array([5 / 18, 4 / 9, 5 / 18])


@dataclass(frozen=True, eq=False)
class Operator:
    """-d^2/dt^2 + W(t) on [start, start + span].

    ends: "decaying" (the whole line, W constant outside), "periodic", or "fixed" (Dirichlet).
    """

    curvature: Curvature
    start: float
    span: float
    ends: str
    size: int  # n

    @property
    def left(self) -> Floats:
        return np.asarray(self.curvature(np.array([self.start]))[0])

    @property
    def right(self) -> Floats:
        return np.asarray(self.curvature(np.array([self.start + self.span]))[0])

    def harmonic(self, curvature: Floats) -> Operator:
        """The same interval with a constant curvature."""
        constant = np.asarray(curvature)
        return Operator(
            lambda t: np.broadcast_to(constant, (len(t), *constant.shape)), self.start, self.span, self.ends, self.size
        )


@dataclass(frozen=True)
class Determinant:
    """det O / det O_harmonic, its zero modes left out, with the difference from a coarser calculation."""

    ratio: float
    error: float
    zero_modes: int


@dataclass(frozen=True, eq=False)
class Modes:
    """Lowest eigenvalues and the determinant ratio on a lattice, extrapolated to zero spacing."""

    values: Floats
    errors: Floats
    ratio: float
    error: float
    zero_modes: int

    @property
    def negative(self) -> int:
        return int(np.sum(self.values < 0)) - int(np.sum(self.values[self.zero] < 0))

    @property
    def zero(self) -> NDArray[np.int_]:
        """Positions of the zero modes among `values`."""
        return np.argsort(np.abs(self.values))[: self.zero_modes]


# --- Gelfand and Yaglom -----------------------------------------------------------------------------------------
def gelfand_yaglom(operator: Operator, harmonic: Floats, zero_modes: int) -> Determinant:
    """det O over that of the oscillator with the constant curvature matrix `harmonic`, zero modes left out.

    `zero_modes` is 0 or 1, as expected; SaddleError where the determinant says that there are others.
    """
    top = float(np.sqrt(np.max(np.abs(operator.curvature(operator.start + operator.span * np.linspace(0, 1, 401))))))
    steps = max(64, int(np.ceil(operator.span * top / STEP)))
    fine, coarse = (_ratio(operator, harmonic, zero_modes, n) for n in (steps, (2 * steps) // 3))
    return Determinant(fine, abs(fine - coarse), zero_modes)


def _ratio(operator: Operator, harmonic: Floats, zero_modes: int, steps: int) -> float:
    there = _sampled(operator, steps)
    free = _determinant(_sampled(operator.harmonic(harmonic), steps), 0.0)
    if zero_modes == 0:
        return float(np.real(_quotient(_determinant(there, 0.0), free)))
    radius = RADIUS * float(np.min(np.abs(np.linalg.eigvalsh(harmonic))))
    circle = radius * np.exp(2j * np.pi * (np.arange(CIRCLE // 2) + 0.5) / CIRCLE)  # upper half; the other is conjugate
    values = np.array([_quotient(_determinant(there, k2), free) for k2 in circle])
    constant, slope = (float(np.mean(np.real(values / circle**power))) for power in (0, 1))
    if abs(constant) > ZERO * radius * abs(slope):
        raise SaddleError(
            "the fluctuation operator should have one zero mode, of the free motion in time; its "
            "determinant at zero is "
            f"{abs(constant) / (radius * abs(slope)):.1g} of its value nearby: the saddles form a larger "
            "family, or the "
            "path is not stationary"
        )
    return slope


def _quotient(value: tuple[complex, float], free: tuple[complex, float]) -> complex:
    return value[0] / free[0] * np.exp(value[1] - free[1])


@dataclass(frozen=True, eq=False)
class _Sampled:
    """An operator on its Gauss-Legendre nodes: w is (steps, 3, n, n)."""

    w: Floats
    step: float
    left: Floats
    right: Floats
    ends: str


def _sampled(operator: Operator, steps: int) -> _Sampled:
    n, h = operator.size, operator.span / steps
    times = operator.start + h * (np.arange(steps)[:, None] + NODES)
    w = operator.curvature(times.ravel()).reshape(steps, 3, n, n)
    return _Sampled(w, h, operator.left, operator.right, operator.ends)


def _determinant(there: _Sampled, k2: complex) -> tuple[complex, float]:
    """Phase and logarithm of the modulus of det of the operator + k2, up to a factor that all operators share."""
    steps, _, n, _ = there.w.shape
    one = np.eye(n)
    body = _bidiagonal(_propagators(there.w + k2 * one, there.step))
    if there.ends == "periodic":
        closing = _block_row(steps, {0: -np.eye(2 * n), steps: np.eye(2 * n)})
        return _log_determinant(bmat([[body], [closing]], format="csc"))
    if there.ends == "fixed":
        left = right = np.hstack([one, np.zeros((n, n))])
    else:
        left = np.hstack([-_root(there.left + k2 * one), one])
        right = np.hstack([_root(there.right + k2 * one), one])
    above, below = _block_row(steps, {0: left}), _block_row(steps, {steps: right})
    return _log_determinant(bmat([[above], [body], [below]], format="csc"))


def _root(matrix: Numbers) -> Numbers:
    return np.asarray(sqrtm(matrix)).reshape(np.shape(matrix))


def _propagators(w: Numbers, h: float) -> Numbers:
    """(psi, psi') from step to step, (steps, 2n, 2n), by the three-stage Gauss-Legendre rule."""
    steps, _, n, _ = w.shape
    size = 2 * n
    generator = np.zeros((steps, 3, size, size), dtype=w.dtype)
    generator[:, :, :n, n:] = np.eye(n)
    generator[:, :, n:, :n] = w
    system = np.zeros((steps, 3, size, 3, size), dtype=w.dtype)
    for i in range(3):
        for j in range(3):
            system[:, i, :, j, :] = -h * STAGES[i, j] * generator[:, i]
    system = system.reshape(steps, 3 * size, 3 * size) + np.eye(3 * size)
    slopes = np.linalg.solve(system, generator.reshape(steps, 3 * size, size)).reshape(steps, 3, size, size)
    return np.asarray(np.eye(size) + h * np.einsum("i,sijk->sjk", WEIGHTS, slopes))


def _bidiagonal(propagators: Numbers) -> csc_matrix:
    """Rows y_{j+1} - M_j y_j."""
    steps, size, _ = propagators.shape
    j, row, column = np.meshgrid(np.arange(steps), np.arange(size), np.arange(size), indexing="ij")
    rows = np.concatenate([(j * size + row).ravel(), np.arange(steps * size)])
    columns = np.concatenate([(j * size + column).ravel(), np.arange(size, (steps + 1) * size)])
    values = np.concatenate([-propagators.ravel(), np.ones(steps * size)])
    return coo_matrix((values, (rows, columns)), shape=(steps * size, (steps + 1) * size)).tocsc()


def _block_row(steps: int, blocks: dict[int, Numbers]) -> csc_matrix:
    """A row of blocks that is zero but at the given places."""
    height, width = next(iter(blocks.values())).shape
    dtype = np.result_type(*blocks.values())
    row = coo_matrix((height, (steps + 1) * width), dtype=dtype).tolil()
    for place, block in blocks.items():
        row[:, place * width : (place + 1) * width] = block
    return row.tocsc()


def _log_determinant(matrix: csc_matrix) -> tuple[complex, float]:
    factors = splu(matrix)
    pivots = factors.U.diagonal()
    sign = _parity(factors.perm_r) * _parity(factors.perm_c)
    return complex(sign * np.prod(pivots / np.abs(pivots))), float(np.sum(np.log(np.abs(pivots))))


def _parity(permutation: NDArray[np.int_]) -> int:
    """+1 or -1: by the number of its cycles."""
    size = len(permutation)
    graph = coo_matrix((np.ones(size), (np.arange(size), permutation)), shape=(size, size))
    cycles = connected_components(graph, directed=False, return_labels=False)
    return 1 if (size - int(cycles)) % 2 == 0 else -1


# --- the lattice ------------------------------------------------------------------------------------------------
def lattice_modes(operator: Operator, harmonic: Floats, zero_modes: int) -> Modes:
    """Lowest modes and det O / det O_harmonic without zero modes, on lattices of three spacings, extrapolated."""
    found = [_on_lattice(operator, harmonic, zero_modes, sites) for sites in LATTICES]
    values = np.stack([np.append(v, r) for v, r in found])
    best, error = _extrapolated(values)
    return Modes(best[:-1], error[:-1], float(best[-1]), float(error[-1]), zero_modes)


def _extrapolated(values: Floats) -> tuple[Floats, Floats]:
    """To zero spacing by a^2 and a^4; the change from a^2 alone is the error."""
    a2 = 1 / np.array(LATTICES, dtype=np.float64) ** 2
    full = np.linalg.solve(np.vander(a2, 3, increasing=True), values)[0]
    short = np.linalg.solve(np.vander(a2[1:], 2, increasing=True), values[1:])[0]
    return full, np.abs(full - short) + 1e-12 * np.abs(full)


def _on_lattice(operator: Operator, harmonic: Floats, zero_modes: int, sites: int) -> tuple[Floats, float]:
    n = operator.size
    a = operator.span / (sites if operator.ends == "periodic" else sites + 1)
    times = np.asarray(operator.start + a * np.arange(1, sites + 1), dtype=np.float64)
    matrix = _lattice_matrix(operator.curvature(times), a, operator.ends)
    free = _lattice_matrix(operator.harmonic(harmonic).curvature(times), a, operator.ends)
    floor = float(np.min(np.linalg.eigvalsh(operator.curvature(times)))) - 0.1 * float(np.max(np.abs(harmonic)))
    start = np.random.default_rng(1).normal(size=n * sites)  # of no symmetry, or modes would be missed; the same always
    modes = np.sort(eigsh(matrix, k=MODES, sigma=floor, which="LM", v0=start, return_eigenvectors=False))
    (phase, log), (free_phase, free_log) = _log_determinant(matrix), _log_determinant(free)
    ratio = float(np.real(phase / free_phase)) * np.exp(log - free_log)
    for zero in sorted(modes, key=abs)[:zero_modes]:
        ratio /= float(zero)
    return np.asarray(modes), ratio


def _lattice_matrix(curvature: Floats, a: float, ends: str) -> csc_matrix:
    """-second difference + W, (n sites) square, sites slowest."""
    sites, n, _ = curvature.shape
    second = diags([2.0, -1.0, -1.0], [0, 1, -1], shape=(sites, sites), format="lil")
    if ends == "periodic":
        second[0, -1] = second[-1, 0] = -1.0
    j, row, column = np.meshgrid(np.arange(sites), np.arange(n), np.arange(n), indexing="ij")
    places = ((j * n + row).ravel(), (j * n + column).ravel())
    local = coo_matrix((curvature.ravel(), places), shape=(sites * n, sites * n))
    return (kron(second / a**2, np.eye(n)) + local).tocsc()
