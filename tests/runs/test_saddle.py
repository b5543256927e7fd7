"""`saddle` end to end: instantons, bounces, temperatures, fields, records, and what is refused."""

import math
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq, minimize

from quarterturn.errors import ActionError, RequestError, SaddleError
from quarterturn.records.verdict import compare
from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.saddle import saddle
from quarterturn.runs.spectrum import levels
from quarterturn.runs.verification import rerun
from quarterturn.saddles.cosine import at
from quarterturn.saddles.radial import radial_bounce

sys.path.insert(0, str(Path(__file__).parents[1] / "outside"))
from values import value


@pytest.fixture(scope="module")
def well() -> DeclaredAction:
    return action("q(t)\nL = 1/2 q'^2 - lam (q^2 - v2)^2\nlam = 1, v2 = 1", "well")


@pytest.fixture(scope="module")
def pendulum() -> DeclaredAction:
    return action("theta(t) mod 2 pi\nL = 1/2 theta'^2 - K (1 - cos(theta))\nK = 1", "pendulum")


@pytest.fixture(scope="module")
def cubic() -> DeclaredAction:
    return action("q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 (1 - q/q0)\nw = 1, q0 = 3", "cubic")


# --- against closed forms ---------------------------------------------------------------------------------------
@pytest.mark.parametrize("v2", [1, 2])
def test_the_double_well_has_its_exact_instanton(well: DeclaredAction, v2: int) -> None:
    """Coleman, The Uses of Instantons (1979)."""
    exact = {key: float(v) for key, v in value(f"inst-dw-lam1-v2{v2}")["value"].items()}
    found = saddle(well, v2=v2)
    assert found.kind == "instanton"
    assert found["S"] == pytest.approx(exact["S0"], rel=1e-11)
    assert found["omega"] == pytest.approx(exact["w"], rel=1e-12)
    assert found["det'/det_0"] == pytest.approx(exact["detratio"], rel=1e-9)
    assert found["det'/det_0, on a lattice"] == pytest.approx(exact["detratio"], rel=1e-5)
    assert found["K exp(-S)"] == pytest.approx(exact["density"], rel=1e-8)
    assert (found["negative modes"], found["zero modes"]) == (0, 1)
    spread = 2 / exact["w"] * math.sqrt((math.pi**2 - 6) / 12)  # of t, weighted with sech^4(w t / 2)
    assert found["duration"] == pytest.approx(spread, rel=1e-9)
    profile = math.sqrt(v2) * np.tanh(exact["w"] * found.t / 2)
    assert np.abs(found.path[0]) == pytest.approx(np.abs(profile), abs=1e-8)


@pytest.mark.parametrize("strength", [1, 4])
def test_the_pendulum_has_its_exact_band(pendulum: DeclaredAction, strength: int) -> None:
    """The leading width of the lowest Mathieu band, DLMF 28.8."""
    exact = {key: float(v) for key, v in value(f"inst-cos-K{strength}")["value"].items()}
    found = saddle(pendulum, K=strength)
    assert found["S"] == pytest.approx(exact["S0"], rel=1e-11)
    assert found["width of the band"] == pytest.approx(exact["lead"], rel=1e-8)


def test_the_cubic_bounce_has_its_exact_rate(cubic: DeclaredAction) -> None:
    """Caldeira and Leggett, Ann. Phys. 149 (1983) 374."""
    exact = {key: float(v) for key, v in value("bounce-cubic-w1-x03")["value"].items()}
    found = saddle(cubic)
    assert found.kind == "bounce"
    assert found["S"] == pytest.approx(exact["B"], rel=1e-11)
    assert found["V_b"] == pytest.approx(exact["Vb"], rel=1e-12)
    assert found["decay rate"] == pytest.approx(exact["Gamma"], rel=1e-8)
    assert found["lambda_-"] == pytest.approx(-1.25, abs=1e-6)  # of -d^2 + 1 - 3 sech^2(t/2)
    assert (found["negative modes"], found["zero modes"]) == (1, 1)
    assert found["decay rate"] == pytest.approx(float(value("bounce-cubic-exact-q03")["value"]["lead"]), rel=1e-8)


@pytest.mark.parametrize("g", ["0.05", "0.08"])
def test_the_inverted_quartic_decays_to_both_sides(g: str) -> None:
    """Bender and Wu, Phys. Rev. D 7 (1973) 1620: |Im E| = Gamma/2 = sqrt(2 / pi g) exp(-1/3g)."""
    exact = {key: float(v) for key, v in value(f"bounce-invquartic-g{g}")["value"].items()}
    found = saddle(action("q(t)\nL = 1/2 q'^2 - 1/2 q^2 + g q^4\ng = 0.1"), g=float(g))
    assert found["S"] == pytest.approx(exact["SB"], rel=1e-8)
    rate = found["decay rate"]
    assert rate is not None
    assert rate / 2 == pytest.approx(exact["lead"], rel=1e-8)


def test_several_barriers_in_a_row_are_passed_in_one_bounce() -> None:
    """S = 2 int sqrt(2 V) dq up to the turning point, by SciPy's quadrature."""

    def potential(q: float) -> float:
        return q**2 / 2 * (1 - q / 6) + (1 - math.cos(3 * q)) / 2

    end = brentq(potential, 5, 6.5)
    exact = 2 * quad(lambda q: math.sqrt(2 * max(potential(q), 0)), 0, end, limit=400)[0]
    bumpy = action("q(t)\nL = 1/2 q'^2 - 1/2 q^2 (1 - q/6) - (1 - cos(3 q))/2")
    found = saddle(bumpy, vacuum=0)
    assert found["S"] == pytest.approx(exact, rel=1e-9)
    assert found["negative modes"] == 1


def test_a_curved_valley_agrees_with_minimising_the_lattice_action() -> None:
    """Two coupled paths, by SciPy's minimiser on three lattices, extrapolated; none of our code."""
    k, c, length = 2.0, 0.4, 14.0

    def potential(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        return (x**2 - 1) ** 2 + k / 2 * (y - c * x) ** 2 * (1 + x**2) + 0.3 * (y - c * x) * (1 - x**2)

    def slope(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        w = y - c * x
        fy = k * w * (1 + x**2) + 0.3 * (1 - x**2)
        return 4 * x * (x**2 - 1) + k * w**2 * x - 0.6 * w * x - c * fy, fy

    def least(sites: int) -> float:
        a = length / sites
        t = (np.arange(sites + 1) - sites / 2) * a
        start = np.stack([np.tanh(t), c * np.tanh(t)])
        start[:, [0, -1]] = np.array([[-1.0, 1.0], [-c, c]])

        def cost(free: np.ndarray) -> tuple[float, np.ndarray]:
            path = start.copy()
            path[:, 1:-1] = free.reshape(2, -1)
            step = np.diff(path, axis=1)
            total = np.sum(step**2) / (2 * a) + a * np.sum(potential(*path))
            force = a * np.stack(slope(*path))[:, 1:-1] - np.diff(step, axis=1) / a
            return float(total), force.ravel()

        options = {"maxiter": 20000, "maxfun": 40000, "ftol": 1e-15, "gtol": 1e-9}
        return float(minimize(cost, start[:, 1:-1].ravel(), jac=True, method="L-BFGS-B", options=options).fun)

    coarse, fine = least(100), least(200)
    valley = action(
        "x(t)\ny(t)\nL = 1/2 x'^2 + 1/2 y'^2 - V(x, y)\n"
        f"V(x, y) = (x^2 - 1)^2 + {k}/2 (y - {c} x)^2 (1 + x^2) + 0.3 (y - {c} x) (1 - x^2)"
    )
    assert saddle(valley)["S"] == pytest.approx(fine + (fine - coarse) / 3, rel=2e-5)


# --- against what else this program knows ----------------------------------------------------------------------
def test_the_splitting_agrees_with_levels_in_the_semiclassical_limit(well: DeclaredAction) -> None:
    """E_1 - E_0 = 2 K exp(-S) [1 - (71/72)/S - (6299/10368)/S^2 ...]: Zinn-Justin and Jentschura, Ann. Phys. 313
    (2004) 197, with their g = 1/(6 S); so (1 - exact/one loop) S tends to 71/72 from above, linearly in 1/S."""
    sizes, defects = [], []
    for lam in (0.4, 0.3, 0.2):  # at fixed w^2 = 8 lam v2 = 8
        found = saddle(well, lam=lam, v2=1 / lam)
        spectrum = levels(well, lam=lam, v2=1 / lam, count=2)
        exact = float(spectrum.energies[1] - spectrum.energies[0])
        action_, splitting = found["S"], found["E_1 - E_0"]
        assert action_ is not None and splitting is not None
        sizes.append(1 / action_)
        defects.append((1 - exact / splitting) * action_)
    line = np.polynomial.Polynomial.fit(sizes, defects, 2).convert()
    assert line.coef[0] == pytest.approx(71 / 72, rel=0.02)


def test_two_coupled_paths_reduce_to_one(well: DeclaredAction) -> None:
    """A spectator with its own oscillator changes neither action nor splitting."""
    pair = action("x(t)\ny(t)\nL = 1/2 x'^2 + 1/2 y'^2 - (x^2 - 1)^2 - 9/2 y^2")
    one, two = saddle(well), saddle(pair)
    assert two["S"] == pytest.approx(one["S"], rel=1e-10)
    assert two["E_1 - E_0"] == pytest.approx(one["E_1 - E_0"], rel=1e-7)


def test_a_hill_between_the_wells_is_passed_on_both_sides() -> None:
    """The straight path over a high hill is no minimum; two mirrored ones are, and the splitting counts both."""
    hill = action("x(t)\ny(t)\nL = 1/2 x'^2 + 1/2 y'^2 - 10 (x^2 + y^2 - 1)^2 - 5 y^2")
    found = saddle(hill)
    assert np.max(np.abs(found.path[1])) > 0.3
    assert found["negative modes"] == 0
    assert found["E_1 - E_0"] == pytest.approx(4 * (found["K exp(-S)"] or 0), rel=1e-12)


# --- temperatures -----------------------------------------------------------------------------------------------
def test_above_the_crossover_the_path_rests_on_the_barrier(cubic: DeclaredAction) -> None:
    """Affleck, Phys. Rev. Lett. 46 (1981) 388; T_c = omega_b / 2 pi, here omega_b = 1."""
    found = saddle(cubic, beta=3)
    assert found["T_c"] == pytest.approx(1 / (2 * math.pi), rel=1e-12)
    assert found.kind == "static"
    expected = math.sinh(1.5) / math.sin(1.5) * math.exp(-2) / (2 * math.pi)
    assert found["decay rate"] == pytest.approx(expected, rel=1e-12)
    classical = saddle(cubic, beta=1e-3)["decay rate"]
    assert classical == pytest.approx(math.exp(-1e-3 * 2 / 3) / (2 * math.pi), rel=1e-6)


def test_below_the_crossover_bounces_are_periodic_and_tend_to_the_cold_one(cubic: DeclaredAction) -> None:
    cold = saddle(cubic)
    actions, rates = zip(
        *[(f["S"], f["decay rate"]) for f in (saddle(cubic, beta=b) for b in (8, 12, 16, 200))], strict=True
    )
    assert list(actions) == sorted(actions)
    assert all(a <= cold["S"] * (1 + 1e-12) for a in actions)
    assert list(rates) == sorted(rates, reverse=True)
    assert rates[-1] == pytest.approx(cold["decay rate"], rel=1e-9)
    assert rates[2] == pytest.approx(cold["decay rate"], rel=1e-3)


def test_the_slope_of_the_thermal_action_is_the_energy(cubic: DeclaredAction) -> None:
    """dS/dbeta = E, the energy of the periodic orbit (Hamilton and Jacobi)."""
    low, high = saddle(cubic, beta=7.999), saddle(cubic, beta=8.001)
    middle = saddle(cubic, beta=8.0)
    assert low["S"] is not None and high["S"] is not None
    turning = float(at(middle.path[:, len(middle.t) // 2 :], np.zeros(1))[0, 0])
    energy = 0.5 * turning**2 * (1 - turning / 3)
    assert (high["S"] - low["S"]) / 0.002 == pytest.approx(energy, rel=1e-4)


def test_the_thermal_rate_agrees_with_the_period_of_the_orbit(cubic: DeclaredAction) -> None:
    """Gamma = 2 sinh(omega beta/2) sqrt(|dE/dbeta| / 2 pi) exp(-S): the determinant of one path from the slope of its
    period alone (Dashen, Hasslacher and Neveu, Phys. Rev. D 10 (1974) 4114; Affleck 1981), here by differences of S."""
    h, beta = 0.02, 8.0
    low, middle, high = (saddle(cubic, beta=beta + k * h) for k in (-1, 0, 1))
    curvature = (high["S"] - 2 * middle["S"] + low["S"]) / h**2
    expected = 2 * math.sinh(beta / 2) * math.sqrt(abs(curvature) / (2 * math.pi)) * math.exp(-middle["S"])
    assert middle["decay rate"] == pytest.approx(expected, rel=1e-4)


@pytest.mark.parametrize("beta", [3.0, 8.0])
def test_a_spectator_does_not_change_a_thermal_rate(cubic: DeclaredAction, beta: float) -> None:
    pair = action("x(t)\ny(t)\nL = 1/2 x'^2 + 2 y'^2 - 1/2 x^2 (1 - x/3) - 3 y^2")
    one, two = saddle(cubic, beta=beta), saddle(pair, beta=beta)
    assert two.kind == one.kind
    assert two["S"] == pytest.approx(one["S"], rel=1e-10)
    assert two["decay rate"] == pytest.approx(one["decay rate"], rel=1e-7)


def test_next_to_the_crossover_the_rate_is_withheld(cubic: DeclaredAction) -> None:
    found = saddle(cubic, beta=6.4)
    assert found["decay rate"] is None
    assert "crossover" in repr(found)


# --- theta terms, units of length and mass ---------------------------------------------------------------------
def test_two_ways_around_a_circle_interfere(pendulum: DeclaredAction) -> None:
    """The levels of a rotor with two wells and a theta term, from this program's own spectrum."""
    rotor = action(
        "theta(t) mod 2 pi\nL = 1/2 theta'^2 - K (1 - cos(2 theta)) + vartheta/(2 pi) theta'\nK = 3, vartheta = 0"
    )
    for vartheta in (0.0, 2.0):
        found = saddle(rotor, vartheta=vartheta)
        energies = levels(rotor, vartheta=vartheta, count=2).energies
        ratio = float(energies[1] - energies[0]) / (found["E_1 - E_0"] or 0)
        assert ratio == pytest.approx(1 - 7 / 8 / (found["S"] or 1), abs=0.02)  # DLMF 28.8: 1 - 7/(16 h) of each width


@pytest.mark.parametrize("scale", [1e-5, 1e5])
@pytest.mark.parametrize("height", [1e-6, 1e6])
def test_no_scale_is_built_in(cubic: DeclaredAction, scale: float, height: float) -> None:
    """q0 -> s q0, V -> h V: with w^2 = h/s^2 the action is sqrt(h) s times that of h = s = 1."""
    w = math.sqrt(height) / scale
    assert saddle(cubic, q0=3 * scale, w=w)["S"] == pytest.approx(4.8 * math.sqrt(height) * scale, rel=1e-9)


# --- fields -----------------------------------------------------------------------------------------------------
@pytest.mark.parametrize(("coupling", "key"), [("1/4", "a"), ("1/4!", "b")])
def test_the_field_without_a_scale_has_its_exact_action(coupling: str, key: str) -> None:
    """Fubini, Nuovo Cim. A 34 (1976) 521; Lipatov, Sov. Phys. JETP 45 (1977) 216."""
    found = saddle(action(f"phi(t, x, y, z)\nL = 1/2 (d phi)^2 + {coupling} lam phi^4\nlam = 1"))
    assert found["S"] == pytest.approx(float(value("fubini-lam1")["value"][key]), rel=1e-8)
    assert any("every size" in w for w in found.warnings)


def test_a_field_between_two_vacua_tends_to_the_thin_wall_and_is_verified() -> None:
    """Coleman, Phys. Rev. D 15 (1977) 2929, with sigma = 2/3."""
    body = "phi(t, x)\nL = 1/2 (d phi)^2 - 1/8 (phi^2 - 1)^2 - eps/2 (phi - 1)\neps = 0.1\nlattice 16 x 16"
    found = saddle(action(body), eps=0.02)
    assert found["S"] == pytest.approx(math.pi * (2 / 3) ** 2 / 0.02, rel=0.004)
    assert found["S"] == pytest.approx(found["S, thin wall"], rel=0.004)
    assert compare(found.record, rerun(found.record)).answer == "identical"


@pytest.mark.parametrize(
    ("body", "words"),
    [
        ("phi[2](t, x)\nL = 1/2 d_mu phi . d^mu phi - 1/2 phi.phi", "one real scalar field; .* 2 real components"),
        ("phi(t, x)\nL = 1/2 (d phi)^2 - 1/8 (phi^2 - 1)^2", "level"),
        ("phi(t, x)\nL = 1/2 (d phi)^2 - 1/2 phi^2 - phi^4", "no barrier"),
        ("phi(t, x)\nL = 1/2 (d phi)^2 + phi^4", "no mass"),
    ],
)
def test_a_field_without_a_bounce_is_refused_with_the_reason(body: str, words: str) -> None:
    with pytest.raises(SaddleError, match=words):
        saddle(action(body))


def test_a_field_with_two_speeds_decays_by_a_bubble() -> None:
    """S scales with the product of the roots of the coefficients."""
    quick = action("phi(t, x, y)\nLE = 2 (d_t phi)^2 + 1/2 (d_x phi)^2 + 1/2 (d_y phi)^2 + 1/2 phi^2 - 1/6 phi^3")
    found = saddle(quick)
    unit = radial_bounce(quick.euclidean.potential, quick.euclidean.variables[0], {}, 3)
    assert found.kind == "field bounce"
    assert found["S"] == pytest.approx(2 * unit.action, rel=1e-9)
    assert found["radius"] == pytest.approx(2 * unit.radius, rel=1e-9)
    assert [c.style for c in found.curves] == ["path", "potential", "course"]
    with pytest.raises(RequestError, match="beta is for paths"):
        saddle(quick, beta=3)


# --- what is shown, recorded, verified -------------------------------------------------------------------------
@pytest.mark.parametrize("keywords", [{}, {"beta": 8.0}, {"beta": 3.0}, {"beta": 6.4}])
def test_a_record_is_made_again_bit_for_bit(cubic: DeclaredAction, keywords: dict[str, float]) -> None:
    first = saddle(cubic, q0=4, **keywords)
    assert compare(first.record, rerun(first.record)).answer == "identical"


def test_a_changed_number_is_found(well: DeclaredAction) -> None:
    found = saddle(well)
    record = {**found.record, "results": [dict(r) for r in found.record["results"]]}
    record["results"][0]["value"] *= 1 + 1e-6
    verdict = compare(record, rerun(record))
    assert verdict.answer == "different" and "S" in str(verdict)
    record["results"][0]["value"] = found["S"] * (1 + 1e-13)
    assert compare(record, rerun(record)).answer == "consistent"


def test_it_shows_itself(cubic: DeclaredAction) -> None:
    found = saddle(cubic)
    data, metadata = found._repr_mimebundle_()
    assert metadata["quarterturn"]["record"] == found.record
    assert "decay rate" in data["text/plain"] and "<svg" not in data["text/html"]
    assert r"\Gamma" in data["text/latex"]
    assert [c.style for c in found.curves] == ["path", "potential", "course"]
    with pytest.raises(RequestError, match="there is S, "):
        found["nothing"]


def test_small_actions_carry_a_warning(well: DeclaredAction) -> None:
    assert any("not large" in w for w in saddle(well, v2=1).warnings)
    assert not saddle(well, v2=2).warnings


def test_numbers_that_make_no_sense_are_withheld() -> None:
    """A splitting above omega, a rate above one decay for each swing, wells of different frequencies."""
    shallow = saddle(action("q(t)\nL = 1/2 q'^2 - 1/10 (q^2 - 1)^2"))
    assert shallow["K exp(-S)"] is None and "too shallow" in repr(shallow)
    slight = saddle(action("q(t)\nL = 1/2 q'^2 - (q^2 - 1)^2 + q/100"))
    assert slight["decay rate"] is None and "nearly level" in repr(slight)
    uneven = saddle(action("q(t)\nL = 1/2 q'^2 - (q^2 - 1)^2 (1 + q/10)"))
    assert uneven["K exp(-S)"] is None and "different frequencies" in repr(uneven)
    assert uneven["S"] == pytest.approx(1.885146045449, rel=1e-10)  # int sqrt(2 V) dq by quadrature


def test_instantons_in_a_row_are_not_taken_for_one() -> None:
    """Four level minima on a square: the way to the opposite corner passes a third one, or a hill."""
    square = action("x(t)\ny(t)\nL = 1/2 x'^2 + 1/2 y'^2 - 20 x^2 y^2 - 5 (x^2 + y^2 - 1)^2")
    found = saddle(square)
    ends = found.path[:, [0, -1]]
    assert abs(float(ends[:, 0] @ ends[:, 1])) < 1e-3  # to a neighbour
    assert found["negative modes"] == 0


def test_three_paths_and_a_mass_matrix(well: DeclaredAction) -> None:
    """V of the double well along one direction in a skewed frame: the same action, the same splitting."""
    skewed = action(
        "x(t)\ny(t)\nz(t)\nL = 1/2 (x' + y')^2 + 1/2 (y' - z')^2 + 1/2 z'^2 - ((x + y)^2 - 2)^2 - 8 (y - z)^2 - 9/2 z^2"
    )
    one, three = saddle(well, v2=2), saddle(skewed)
    assert three["S"] == pytest.approx(one["S"], rel=1e-9)
    assert three["E_1 - E_0"] == pytest.approx(one["E_1 - E_0"], rel=1e-6)


# --- what is refused --------------------------------------------------------------------------------------------
@pytest.mark.parametrize(
    ("body", "words"),
    [
        ("q(t)\nL = 1/2 q'^2 - 1/2 q^2", "no barrier .* levels"),
        ("q(t)\nL = 1/2 q'^2 - q^4", "no curvature .* levels"),
        ("q(t)\nL = 1/2 q'^2 + q^2", "no minimum"),
        ("r[2](t)\nL = 1/2 r'.r' - (r.r - 1)^2", "continuous family .* sample"),
        ("r[2](t)\nL = 1/2 r'.r' - 1/2 r.r + 1/10 (r.r)^2", "continuous family .* one path"),
        ("r[5](t)\nL = 1/2 r'.r' - 1/2 r.r", "up to 4 paths; there are 5 .* sample"),
        ("q(t)\nL = 1/2 q'^2 - 1/q^2 - q^2", "infinite wall"),
        ("q(t)\nL = 1/2 q'^2 - 1/2 (1 - exp(-q))^2", "no barrier"),
        ("q(t)\nL = 1/2 q'^2 - (abs(q) - 1)^2", "not resolved .* levels"),
        ("q(t)\nL = 1/2 q'^2 - (q^2 - 1)^2 + q/10^8", "nearly level .* levels"),
        ("x(t)\ny(t)\nL = 1/2 x'^2 + 1/2 y'^2 + x y' - (x^2 - 1)^2 - y^2", "linear in the velocity .* sample"),
        ("q(t)\nL = 1/2 q'^2 - (q^2 - 1)^2 (q - 3)^2 - 1/20 q^2", "vacuum="),
    ],
)
def test_what_has_no_saddle_is_refused_with_the_reason(body: str, words: str) -> None:
    with pytest.raises(SaddleError, match=words):
        saddle(action(body))


def test_a_wrong_sign_of_the_kinetic_term_is_still_an_error() -> None:
    with pytest.raises(ActionError, match="kinetic"):
        saddle(action("q(t)\nL = - 1/2 q'^2 - (q^2 - 1)^2"))


@pytest.mark.parametrize(
    ("keywords", "error", "words"),
    [
        ({"nothing": 1}, RequestError, "no coupling nothing"),
        ({"a": 0.1}, RequestError, "a has no meaning"),
        ({"beta": -1}, RequestError, "beta must be positive"),
        ({"beta": 9}, SaddleError, "nothing decays"),
        ({"kind": "kink"}, RequestError, "kind must be"),
        ({"kind": "bounce"}, SaddleError, "no bounce was found"),
        ({"vacuum": "left"}, RequestError, "vacuum must be"),
        ({"vacuum": (1, 2)}, RequestError, "vacuum must be one finite number"),
    ],
)
def test_a_bad_request_is_told(well: DeclaredAction, keywords: dict[str, Any], error: Any, words: str) -> None:
    with pytest.raises(error, match=words):
        saddle(well, **keywords)


def test_vacuum_chooses_the_minimum() -> None:
    triple = action("q(t)\nL = 1/2 q'^2 - q^2 (q^2 - 1)^2 - eps (q - q^3/6)\neps = 0.1")
    left = saddle(triple, vacuum=0.0)
    right = saddle(triple, vacuum=1.0)
    assert left.kind == right.kind == "bounce"
    assert left["S"] != pytest.approx(right["S"], rel=1e-3)
