"""The Gamma method: errors of functions of means, from the measured autocorrelation function.

Source: Wolff, Comput. Phys. Commun. 156 (2004) 143 (automatic window, correction of the bias, replicas). The
convention is tau = 1/2 + sum_{t >= 1} rho(t), so that the error of a mean of N draws is sqrt(2 tau variance / N).

Some things are added. The series is one of bins, so tau in draws is found from error^2 N / (2 variance) with the
exact variance of single draws. And where chains are too short for a window, but many, the scatter of their means
is the error: it needs no window. And the automatic window closes at once where neighbouring draws are
anticorrelated, and would miss a slow mode of small weight behind them; so no window is shorter than the data afford,
up to the lag whose noise costs an error of some 4 % of the error.
"""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.fft import irfft, next_fast_len, rfft
from scipy.special import fdtrc

from quarterturn.errors import EstimateError
from quarterturn.estimates.estimate import GOOD, UNRESOLVED, Estimate
from quarterturn.estimates.jackknife import jackknife
from quarterturn.estimates.series import Array, Samples

WINDOW_FACTOR = 1.5  # S of the automatic window: the assumed ratio of exponential and integrated time
AFFORDED = 0.002  # of all bins: the shortest window; the relative error of the error is the root of its share
LONGEST_AFFORDED = 4  # such a window is at most this part of a chain: a quarter
FEWEST_BINS = 16  # below this there is no error at all
WORST_ERROR_OF_ERROR = 0.2  # relative; an error that is known less well is unresolved
SHORTEST_CHAIN = 6.0  # in tau: shorter chains have not moved enough for their scatter to be the error
NONLINEAR = 0.25  # share of the bias in the error above which a derived quantity says so
ROUNDING = 1e-14  # relative spread below which a quantity counts as constant


@dataclass(frozen=True)
class GammaResult:
    """The error of a projected mean. Times are in draws."""

    error: float
    error_of_error: float
    tau: float
    tau_error: float
    window: int
    n_eff: float
    resolved: bool
    replica_q: float | None  # None for a single chain, or where the scatter of chains is itself the error
    freedom: float  # degrees of freedom of error^2 as a chi-squared variable
    remark: str = ""


def autocovariance(series: Array, lags: int) -> Array:
    """Gamma(0 … lags) of chains about their common mean, shape (lags + 1,).

    Gamma(t) = 1/(R (B - t)) sum over R chains of B bins of (a_i - abar)(a_{i+t} - abar); Wolff, eq. (31).
    """
    chains, bins = series.shape
    length = next_fast_len(bins + lags, real=True)
    spectrum = rfft(series - series.mean(), n=length, axis=1)
    power = np.einsum("rk,rk->k", spectrum.real, spectrum.real)
    power += np.einsum("rk,rk->k", spectrum.imag, spectrum.imag)
    sums = irfft(power, n=length)[: lags + 1]
    return np.asarray(sums / (chains * (bins - np.arange(lags + 1))))


def automatic_window(gamma: Array, total_bins: int) -> int | None:
    """First W at which the truncation error drops below the noise (Wolff, eq. (50)-(52)), or None."""
    lags = np.arange(1, len(gamma))
    excess = np.cumsum(gamma[1:]) / gamma[0]  # tau(W) - 1/2
    tail = np.full(len(lags), np.finfo(np.float64).eps)
    falling = excess > 0
    tail[falling] = WINDOW_FACTOR / np.log1p(1 / excess[falling])
    gain = np.exp(-lags / tail) - tail / np.sqrt(lags * total_bins)
    found = np.flatnonzero(gain < 0)
    return int(lags[found[0]]) if len(found) else None


def gamma_method(samples: Samples, gradient: Array, *, window: int | None = None) -> GammaResult:
    """Error of `sum_i gradient_i mean_i` with autocorrelations taken into account.

    Parameters
    ----------
    samples
        Bins of all chains.
    gradient
        Derivatives of the estimated function with respect to the means, shape (quantities,).
    window
        Lags to sum [bins]; automatic if absent.

    Returns
    -------
    The error with its own error, tau [draws], and whether it is resolved: it is not where no window closes inside
    half a chain and the chains are too few or too short for their scatter to stand in, nor where the error is known
    to no better than 20 %.

    Raises
    ------
    EstimateError
        Fewer than 16 bins, a value that is not finite, or a window longer than a chain.
    """
    gradient = np.asarray(gradient, dtype=np.float64)
    series = samples.project(gradient)
    _refuse_what_is_not_finite(samples, gradient, series)
    chains, bins = series.shape
    total = chains * bins
    if total < FEWEST_BINS:
        raise EstimateError(f"{chains} x {bins} bins are too few for an error, at least {FEWEST_BINS} are needed")
    if window is not None and not 0 <= window < bins:
        raise EstimateError(f"a window of {window} bins does not fit in chains of {bins} bins")
    single = samples.projected_variance(gradient)
    gamma = autocovariance(series, bins // 2 if window is None else window)
    if gamma[0] <= (ROUNDING * series.mean()) ** 2:
        return GammaResult(0.0, 0.0, np.nan, np.nan, 0, np.nan, True, None, np.inf, "no variance seen")
    chosen = automatic_window(gamma, total) if window is None else window
    if chosen is not None and window is None:
        chosen = max(chosen, min(int(AFFORDED * total), bins // LONGEST_AFFORDED))
    summed = -1.0 if chosen is None else float(gamma[0] + 2 * gamma[1 : chosen + 1].sum())
    if chosen is None or summed <= 0:
        return _from_scatter_of_chains(samples, series, single)
    single += summed / total  # subtracting the measured mean took this from all Gamma(t): Wolff, eq. (49)
    summed *= 1 + (2 * chosen + 1) / total
    error = float(np.sqrt(summed / total))
    tau = error**2 * samples.draws / (2 * single)
    relative = float(np.sqrt((chosen + 0.5) / total))
    tau_error = 2 * tau * np.sqrt(max(0.0, chosen + 0.5 - tau / samples.block) / total)
    resolved = relative <= WORST_ERROR_OF_ERROR
    freedom = total / (2 * chosen + 1)
    return GammaResult(
        error=error,
        error_of_error=error * relative,
        tau=tau,
        tau_error=float(tau_error),
        window=chosen * samples.block,
        n_eff=samples.draws / (2 * tau),
        resolved=resolved,
        replica_q=_replica_q(series, summed, freedom),
        freedom=freedom,
        remark="" if resolved else f"too few draws: the error is known to {relative:.0%} only",
    )


def estimate(samples: Samples, index: int) -> Estimate:
    """The mean of quantity `index` with its error.

    Raises
    ------
    EstimateError
        As `gamma_method`.
    """
    gradient = np.zeros(samples.values.shape[2])
    gradient[index] = 1.0
    result = gamma_method(samples, gradient)
    return as_estimate(float(samples.values[..., index].mean()), result, gradient)


def derived(samples: Samples, function: Callable[[Array], float], gradient: Array | None = None) -> Estimate:
    """A function of the vector of means, with the errors of all of them and their correlations.

    The value is the function at the means, not corrected for its bias: it is what a reader gets from the printed
    means. The bias of second order, b = 1/2 sum_ij H_ij cov_ij, is found by jackknife over blocks; 2 b^2, the
    variance that the second order adds along one direction, is added to the squared error, and where |b| is above a
    quarter of the error the remark says so.

    Parameters
    ----------
    function
        Takes the means, shape (quantities,), and returns a number.
    gradient
        Its derivatives at the means, shape (quantities,). If absent: central differences over the naive error of
        each mean, which is the scale on which the derivative is needed (Wolff, eq. (38)).

    Raises
    ------
    EstimateError
        As `gamma_method`; also where the function is not finite at, or about, the means.
    """
    value = float(function(samples.means))
    if not np.isfinite(value):
        raise EstimateError(f"the expression has no finite value ({value}) at the measured means")
    if gradient is None:
        gradient = numerical_gradient(samples, function)
    gradient = np.asarray(gradient, dtype=np.float64)
    result = gamma_method(samples, gradient)
    bias = jackknife(samples, function, result.tau).bias if result.error > 0 else 0.0
    return as_estimate(value, result, gradient, bias=bias)


def numerical_gradient(samples: Samples, function: Callable[[Array], float]) -> Array:
    """Central differences over the naive errors of the means, shape (quantities,); zero for constants."""
    means = samples.means
    steps = samples.bin_deviation / np.sqrt(samples.chains * samples.bins)
    gradient = np.zeros_like(means)
    for index in np.flatnonzero(steps > ROUNDING * np.abs(means)).tolist():
        shifted = means.copy()
        shifted[index] = means[index] + steps[index]
        above = function(shifted)
        shifted[index] = means[index] - steps[index]
        gradient[index] = (above - function(shifted)) / (2 * steps[index])
        if not np.isfinite(gradient[index]):
            raise EstimateError(
                f"the expression has no finite value within one standard error of {samples.name(index)}"
            )
    return gradient


def as_estimate(value: float, result: GammaResult, gradient: Array, bias: float = 0.0) -> Estimate:
    """A Gamma result as the estimate of `value`; `bias` is the expected one of second order."""
    constant = result.error == 0
    error = float(np.hypot(result.error, np.sqrt(2) * bias))
    remark = result.remark
    if abs(bias) > NONLINEAR * error:
        words = f"strongly nonlinear over its error: a bias of {bias:.1g} is expected"
        remark = f"{remark}; {words}" if remark else words
    return Estimate(
        value=value,
        error=error,
        error_error=result.error_of_error,
        tau=None if constant else result.tau,
        tau_error=None if constant else result.tau_error,
        n_eff=None if constant else result.n_eff,
        window=result.window,
        replica_q=result.replica_q,
        state=GOOD if result.resolved else UNRESOLVED,
        remark=remark,
        gradient=gradient,
    )


def _from_scatter_of_chains(samples: Samples, series: Array, single: float) -> GammaResult:
    """The error from the means of whole chains, where no window closes; unresolved if they are few or short."""
    chains, bins = series.shape
    if chains == 1:
        error = float(series.std())  # the mean may be off by as much as a chain spreads
        relative, freedom = np.inf, 1.0
    else:
        error = float(series.mean(axis=1).std(ddof=1) / np.sqrt(chains))
        relative, freedom = float(1 / np.sqrt(2 * (chains - 1))), float(chains - 1)
    tau = error**2 * samples.draws / (2 * (single + error**2))
    length = bins * samples.block
    long_enough = length >= SHORTEST_CHAIN * tau
    resolved = long_enough and relative <= WORST_ERROR_OF_ERROR
    remark = "" if resolved else f"the autocorrelation time is not resolved by chains of {length} draws"
    return GammaResult(
        error=error,
        error_of_error=error * relative,
        tau=tau,
        tau_error=2 * relative * tau,
        window=length,
        n_eff=samples.draws / (2 * tau) if tau > 0 else np.nan,
        resolved=resolved,
        replica_q=None,
        freedom=freedom,
        remark=remark,
    )


def _replica_q(series: Array, summed: float, freedom: float) -> float | None:
    """Probability that agreeing chains scatter more than these (Wolff, eq. (44), with the error of the error).

    The published chi^2 distribution is the limit of many bins; the variance in the denominator is an estimate
    with `freedom` degrees of its own, which makes the ratio one of Fisher's.
    """
    chains, bins = series.shape
    if chains == 1:
        return None
    scatter = bins * float(((series.mean(axis=1) - series.mean()) ** 2).sum()) / summed
    return float(fdtrc(chains - 1, freedom, scatter / (chains - 1)))


def _refuse_what_is_not_finite(samples: Samples, gradient: Array, series: Array) -> None:
    if np.isfinite(series.sum()):
        return
    used = np.flatnonzero(gradient).tolist()
    broken = [i for i in used if not np.isfinite(samples.values[..., i]).all()]
    if not broken:
        raise EstimateError("the derivatives of the expression are not finite at the measured means")
    bad = ~np.isfinite(samples.values[..., broken[0]])
    chain, place = np.argwhere(bad)[0]
    raise EstimateError(
        f"{samples.name(broken[0])} is not finite in {int(bad.sum())} of {bad.size} bins, first in chain {chain},"
        f" bin {place}"
    )
