"""`sample` end to end: what it returns, when it stops, what it admits."""

import threading

import numpy as np
import pytest

from quarterturn.errors import ActionError, RequestError
from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.progress import Progress
from quarterturn.runs.run import Run
from quarterturn.runs.sampling import sample
from quarterturn.sampling import program as programs

QUARTIC = """q(t)
L = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4
w = 1, lam = 1
lattice 40, a = 0.2
measure <q^2>, <q>, <q(t) q(0)>, gap(q), energy, G = <q^4> - 3 <q^2>^2, <(mean q)^2>"""


@pytest.fixture(scope="module")
def quartic() -> DeclaredAction:
    return action(QUARTIC, "quartic")


@pytest.fixture(scope="module")
def run(quartic: DeclaredAction) -> Run:
    return sample(quartic, draws=320, seed=11)


def test_every_number_has_an_exact_value_and_lies_near_it(run: Run) -> None:
    """False alarm rate 4e-4 for the six numbers together (4 sigma)."""
    assert list(run.numbers) == ["<q^2>", "<q>", "gap(q)", "energy", "G", "<(mean q)^2>"]
    for label, estimate in run.numbers.items():
        assert estimate.exact is not None, label
        assert estimate.pull is not None and abs(estimate.pull) < 4, (label, str(estimate), estimate.exact)


def test_the_curve_agrees_with_the_transfer_matrix(run: Run) -> None:
    """Correlated chi-squared over the first eight times, false alarm rate 1e-3."""
    curve = run["<q(t) q(0)>"]
    away = (curve.value - curve.exact)[:8]
    chi2 = float(away @ np.linalg.solve(curve.covariance[:8, :8], away))
    assert chi2 < 26.1
    assert curve.t[:3] == pytest.approx([0, 0.2, 0.4])


def test_labels_are_found_in_any_spelling(run: Run) -> None:
    assert run["< q² >"] is run["<q^2>"]
    with pytest.raises(RequestError) as complaint:
        run["<q^3>"]
    assert "there is <q^2>" in str(complaint.value)


def test_the_same_seed_gives_the_same_bits(quartic: DeclaredAction, run: Run) -> None:
    again = sample(quartic, draws=320, seed=11)
    assert [e.value for e in again.numbers.values()] == [e.value for e in run.numbers.values()]
    assert [e.error for e in again.numbers.values()] == [e.error for e in run.numbers.values()]


def test_a_changed_coupling_or_spacing_never_compiles_again(quartic: DeclaredAction, run: Run) -> None:
    compiled = [p for p in programs._programs.values() if p.compilations]
    before = {id(p): p.compilations for p in compiled}
    for couplings in ({"lam": 2.0}, {"w": 0.5}, {"lam": 0.3, "a": 0.1, "sites": 40}):
        sample(quartic, draws=16, **couplings)
    after = {id(p): p.compilations for p in programs._programs.values() if p.compilations}
    assert after == before and all(count == 1 for count in after.values())


def test_a_target_error_ends_the_run_when_it_is_met(quartic: DeclaredAction) -> None:
    run = sample(quartic, error={"<q^2>": "2%"}, time="30s", seed=3)
    assert run.stop == "satisfied"
    assert run["<q^2>"].error <= 0.02 * run["<q^2>"].value


def test_a_time_limit_ends_the_run(quartic: DeclaredAction) -> None:
    run = sample(quartic, error=1e-9, time=1.5, seed=3)
    assert run.stop == "time" and not run.converged
    assert run.record["wall_seconds"] < 10


def test_a_relative_target_leaves_out_what_a_symmetry_makes_zero(quartic: DeclaredAction) -> None:
    run = sample(quartic, error="5%", time="30s", seed=5)
    assert run.stop == "satisfied"


def test_stopping_keeps_what_there_is_and_says_so(quartic: DeclaredAction) -> None:
    stop = threading.Event()

    def watch(progress: Progress) -> None:
        if progress.stage == "drawing":
            stop.set()

    run = sample(quartic, error=1e-9, time=60, progress=watch, stop=stop)
    assert run.stop == "interrupted" and run["<q^2>"].error > 0
    assert any("cut short" in words for words in run.warnings)


def test_progress_tells_current_estimates(quartic: DeclaredAction) -> None:
    seen: list[Progress] = []
    sample(quartic, error=1e-9, time=2, progress=seen.append)
    drawing = [p for p in seen if p.stage == "drawing"]
    assert drawing and drawing[-1].draws > 0 and drawing[-1].chains > 1
    assert any(label == "<q^2>" and "(" in value for label, value, _ in drawing[-1].rows)


def test_a_target_for_a_number_that_is_not_measured_is_refused(quartic: DeclaredAction) -> None:
    with pytest.raises(RequestError) as complaint:
        sample(quartic, error={"<q^6>": "1%"})
    assert "no number is measured under '<q^6>'" in str(complaint.value)


@pytest.mark.parametrize("chains", [0, 1, 2.5, 10**6, True])
def test_a_senseless_number_of_chains_is_refused(quartic: DeclaredAction, chains: object) -> None:
    with pytest.raises(RequestError):
        sample(quartic, draws=16, chains=chains)  # type: ignore[arg-type]


def test_an_unbounded_action_is_never_sampled(quartic: DeclaredAction) -> None:
    with pytest.raises(ActionError):
        sample(quartic, draws=16, lam=-1.0)


def test_a_high_barrier_with_the_symmetry_is_sampled_correctly() -> None:
    """Barrier 64 times the level spacing of one well; false alarm rate 1e-4 for two numbers (4 sigma)."""
    well = action("q(t)\nL = 1/2 q'^2 - lam (q^2 - 4)^2\nlam = 1\nlattice 80, a = 0.25\nmeasure <q^2>, <(mean q)^2>")
    run = sample(well, draws=320, seed=2)
    assert not [w for w in run.warnings if "stuck" in w]
    for label in ("<q^2>", "<(mean q)^2>"):
        assert abs(run[label].pull) < 4, (label, str(run[label]), run[label].exact)


def test_a_high_barrier_without_the_symmetry_is_reported_as_stuck() -> None:
    """Two wells of nearly equal depth and no symmetry: nothing moves a path from one to the other."""
    well = action(
        "q(t)\nL = 1/2 q'^2 - lam (q^2 - 4)^2 - tilt q\nlam = 4, tilt = 0.02\nlattice 80, a = 0.25\nmeasure <q>, <q^2>"
    )
    run = sample(well, draws=160, seed=2)
    assert any("stuck" in words for words in run.warnings)
    assert run["<q>"].state == "unresolved" and "unresolved" in str(run["<q>"])
    assert not run.converged


def test_a_theta_term_is_reweighted_and_its_phase_comes_first() -> None:
    """Exact: the rotor's spectrum (p - A)^2/2I, checked in the room imaginary; false alarm rate 2e-4."""
    rotor = action(
        "theta(t) mod 2 pi\nL = 1/2 I theta'^2 + vartheta/(2 pi) theta'\n"
        "I = 1, vartheta = 1.5\nlattice 20, a = 0.5\nmeasure <charge(theta)^2>, energy, <cos(theta)>"
    )
    run = sample(rotor, draws=640, seed=4)
    assert next(iter(run.numbers)) == "average phase"
    assert "complex" in run.warnings[0]
    for label in ("average phase", "<charge(theta)^2>", "energy"):
        assert abs(run[label].pull) < 4, (label, str(run[label]), run[label].exact)


def test_a_lost_phase_withholds_the_numbers() -> None:
    rotor = action(
        "theta(t) mod 2 pi\nL = 1/2 I theta'^2 + vartheta/(2 pi) theta'\n"
        "I = 1, vartheta = 3.1\nlattice 200, a = 1\nmeasure energy, <cos(theta)>"
    )
    run = sample(rotor, draws=64, seed=4)
    assert run["energy"].state == "withheld" and "sign problem" in run["energy"].remark
    assert "withheld" in repr(run)


def test_two_coupled_paths_agree_with_the_normal_modes() -> None:
    """K = 1, potential 1/2 (x^2 + y^2) + c x y: normal modes w^2 = 1 +- c, each a lattice oscillator.

    Closed form of Creutz and Freedman, Ann. Phys. 132 (1981) 427; false alarm rate 1e-4 (4 sigma).
    """
    pair = action(
        "x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 - 1/2 x^2 - 1/2 y^2 - c x y\nc = 0.4\n"
        "lattice 40, a = 0.25\nmeasure <x y>, <x^2>"
    )
    run = sample(pair, draws=320, seed=6)

    def mode(w2: float) -> float:
        k = 2 * np.pi * np.arange(40) / 40
        return float(np.mean(1 / (2 * (1 - np.cos(k)) / 0.25 + 0.25 * w2)))

    plus, minus = mode(1.4), mode(0.6)
    assert abs(run["<x y>"].value - (plus - minus) / 2) < 4 * run["<x y>"].error
    assert abs(run["<x^2>"].value - (plus + minus) / 2) < 4 * run["<x^2>"].error
    assert run["<x^2>"].exact == pytest.approx((plus + minus) / 2, rel=1e-9)


def test_user_settings_of_jax_and_numpy_are_left_alone(quartic: DeclaredAction) -> None:
    import jax

    settings, errors = dict(jax.config.values), np.geterr()
    sample(quartic, draws=16)
    assert dict(jax.config.values) == settings and np.geterr() == errors
    assert jax.numpy.ones(1).dtype == "float32"


def test_too_few_draws_withhold_what_they_can_not_support(quartic: DeclaredAction) -> None:
    run = sample(quartic, draws=16, chains=2)
    assert run["gap(q)"].state == "withheld" and "too few" in run["gap(q)"].remark
    assert not run.converged and "withheld" in repr(run)


def test_an_interruption_during_warm_up_reports_nothing(quartic: DeclaredAction) -> None:
    stop = threading.Event()
    stop.set()
    with pytest.raises(RequestError) as complaint:
        sample(quartic, draws=16, stop=stop)
    assert "during warm-up" in str(complaint.value)


def test_a_wall_is_named_and_not_mistaken_for_a_broken_integrator() -> None:
    wall = action("q(t)\nL = 1/2 q'^2 - log(q)^2 - q^2\nlattice 40, a = 0.1\nmeasure <q>")
    run = sample(wall, draws=64, seed=8)
    assert any("as at a wall" in words for words in run.warnings)
    assert not any("test fails" in words for words in run.warnings)


def test_a_curve_can_be_measured_alone() -> None:
    run = sample(action("q(t)\nL = 1/2 q'^2 - q^2\nlattice 32, a = 0.25\nmeasure <q(t) q(0)>"), draws=64)
    assert list(run) == ["<q(t) q(0)>"] and np.isfinite(run["<q(t) q(0)>"].error).all()
