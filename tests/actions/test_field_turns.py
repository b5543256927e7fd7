"""The turned actions of textbook field theories, each with its source, in either signature; indices that are wrong."""

import pytest

from quarterturn.actions.declare import declare
from quarterturn.actions.findings import check
from quarterturn.actions.printing import notation
from quarterturn.errors import ActionError

# declaration; L in the mostly minus metric; L_E that the source gives, in notation; couplings
TEXTBOOK = {
    # Peskin and Schroeder, An Introduction to Quantum Field Theory (1995), eqs. (2.6) and (9.47); free, D = 2
    "Klein-Gordon, D = 2": (
        "phi(t,x)", "1/2 (d phi)^2 - 1/2 m2 phi^2", "1/2 phi'^2 + 1/2 (d_x phi)^2 + 1/2 m2 phi^2", "m2 = 1",
    ),
    # the same, D = 3 (Zinn-Justin, Quantum Field Theory and Critical Phenomena, 4th ed. (2002), section 7.1)
    "phi^4, D = 3": (
        "phi(t,x,y)", "1/2 d_mu phi d^mu phi - 1/2 m2 phi^2 - lam/4! phi^4",
        "1/2 phi'^2 + 1/2 (d_x phi)^2 + 1/2 (d_y phi)^2 + 1/2 m2 phi^2 + 1/24 lam phi^4", "m2 = 1, lam = 1",
    ),
    # Peskin and Schroeder, eq. (4.12) and (9.47), D = 4
    "phi^4, D = 4": (
        "phi(t,x,y,z)", "1/2 (d phi)^2 - 1/2 m2 phi^2 - lam/4! phi^4",
        "1/2 phi'^2 + 1/2 (d_x phi)^2 + 1/2 (d_y phi)^2 + 1/2 (d_z phi)^2 + 1/2 m2 phi^2 + 1/24 lam phi^4",
        "m2 = 1, lam = 1",
    ),
    # Zinn-Justin (2002), section 14.1: the linear O(N) model
    "linear sigma model": (
        "phi[4](t,x)", "1/2 d_mu phi . d^mu phi - 1/2 m2 phi.phi - lam/4 (phi.phi)^2",
        "1/2 sum_a phi[a]'^2 + 1/2 sum_a (d_x phi[a])^2 + 1/2 m2 phi[a] phi[a] + lam/4 (phi[a] phi[a])^2",
        "m2 = 1, lam = 1",
    ),
    # Polyakov, Phys. Lett. B 59 (1975) 79: the nonlinear O(3) model
    "nonlinear sigma model": (
        "n[3](t,x), n.n = 1", "1/(2 g2) d_mu n . d^mu n", "1/(2 g2) n'.n' + 1/(2 g2) d_x n . d_x n", "g2 = 1",
    ),
    # Peskin and Schroeder, eq. (2.48) and section 9.1: a complex scalar
    "complex scalar": (
        "psi(t,x,y,z) complex", "d_mu conj(psi) d^mu psi - m2 |psi|^2 - lam |psi|^4",
        "|psi'|^2 + |d_x psi|^2 + |d_y psi|^2 + |d_z psi|^2 + m2 |psi|^2 + lam |psi|^4", "m2 = 1, lam = 1",
    ),
    # two scalars with a cubic coupling (Srednicki, Quantum Field Theory (2007), problem 10.2, in form)
    "Yukawa of two scalars": (
        "phi(t,x,y,z), chi(t,x,y,z)",
        "1/2 (d phi)^2 + 1/2 (d chi)^2 - 1/2 m2 phi^2 - 1/2 M2 chi^2 - g/2 chi phi^2 - lam phi^4 - eta chi^4",
        "1/2 phi'^2 + 1/2 (d_x phi)^2 + 1/2 (d_y phi)^2 + 1/2 (d_z phi)^2 + 1/2 chi'^2 + 1/2 (d_x chi)^2"
        " + 1/2 (d_y chi)^2 + 1/2 (d_z chi)^2 + 1/2 m2 phi^2 + 1/2 M2 chi^2 + 1/2 g chi phi^2 + lam phi^4 + eta chi^4",
        "m2 = 1, M2 = 2, g = 0.1, lam = 1, eta = 1",
    ),
    # sine-Gordon (Coleman, Phys. Rev. D 11 (1975) 2088, eq. (1.1))
    "sine-Gordon": (
        "theta(t,x) mod 2 pi", "1/2 k (d theta)^2 + g cos(theta)",
        "1/2 k theta'^2 + 1/2 k (d_x theta)^2 - g cos(theta)", "k = 1, g = 1",
    ),
    # quartic form with a symmetric tensor of couplings (Zinn-Justin (2002), section 11.1: cubic anisotropy)
    "tensor of couplings": (
        "phi[2](t,x)", "1/2 (d phi)^2 - 1/2 phi.phi - sum_a sum_b g[a,b] phi[a]^2 phi[b]^2",
        "1/2 phi'.phi' + 1/2 d_x phi . d_x phi + 1/2 phi.phi + g_11 phi[1]^4 + g_22 phi[2]^4"
        " + 2 g_12 phi[1]^2 phi[2]^2",
        "g = [[1, 0.5], [0.5, 2]]",
    ),
    # an external source (Peskin and Schroeder, eq. (9.34)): + J phi in L, so - J phi in L_E
    "source": (
        "phi(t,x)", "1/2 (d phi)^2 - 1/2 phi^2 + J phi", "1/2 phi'^2 + 1/2 (d_x phi)^2 + 1/2 phi^2 - J phi",
        "j0 = 1; J(t,x) = j0 exp(-t^2 - x^2)",
    ),
}  # fmt: skip


def body(fields: str, form: str, action: str, couplings: str, metric: str = "") -> str:
    lines = (fields, metric, f"{form} = {action}", *couplings.split("; "))
    return "\n".join(line for line in lines if line)


def flipped(lagrangian: str) -> str:
    """The same Lagrangian for a metric of the other sign: contractions of two derivatives change theirs."""
    words = lagrangian
    for contraction in ("(d phi)^2", "(d chi)^2", "(d theta)^2", "d_mu phi d^mu phi", "d_mu phi . d^mu phi",
                        "d_mu n . d^mu n", "d_mu conj(psi) d^mu psi"):  # fmt: skip
        words = words.replace(contraction, f"(-{contraction})")
    return words


@pytest.mark.parametrize("name", TEXTBOOK)
def test_the_turn_of_a_textbook_field_theory(name: str) -> None:
    fields, lagrangian, euclidean, couplings = TEXTBOOK[name]
    turned = declare(body(fields, "L", lagrangian, couplings)).euclidean
    assert turned.digest == declare(body(fields, "LE", euclidean, couplings)).euclidean.digest
    assert turned.phase is None


@pytest.mark.parametrize("name", TEXTBOOK)
def test_either_signature_gives_the_same_turned_action(name: str) -> None:
    fields, lagrangian, _, couplings = TEXTBOOK[name]
    minus = declare(body(fields, "L", lagrangian, couplings, "metric mostly minus"))
    plus = declare(body(fields, "L", flipped(lagrangian), couplings, "metric mostly plus"))
    assert flipped(lagrangian) != lagrangian
    assert plus.euclidean.digest == minus.euclidean.digest
    assert plus.metric == minus.metric.translate(str.maketrans("+-", "-+"))


@pytest.mark.parametrize("name", TEXTBOOK)
def test_canonical_notation_of_a_field_theory_parses_back(name: str) -> None:
    fields, lagrangian, _, couplings = TEXTBOOK[name]
    action = declare(body(fields, "L", lagrangian, couplings))
    values = "\n".join(f"{n} = {c.default}" for n, c in action.couplings.items())
    again = declare(f"{action.canonical}\n{values}")
    assert (again.digest, again.canonical) == (action.digest, action.canonical)
    assert again.euclidean.digest == action.euclidean.digest


def test_a_chemical_potential_becomes_the_phase() -> None:
    """S_E = int |(d_tau - mu) psi|^2 + ... (Kapusta and Gale, Finite-Temperature Field Theory (2006), section 2.4)."""
    text = (
        "psi(t,x) complex\nL = |psi' + i mu psi|^2 - |d_x psi|^2 - m2 |psi|^2 - lam |psi|^4\nmu = 0.5, m2 = 1, lam = 1"
    )
    euclidean = declare(text).euclidean
    assert notation(euclidean.potential).count("mu^2") == 2  # - mu^2 |psi|^2
    phase = euclidean.phase
    assert phase is not None
    assert notation(phase) in (
        "2 mu Im(psi) Re(psi)' - 2 mu Im(psi)' Re(psi)", "-2 mu Im(psi) Re(psi)' + 2 mu Im(psi)' Re(psi)",
    )  # fmt: skip
    assert any(f.topic == "phase" for f in euclidean.findings)


def test_a_rotating_frame_is_a_phase() -> None:
    """L in a frame that turns with omega (Landau and Lifshitz, Mechanics, section 39)."""
    text = """r[2](t)
    L = m/2 ((r[1]' - omega r[2])^2 + (r[2]' + omega r[1])^2) - k/2 r.r
    m = 1, omega = 0.3, k = 1"""
    euclidean = declare(text).euclidean
    assert notation(euclidean.phase or euclidean.potential) == "-m omega r[1] r[2]' + m omega r[1]' r[2]"


def test_the_wrong_signature_is_refused_and_named() -> None:
    text = "phi(t,x)\nmetric -+\nL = 1/2 (d phi)^2 - 1/2 phi^2"
    findings = [f for f in declare(text).euclidean.findings if f.severity == "fatal"]
    assert findings and findings[0].topic == "kinetic"


# body; what is underlined; a word of the complaint
WRONG_INDICES = {
    "down twice": ("phi(t,x)\nL = 1/2 d_mu phi d_mu phi - phi^2", "d_mu phi", "down"),
    "up twice": ("phi(t,x)\nL = 1/2 d^mu phi d^mu phi - phi^2", "d^mu phi", "up"),
    "squared": ("phi(t,x)\nL = 1/2 (d_mu phi)^2 - phi^2", "d_mu phi", "down"),
    "left over": ("phi[2](t,x)\nL = 1/2 (d phi)^2 - phi[a]", "phi[a]", "left over"),
    "in one term only": ("phi[2](t,x)\nL = 1/2 (d phi)^2 - h[a] (phi[a] + 1)\nh = [1, 2]", "", "left over"),
    "three times": ("phi[2](t,x)\nL = 1/2 (d phi)^2 - phi[a] phi[a] phi[a]", "phi[a]", "3 times"),
    "four times": ("phi[2](t,x)\nL = 1/2 (d phi)^2 - phi[a]^4", "phi[a]", "4 times"),
    "of two kinds": ("phi[2](t,x)\nL = 1/2 (d phi)^2 - phi[a] d_a phi[1]", "", "directions"),
    "of two lengths": ("phi[2](t,x), chi[3](t,x)\nL = 1/2 (d phi)^2 + 1/2 (d chi)^2 - phi[a] chi[a]", "", "2 and 3"),
    "of a direction that is not there": ("phi(t,x)\nL = 1/2 (d phi)^2 + d_y phi", "d_y phi", "depends on y"),
}


@pytest.mark.parametrize("name", WRONG_INDICES)
def test_a_wrong_index_is_underlined(name: str) -> None:
    text, place, word = WRONG_INDICES[name]
    with pytest.raises(ActionError) as caught:
        declare(text)
    complaint = caught.value
    assert word in complaint.message and complaint.span is not None
    underlined = text.split("\n")[complaint.span.line - 1][complaint.span.column - 1 : complaint.span.end_column - 1]
    assert place in underlined


def test_explicit_sums_and_tensors() -> None:
    one = declare("phi[3](t,x)\nL = 1/2 (d phi)^2 - lam sum_a phi[a]^4\nlam = 1")
    two = declare("phi[3](t,x)\nL = 1/2 (d phi)^2 - lam (phi[1]^4 + phi[2]^4 + phi[3]^4)\nlam = 1")
    assert one.digest == two.digest
    entries = declare("phi[2](t,x)\nL = 1/2 (d phi)^2 - g[a,b] phi[a] phi[b]\ng[1,1] = 1, g[1,2] = 0.5, g[2,2] = 2")
    array = declare("phi[2](t,x)\nL = 1/2 (d phi)^2 - g[a,b] phi[a] phi[b]\ng = [[1, 0.5], [0.5, 2]]")
    assert entries.digest == array.digest and set(array.couplings) == {"g_11", "g_12", "g_22"}


def test_a_lattice_action_is_sorted_into_sites_and_links() -> None:
    """phi^4 in the form of Montvay and Muenster, Quantum Fields on a Lattice (1994), eq. (2.9)."""
    text = """phi(t,x)
    SE = -2 kappa sum_mu phi phi(+mu) + phi^2 + lam (phi^2 - 1)^2
    kappa = 0.2, lam = 0.5
    lattice 8 x 8"""
    euclidean = declare(text).euclidean
    assert notation(euclidean.potential) == "lam - 2 lam phi^2 + lam phi^4 + phi^2"
    assert [notation(link) for link in euclidean.links] == ["-2 kappa phi phi(+t)", "-2 kappa phi phi(+x)"]
    backwards = text.replace("phi phi(+mu)", "phi phi(-mu)")
    assert declare(backwards).euclidean.digest == euclidean.digest


def test_the_constraint_makes_equal_actions_equal() -> None:
    plain = declare("n[3](t,x), n.n = 1\nL = 1/(2 g2) d_mu n . d^mu n + h n[3]^2\ng2 = 1, h = 0.1")
    other = declare("n[3](t,x), n.n = 1\nL = 1/(2 g2) d_mu n . d^mu n + h (n.n - n[1]^2 - n[2]^2)\ng2 = 1, h = 0.1")
    assert plain.digest == other.digest
    assert plain.euclidean.spheres == ((0, 1, 2),)


def test_cases_and_tables_are_potentials() -> None:
    import numpy as np

    action = declare("q(t)\nL = 1/2 q'^2 - V(q)\nV(q) = {1/2 q^2 where |q| < 1, |q| - 1/2 otherwise}")
    (atom,) = action.euclidean.variables
    x = np.array([-2.0, -0.5, 0.0, 0.5, 3.0])
    assert np.allclose(action.euclidean.potential.evaluate({atom: x}, np), [1.5, 0.125, 0.0, 0.125, 2.5])
    slope = action.euclidean.potential.diff(atom).evaluate({atom: x}, np)
    assert np.allclose(slope, [-1.0, -0.5, 0.0, 0.5, 1.0])
    points = ", ".join(f"[{v}, {v * v}]" for v in (-2, -1, 0, 1, 2))
    spline = declare(f"q(t)\nL = 1/2 q'^2 - V(q)\nV(q) = table([{points}], q, cubic)")
    inside = np.array([-1.7, -0.3, 0.9])
    assert np.allclose(spline.euclidean.potential.evaluate({atom: inside}, np), inside**2)  # a cubic spline is exact
    assert declare(spline.canonical).digest == spline.digest
    assert not [f for f in check(spline.euclidean, {}) if f.severity == "fatal"]
