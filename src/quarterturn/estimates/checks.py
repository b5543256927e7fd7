"""Reasons to doubt an error bar, each a test of which the false alarm rate is known.

Three tests look at the series behind an estimate: does its beginning agree with its end (Geweke, in Bayesian
Statistics 4 (1992) 169, here with the autocorrelated error and its own uncertainty), do the chains agree (Wolff,
Comput. Phys. Commun. 156 (2004) 143, section 4), does the jackknife over long blocks confirm the Gamma method. With
a false alarm rate of 1e-3 for each test in a whole report, shared by its numbers, three reports in a thousand without
fault carry such a warning, or fewer.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import fdtrc, stdtr

from quarterturn.estimates.estimate import UNRESOLVED, Estimate
from quarterturn.estimates.gamma import GammaResult, gamma_method
from quarterturn.estimates.jackknife import BLOCK_IN_TAU, block_means
from quarterturn.estimates.series import Array, Samples

FALSE_ALARM_RATE = 1e-3  # of each kind of test, in a whole report
FIRST_PART, LAST_PART = 0.2, 0.5  # shares of a chain that are compared
FEWEST_EFFECTIVE = 100
LONG_BLOCKS = 32  # blocks of the cross-check, over all chains together
SHOWN = 3  # labels that a warning lists


@dataclass(frozen=True)
class Thermalisation:
    """Difference of the beginning and the end of the chains in standard errors, and its probability."""

    z: float
    probability: float


def thermalisation(samples: Samples, gradient: Array) -> Thermalisation | None:
    """Compares the first fifth of all chains with their last half.

    z = (first - last) / sqrt(C (1/n_first + 1/n_last)) with C the Gamma method's variance; it is read as Student's t
    with the degrees of freedom of C. Bins inside a part are taken as many against tau, otherwise the variance is
    overestimated and the test is cautious. None where nothing fluctuates or chains have fewer than five bins.
    """
    result = gamma_method(samples, gradient)
    first, last = int(FIRST_PART * samples.bins), int(LAST_PART * samples.bins)
    if result.error == 0 or first == 0:
        return None
    series = samples.project(gradient)
    difference = float(series[:, :first].mean() - series[:, -last:].mean())
    scale = result.error * np.sqrt(samples.bins * (1 / first + 1 / last))
    z = difference / scale
    return Thermalisation(float(z), float(2 * stdtr(result.freedom, -abs(z))))


@dataclass(frozen=True)
class CrossCheck:
    """The error from long blocks, the number of blocks, and the probability of a ratio as far from one."""

    error: float
    block: int  # draws in a block
    blocks: int
    probability: float


def cross_check(samples: Samples, gradient: Array, result: GammaResult) -> CrossCheck | None:
    """Jackknife error from blocks as long as leave 32 of them, or four in a chain, against the Gamma method's.

    For a projected mean the jackknife error is that of independent blocks. The ratio of squared errors is read as
    Fisher's F; the two share their data and so differ less than independent ones, which makes the test cautious.
    None where blocks of ten tau do not fit.
    """
    per_chain = max(4, -(-LONG_BLOCKS // samples.chains))
    length = samples.bins // per_chain
    if result.error == 0 or length == 0 or length * samples.block < BLOCK_IN_TAU * result.tau:
        return None
    blocks = block_means(samples.project(gradient), length)
    count = len(blocks)
    error = float(blocks.std(ddof=1) / np.sqrt(count))
    ratio = (error / result.error) ** 2
    tail = float(fdtrc(count - 1, result.freedom, ratio))
    return CrossCheck(error, length * samples.block, count, 2 * min(tail, 1 - tail))


def warnings(samples: Samples, estimates: Sequence[Estimate], labels: Sequence[str]) -> tuple[str, ...]:
    """What a reader has to know before relying on the numbers, a sentence each; empty where there is nothing.

    Parameters
    ----------
    samples
        What the estimates were made from.
    estimates
        The numbers of a report. Those without a gradient (not made from samples), and those withheld or without
        variance, are passed over.
    labels
        How the report calls them, in the same order.
    """
    if len(estimates) != len(labels):
        raise ValueError(f"{len(estimates)} estimates, but {len(labels)} labels")
    sampled = [(e, label) for e, label in zip(estimates, labels, strict=True) if e.gradient is not None and e.error]
    threshold = FALSE_ALARM_RATE / max(1, len(sampled))
    unresolved = [label for e, label in sampled if e.state == UNRESOLVED]
    few, early, apart, doubtful = [], [], [], []
    for e, label in sampled:
        if e.state == UNRESOLVED:
            continue
        assert e.gradient is not None  # kept by the list above; says so to the type checker
        result = gamma_method(samples, e.gradient)
        if result.n_eff < FEWEST_EFFECTIVE:
            few.append(f"{label} ({result.n_eff:.0f})")
        if result.replica_q is not None and result.replica_q < threshold:
            apart.append(f"{label} (probability {result.replica_q:.0e})")
        trend = thermalisation(samples, e.gradient)
        if trend is not None and trend.probability < threshold:
            early.append(f"{label} ({abs(trend.z):.1f} standard errors)")
        check = cross_check(samples, e.gradient, result)
        if check is not None and check.probability < threshold:
            doubtful.append(f"{label} (by {check.error / result.error - 1:+.0%} with blocks of {check.block} draws)")
    sentences = {
        "the autocorrelation time is not resolved, so there is no error to rely on: ": unresolved,
        f"the effective number of samples is under {FEWEST_EFFECTIVE}: ": few,
        "replicas disagree: ": apart,
        "warm-up was too short, the first fifth of the draws differs from the last half: ": early,
        "the jackknife error differs from the Gamma method's by more than both allow: ": doubtful,
    }
    return tuple(words + _listed(labels) for words, labels in sentences.items() if labels)


def _listed(labels: Sequence[str]) -> str:
    rest = len(labels) - SHOWN
    return ", ".join(labels[:SHOWN]) + (f" and {rest} more" if rest > 0 else "")
