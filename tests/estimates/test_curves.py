"""Curves and their covariance, the effective gap, several operators, fits of exponentials."""

import numpy as np
import pytest

from quarterturn.errors import EstimateError
from quarterturn.estimates.correlators import effective_gap
from quarterturn.estimates.curves import curve
from quarterturn.estimates.estimate import CurveEstimate
from quarterturn.estimates.fits import fit_exponentials
from quarterturn.estimates.operators import eigenvalue_energies, ground_vector


def exact_curve(t, value):
    return CurveEstimate(np.asarray(t, dtype=float), value, np.zeros(len(t)), np.zeros((len(t), len(t))))


def test_the_covariance_of_a_curve_is_that_of_its_means(simulated):
    """Three mixed AR(1) series: covariance of means 2 tau/N times the mixing, known; to 4 sigma over 60 runs."""
    rng = np.random.default_rng(50)
    mixing = np.array([[1.0, 0.0, 0.0], [0.9, 0.5, 0.0], [0.5, 0.5, 1.0]])
    exact = 2 * 4.5 / (16 * 512) * mixing @ mixing.T
    found = []
    for _ in range(60):
        x = simulated.autoregressive(rng, 0.8, (16, 512, 3)) @ mixing.T
        found.append(curve(simulated.binned(x, 4), np.arange(3), np.arange(3.0)).covariance)
    scatter = np.std(found, axis=0) / np.sqrt(60)
    assert np.all(np.abs(np.mean(found, axis=0) - exact) < 4 * scatter + 0.02 * exact)


def test_the_covariance_is_positive_with_as_many_times_as_blocks_allow(simulated):
    rng = np.random.default_rng(51)
    q = simulated.gaussian_path(rng, 0.5, (32, 64, 64), 0.2, 1.0)
    c = curve(simulated.binned(simulated.correlator(q, q), 4), np.arange(33), 0.2 * np.arange(33))
    assert np.linalg.eigvalsh(c.covariance).min() > -1e-12 * np.trace(c.covariance)
    assert np.sqrt(np.diag(c.covariance)) == pytest.approx(c.error)


def test_an_unresolved_time_marks_the_curve(simulated):
    rng = np.random.default_rng(52)
    c = curve(simulated.binned(simulated.autoregressive(rng, 0.995, (2, 100, 2)), 1), np.arange(2), np.arange(2.0))
    assert c.state == "unresolved" and "2 of 2 times" in c.remark


def test_effective_gap_of_a_cosh(outside):  # effmass-cosh-E0.35
    case = outside("effmass-cosh-E0.35")
    energy, period = float(case["parameters"]["E"]), float(case["parameters"]["T"])
    t = np.arange(13.0)
    c = exact_curve(t, np.cosh(energy * (t - period / 2)))
    logarithmic, periodic = effective_gap(c), effective_gap(c, period)
    assert logarithmic.value[3] == pytest.approx(float(case["value"]["log"]), rel=1e-10)
    assert periodic.value == pytest.approx(np.full(12, float(case["value"]["acosh"])), rel=1e-9)
    assert periodic.t == pytest.approx(t[:-1] + 0.5)
    assert effective_gap(c, period, spacing=3.0).value == pytest.approx(np.full(10, energy), rel=1e-9)


def test_effective_gap_beyond_half_the_period_and_across_it():
    t = np.arange(24.0)
    found = effective_gap(exact_curve(t, np.cosh(0.35 * (t - 12))), 24.0, spacing=1.0)
    assert found.value == pytest.approx(np.full(23, 0.35), rel=1e-9)
    across = effective_gap(exact_curve(t + 0.5, np.cosh(0.35 * (t - 11.5))), 24.0)
    assert np.isnan(across.value[11])  # 11.5 and 12.5: equal by symmetry, so they tell nothing
    assert np.isfinite(across.value[:11]).all()


def test_effective_gap_propagates_the_covariance():
    """Against differences of the gap itself."""
    t, period = np.arange(6.0), 16.0
    value = np.cosh(0.3 * (t - 8))
    root = np.random.default_rng(53).standard_normal((6, 6)) * 1e-3
    covariance = root @ root.T
    c = CurveEstimate(t, value, np.sqrt(np.diag(covariance)), covariance)
    jacobian = np.empty((5, 6))
    for i in range(6):
        step = np.eye(6)[i] * 1e-5
        above, below = (effective_gap(exact_curve(t, value + s * step), period).value for s in (1, -1))
        jacobian[:, i] = (above - below) / 2e-5
    assert effective_gap(c, period).covariance == pytest.approx(jacobian @ covariance @ jacobian.T, rel=1e-5)


def test_effective_gap_shows_no_point_where_there_is_none():
    t = np.arange(6.0)
    value = np.array([1.0, 0.5, -0.1, 0.2, 0.1, 0.12])
    error = np.array([0.01, 0.01, 0.01, 0.01, 0.08, 0.01])
    found = effective_gap(CurveEstimate(t, value, error, np.diag(error**2)), 20.0)
    # negative at 2, within its noise at 4 ; the error of an absent point is absent too
    assert np.isfinite(found.value).tolist() == [True, False, False, False, False]
    assert np.isnan(found.error[1:]).all() and np.isfinite(found.error[0])
    rising = effective_gap(exact_curve(t[:2], np.array([0.5, 1.0])), 20.0)
    assert np.isnan(rising.value[0])  # no cosh rises towards the middle


@pytest.mark.parametrize("spacing", [0.4, 0.0, 7.0, -1.0])
def test_a_spacing_that_does_not_fit_is_refused(spacing):
    with pytest.raises(EstimateError, match="spacing"):
        effective_gap(exact_curve(np.arange(6.0), np.ones(6)), spacing=spacing)


@pytest.mark.parametrize("name", ["gevp-2x2-exact", "gevp-2x3"])
def test_generalised_eigenvalues(outside, name):  # Lüscher and Wolff 1990
    case = outside(name)
    energies, v = np.array(case["parameters"]["E"]), np.array(case["parameters"]["v"])
    t = np.arange(11.0)
    matrices = np.einsum("in,jn,tn->tij", v, v, np.exp(-np.outer(t, energies)))
    for key, expected in case["value"].items():
        late, early = (int(part.split("=")[1]) for part in key.split(","))
        found = eigenvalue_energies(matrices, t, early)[late]
        assert found == pytest.approx([float(e) for e in expected], rel=1e-10)


def test_the_vector_of_the_lowest_state_kills_the_other_one():
    v, energies, t = np.array([[1.0, 0.5], [0.4, -1.2]]), np.array([0.3, 0.7]), np.arange(8.0)
    matrices = np.einsum("in,jn,tn->tij", v, v, np.exp(-np.outer(t, energies)))
    vector = ground_vector(matrices[2], matrices[4])
    assert vector @ v[:, 1] == pytest.approx(0, abs=1e-12)
    assert vector @ matrices[2] @ vector == pytest.approx(1)


def test_operators_that_are_one_and_the_same_are_refused():
    matrix = np.ones((2, 2))
    with pytest.raises(EstimateError, match="can't be told apart"):
        ground_vector(matrix - np.diag([0, 1e-9]), matrix / 2)


@pytest.mark.parametrize("name", ["nist-nls-Lanczos1", "nist-nls-Lanczos2"])
@pytest.mark.parametrize(("start", "digits"), [("start1", 4), ("start2", 6)])
def test_three_exponentials_to_certified_digits(outside, name, start, digits):  # NIST StRD, Lanczos
    case = outside(name)
    y, x = np.array(case["parameters"]["data"], dtype=float).T
    certified = np.array(case["value"]["b"], dtype=float)
    energies = np.sort(np.array(case["parameters"][start], dtype=float)[1::2])
    found = fit_exponentials(x, y, np.eye(len(x))[None], np.zeros(1), energies[None], None)
    assert found.arrived[0]
    assert found.energies[0] == pytest.approx(certified[1::2], rel=10.0**-digits)
    assert found.amplitudes[0] == pytest.approx(certified[::2], rel=10.0**-digits)
    residual = found.chi2[0]
    assert residual == pytest.approx(float(case["value"]["rss"]), rel=1e-2 if name.endswith("1") else 1e-6)


def test_the_slope_of_a_fit_is_its_derivative():
    """On data that the model fits exactly, where the linearised normal equations are exact."""
    t, period = np.arange(1.0, 11.0), 24.0

    def model(e, a):
        return a * (np.exp(-e * t) + np.exp(-e * (period - t)))

    data, whitening = model(0.3, 1.0) + model(0.9, 0.4), np.diag(1 / np.linspace(0.01, 0.05, 10))[None]

    def fit(y):
        return fit_exponentials(t, y, whitening, t[:1], np.array([[0.25, 1.0]]), period)

    base = fit(data)
    assert base.energies[0] == pytest.approx([0.3, 0.9], rel=1e-6)
    for i in range(10):
        step = 1e-6 * np.eye(10)[i]
        moved = (fit(data + step).energies[0, 0] - fit(data - step).energies[0, 0]) / 2e-6
        assert base.slope[0, i] == pytest.approx(moved, rel=1e-3, abs=1e-5)
