"""Monte Carlo against the exact value at the same spacing, over many settings; and the coverage of the error bars.

The exact values come from the transfer matrix (room `imaginary`, which is itself held against published and closed
values in its own tests) and, for the oscillator, from the closed form of Creutz and Freedman, Ann. Phys. 132 (1981)
427. Seeds are fixed; each test states how often it would fail with another seed.
"""

import math

import numpy as np
import pytest
from scipy import stats

from quarterturn.runs.declaration import action
from quarterturn.runs.sampling import sample

OSCILLATOR = "q(t)\nL = 1/2 m q'^2 - 1/2 m w^2 q^2\nm = 1, w = 1\nlattice 20, a = 0.5\nmeasure <q^2>"
QUARTIC = "q(t)\nL = 1/2 q'^2 - 1/2 w2 q^2 - lam q^4\nw2 = 1, lam = 1\nlattice 40, a = 0.2\nmeasure <q^2>"
WELL = "q(t)\nL = 1/2 q'^2 - lam (q^2 - v2)^2\nlam = 1, v2 = 1\nlattice 40, a = 0.2\nmeasure <q^2>"
SKEW = "q(t)\nL = 1/2 q'^2 - 1/2 q^2 - g q^3 - h q^4\ng = 0.2, h = 0.1\nlattice 32, a = 0.25\nmeasure <q>"
PENDULUM = (
    "theta(t) mod 2 pi\nL = 1/2 I theta'^2 + g cos(theta)\nI = 1, g = 1\nlattice 24, a = 0.25\nmeasure <cos(theta)>"
)

SETTINGS = [
    *((OSCILLATOR, {"w": w, "m": m}) for w, m in ((1, 1), (0.5, 1), (2, 0.5), (1, 3), (3, 1))),
    *((QUARTIC, {"lam": lam}) for lam in (0.01, 0.1, 0.5, 1, 10)),
    *((QUARTIC, {"w2": w2, "lam": 1}) for w2 in (0, -1, 4)),
    *((WELL, {"lam": lam, "v2": v2}) for lam, v2 in ((1, 1), (1, 2), (0.25, 4), (2, 1.5), (0.5, 0.5))),
    *((SKEW, {"g": g, "h": h}) for g, h in ((0.2, 0.1), (-0.3, 0.2), (0.5, 0.3), (0.0, 0.05))),
    *((PENDULUM, {"g": g, "I": inertia}) for g, inertia in ((1, 1), (0.3, 1), (3, 1), (1, 0.25))),
]


@pytest.fixture(scope="module")
def pulls() -> np.ndarray:
    actions = {text: action(text) for text in (OSCILLATOR, QUARTIC, WELL, SKEW, PENDULUM)}
    found = []
    for number, (text, couplings) in enumerate(SETTINGS):
        run = sample(actions[text], draws=256, seed=1000 + number, **couplings)
        (estimate,) = run.numbers.values()
        assert estimate.exact is not None, (text, couplings)
        assert estimate.state == "good", (text, couplings, run.warnings)
        found.append(estimate.pull)
    return np.array(found, dtype=float)


def test_there_are_more_than_twenty_settings() -> None:
    assert len(SETTINGS) > 20


def test_pulls_have_the_chi_squared_of_standard_normals(pulls: np.ndarray) -> None:
    """Two-sided, false alarm rate 1e-3."""
    probability = stats.chi2.sf(float(np.sum(pulls**2)), len(pulls))
    assert 5e-4 < probability < 1 - 5e-4, pulls


def test_pulls_are_distributed_as_standard_normals(pulls: np.ndarray) -> None:
    """Kolmogorov-Smirnov, false alarm rate 1e-3."""
    assert stats.kstest(pulls, "norm").pvalue > 1e-3, pulls


def lattice_oscillator(a: float, w: float, sites: int, m: float) -> float:
    """<q^2> in closed form: R = 1 + a^2 w^2/2 - a w sqrt(1 + a^2 w^2/4), Creutz and Freedman, section 3."""
    r = 1 + (a * w) ** 2 / 2 - a * w * math.sqrt(1 + (a * w) ** 2 / 4)
    return (1 + r**sites) / (1 - r**sites) / (2 * m * w * math.sqrt(1 + (a * w) ** 2 / 4))


@pytest.mark.parametrize(("a", "beta"), [(0.1, 4.0), (0.25, 4.0), (0.5, 10.0), (1.0, 12.0)])
def test_lattice_oscillator_agrees_with_its_closed_form(a: float, beta: float) -> None:
    """False alarm rate 6e-5 each (4 sigma); the exact column to rounding."""
    run = sample(action(OSCILLATOR), a=a, beta=beta, draws=256, seed=7)
    estimate = run["<q^2>"]
    closed = lattice_oscillator(a, 1.0, round(beta / a), 1.0)
    assert estimate.exact == pytest.approx(closed, rel=1e-10)
    assert abs(estimate.value - closed) < 4 * estimate.error


@pytest.mark.parametrize(
    ("text", "label"),
    [
        ("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 1\nlattice 16, a = 0.5\nmeasure <q^2>", "<q^2>"),
        ("q(t)\nL = 1/2 q'^2 - lam (q^2 - 1)^2\nlam = 1\nlattice 16, a = 0.5\nmeasure <q(0.5) q(0)>/<q^2>", None),
    ],
)
def test_one_sigma_covers_the_exact_value_in_68_percent_of_short_runs(text: str, label: str | None) -> None:
    """400 independent runs of 16 chains of 48 draws; binomial, false alarm rate 1e-3 (3.3 standard errors)."""
    act = action(text)
    label = label or act.measurements[0].label
    inside = 0
    for seed in range(400):
        estimate = sample(act, draws=48, chains=16, seed=seed)[label]
        assert estimate.error is not None and estimate.exact is not None
        inside += abs(estimate.value - estimate.exact) < estimate.error
    share, expected = inside / 400, math.erf(1 / math.sqrt(2))
    assert abs(share - expected) < 3.3 * math.sqrt(expected * (1 - expected) / 400), share
