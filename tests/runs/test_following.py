"""What a spectrum can be asked beyond its measurements, and `propagate`: words in, words out."""

import numpy as np
import pytest

import quarterturn as qt
from quarterturn.errors import RequestError, SpectrumError
from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.propagation import BetweenEnds, GroundState, Propagated
from quarterturn.runs.spectrum import Levels

OSCILLATOR = "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2\nw = 1.3"


@pytest.fixture(scope="module")
def oscillator() -> Levels:
    return qt.levels(action(OSCILLATOR, "spring"), count=4)


@pytest.fixture(scope="module")
def quartic() -> DeclaredAction:
    return action("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 1\nlattice 100, a = 0.1", "quartic")


# --- Levels -----------------------------------------------------------------------------------------------------
def test_thermodynamics_of_the_oscillator(oscillator: Levels) -> None:
    found = oscillator.thermodynamics(2.0)
    x = 1.3 * 2.0
    assert found.partition == pytest.approx(1 / (2 * np.sinh(x / 2)), rel=1e-12)
    assert found.entropy == pytest.approx(x / np.expm1(x) - np.log(-np.expm1(-x)), rel=1e-11)
    assert found.heat_capacity == pytest.approx((x / 2 / np.sinh(x / 2)) ** 2, rel=1e-11)
    several = oscillator.thermodynamics([1.0, 2.0])
    assert several.free_energy[1] == pytest.approx(found.free_energy, rel=1e-13)
    assert oscillator.at(2.0).thermodynamics().energy == found.energy
    assert "S = beta (E - F)" in repr(found)
    assert len(several.report().curves) == 4
    assert not hasattr(found, "pressure")


def test_the_propagator_comes_twice(oscillator: Levels) -> None:
    """Mehler 1866."""
    w, beta, b, a = 1.3, 1.0, 0.3, -0.7
    s, c = np.sinh(w * beta), np.cosh(w * beta)
    exact = np.sqrt(w / (2 * np.pi * s)) * np.exp(-w * ((a * a + b * b) * c - 2 * a * b) / (2 * s))
    found = oscillator.propagator(b, a, beta)
    assert abs(found.value - exact) <= found.error
    assert abs(found.propagation.value - exact) <= found.propagation.error
    assert found.agreement <= 1
    assert "measured order   4.0" in repr(found)


def test_real_time_is_time_ordered_and_says_how(oscillator: Levels) -> None:
    t = np.array([-2.0, 0.7])
    found = oscillator.real_time("<q(t) q(0)>", t)
    assert found.value == pytest.approx(np.exp(-1.3j * np.abs(t)) / 2.6, abs=1e-12)
    assert "t (1 - i eps)" in repr(found)
    assert "split-operator propagation differ by" in repr(found)
    assert max(point.difference for point in found.turn) < 1e-10
    thermal = oscillator.at(2.0).real_time("<q(t) q(0)>", t)
    assert thermal.value.real == pytest.approx(np.cos(1.3 * t) / np.tanh(1.3) / 2.6, abs=1e-11)
    assert "no i eps" in thermal.prescription
    assert "Re &lt;q(t) q(0)&gt;" in found._repr_html_()


def test_connected_real_time_correlators_subtract_the_means() -> None:
    """q^2 of the oscillator: <T q^2(t) q^2(0)>_c = 2 G_F(t)^2."""
    found = qt.levels(action(OSCILLATOR)).real_time("<q(t)^2 q(0)^2> - <q^2>^2", [0.4, 1.5])
    assert found.value == pytest.approx(2 * (np.exp(-1.3j * found.t) / 2.6) ** 2, abs=1e-11)


def test_euclidean_products_of_many_factors(oscillator: Levels) -> None:
    """Wick's theorem: the connected four-point function of an oscillator vanishes."""
    four = oscillator.euclidean("<q(2) q(1.5) q(0.5) q(0)>")
    g = {t: np.exp(-1.3 * t) / 2.6 for t in (0.5, 1.0, 1.5, 2.0)}
    assert four == pytest.approx(g[0.5] ** 2 + g[1.5] ** 2 + g[2.0] * g[1.0], rel=1e-11)
    assert oscillator.euclidean("<q(2) q(1.5) q(0.5) q(0)>_c") == pytest.approx(0, abs=1e-13)
    assert oscillator.at(3.0).euclidean("<q(2) q(1.5) q(0.5) q(0)>_c") == pytest.approx(0, abs=1e-13)
    measured = qt.levels(action(f"{OSCILLATOR}\nmeasure <q(2) q(1.5) q(0.5) q(0)>"))
    assert list(measured) != []
    assert measured[next(iter(measured))] == pytest.approx(four, rel=1e-12)


def test_spectral_lines_and_their_sums(quartic: DeclaredAction) -> None:
    spectrum = qt.levels(quartic)
    found = spectrum.spectral("q")
    assert found.frequencies[0] == pytest.approx(spectrum.energies[1] - spectrum.energies[0], rel=1e-11)
    assert found.weights[0] == pytest.approx(spectrum.matrix_element("q", 0, 1) ** 2, rel=1e-11)
    assert found.moment(1) == pytest.approx(0.5, rel=1e-11)
    omega = np.linspace(-5, 20, 4001)
    area = np.sum(found.broadened(omega, 0.1)) * (omega[1] - omega[0])
    assert area == pytest.approx(found.moment(0), rel=1e-6)
    assert "weight at 1.934" in repr(found)
    assert "none: no weight stands out" in repr(spectrum.spectral("q^2", "q"))


def test_response_to_a_source(oscillator: Levels, quartic: DeclaredAction) -> None:
    found = oscillator.response("q", frequencies=[0.5], width=0.0)
    assert found.values == pytest.approx([1 / (1.69 - 0.25)], rel=1e-11)
    assert found.static == pytest.approx(1 / 1.69, rel=1e-11)
    t = np.linspace(0, 30, 601)
    slow = found.to(t, np.minimum(t / 20, 1.0))
    assert slow[-1] == pytest.approx(1 / 1.69, abs=0.05)
    assert found.in_time(0.4)[0] == pytest.approx(np.sin(1.3 * 0.4) / 1.3, rel=1e-10)
    shown = qt.levels(quartic).response("q^2", "q^2")
    assert shown.values.imag.max() > 10 * abs(shown.static)  # a line of the width asked for
    assert "H - J g" in repr(shown)


def test_two_paths_have_all_of_it_too() -> None:
    """An isotropic oscillator: the angular average of q[1] is that of one oscillator."""
    both = qt.levels(action("q[2](t)\nL = 1/2 q'.q' - 1/2 w^2 q.q\nw = 1.3"), count=3)
    lines = both.spectral("q[1]")
    assert lines.frequencies[0] == pytest.approx(1.3, rel=1e-8)
    assert lines.weights[0] == pytest.approx(1 / 2.6, rel=1e-8)
    t = np.array([-0.5, 1.0])
    found = both.real_time("<q[1](t) q[1](0)>", t)
    assert found.value == pytest.approx(np.exp(-1.3j * np.abs(t)) / 2.6, abs=1e-8)
    assert both.thermodynamics(2.0).partition == pytest.approx((2 * np.sinh(1.3)) ** -2, rel=1e-8)
    kernel = both.propagator((0.3, 0.1), (-0.7, 0.2), 1.0)
    assert abs(kernel.levels.value - kernel.propagation.value) <= kernel.error + kernel.propagation.error


def test_what_can_not_be_asked_is_refused(oscillator: Levels, quartic: DeclaredAction) -> None:
    with pytest.raises(RequestError, match="has the free time t"):
        oscillator.real_time("<q(1) q(0)>", [1.0])
    with pytest.raises(RequestError, match="two times"):
        oscillator.real_time("<q(t) q(1) q(0)>", [1.0])
    with pytest.raises(RequestError, match="times must be a list of finite numbers"):
        oscillator.real_time("<q(t) q(0)>", [np.inf])
    with pytest.raises(RequestError, match="fixed times only"):
        oscillator.euclidean("<q(t) q(0)>")
    with pytest.raises(RequestError, match="x is not declared"):
        oscillator.spectral("x")
    with pytest.raises(RequestError, match="operator ordering"):
        oscillator.spectral("p")
    with pytest.raises(RequestError, match="one measurement is expected"):
        oscillator.real_time("<q(t) q(0)>, <q>", [1.0])
    with pytest.raises(RequestError, match="width must not be negative"):
        oscillator.response("q", width=-1.0)
    with pytest.raises(RequestError, match="infinite there"):
        oscillator.response("q", frequencies=[oscillator.response("q").lines.frequencies[0]], width=0.0)
    with pytest.raises(RequestError, match="ascending times"):
        oscillator.response("q").to([0.0, 1.0], [1.0])
    with pytest.raises(RequestError, match="beta is missing"):
        oscillator.thermodynamics()
    with pytest.raises(RequestError, match="beta must be a positive imaginary time"):
        oscillator.propagator(0.0, 0.0)
    with pytest.raises(RequestError, match="q_b must be a point of 1 finite numbers"):
        oscillator.propagator(np.nan, 0.0, 1.0)
    with pytest.raises(RequestError, match="no continuous time"):
        qt.levels(quartic, spacing="lattice").spectral("q")


# --- propagate --------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(("scheme", "order"), [("second", 2), ("fourth", 4)])
def test_the_ground_state_by_evolution(quartic: DeclaredAction, scheme: str, order: int) -> None:
    found = qt.propagate(quartic, scheme=scheme)
    assert isinstance(found, GroundState)
    exact = qt.levels(quartic).energies[0]
    assert abs(found.energy - exact) <= found.error + 1e-12
    assert found.order == pytest.approx(order, abs=0.05)
    assert f"measured order                                    {order}.00" in repr(found)
    assert len(found.report().curves) == 2


def test_a_state_evolves_towards_the_vacuum() -> None:
    """A displaced Gaussian of the oscillator stays one: <H> falls as in closed form."""
    found = qt.propagate(action(OSCILLATOR), start=lambda q: np.exp(-1.3 * (q - 1) ** 2 / 2), beta=0.8)
    assert isinstance(found, Propagated)
    centre = np.exp(-1.3 * 0.8)  # of the coherent state
    assert found.energy == pytest.approx(1.3 / 2 + 1.69 * centre**2 / 2, rel=1e-10)
    assert found.order == pytest.approx(4, abs=0.05)


def test_two_paths_propagate() -> None:
    act = action("q[2](t)\nL = 1/2 q'.q' - 1/2 q.q - 1/2 q[1]^2 q[2]^2")
    ground = qt.propagate(act)
    assert ground.energy == pytest.approx(1.0979590426, abs=2e-10)  # two-dof-x2y2 of the outside values
    between = qt.propagate(act, start=(0.3, 0.2), end=(-0.7, 0.0), beta=1.0)
    assert isinstance(between, BetweenEnds)
    back = qt.propagate(act, start=(-0.7, 0.0), end=(0.3, 0.2), beta=1.0, scheme="second")
    assert abs(between.value - back.value) <= between.error + 2 * back.error
    assert "from (0.3, 0.2) to (-0.7, 0)" in repr(between)


def test_propagation_that_can_not_be_is_refused(quartic: DeclaredAction) -> None:
    with pytest.raises(RequestError, match="scheme must be 'second' or 'fourth'"):
        qt.propagate(quartic, scheme="third")
    with pytest.raises(RequestError, match="a state to start from is missing"):
        qt.propagate(quartic, beta=1.0)
    with pytest.raises(RequestError, match="beta must be a positive imaginary time"):
        qt.propagate(quartic, start=np.cos)
    with pytest.raises(RequestError, match="end is missing"):
        qt.propagate(quartic, start=1.0, beta=1.0)
    with pytest.raises(RequestError, match="a point of 1 finite numbers"):
        qt.propagate(quartic, start=1.0, end=(1.0, 2.0), beta=1.0)
    with pytest.raises(RequestError, match="finite everywhere and not zero"):
        qt.propagate(quartic, start=lambda q: 0 * q, beta=1.0)
    with pytest.raises(RequestError, match="no coupling mu"):
        qt.propagate(quartic, mu=1.0)
    with pytest.raises(SpectrumError, match="3 degrees of freedom"):
        qt.propagate(action("q[3](t)\nL = 1/2 q'.q' - 1/2 q.q"))
    with pytest.raises(SpectrumError, match="does not fall off"):
        qt.propagate(quartic, start=lambda q: 1 + 0 * q, beta=1.0)


def test_laboratory_units_are_carried() -> None:
    """A bond in amu, angstrom and 1/cm: levels, evolution and series say one number, and its unit."""
    bond = action("units amu, angstrom, 1/cm\nq(t)\nL = 1/2 m q'^2 - 1/2 k q^2 - lam q^4\nm = 1, k = 5000, lam = 300")
    spectrum = qt.levels(bond, count=3)
    ground, series = qt.propagate(bond), qt.series(bond, order=20, coupling="lam")
    assert ground.energy == pytest.approx(spectrum.energies[0], rel=1e-12)
    assert abs(series["Borel-Padé"].value - spectrum.energies[0]) <= series["Borel-Padé"].error + spectrum.errors[0]
    assert {row.unit for row in (*ground.report().rows, *series.report().rows) if row.value} == {"1/cm"}
    assert spectrum.real_time("<q(t) q(0)>", [0.0]).value[0] == pytest.approx(spectrum.euclidean("<q^2>"), rel=1e-11)
    assert "energies in 1/cm" in repr(spectrum.thermodynamics(0.002))
