"""Sums of exponentials fitted to correlators by correlated least squares, many windows at once.

C(t) = sum_k A_k [exp(-E_k t) + exp(-E_k (T - t))], without the second term where there is no period. For given
energies the amplitudes follow by linear least squares, so that only the energies are searched (variable projection:
Golub and Pereyra, SIAM J. Numer. Anal. 10 (1973) 413, with Kaufman's Jacobian, BIT 15 (1975) 49), by
Levenberg and Marquardt's method. All windows with the same number of states advance together.
"""

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from quarterturn.estimates.series import Array

ITERATIONS = 80
STILL = 1e-8  # largest step, in logarithms of energy differences, of a search that has arrived
SMALL, LEVEL = 1e-3, 1e-11  # or a small step on which chi^2 changes by no more than this share of itself
LARGEST_STEP = 1.0
SOFTEST, STIFFEST = 1e-7, 1e8  # damping; at the latter no direction leads down any more
SLOWEST, FASTEST = 1e-6, 30.0  # energy differences, in units of the range and of the step of times
PARALLEL = 1e-10  # relative size below which a state is a copy of the others


@dataclass(frozen=True, eq=False)
class ExponentialFits:
    """Fits of n windows with k states over P times."""

    energies: Array  # (n, k), ascending
    amplitudes: Array  # (n, k), at t = 0
    chi2: Array  # (n,), with the prior's share
    slope: Array  # (n, P): dE_1/dC(t), zero outside a window
    pull: Array  # (n, P): dchi^2/dC(t)
    prior_error: Array  # (n,): share of the prior's width in the error of E_1
    parameters: Array  # (n,): how many parameters the data determine, 2 k without a prior
    arrived: NDArray[np.bool_]  # (n,): the search converged and the states are distinct

    def part(self, rows: slice) -> "ExponentialFits":
        """Some of the windows."""
        return ExponentialFits(*(getattr(self, column.name)[rows] for column in fields(self)))


@dataclass(frozen=True)
class Prior:
    """What is known of excited states: Gaussians for two properties of each state but the lowest."""

    centre: float  # of the logarithm of the energy above the state below
    width: float  # of that logarithm
    share: float  # width, about zero, of the state's share in the correlator at the window's first time


@dataclass(frozen=True, eq=False)
class _Problem:
    """Data (P,), whitening matrices (n, P, P) with zero rows and columns outside a window, first times (n,)."""

    t: Array
    data: Array
    whitening: Array
    origin: Array
    period: float | None
    prior: Prior | None
    states: int

    def part(self, chosen: NDArray[np.bool_]) -> "_Problem":
        return _Problem(
            self.t, self.data, self.whitening[chosen], self.origin[chosen], self.period, self.prior, self.states
        )

    def basis(self, energies: Array) -> tuple[Array, Array]:
        """Whitened exponentials and their derivatives by energy, (n, P + rows, k); one at the window's first time.

        The rows below the P times are the prior's for the shares of excited states.

        Times before the window are held at its first: they carry no weight, and must not overflow.
        """
        ahead = np.maximum(self.t[None, :] - self.origin[:, None], 0.0)[..., None]
        value = np.exp(-energies[:, None, :] * ahead)
        slope = -ahead * value
        if self.period is not None:
            back = np.maximum(self.period - self.t[None, :] - self.origin[:, None], 0.0)[..., None]
            mirror = np.exp(-energies[:, None, :] * back)
            value, slope = value + mirror, slope - back * mirror
        value, slope = self.whitening @ value, self.whitening @ slope
        shares = self._share_rows()
        return np.concatenate([value, shares], axis=1), np.concatenate([slope, 0 * shares], axis=1)

    def target(self) -> Array:
        """Whitened data, with the zeros that the prior expects below them, (n, P + rows)."""
        return np.pad(self.whitening @ self.data, ((0, 0), (0, self._rows)))

    @property
    def _rows(self) -> int:
        return 0 if self.prior is None else self.states - 1

    def _share_rows(self) -> Array:
        if self.prior is None:
            return np.zeros((len(self.origin), 0, self.states))
        size = np.interp(self.origin, self.t, np.abs(self.data))
        return np.eye(self.states)[1:] / (self.prior.share * size)[:, None, None]

    def prior_rows(self, logs: Array) -> tuple[Array, Array]:
        """Residual and Jacobian of the prior for energies, shapes (n, k - 1) and (n, k - 1, k); empty without one."""
        count, states = logs.shape
        if self.prior is None:
            return np.zeros((count, 0)), np.zeros((count, 0, states))
        rows = np.broadcast_to(np.eye(states)[1:] / self.prior.width, (count, states - 1, states))
        return (logs[:, 1:] - self.prior.centre) / self.prior.width, rows


@dataclass(frozen=True, eq=False)
class _Point:
    """Where a search stands: parameters, residual, Jacobian of the projected residual, and the linear part."""

    logs: Array  # (n, k): log E_1, log(E_2 - E_1), …
    chi2: Array  # (n,)
    residual: Array  # (n, P + prior's rows)
    jacobian: Array  # (n, P + prior's rows, k)
    amplitudes: Array  # (n, k), at the window's first time
    distinct: NDArray[np.bool_]  # (n,)


def fit_exponentials(
    t: Array,
    data: Array,
    whitening: Array,
    first: Array,
    start: Array,
    period: float | None,
    prior: Prior | None = None,
) -> ExponentialFits:
    """Least-squares fits of `start.shape[1]` states in each window.

    Parameters
    ----------
    t, data
        Times and correlator, shape (P,).
    whitening
        W with chi^2 = |W (data - model)|^2, one for each window, shape (n, P, P); zero outside the window.
    first
        First time of each window, shape (n,).
    start
        Energies to start from, ascending, shape (n, k).
    period
        Extent T of a periodic time, or None.
    prior
        What is known of the differences between energies.

    Source: see the head of this module; dE/dC is that of the linearised normal equations.
    """
    problem = _Problem(t, data, whitening, first, period, prior, start.shape[1])
    logs = np.log(np.diff(start, axis=1, prepend=0.0))
    point, arrived = _search(problem, logs)
    energies = np.cumsum(np.exp(point.logs), axis=1)
    with np.errstate(over="ignore"):  # a state that dies at once has no amplitude at t = 0 to speak of
        amplitudes = point.amplitudes * np.exp(energies * first[:, None])
    slope, prior_error, parameters = _slope(problem, point)
    return ExponentialFits(
        energies=energies,
        amplitudes=amplitudes,
        chi2=point.chi2,
        slope=slope,
        pull=2 * np.einsum("np,npq->nq", point.residual[:, : len(t)], whitening),
        prior_error=prior_error,
        parameters=parameters,
        arrived=arrived & point.distinct & np.isfinite(amplitudes).all(axis=1),
    )


def _search(problem: _Problem, logs: Array) -> tuple[_Point, NDArray[np.bool_]]:
    """Levenberg-Marquardt with each window's own damping; windows that have arrived rest."""
    limits = np.log(SLOWEST / (problem.t[-1] - problem.t[0])), np.log(FASTEST / np.diff(problem.t).min())
    point = _evaluate(problem, np.clip(logs, *limits))
    damping = np.full(len(logs), 1e-3)
    arrived = np.zeros(len(logs), dtype=np.bool_)
    for _ in range(ITERATIONS):
        active = ~arrived & np.isfinite(point.chi2)
        if not active.any():
            break
        here = _take(point, active)
        step = _step(here, damping[active])
        trial = _evaluate(problem.part(active), np.clip(here.logs + step, *limits))
        better = trial.chi2 <= here.chi2
        moved = active.copy()
        moved[active] = better
        _overwrite(point, moved, _take(trial, better))
        damping[active] = np.maximum(damping[active] * np.where(better, 0.1, 10.0), SOFTEST)
        size = np.abs(step).max(axis=1)
        level = np.abs(trial.chi2 - here.chi2) <= LEVEL * here.chi2
        arrived[active] = (size < STILL) | (level & (size < SMALL)) | (damping[active] > STIFFEST)
    return point, arrived


def _step(point: _Point, damping: Array) -> Array:
    normal = np.einsum("npi,npj->nij", point.jacobian, point.jacobian)
    downhill = -np.einsum("npi,np->ni", point.jacobian, point.residual)
    diagonal = np.einsum("nii->ni", normal).copy()
    diagonal[diagonal == 0] = 1.0
    damped = normal + (damping[:, None] * diagonal)[..., None] * np.eye(normal.shape[-1])
    # Scaled to a unit diagonal, so that a flat direction never makes the solver overflow.
    scale = 1 / np.sqrt(np.einsum("nii->ni", damped))
    scaled = damped * scale[:, :, None] * scale[:, None, :] + 1e-14 * np.eye(normal.shape[-1])
    step = scale * np.linalg.solve(scaled, (scale * downhill)[..., None])[..., 0]
    return np.clip(step, -LARGEST_STEP, LARGEST_STEP)


def _evaluate(problem: _Problem, logs: Array) -> _Point:
    widths = np.exp(logs)
    value, slope = problem.basis(np.cumsum(widths, axis=1))
    target = problem.target()
    orthogonal, triangle = np.linalg.qr(value)
    diagonal = np.abs(np.einsum("nii->ni", triangle))
    distinct = np.all(diagonal > PARALLEL * np.linalg.norm(value, axis=1), axis=1)
    triangle = np.where(distinct[:, None, None], triangle, np.eye(triangle.shape[-1]))
    inside = np.einsum("npk,np->nk", orthogonal, target)
    amplitudes = np.linalg.solve(triangle, inside[..., None])[..., 0]
    residual = target - np.einsum("npk,nk->np", orthogonal, inside)
    by_log = _by_log(slope, amplitudes, widths)
    by_log = by_log - orthogonal @ (orthogonal.swapaxes(1, 2) @ by_log)
    prior_residual, prior_rows = problem.prior_rows(logs)
    residual = np.concatenate([residual, prior_residual], axis=1)
    jacobian = np.concatenate([-by_log, prior_rows], axis=1)
    chi2 = np.where(distinct, (residual**2).sum(axis=1), np.inf)
    return _Point(logs.copy(), chi2, residual, jacobian, amplitudes, distinct)


def _by_log(slope: Array, amplitudes: Array, widths: Array) -> Array:
    """d model/d log of the j-th energy difference, which moves the energies j, j + 1, …; shape (n, P, k)."""
    by_energy = slope * amplitudes[:, None, :]
    return np.asarray(np.cumsum(by_energy[..., ::-1], axis=-1)[..., ::-1] * widths[:, None, :])


def _slope(problem: _Problem, point: _Point) -> tuple[Array, Array, Array]:
    """dE_1/dC(t), the prior's share in the error of E_1, and the parameters that the data determine.

    All from the linearised normal equations; the last is the trace of the data's part of the projector on them.
    """
    widths = np.exp(point.logs)
    value, slope = problem.basis(np.cumsum(widths, axis=1))
    by_log = _by_log(slope, point.amplitudes, widths)
    _, prior_rows = problem.prior_rows(point.logs)
    of_data = np.concatenate([by_log, value], axis=2)
    of_prior = np.concatenate([prior_rows, np.zeros_like(prior_rows)], axis=2)
    design = np.concatenate([of_data, of_prior], axis=1)
    size = np.linalg.norm(design, axis=1, keepdims=True)
    size[size == 0] = 1.0
    usable = np.isfinite(design).all(axis=(1, 2))
    scaled = np.where(usable[:, None, None], design / size, 0.0)
    inverse = np.linalg.pinv(scaled, rcond=1e-12)
    row = inverse[:, 0, :] * (widths[:, 0] / size[:, 0, 0])[:, None]
    times = len(problem.t)
    parameters = np.einsum("npk,nkp->n", scaled[:, :times], inverse[:, :, :times])
    energy_slope = np.einsum("np,npq->nq", row[:, :times], problem.whitening)
    return energy_slope, np.linalg.norm(row[:, times:], axis=1), parameters


def _take(point: _Point, chosen: NDArray[np.bool_]) -> _Point:
    return _Point(*(getattr(point, column.name)[chosen] for column in fields(_Point)))


def _overwrite(point: _Point, chosen: NDArray[np.bool_], other: _Point) -> None:
    for column in fields(_Point):
        getattr(point, column.name)[chosen] = getattr(other, column.name)
