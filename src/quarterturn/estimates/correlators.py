"""Energies from correlators: the effective gap, and the gap by averaged fits.

A correlator of operators that create the state |1> from the vacuum falls like exp(-E t), on a periodic time like
cosh(E (t - T/2)). `effective_gap` reads E off neighbouring times; `gap` fits sums of exponentials over several
windows and numbers of states and averages the results, see `quarterturn.estimates.windows`.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import chdtrc

from quarterturn.errors import EstimateError
from quarterturn.estimates.curves import LinearCurve
from quarterturn.estimates.estimate import CurveEstimate, Estimate, withheld
from quarterturn.estimates.gamma import as_estimate, gamma_method
from quarterturn.estimates.operators import ground_vector
from quarterturn.estimates.series import Array, Samples
from quarterturn.estimates.windows import AveragedFits, Fit, averaged_fits

LARGEST_NOISE = 0.25  # relative error at which the times of a fit end
MOST_TIMES, FEWEST_TIMES = 16, 4  # in a fit
BLOCKS_FOR_A_TIME = 8  # fewer times are fitted where there are fewer blocks to measure their covariance
ABOVE_NOISE = 2.0  # errors by which a correlator must be positive for its logarithm to be shown
BAD_FIT = 1e-4  # probability of chi^2 below which the best fit is called poor


@dataclass(frozen=True, eq=False)
class GapResult:
    """An energy above the vacuum, and all that led to it."""

    estimate: Estimate  # error: statistical and systematic in quadrature
    fits: tuple[Fit, ...]  # every fit, with its weight
    curve: CurveEstimate  # effective gap of the correlator that was fitted
    statistical: float  # one sigma, Gamma method on the derivative of the average, weights included
    systematic: float  # what the fits differ by beyond chance, and what is not known of excited states


def effective_gap(curve: CurveEstimate, length: float | None = None, spacing: float | None = None) -> CurveEstimate:
    """Energy that two neighbouring times of a correlator imply, at the middle between them.

    Parameters
    ----------
    curve
        A correlator on equidistant times.
    length
        Extent T of a periodic time, in units of `curve.t`: E solves
        C(t)/C(t + s) = cosh(E (t - T/2)) / cosh(E (t + s - T/2)). None: E = ln(C(t)/C(t + s))/s.
    spacing
        The distance s, a multiple of the step of `curve.t`; that step if absent.

    Returns
    -------
    A curve with propagated errors and covariance. Where a correlator is not positive by twice its error, or the ratio
    belongs to no real energy, the point is nan: there is no number to show.

    Raises
    ------
    EstimateError
        Fewer than two times, or a spacing that does not fit them.
    """
    stride = _stride(curve.t, spacing)
    here, there = curve.value[:-stride], curve.value[stride:]
    noise_here, noise_there = curve.error[:-stride], curve.error[stride:]
    shown = (here > ABOVE_NOISE * noise_here) & (there > ABOVE_NOISE * noise_there)
    energies = np.full(len(here), np.nan)
    jacobian = np.zeros((len(here), len(curve)))
    for index in np.flatnonzero(shown):
        start, end = float(curve.t[index]), float(curve.t[index + stride])
        energy, rise = _energy_of_ratio(float(np.log(here[index] / there[index])), start, end, length)
        energies[index] = energy
        jacobian[index, index] = 1 / (here[index] * rise)
        jacobian[index, index + stride] = -1 / (there[index] * rise)
    absent = np.isnan(energies)
    jacobian[absent] = 0.0
    covariance = jacobian @ curve.covariance @ jacobian.T
    covariance[absent] = np.nan
    covariance[:, absent] = np.nan
    return CurveEstimate(
        t=(curve.t[:-stride] + curve.t[stride:]) / 2,
        value=energies,
        error=np.sqrt(np.diag(covariance)),
        covariance=covariance,
        label=curve.label,
        state=curve.state,
        remark=curve.remark,
    )


def _stride(t: Array, spacing: float | None) -> int:
    if len(t) < 2:
        raise EstimateError("an effective gap needs a correlator at two times or more")
    steps = np.diff(t)
    if not np.allclose(steps, steps[0], rtol=1e-6) or steps[0] <= 0:
        raise EstimateError("an effective gap needs equidistant, ascending times")
    stride = 1.0 if spacing is None else spacing / steps[0]
    if round(stride) < 1 or abs(stride - round(stride)) > 1e-6 or round(stride) >= len(t):
        raise EstimateError(f"a spacing of {spacing} is no multiple of the step {steps[0]:g} inside the times given")
    return round(stride)


def _energy_of_ratio(log_ratio: float, start: float, end: float, length: float | None) -> tuple[float, float]:
    """E with C(start)/C(end) = exp(log_ratio), and d log_ratio/dE there; nan if there is none."""
    if length is None:
        return log_ratio / (end - start), end - start
    far, near = abs(start - length / 2), abs(end - length / 2)
    if far < near:
        far, near, log_ratio = near, far, -log_ratio
    if far - near < 1e-9 * (end - start) or log_ratio <= 0:
        return np.nan, np.nan

    def mismatch(energy: float) -> float:
        # log cosh x = x + log(1 + exp(-2x)) - log 2 does not overflow
        bend = np.log1p(np.exp(-2 * energy * far)) - np.log1p(np.exp(-2 * energy * near))
        return float(energy * (far - near) + bend - log_ratio)

    largest = (log_ratio + np.log(2)) / (far - near)
    energy = float(brentq(mismatch, 0.0, largest * (1 + 1e-12), xtol=1e-15, rtol=1e-14))
    rise = float(far * np.tanh(energy * far) - near * np.tanh(energy * near))
    forward = abs(start - length / 2) > abs(end - length / 2)
    return energy, rise if forward else -rise


def gap(
    samples: Samples,
    indices: NDArray[np.int_],
    t: Array,
    period: float | None = None,
    subtract: NDArray[np.int_] | int | None = None,
    exact: float | None = None,
) -> GapResult:
    """The energy of the lowest state that the operators create, above the vacuum.

    Parameters
    ----------
    samples
        Bins of the correlators (and of the operators, if subtracted).
    indices
        Columns of <f(t) f(0)>, shape (T,), or of <f_i(t) f_j(0)>, shape (n, n, T).
    t
        Times in units of the notation, ascending, shape (T,).
    period
        Extent of a periodic time; None if it has no period.
    subtract
        Columns of <f_i>, where the operators have vacuum expectation values: <f_i><f_j> is subtracted, and its
        fluctuations are propagated with those of the correlator.
    exact
        An independent value, kept beside the result.

    Returns
    -------
    The average over fits with one, two and three states. For several operators the correlator that is fitted is the
    principal one, with a fixed vector. The statistical error is the Gamma method's for the derivative of the average,
    weights included; what the fits differ by beyond chance, and what the priors leave open, is added in quadrature.
    Where the correlator has no signal, the estimate is withheld and says why.

    Raises
    ------
    EstimateError
        As `gamma_method`; shapes disagree.
    """
    columns, vacuum, t = _checked(indices, subtract, t)
    inside = t <= (np.inf if period is None else period / 2 * (1 + 1e-9))
    columns, t = columns[..., inside], t[inside]
    try:
        vector = _fixed_vector(_matrices(samples, columns, vacuum), t)
    except EstimateError as reason:
        return _nothing(t, reason.message)
    correlator = _principal(samples, columns, vacuum, t, vector)
    shown = effective_gap(correlator.estimate(label="effective gap"), period)
    picked, average = _fit(correlator, period)
    if average is None:
        last = f" beyond t = {t[picked[-1]]:.3g}" if len(picked) else ""
        return replace(_nothing(t, f"the correlator has too little signal{last} for a fit"), curve=shown)
    gradient = average.slope @ correlator.gradients[picked]
    statistical = as_estimate(average.energy, gamma_method(samples, gradient), gradient)
    error = float(np.hypot(statistical.error or 0.0, average.systematic))
    remark = "; ".join(
        words for words in (statistical.remark, _near_zero(average.energy, error, period), _poor(average)) if words
    )
    estimate = replace(statistical, error=error, remark=remark, exact=exact)
    return GapResult(estimate, average.fits, shown, statistical.error or 0.0, average.systematic)


def _checked(
    indices: NDArray[np.int_], subtract: NDArray[np.int_] | int | None, t: Array
) -> tuple[NDArray[np.int_], NDArray[np.int_] | None, Array]:
    """Columns as (n, n, T), vacuum columns as (n,), times as (T,)."""
    columns, t = np.asarray(indices), np.asarray(t, dtype=np.float64)
    if columns.ndim == 1:
        columns = columns[None, None, :]
    if columns.ndim != 3 or columns.shape[0] != columns.shape[1] or columns.shape[2:] != t.shape:
        raise EstimateError(f"correlators have shape (T,) or (n, n, T), not {columns.shape} for {t.shape} times")
    if len(t) > 1 and not np.all(np.diff(t) > 0):
        raise EstimateError("the times of a correlator have to ascend")
    if subtract is None:
        return columns, None, t
    vacuum = np.atleast_1d(np.asarray(subtract))
    if vacuum.shape != columns.shape[:1]:
        raise EstimateError(f"{columns.shape[0]} operators, but {vacuum.size} expectation values to subtract")
    return columns, vacuum, t


def _matrices(samples: Samples, columns: NDArray[np.int_], vacuum: NDArray[np.int_] | None) -> Array:
    """Connected correlation matrices, symmetrised, shape (T, n, n)."""
    matrices = np.moveaxis(samples.means[columns], 2, 0)
    matrices = (matrices + matrices.swapaxes(1, 2)) / 2
    if vacuum is not None:
        matrices = matrices - np.outer(samples.means[vacuum], samples.means[vacuum])
    return np.asarray(matrices)


def _fixed_vector(matrices: Array, t: Array) -> Array:
    """Weights of the operators in the lowest state, from the times about 1/(2 E) and 1/E of the first operator."""
    if matrices.shape[1] == 1:
        return np.ones(1)
    first = int(np.argmax(t > 0))
    diagonal = matrices[:, 0, 0]
    fallen = np.flatnonzero(diagonal[first:] < diagonal[first] / np.e)
    late = max(first + 1, first + int(fallen[0]) if len(fallen) else len(t) - 1)
    if late >= len(t):
        raise EstimateError("several operators need correlators at two times or more after t = 0")
    early = max(first, int(np.searchsorted(t, t[late] / 2)))
    return ground_vector(matrices[min(early, late - 1)], matrices[late])


def _principal(
    samples: Samples, columns: NDArray[np.int_], vacuum: NDArray[np.int_] | None, t: Array, vector: Array
) -> LinearCurve:
    """v^T C(t) v with its derivatives by the means; v is held fixed."""
    gradients = np.zeros((len(t), samples.values.shape[2]))
    weights = np.outer(vector, vector)
    times = np.broadcast_to(np.arange(len(t)), columns.shape)
    np.add.at(gradients, (times, columns), np.broadcast_to(weights[..., None], columns.shape))
    value = gradients @ samples.means
    if vacuum is not None:
        level = float(vector @ samples.means[vacuum])
        value = value - level**2
        for column, weight in zip(vacuum, vector, strict=True):  # one column may serve several operators
            gradients[:, column] -= 2 * level * weight
    return LinearCurve(samples, t, value, gradients)


def _fit(correlator: LinearCurve, period: float | None) -> tuple[NDArray[np.int_], AveragedFits | None]:
    """The times that carry signal, thinned, and the average of the fits to them; None if they are too few."""
    later = np.flatnonzero(correlator.t > 0)
    noisy = correlator.value[later] * LARGEST_NOISE <= correlator.error[later]
    usable = later[: int(np.argmax(noisy))] if noisy.any() else later
    picked = _thinned(usable, MOST_TIMES)
    if len(picked) < FEWEST_TIMES:
        return picked, None
    covariance, blocks = correlator.covariance(picked)
    if blocks < BLOCKS_FOR_A_TIME * len(picked):
        picked = _thinned(usable, max(FEWEST_TIMES, blocks // BLOCKS_FOR_A_TIME))
        covariance, blocks = correlator.covariance(picked)
    return picked, averaged_fits(correlator.t[picked], correlator.value[picked], covariance, blocks, period)


def _thinned(times: NDArray[np.int_], most: int) -> NDArray[np.int_]:
    """At most so many times, from the first to the last: neighbours tell nearly the same, early ones tell more.

    Their density falls like the third root of the time, which halved the errors of equidistant ones on a fine mesh.
    """
    if len(times) <= most:
        return times
    places = (len(times) - 1) * np.linspace(0, 1, most) ** 1.5
    return times[np.unique(np.rint(places).astype(np.int_))]


def _near_zero(energy: float, error: float, period: float | None) -> str:
    """Words where the energy is within two sigma of zero; the cosh of a small energy knows its square only."""
    flat = period is not None and energy * period / 2 < 1
    if energy > (4 if flat else 2) * error:
        return ""
    return "compatible with zero, and an energy is positive: no Gaussian error"


def _poor(average: AveragedFits) -> str:
    best = max(average.fits, key=lambda fit: fit.weight)
    if float(chdtrc(best.freedom, best.chi2)) >= BAD_FIT:
        return ""
    return f"poor fit: chi^2 = {best.chi2:.0f} for {best.freedom} degrees of freedom at best"


def _nothing(t: Array, reason: str) -> GapResult:
    empty = CurveEstimate(t[:0], t[:0], t[:0], np.zeros((0, 0)), label="effective gap")
    return GapResult(withheld(reason), (), empty, float("nan"), float("nan"))
