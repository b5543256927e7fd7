"""log Z[J] against closed forms and against the n-point functions that are its derivatives."""

import numpy as np
import pytest
from scipy import stats

import quarterturn as qt
from quarterturn.lattice.sources import source_values
from quarterturn.runs.verification import rerun

SITES, SPACING, W = 48, 0.25, 1.3
OSCILLATOR = f"""q(t)
L = 1/2 q'^2 - 1/2 w^2 q^2 + J q
J(t) = j0 exp(-t^2)
w = {W}, j0 = 1
lattice {SITES}, a = {SPACING}
measure <q>, log Z[J]"""


def propagator() -> np.ndarray:
    """<q_i q_j> of the lattice oscillator, (N, N): 1/N sum_k cos(k (i - j)) / [(2/a)(1 - cos k) + a w^2].

    Creutz and Freedman, Ann. Phys. 132 (1981) 427, section 3.
    """
    k = 2 * np.pi * np.arange(SITES) / SITES
    row = np.fft.ifft(1 / ((2 / SPACING) * (1 - np.cos(k)) + SPACING * W**2)).real
    return np.array([[row[(i - j) % SITES] for j in range(SITES)] for i in range(SITES)])


def source() -> np.ndarray:
    return np.exp(-(((np.arange(SITES) - SITES // 2) * SPACING) ** 2))


def test_a_source_stands_in_the_middle_of_the_lattice() -> None:
    action = qt.action(OSCILLATOR)
    (values,) = source_values(action.euclidean.sources, {"j0": 2.0}, ("t",), (SITES,), (SPACING,))
    assert np.allclose(values, 2 * source())


def test_the_oscillator_has_the_closed_form_of_log_z() -> None:
    """log Z[J] = 1/2 sum a^2 J_i <q_i q_j> J_j (Feynman and Hibbs, 1965, eq. (7-33) on a lattice).

    Twelve seeds; chi-squared of the pulls, false alarm 1e-3 on either side; and the exact column against the form.
    """
    action = qt.action(OSCILLATOR)
    expected = SPACING**2 * source() @ propagator() @ source() / 2
    mean = SPACING * float(np.sum(propagator() @ source())) / SITES
    pulls, means = [], []
    for seed in range(12):
        run = qt.sample(action, draws=256, chains=16, seed=seed)
        e = run["log Z[J]"]
        assert e.exact == pytest.approx(expected, rel=1e-10)
        pulls.append((e.value - expected) / e.error)
        means.append((run["<q>"].value - mean) / run["<q>"].error)
    low, high = stats.chi2.ppf([5e-4, 1 - 5e-4], 12)
    assert low < np.sum(np.square(pulls)) < high
    assert low < np.sum(np.square(means)) < high


def test_derivatives_of_log_z_are_the_connected_functions() -> None:
    """(log Z[e J] + log Z[-e J])/e^2 is sum a^2 J J <q q>, whose fourth-order companion is its curvature in e.

    On the quartic path, whose exact column is computed independently of the sampler, at three strengths; the sampled
    second difference agrees with the sampled two-point function within 4 of their errors (false alarm below 1e-4).
    """
    text = f"""q(t)
    L = 1/2 q'^2 - 1/2 q^2 - q^4 + J q
    J(t) = j0 exp(-t^2)
    j0 = 1
    lattice {SITES}, a = {SPACING}
    measure log Z[J]"""
    silent = text.replace(" + J q", "").replace("log Z[J]", "<q(t) q(0)>").replace("J(t) = j0 exp(-t^2)\n", "")
    pair = qt.sample(qt.action(silent.replace("    j0 = 1\n", "")), draws=1024, chains=16, seed=3)["<q(t) q(0)>"]
    steps = [min((i - j) % SITES, (j - i) % SITES) for i in range(SITES) for j in range(SITES)]
    weight = np.bincount(steps, (SPACING**2 * np.outer(source(), source())).ravel(), minlength=len(pair.t))
    second, error = float(weight @ pair.value), float(np.sqrt(weight @ pair.covariance @ weight))
    exact = float(weight @ pair.exact)
    small = 0.2
    e = qt.sample(qt.action(text), j0=small, draws=512, chains=16, seed=4)["log Z[J]"]
    quartic = 2 * e.exact / small**2 - exact  # what the fourth derivative leaves, from exact numbers alone
    assert abs(quartic) < 0.05 * exact
    difference = 2 * e.value / small**2 - quartic - second
    assert abs(difference) < 4 * np.hypot(2 * e.error / small**2, error)


def test_a_changed_source_compiles_nothing_new_and_its_record_is_made_again() -> None:
    action = qt.action(OSCILLATOR)
    first = qt.sample(action, draws=128, chains=8, seed=1)
    second = qt.sample(action, draws=128, chains=8, seed=1, j0=0.5)
    assert second["log Z[J]"].exact == pytest.approx(first["log Z[J]"].exact / 4, rel=1e-9)
    again = rerun(second.record)
    assert again["results"] == second.record["results"]


def test_what_a_source_forbids_is_said() -> None:
    with pytest.raises(qt.RequestError, match="energy is not conserved"):
        qt.sample(qt.action(OSCILLATOR.replace("<q>,", "energy,")), draws=64)
    with pytest.raises(qt.ActionError, match="not a finite real number"):
        qt.sample(qt.action(OSCILLATOR.replace("exp(-t^2)", "log(t)")), draws=64)
