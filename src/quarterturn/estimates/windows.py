"""Which times and how many states to fit: all of them, averaged with information-criterion weights.

A fit is a window of times and a number of states. Its weight is exp(-(chi^2 + 2 k + 2 n_cut)/2) for k parameters and
n_cut times left out (Jay and Neil, Phys. Rev. D 103 (2021) 114502). Excited states carry Gaussian priors (Lepage et
al., Nucl. Phys. B Proc. Suppl. 106 (2002) 12), whose penalty is part of chi^2; k counts what the data determine, the
effective number of parameters of Spiegelhalter et al., J. R. Stat. Soc. B 64 (2002) 583.

The covariance is the measured one; eigenvalues of its correlation matrix below 1e-10 of the largest are raised to
that, and chi^2 carries the factor (n - p - 2)/(n - 1) for p times and n blocks that makes the inverse of a measured
covariance unbiased (Hartlap, Simon and Schneider, Astron. Astrophys. 464 (2007) 399).
"""

from dataclasses import dataclass, fields, replace

import numpy as np

from quarterturn.estimates.fits import ExponentialFits, Prior, fit_exponentials
from quarterturn.estimates.series import Array

MOST_STATES = 3
END_SHARES = (1.0, 0.75)  # of the times, where windows end
PRIOR_WIDTH = 1.0  # of the logarithm of energy differences
PRIOR_SHARE = 0.3  # of an excited state in the correlator at the first time of a window
FLOOR = 1e-10  # of eigenvalues, relative to the largest
SHORTEST_LIFE = 1e-3  # what is left of a state after one time step, below which it is no state but one point
NEAREST_STATES = 0.1  # of an energy difference times the length of the window, below which two states are one
FLAT = 1e-4  # of the lowest energy times the length of the window, below which nothing decays


@dataclass(frozen=True)
class Fit:
    """One window with one number of states."""

    states: int
    t_min: float
    t_max: float
    points: int
    energies: tuple[float, ...]  # ascending, above the vacuum
    amplitudes: tuple[float, ...]
    error: float  # of the lowest energy, one sigma, statistical
    chi2: float
    freedom: int
    weight: float  # in the average; zero for a fit that failed
    remark: str = ""  # why it failed


@dataclass(frozen=True, eq=False)
class AveragedFits:
    """The average of all fits.

    `slope` is its derivative by the correlator, shape (P,), with that of the weights: all of the statistical error.
    `systematic` is what the spread of the fits exceeds their statistical differences by, and the width of the priors.
    """

    energy: float
    slope: Array
    systematic: float
    fits: tuple[Fit, ...]


def averaged_fits(t: Array, value: Array, covariance: Array, blocks: int, period: float | None) -> AveragedFits | None:
    """Fits all windows with one, two and three states, and averages the lowest energies; None if all fail.

    Parameters
    ----------
    t, value, covariance
        The correlator at P times: shapes (P,), (P,), (P, P).
    blocks
        Number of blocks behind the covariance.
    period
        Extent of a periodic time, in units of t, or None.
    """
    described: list[Fit] = []
    penalties: list[float] = []
    slopes, pulls, priors = [], [], []
    for states in range(1, MOST_STATES + 1):
        spans = _spans(len(t), states)
        if not spans:
            continue
        found = _fitted(t, value, covariance, spans, states, blocks, period)
        for index, span in enumerate(spans):
            fit = _described(t, covariance, found, index, span)
            penalty = fit.chi2 + 2 * float(found.parameters[index]) + 2 * (len(t) - fit.points)
            described.append(fit)
            penalties.append(np.inf if fit.remark else penalty)
            slopes.append(found.slope[index])
            pulls.append(found.pull[index])
            priors.append(found.prior_error[index])
    if not np.isfinite(penalties).any():
        return None
    weights = np.exp(-(np.array(penalties) - min(penalties)) / 2)
    weights /= weights.sum()
    good = weights > 0
    energies = np.array([fit.energies[0] for fit in described])[good]
    columns = (np.array(column)[good] for column in (slopes, pulls, priors))
    energy, slope, systematic = _average(covariance, weights[good], energies, *columns)
    fits = tuple(replace(f, weight=float(w)) for f, w in zip(described, weights, strict=True))
    return AveragedFits(energy, slope, systematic, fits)


def _average(
    covariance: Array, weights: Array, energies: Array, slopes: Array, pulls: Array, priors: Array
) -> tuple[float, Array, float]:
    """Average, its derivative, and its systematic error; `pulls` are the derivatives of chi^2, (n, P)."""
    energy = float(weights @ energies)
    away = energies - energy
    of_energies = weights @ slopes
    of_weights = -0.5 * (weights * away) @ pulls
    # Fits of one set of data differ by chance too; the derivative accounts for that, the spread must not again.
    different = slopes - of_energies
    by_chance = np.einsum("np,pq,nq->n", different, covariance, different)
    excess = max(0.0, float(weights @ (away**2 - by_chance)))
    return energy, of_energies + of_weights, float(np.sqrt(excess + (weights @ priors) ** 2))


def _spans(points: int, states: int) -> list[tuple[int, int]]:
    """Half-open ranges of times with at least one degree of freedom."""
    ends = sorted({max(2 * states + 1, round(share * points)) for share in END_SHARES}, reverse=True)
    return [(i, end) for end in ends if end <= points for i in range(end - 2 * states)]


def _fitted(
    t: Array,
    value: Array,
    covariance: Array,
    spans: list[tuple[int, int]],
    states: int,
    blocks: int,
    period: float | None,
) -> ExponentialFits:
    whitening = np.zeros((len(spans), len(t), len(t)))
    for index, (i, j) in enumerate(spans):
        whitening[index, i:j, i:j] = _whitening(covariance[i:j, i:j], blocks)
    first = np.array([t[i] for i, _ in spans])
    lowest = np.array([_decay(t[i:j], value[i:j]) for i, j in spans])
    prior = prior_of(t)
    widths = [lowest, np.full(len(spans), np.exp(prior.centre))][: 1 if states == 1 else 2]
    ladder = np.arange(states, dtype=np.float64)
    start = np.concatenate([lowest[:, None] + width[:, None] * ladder for width in widths])
    tries = len(widths)
    found = fit_exponentials(t, value, np.tile(whitening, (tries, 1, 1)), np.tile(first, tries), start, period, prior)
    return found if tries == 1 else _better(found.part(slice(0, len(spans))), found.part(slice(len(spans), None)))


def prior_of(t: Array) -> Prior:
    """Excited states that a fit to the times `t` can know of outlive a step and die within the range."""
    longest, shortest = np.log(1 / (t[-1] - t[0])), np.log(2 / (t[1] - t[0]))
    return Prior(centre=float((longest + shortest) / 2), width=PRIOR_WIDTH, share=PRIOR_SHARE)


def _whitening(covariance: Array, blocks: int) -> Array:
    """W with W^T W the (debiased) inverse of a covariance whose smallest eigenvalues are raised."""
    error = np.sqrt(np.diag(covariance))
    values, vectors = np.linalg.eigh(covariance / np.outer(error, error))
    values = np.maximum(values, FLOOR * values[-1])
    unbiased = max(blocks - len(error) - 2, 1) / (blocks - 1)
    return np.asarray((vectors * np.sqrt(unbiased / values)).T / error)


def _decay(t: Array, value: Array) -> float:
    """A rough decay rate over the first half of a window; small and positive where there is none."""
    middle = max(1, len(t) // 2)
    span = float(t[middle] - t[0])
    rate = float(np.log(value[0] / value[middle])) / span if value[0] > value[middle] > 0 else 0.0
    return max(rate, 0.01 / span)


def _better(one: ExponentialFits, other: ExponentialFits) -> ExponentialFits:
    """Fit by fit, the one that arrived at the smaller chi^2."""
    take = (other.arrived & ~one.arrived) | ((other.arrived == one.arrived) & (other.chi2 < one.chi2))

    columns = []
    for column in fields(ExponentialFits):
        a, b = getattr(one, column.name), getattr(other, column.name)
        columns.append(np.where(take.reshape(-1, *[1] * (a.ndim - 1)), b, a))
    return ExponentialFits(*columns)


def _described(t: Array, covariance: Array, found: ExponentialFits, index: int, span: tuple[int, int]) -> Fit:
    i, j = span
    slope, energies = found.slope[index], found.energies[index]
    gaps, step, length = np.diff(energies), float(t[1] - t[0]), float(t[j - 1] - t[i])
    if not found.arrived[index]:
        remark = "did not converge"
    elif found.amplitudes[index][0] <= 0:
        remark = "the lowest state has a negative weight"
    elif np.any(np.exp(-gaps * step) < SHORTEST_LIFE):
        remark = "a state dies within one time step"
    elif np.any(gaps * length < NEAREST_STATES):
        remark = "two states at the same energy"
    elif energies[0] * length < FLAT:
        remark = "the lowest state does not decay"
    else:
        remark = ""
    return Fit(
        states=len(energies),
        t_min=float(t[i]),
        t_max=float(t[j - 1]),
        points=j - i,
        energies=tuple(energies.tolist()),
        amplitudes=tuple(found.amplitudes[index].tolist()),
        error=float(np.sqrt(slope @ covariance @ slope)),
        chi2=float(found.chi2[index]),
        freedom=j - i - 2 * len(energies),
        weight=0.0,
        remark=remark,
    )
