"""The turned actions of textbook Lagrangians, each with its source, and the digests that tell meanings apart."""

import time

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from quarterturn.actions.declare import declare
from quarterturn.actions.expression import Expression, PathAtom, Symbol
from quarterturn.actions.printing import notation
from quarterturn.actions.turn import Turned, euclidean_lagrangian
from quarterturn.errors import ActionError

# body of the cell; L_E that the source gives, in notation, with I for the imaginary unit
TEXTBOOK = {
    # Feynman and Hibbs, Quantum Mechanics and Path Integrals (1965), eq. (10-30)
    "oscillator": ("q(t)\nL = m/2 q'^2 - m w^2/2 q^2\nm = 1, w = 1", "1/2 m q'^2 + 1/2 m w^2 q^2"),
    # Creutz and Freedman, Ann. Phys. 132 (1981) 427, eq. (2.1) with lambda and f
    "anharmonic": ("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 1", "1/2 q'^2 + 1/2 q^2 + lam q^4"),
    # Coleman, The uses of instantons (1977), section 2.2: V = lambda (x^2 - a^2)^2, written out
    "double well": (
        "q(t)\nL = 1/2 q'^2 - lam (q^2 - b^2)^2\nlam = 1, b = 1",
        "1/2 q'^2 + lam q^4 - 2 lam b^2 q^2 + lam b^4",
    ),
    # Morse, Phys. Rev. 34 (1929) 57, eq. (4)
    "Morse": (
        "q(t)\nL = 1/2 q'^2 - D (1 - exp(-a1 q))^2\nD = 10, a1 = 1",
        "1/2 q'^2 + D - 2 D exp(-a1 q) + D exp(-a1 q)^2",
    ),
    # pendulum, common practice
    "pendulum": (
        "theta(t) mod 2 pi\nL = 1/2 I0 theta'^2 + g cos(theta)\nI0 = 1, g = 1",
        "1/2 I0 theta'^2 - g cos(theta)",
    ),
    # rotor with a theta term: S_E = int I/2 phidot^2 - i theta Q (Bietenholz et al., Phys. Lett. B 407 (1997) 283)
    "rotor": (
        "theta(t) mod 2 pi\nL = 1/2 I0 theta'^2 + vartheta/(2 pi) theta'\nI0 = 1, vartheta = 1",
        "1/2 I0 theta'^2 - 1/2 I pi^-1 vartheta theta'",
    ),
    # charge in a uniform magnetic field, symmetric gauge (Feynman and Hibbs, eq. (3-64))
    "magnetic": (
        "r[2](t)\nL = m/2 r'.r' + b/2 (r[1] r[2]' - r[2] r[1]') - k/2 r.r\nm = 1, b = 1, k = 1",
        "1/2 m r[1]'^2 + 1/2 m r[2]'^2 - 1/2 I b r[1] r[2]' + 1/2 I b r[2] r[1]' + 1/2 k r[1]^2 + 1/2 k r[2]^2",
    ),
    # coupled oscillators, common practice
    "coupled": (
        "x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 - 1/2 x^2 - 1/2 y^2 - c x y\nc = 0.4",
        "1/2 x'^2 + 1/2 y'^2 + 1/2 x^2 + 1/2 y^2 + c x y",
    ),
    # Poeschl and Teller, Z. Phys. 83 (1933) 143, the attractive well
    "Poeschl-Teller": (
        "q(t)\nL = 1/2 q'^2 + nu (nu + 1)/2 / cosh(q)^2\nnu = 2",
        "1/2 q'^2 - 1/2 nu^2 cosh(q)^-2 - 1/2 nu cosh(q)^-2",
    ),
    # Hamiltonian with a mass: the Gaussian momentum integral (Feynman and Hibbs, section 4-2)
    "Hamiltonian": ("q(t)\nH = p^2/(2 m) + m w^2/2 q^2\nm = 1, w = 1", "1/2 m q'^2 + 1/2 m w^2 q^2"),
    # ring of radius R, central potential, common practice
    "ring": (
        "r[2](t)\nL = 1/2 r'.r' - V(r)\nV(r) = k/2 (sqrt(r.r) - R)^2\nk = 40, R = 1",
        "1/2 r[1]'^2 + 1/2 r[2]'^2 + 1/2 k r[1]^2 + 1/2 k r[2]^2 - k R (r[1]^2 + r[2]^2)^(1/2) + 1/2 k R^2",
    ),
}


@pytest.mark.parametrize("name", TEXTBOOK)
def test_the_turn_of_a_textbook_lagrangian(name: str) -> None:
    body, expected = TEXTBOOK[name]
    act = declare(body)
    euclidean = act.euclidean
    turned = Turned(euclidean.mass, euclidean.potential, euclidean.drift)
    found = euclidean_lagrangian(turned, euclidean.variables)
    assert _terms(notation(found)) == _terms(expected), notation(found)


def _terms(text: str) -> set[frozenset[str]]:
    """Terms of a printed sum, each as the set of its factors; their order does not matter."""
    found, depth, word = [], 0, ""
    for i, letter in enumerate(text):
        depth += (letter in "([") - (letter in ")]")
        if depth == 0 and i and letter in "+-" and text[i - 1] == " ":
            found.append(word)
            word = "-" if letter == "-" else ""
        else:
            word += letter
    return {frozenset(_factors(term.strip())) for term in [*found, word]}


def _factors(term: str) -> list[str]:
    """Factors of a printed term; the order of factors does not matter."""
    depth, word, found = 0, "", []
    for letter in term.removeprefix("-").strip():
        depth += (letter in "([") - (letter in ")]")
        if letter == " " and depth == 0:
            found.append(word)
            word = ""
        else:
            word += letter
    return [*found, word, "-" if term.startswith("-") else "+"]


@pytest.mark.parametrize(
    "other",
    [
        "q(t)\nLE = 1/2 m q'^2 + 1/2 m w^2 q^2\nm = 1, w = 1",
        "q(t)\nH = p^2/(2 m) + 1/2 m w^2 q^2\nm = 2, w = 3",
        "q(t)\nL = T - V; T = 1/2 m q'^2; V = 1/2 m w^2 q^2; m = 1; w = 1",
        "q(t)  # a comment\nL = -½ m w² q² + ½ m q̇²\nw = 2\nm = 1\nlattice 50, a = 0.1\nmeasure <q^2>",
        "q(t)\nL = m/2 (d_t q)^2 - m/2 (w q)^2\nm = 1, w = 1",
    ],
)
def test_the_same_physics_has_the_same_turned_digest(other: str) -> None:
    act = declare("q(t)\nL = 1/2 m q'^2 - 1/2 m w^2 q^2\nm = 1, w = 1")
    assert declare(other).euclidean.digest == act.euclidean.digest


@pytest.mark.parametrize(
    "other",
    [
        "q(t)\nL = 1/2 m q'^2 + 1/2 m w^2 q^2\nm = 1, w = 1",
        "q(t)\nL = 1/2 m q'^2 - 1/2 m w^2 q^4\nm = 1, w = 1",
        "q(t)\nL = 1/2 m q'^2 - 1/2 m w q^2\nm = 1, w = 1",
        "q(t)\nL = 1/2 m q'^2 - 1/3 m w^2 q^2\nm = 1, w = 1",
        "q(t) mod 7\nL = 1/2 m q'^2 - 1/2 m w^2 q^2\nm = 1, w = 1",
    ],
)
def test_another_meaning_has_another_digest(other: str) -> None:
    act = declare("q(t)\nL = 1/2 m q'^2 - 1/2 m w^2 q^2\nm = 1, w = 1")
    assert declare(other).digest != act.digest
    assert declare(other).euclidean.digest != act.euclidean.digest


coefficients = st.sampled_from(["1", "1/2", "3", "0.25", "2/7", "lam", "g", "lam g^2", "lam/g"])
factors = st.sampled_from(
    [
        "q^2",
        "q^4",
        "q",
        "x^2",
        "x q",
        "sin(q)",
        "cos(2 x)",
        "exp(-q^2)",
        "sqrt(1 + q^2)",
        "(1 + x^2)^-1",
        "q^2 x^2",
        "|q|",
    ]
)
terms = st.lists(st.tuples(st.sampled_from("+-"), coefficients, factors), min_size=1, max_size=6)


def body(parts: list[tuple[str, str, str]]) -> str:
    potential = " ".join(f"{sign} {c} {f}" for sign, c, f in parts)
    return f"q(t), x(t)\nL = 1/2 q'^2 + 1/2 x'^2 {potential}\nlam = 0.5, g = 2"


@settings(max_examples=200, deadline=None, derandomize=True)
@given(terms)
def test_canonical_notation_parses_back_to_the_same_digest(parts: list[tuple[str, str, str]]) -> None:
    act = declare(body(parts))
    again = declare(act.canonical + "\nlam = 1, g = 1")
    assert again.digest == act.digest and again.canonical == act.canonical


@settings(max_examples=200, deadline=None, derandomize=True)
@given(terms, st.randoms(use_true_random=False))
def test_order_of_terms_and_white_space_do_not_matter(parts: list[tuple[str, str, str]], random: object) -> None:
    shuffled = list(parts)
    random.shuffle(shuffled)  # type: ignore[attr-defined]
    spaced = body(shuffled).replace(" ", "  ").replace("\n", "\n\n") + "  # comment"
    assert declare(spaced).digest == declare(body(parts)).digest


@settings(max_examples=100, deadline=None, derandomize=True)
@given(terms)
def test_a_changed_sign_changes_the_digest(parts: list[tuple[str, str, str]]) -> None:
    act = declare(body(parts))
    if not act.euclidean.potential.terms:
        return
    flipped = [("-" if sign == "+" else "+", c, f) for sign, c, f in parts]
    assert declare(body(flipped)).digest != act.digest


def test_dimensions_follow_from_the_kinetic_term() -> None:
    act = declare("q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 1")
    assert (act.couplings["w"].dimension, act.couplings["lam"].dimension) == (1, 3)


def test_symmetries_are_found() -> None:
    act = declare("x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 - x^2 - y^2 - x^2 y^2 - x y")
    assert act.euclidean.symmetries == ((-1, -1),)
    assert declare("q(t)\nL = 1/2 q'^2 - q^2 - q^3 - q^4").euclidean.symmetries == ()


def test_the_phase_of_a_real_action_is_absent() -> None:
    act = declare("q(t)\nL = 1/2 q'^2 + b q q' - q^2\nb = 1")
    assert act.euclidean.phase is None  # a total derivative, said so
    assert any("total derivative" in f.message for f in act.findings)
    rotor = declare("theta(t) mod 2 pi\nL = theta'^2 + c theta'\nc = 1")
    assert rotor.euclidean.phase == -Expression.of(Symbol("coupling", "c")) * Expression.of(PathAtom("theta", 0, 1))


@pytest.mark.parametrize(
    "dynamics",
    [
        "L = 1/2 q'^2 - |q'| - q^2",
        "L = 1/2 q'^2 - sqrt(q'^2) - q^2",
        "L = -sqrt(1 - q'^2) - q^2",  # a relativistic particle
        "L = 1/2 q'^2 - 1/q'^2 - q^2",
        "L = 1/2 q'^2 - exp(q') - q^2",
        "LE = 1/2 q'^2 + |q'| + q^2",
        "H = p^2/2 + |p| + q^2",
        "H = sqrt(1 + p^2) + q^2",
        "H = p^2/2 + 1/p + q^2",
    ],
)
def test_a_velocity_inside_a_function_is_refused_not_dropped(dynamics: str) -> None:
    with pytest.raises(ActionError, match="not Gaussian"):
        declare(f"q(t)\n{dynamics}")


def test_terms_that_contradict_each_other_give_no_dimension() -> None:
    """1/2 q'^2 + 1/2 q^2 is written in units of the frequency, in which lam is a pure number as well as a mass^3."""
    act = declare("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 1")
    assert act.couplings["lam"].dimension is None


def test_forty_coupled_paths_are_turned_within_seconds() -> None:
    names = [f"q{i}" for i in range(40)]
    chain = " ".join(f"+ 1/2 {a}'^2 - {a}^4 - ({a} - {b})^2" for a, b in zip(names, names[1:] + names[:1], strict=True))
    began = time.monotonic()
    act = declare(", ".join(f"{n}(t)" for n in names) + f"\nL = {chain.removeprefix('+ ')}")
    assert not act.findings
    assert time.monotonic() - began < 5.0  # half a second on an idle core
