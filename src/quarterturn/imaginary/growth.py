"""How the coefficients of a series grow at large order: a_n ~ C Gamma(s n + b) / S^n, read off exact coefficients.

The three numbers come from ratios of neighbours, extrapolated in 1/n by Richardson's method in decimal arithmetic; the
error of each is the change from one extrapolation to the next. Leading behaviour and its origin in the instanton:
Bender and Wu, Phys. Rev. D 7 (1973) 1620.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from decimal import Decimal, localcontext

FEWEST = 24  # coefficients
DIGITS = 120
STEPS = (4, 6, 8, 10, 12, 16, 20)  # orders of extrapolation that are tried
BERNOULLI = ((1, 6), (-1, 30), (1, 42), (-1, 30), (5, 66), (-691, 2730), (7, 6), (-3617, 510))  # B_2, B_4, …


@dataclass(frozen=True)
class Growth:
    """a_n ~ constant Gamma(rate n + offset) / singularity^n, each number with an error estimate.

    `singularity` is where the Borel transform with (rate n)! is singular, in the variable of the series: negative for
    a series of alternating signs.
    """

    rate: int
    singularity: float
    singularity_error: float
    offset: float
    offset_error: float
    constant: float
    constant_error: float


def large_orders(series: Sequence[Decimal], rate: int) -> Growth | None:
    """The growth of coefficients, for a known rate; None where there are too few or they show no such growth."""
    if rate < 1 or len(series) < FEWEST or not all(series[len(series) // 2 :]):
        return None
    with localcontext(prec=DIGITS):
        reduced = [+a / math.factorial(rate * n) for n, a in enumerate(series)]
        ratio = {n: reduced[n] / reduced[n - 1] for n in range(len(series) // 2, len(series))}
        last = len(series) - 1
        inverse, inverse_error = _limit(lambda n: ratio[n], last)
        if not inverse or 100 * inverse_error > abs(inverse):
            return None
        # Gamma(s n + b) / (s n)! ~ (s n)^(b - 1): the ratio is (1 + (b - 1) / n + …) / S
        slope, slope_error = _limit(lambda n: n * (n - 1) * (ratio[n - 1] - ratio[n]), last)
        offset, offset_error = slope / inverse + 1, slope_error / abs(inverse)
        constant, constant_error = _limit(lambda n: reduced[n] / inverse**n * _over(rate * n, offset), last)
        inherited = last * inverse_error / abs(inverse) + offset_error * Decimal(rate * last).ln()
        return Growth(
            rate,
            float(1 / inverse),
            float(inverse_error / inverse**2),
            float(offset),
            float(offset_error),
            float(constant),
            float(constant_error + inherited * abs(constant)),
        )


def _limit(sequence: Callable[[int], Decimal], last: int) -> tuple[Decimal, Decimal]:
    """lim f(n) for f = f_0 + f_1/n + … from the last values; and what one value or one power of 1/n fewer changes."""
    found = []
    for k in STEPS:
        if last - k - 1 <= last // 2 + 1:
            break
        value = _richardson(sequence, last - k, k)
        changes = (value - _richardson(sequence, last - k - 1, k), value - _richardson(sequence, last - k + 1, k - 1))
        found.append((sum(map(abs, changes), Decimal(0)), value))
    error, value = min(found)
    return value, error


def _richardson(sequence: Callable[[int], Decimal], n: int, k: int) -> Decimal:
    """sum_j (-1)^(j+k) (n + j)^k f(n + j) / (j! (k - j)!)."""
    total = Decimal(0)
    for j in range(k + 1):
        weight = Decimal((n + j) ** k) / (math.factorial(j) * math.factorial(k - j))
        total += (-1) ** (j + k) * weight * sequence(n + j)
    return total


def _over(x: int, offset: Decimal) -> Decimal:
    """Gamma(x + 1) / Gamma(x + offset) for large x."""
    return (_log_gamma(Decimal(x + 1)) - _log_gamma(x + offset)).exp()


def _log_gamma(x: Decimal) -> Decimal:
    """log Gamma(x) - log(2 pi) / 2 by Stirling's series; beyond x = 20 its terms leave less than 1e-20."""
    total, power = (x - Decimal(1) / 2) * x.ln() - x, x
    for k, (above, below) in enumerate(BERNOULLI, 1):
        total += Decimal(above) / (below * 2 * k * (2 * k - 1) * power)
        power *= x * x
    return total
