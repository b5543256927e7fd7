"""Sampled fields against exact lattice propagators, exactly summed small lattices, and their own records."""

import numpy as np
import pytest
from scipy import stats

import quarterturn as qt
from quarterturn.compiled.precision import double
from quarterturn.runs.verification import rerun
from quarterturn.sampling.fields.program import _programs
from tests.outside.values import value

FREE = """phi({coordinates})
L = 1/2 (d phi)^2 - 1/2 m2 phi^2
m2 = {m2}
lattice {extents}
measure <phi^2>, c1 = <phi phi(+t)>, chi = vol <(mean phi)^2>"""
CASES = {
    "D=2": ("t,x", (8, 8), 0.5),
    "D=3": ("t,x,y", (4, 5, 4), 0.7),
    "D=4": ("t,x,y,z", (4, 4, 3, 4), 0.6),
}


def free_propagator(extents: tuple[int, ...], m2: float) -> np.ndarray:
    """<phi(x) phi(0)> of the free lattice field: the mean over momenta of exp(ikx)/(m^2 + sum 2 (1 - cos k)).

    Montvay and Muenster, Quantum Fields on a Lattice (1994), eqs. (2.48) and (2.52).
    """
    inverse = np.full(extents, m2)
    for axis, n in enumerate(extents):
        k = 2 * np.pi * np.arange(n) / n
        inverse = inverse + np.expand_dims(2 * (1 - np.cos(k)), tuple(i for i in range(len(extents)) if i != axis))
    return np.fft.ifftn(1 / inverse).real


@pytest.mark.parametrize("name", CASES)
def test_free_fields_have_the_exact_lattice_propagator(name: str) -> None:
    """Pulls of three numbers over five seeds: chi-squared, false alarm 1e-3 on either side."""
    coordinates, extents, m2 = CASES[name]
    action = qt.action(FREE.format(coordinates=coordinates, m2=m2, extents=" x ".join(map(str, extents))))
    g = free_propagator(extents, m2)
    exact = {"<phi^2>": g.flat[0], "c1": g[(1,) + (0,) * (len(extents) - 1)], "chi": 1 / m2}
    pulls = []
    for seed in range(5):
        run = qt.sample(action, draws=512, chains=16, seed=seed)
        pulls += [(run[label].value - value) / run[label].error for label, value in exact.items()]
    low, high = stats.chi2.ppf([5e-4, 1 - 5e-4], len(pulls))
    assert low < np.sum(np.square(pulls)) < high, pulls


def test_a_chain_in_lattice_form_is_the_one_dimensional_field() -> None:
    """D = 1: SE = 1/2 (phi(+t) - phi)^2 + m2/2 phi^2 against the same propagator (pull below 4: 6e-5 a number)."""
    text = """phi(t)
    SE = 1/2 (phi(+t) - phi)^2 + 1/2 m2 phi^2
    m2 = 0.25
    lattice 16, a = 1
    measure <phi^2>, <phi phi(+t)>"""
    run = qt.sample(qt.action(text), draws=512, chains=16)
    g = free_propagator((16,), 0.25)
    for label, exact in (("<phi^2>", g[0]), ("<phi phi(+t)>", g[1])):
        assert abs(run[label].value - exact) < 4 * run[label].error


def test_curves_are_summed_over_space_or_fixed_in_it() -> None:
    """The correlators of a free field on 8 x 6 sites; largest of 10 pulls below 4.5 (false alarm 7e-5)."""
    text = FREE.format(coordinates="t,x", m2=0.5, extents="8 x 6").replace(
        "measure", "measure <sum_x phi(t,x) phi(0,0)>, <phi(t,2) phi(0,0)>,"
    )
    run = qt.sample(qt.action(text), draws=1024, chains=16)
    g = free_propagator((8, 6), 0.5)
    summed, fixed = run["<sum_x phi(t,x) phi(0,0)>"], run["<phi(t,2) phi(0,0)>"]
    assert np.abs((summed.value - g.sum(axis=1)[:5]) / summed.error).max() < 4.5
    assert np.abs((fixed.value - g[:5, 2]) / fixed.error).max() < 4.5


@pytest.mark.parametrize(
    ("identity", "text", "label"),
    [
        (
            "xy-2d-3x3-b1.0",
            "theta(t,x) mod 2 pi\nSE = -b sum_mu cos(theta(+mu) - theta)\nb = 1\nlattice 3 x 3\n"
            "measure e = 1/2 (<cos(theta(+t) - theta)> + <cos(theta(+x) - theta)>)",
            "e",
        ),
    ],
)
def test_small_lattices_that_were_summed_exactly(identity: str, text: str, label: str) -> None:
    """Within 4 standard errors of the published or independently computed value (false alarm 6e-5)."""
    e = qt.sample(qt.action(text), draws=2048, chains=16)[label]
    assert abs(e.value - float(value(identity)["value"])) < 4 * e.error


def test_unit_vectors_stay_on_their_sphere_and_agree_with_the_transfer_matrix_of_the_chain() -> None:
    """The O(3) chain has <n.n'> = (L + L^{N-1})/(1 + L^N...), in the leading eigenvalues of the transfer matrix.

    On N sites <n_0.n_1> = sum_l (2l+1) [l lam_{l-1} + (l+1) lam_{l+1}]/(2l+1) lam_l^{N-1} / sum_l (2l+1) lam_l^N with
    lam_l = i_l(b), modified spherical Bessel functions (Fisher, Am. J. Phys. 32 (1964) 343).
    """
    from scipy.special import spherical_in

    sites, b = 8, 1.5
    lam = spherical_in(np.arange(40), b)
    orders = np.arange(39)
    z = np.sum((2 * orders + 1) * lam[:39] ** sites)
    up, down = (orders + 1) * lam[1:40], orders * np.concatenate([[0.0], lam[:38]])
    exact = float(np.sum((up + down) * lam[:39] ** (sites - 1)) / z)
    text = f"n[3](t), n.n = 1\nSE = -b n.n(+t)\nb = {b}\nlattice {sites}, a = 1\nmeasure <n.n(+t)>, <n.n>"
    run = qt.sample(qt.action(text), draws=1024, chains=16)
    assert run["<n.n>"].value == pytest.approx(1.0, abs=1e-12)
    e = run["<n.n(+t)>"]
    assert abs(e.value - exact) < 4 * e.error


def test_an_antiperiodic_direction_shifts_the_momenta() -> None:
    """<phi^2> with momenta (2n + 1) pi/N in time (common practice); 4 standard errors."""
    text = FREE.format(coordinates="t,x", m2=0.25, extents="6 x 4").replace(
        "c1 = <phi phi(+t)>, chi = vol <(mean phi)^2>", "<phi^4>"
    )
    run = qt.sample(qt.action(text + "\nlattice antiperiodic t"), draws=1024, chains=16)
    k, q = (2 * np.arange(6) + 1) * np.pi / 6, 2 * np.pi * np.arange(4) / 4
    exact = np.mean(1 / (0.25 + 2 * (1 - np.cos(k))[:, None] + 2 * (1 - np.cos(q))[None, :]))
    e = run["<phi^2>"]
    assert abs(e.value - exact) < 4 * e.error


def test_the_force_is_the_slope_of_the_action() -> None:
    """Against automatic differentiation, for every kind of field and edge (rounding)."""
    import jax
    import jax.numpy as jnp

    from quarterturn.compiled.field_target import FieldTarget
    from quarterturn.lattice.field import put_on_lattice

    bodies = [
        "phi[2](t,x)\nL = 1/2 (d phi)^2 - g[a,b] phi[a] phi[b] - lam sum_a phi[a]^4 + h phi[1] d_x phi[2]\n"
        "g = [[1, 0.2], [0.2, 2]], lam = 0.3, h = 0.4\nlattice 4 x 3, a = 0.7, open x",
        "psi(t,x) complex\nL = d_mu conj(psi) d^mu psi - |psi|^2 - |psi|^4\nlattice 4 x 3, twist x = 0.4",
        "theta(t,x) mod 2 pi\nL = 1/2 k (d theta)^2 + g cos(theta)\nk = 1.2, g = 0.5\nlattice 4 x 3",
        "phi(t,x)\nSE = -2 kappa sum_mu phi phi(+mu) + phi^2 + (phi^2 - 1)^2\nkappa = 0.2\nlattice 4 x 3, "
        "antiperiodic t",
        "phi(t,x)\nL = 1/2 (d phi)^2 - phi^4 + J phi\nJ(t,x) = j exp(-t^2 - x^2)\nj = 0.5\nlattice 4 x 3",
    ]
    for text in bodies:
        action = qt.action(text)
        geometry = action.geometry
        assert geometry is not None
        lattice = put_on_lattice(action.euclidean, geometry.extents, geometry.edges)
        couplings = {n: c.default for n, c in action.couplings.items()}
        target = FieldTarget(lattice, tuple(sorted(couplings)))
        with double():
            p = target.parameters(couplings, geometry.spacings)
            normals = np.random.default_rng(1).normal(size=(target.components, target.sites, 2))
            phi = tuple(jnp.asarray(f) for f in normals)
            slope = jax.grad(lambda x, p=p, target=target: jnp.sum(target.action(x, p)))(phi)
            assert np.allclose(slope, target.force(phi, p), atol=1e-11), text


def test_another_coupling_compiles_nothing_and_the_record_is_made_again_bit_for_bit() -> None:
    action = qt.action(FREE.format(coordinates="t,x", m2=0.5, extents="6 x 6"))
    qt.sample(action, draws=64, chains=8)
    program = next(reversed(_programs.values()))
    run = qt.sample(action, m2=0.8, draws=64, chains=8, seed=5)
    assert program.compilations == 1
    assert rerun(run.record)["results"] == run.record["results"]


def test_what_a_field_forbids_is_said() -> None:
    text = FREE.format(coordinates="t,x", m2=0.5, extents="8 x 8")
    with pytest.raises(qt.RequestError, match="two double each link"):
        qt.sample(qt.action(text), sites=(8, 2))
    with pytest.raises(qt.RequestError, match="GiB"):
        qt.sample(qt.action(text), sites=(60000, 60000))
    with pytest.raises(qt.RequestError, match="2 coordinates"):
        qt.sample(qt.action(text), sites=(8, 8, 8))
    with pytest.raises(qt.ActionError, match="falls without limit"):
        qt.sample(qt.action(text), m2=-0.5)


def test_the_generating_functional_of_a_free_field_is_that_of_its_propagator() -> None:
    """log Z[J] = 1/2 J G J of `free-source-D2`, by the ladder of strengths; 4 standard errors (false alarm 6e-5)."""
    text = (
        "phi(t,x)\nLE = 1/2 (d_t phi)^2 + 1/2 (d_x phi)^2 + 1/2 m^2 phi^2 - J phi\n"
        "J(t,x) = exp(-50 (t^2 + x^2)) - 0.7 exp(-50 ((t - 2)^2 + (x + 3)^2))\n"
        "m = 0.5\nlattice 6 x 6\nmeasure log Z[J]"
    )
    e = qt.sample(qt.action(text), draws=1024, chains=16)["log Z[J]"]
    assert abs(e.value - value("free-source-D2")["value"]["lnZ"]) < 4 * e.error < 0.02


def test_curves_run_along_space() -> None:
    """<phi(0,x) phi(0,0)> of a free field on 6 x 8 sites; largest of 5 pulls below 4.5 (false alarm 4e-5)."""
    text = FREE.format(coordinates="t,x", m2=0.5, extents="6 x 8").replace("measure", "measure <phi(0,x) phi(0,0)>,")
    curve = qt.sample(qt.action(text), draws=1024, chains=16)["<phi(0,x) phi(0,0)>"]
    exact = free_propagator((6, 8), 0.5)[0, :5]
    assert np.abs((curve.value - exact) / curve.error).max() < 4.5
