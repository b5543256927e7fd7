"""Action and force of fields on a lattice, against plain sums over sites and finite differences."""

from itertools import pairwise

import jax.numpy as jnp
import numpy as np
import pytest

from quarterturn.actions.declare import declare
from quarterturn.compiled.field_target import Fields, FieldTarget
from quarterturn.compiled.precision import double
from quarterturn.lattice.field import put_on_lattice

PHI4 = (
    "phi(t, x)\nLE = K/2 (d_t phi)^2 + G/2 (d_x phi)^2 + 1/2 m2 phi^2 + lam phi^4 + h phi\n"
    "K = 1.3, G = 0.7, m2 = -0.5, lam = 1, h = 0.2\n"
)
EVEN = PHI4.replace("+ h phi", "").replace(", h = 0.2", "")  # has a sign to change
LATTICE = "SE = -2 kappa sum_mu phi phi(+mu) + phi^2 + lam (phi^2 - 1)^2\nkappa = 0.2, lam = 0.5\n"
XY = "theta(t, x) mod 2 pi\nSE = -beta_c sum_mu cos(theta(+mu) - theta)\nbeta_c = 0.9\n"
ANGLE = "theta(t, x) mod 2 pi\nLE = K/2 (d_t theta)^2 + K/2 (d_x theta)^2 + g cos(theta)\nK = 0.8, g = 0.3\n"
SPHERE = "n[3](t, x), n.n = 1\nLE = 1/(2 g2) d_mu n . d_mu n\ng2 = 0.7\n"
PAIR = (
    "u(t, x), v(t, x)\nLE = 1/2 (d_t u)^2 + 1/2 (d_x u)^2 + 1/2 (d_t v)^2 + 1/2 (d_x v)^2 + c/2 (d_t u)(d_t v) "
    "+ u^2 v^2\nc = 0.4\n"
)
CUBE = "phi(t, x, y)\nLE = 1/2 (d_t phi)^2 + 1/2 (d_x phi)^2 + 1/2 (d_y phi)^2 + lam phi^4 + exp(-phi^2)\nlam = 1\n"


def made(text: str) -> tuple[FieldTarget, dict[str, float], tuple[float, ...]]:
    action = declare(text, "test")
    assert action.geometry is not None
    lattice = put_on_lattice(action.euclidean, action.geometry.extents, action.geometry.edges)
    couplings = {name: c.default for name, c in action.couplings.items()}
    return FieldTarget(lattice, tuple(sorted(couplings))), couplings, action.geometry.spacings


def fields(phi: np.ndarray) -> Fields:
    """One array for each variable."""
    return tuple(jnp.asarray(f) for f in phi)


CASES = {
    "phi4": PHI4 + "lattice 5 x 4, a_t = 0.5, a_x = 0.8",
    "phi4 antiperiodic": EVEN + "lattice 5 x 4, a = 0.5, antiperiodic t",
    "phi4 open": PHI4 + "lattice 5 x 4, a = 0.5, open x",
    "lattice": "phi(t, x)\n" + LATTICE + "lattice 3 x 4",
    "three dimensions": CUBE + "lattice 3 x 4 x 3, a = 0.6",
    "xy": XY + "lattice 3 x 4",
    "angle": ANGLE + "lattice 3 x 4, a = 0.7",
    "sphere": SPHERE + "lattice 3 x 4",
    "pair": PAIR + "lattice 3 x 4",
}


@pytest.mark.parametrize("name", CASES)
def test_force_is_the_derivative_of_the_action(name: str) -> None:
    """Central differences of every variable, to their error of 1e-7."""
    target, couplings, spacings = made(CASES[name])
    rng = np.random.default_rng(1)
    phi = rng.standard_normal((target.components, target.sites, 2))
    with double():
        p = target.parameters(couplings, spacings)
        force = np.stack([np.asarray(f) for f in target.force(fields(phi), p)])
        found = np.zeros_like(force)
        for c in range(target.components):
            for x in range(target.sites):
                for sign in (1, -1):
                    moved = phi.copy()
                    moved[c, x] += sign * 1e-5
                    found[c, x] += sign * np.asarray(target.action(fields(moved), p)) / 2e-5
    assert force == pytest.approx(found, rel=1e-6, abs=1e-7)


@pytest.mark.parametrize(("edge", "sign"), [("", 1.0), (", antiperiodic t", -1.0), (", open t", 0.0)])
def test_action_is_the_sum_over_sites_and_links(edge: str, sign: float) -> None:
    """Written out with loops."""
    body = EVEN if "anti" in edge else PHI4
    target, c, (a, b) = made(body + "lattice 5 x 4, a_t = 0.5, a_x = 0.8" + edge)
    phi = np.random.default_rng(2).standard_normal((5, 4))
    total = 0.0
    for t in range(5):
        for x in range(4):
            here, right = phi[t, x], phi[t, (x + 1) % 4]
            up = phi[t + 1, x] if t < 4 else sign * phi[0, x]
            total += a * b * (c["m2"] / 2 * here**2 + c["lam"] * here**4 + c.get("h", 0.0) * here)
            total += a * b * c["G"] / 2 * ((right - here) / b) ** 2
            if t < 4 or sign:
                total += a * b * c["K"] / 2 * ((up - here) / a) ** 2
    with double():
        found = target.action(fields(phi.reshape(1, 20, 1)), target.parameters(c, (a, b)))
    assert float(found[0]) == pytest.approx(total, rel=1e-13)


def test_a_twist_turns_a_complex_field_across_the_edge() -> None:
    """|psi(x+1) - psi(x)|^2 with psi(N) = exp(i alpha) psi(0)."""
    text = "psi(t, x) complex\nLE = |d_t psi|^2 + |d_x psi|^2\nlattice 3 x 4, twist x = 0.7"
    target, c, spacings = made(text)
    rng = np.random.default_rng(3)
    parts = rng.standard_normal((2, 3, 4))
    psi = parts[0] + 1j * parts[1]
    right = np.concatenate([psi[:, 1:], np.exp(0.7j) * psi[:, :1]], axis=1)
    total = np.sum(np.abs(right - psi) ** 2) + np.sum(np.abs(np.roll(psi, -1, 0) - psi) ** 2)
    with double():
        found = target.action(fields(parts.reshape(2, 12, 1)), target.parameters(c, spacings))
    assert float(found[0]) == pytest.approx(total, rel=1e-12)


def test_angle_links_are_periodic_in_each_angle() -> None:
    target, c, spacings = made(CASES["angle"])
    phi = np.random.default_rng(4).uniform(-3, 3, (1, 12, 1))
    turned = phi.copy()
    turned[0, 5] += 2 * np.pi
    with double():
        p = target.parameters(c, spacings)
        before, after = target.action(fields(phi), p), target.action(fields(turned), p)
    assert float(before[0]) == pytest.approx(float(after[0]), rel=1e-12)


def test_small_angles_move_as_on_the_line() -> None:
    """The cosine agrees with the square to the order theta^4."""
    target, c, spacings = made(CASES["angle"].replace("+ g cos(theta)", "").replace(", g = 0.3", ""))
    phi = 1e-3 * np.random.default_rng(5).standard_normal((3, 4))
    squares = sum(float(np.sum((np.roll(phi, -1, axis) - phi) ** 2)) for axis in (0, 1))
    with double():
        found = target.action(fields(phi.reshape(1, 12, 1)), target.parameters(c, spacings))
    assert float(found[0]) == pytest.approx(0.8 / 2 * squares, rel=1e-5)


def test_a_link_of_two_sites_is_seen_from_both_ends() -> None:
    """The sites next to each other in the list of neighbours."""
    target, _, _ = made(CASES["lattice"])
    forwards = [target.shifted_sites(offset) for offset in ((1, 0), (0, 1))]
    assert [list(f[:4]) for f in forwards] == [[4, 5, 6, 7], [1, 2, 3, 0]]
    assert all(a != b for f in forwards for a, b in pairwise(f))
