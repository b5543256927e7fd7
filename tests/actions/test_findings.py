"""Boundedness, confinement and the kinetic form: what is found, along which direction, and when it stops a run."""

import pytest

from quarterturn.actions.declare import declare
from quarterturn.actions.findings import check


def severities(body: str) -> set[str]:
    return {f.severity for f in declare(body).findings if f.topic in ("kinetic", "bounded")}


@pytest.mark.parametrize(
    ("potential", "severity"),
    [
        ("q^2", None),
        ("q^4 - 10 q^2", None),
        ("q^6 + q^5", None),
        ("-q^4 + 100 q^2", "fatal"),
        ("q^3", "fatal"),
        ("q", "fatal"),
        ("cosh(q)", None),
        ("exp(q)", "unconfined"),
        ("-exp(q)", "fatal"),
        ("(1 - exp(-q))^2", "unconfined"),
        ("|q|", None),
        ("sqrt(1 + q^2)", None),
        ("-1/(1 + q^2)", "unconfined"),
    ],
)
def test_one_path(potential: str, severity: str | None) -> None:
    assert severities(f"q(t)\nL = 1/2 q'^2 - ({potential})") == ({severity} if severity else set())


@pytest.mark.parametrize(
    ("potential", "severity"),
    [
        ("x^2 + y^2", None),
        ("x^4 + y^4 - 3 x^2 y^2", "fatal"),  # falls along x = y
        ("x^4 + y^4 - 2 x^2 y^2 + x^2 + y^2", None),  # leading form vanishes along x = y, the next decides
        ("x^2 y^2", "unconfined"),  # flat along the axes
        ("x^2 y^2 + x^2 + y^2", None),
        ("(x - y)^2", "unconfined"),
        ("x^2", "unconfined"),
        ("x^4 + y^4 + x^3 y^2", "fatal"),
    ],
)
def test_two_paths(potential: str, severity: str | None) -> None:
    assert severities(f"x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 - ({potential})") == ({severity} if severity else set())


def test_an_angle_needs_no_confinement() -> None:
    assert severities("theta(t) mod 2 pi\nL = 1/2 theta'^2") == set()


def test_the_sign_of_a_coupling_decides_and_is_asked_again() -> None:
    act = declare("q(t)\nL = 1/2 q'^2 - 1/2 q^2 - lam q^4\nlam = 0.1")
    assert not check(act.euclidean, {"lam": 0.1})
    (finding,) = check(act.euclidean, {"lam": -0.1})
    assert finding.severity == "fatal"
    assert "leading term lam q^4 with lam = -0.1); stable for lam > 0" in finding.message


def test_a_coupling_of_zero_leaves_the_next_term_to_decide() -> None:
    act = declare("q(t)\nL = 1/2 q'^2 - k q^2 - lam q^4\nk = 1, lam = 0")
    assert not check(act.euclidean, {"k": 1.0, "lam": 0.0})
    assert check(act.euclidean, {"k": -1.0, "lam": 0.0})[0].severity == "fatal"
    assert check(act.euclidean, {"k": 0.0, "lam": 0.0})[0].severity == "unconfined"


@pytest.mark.parametrize("kinetic", ["-1/2 q'^2", "0 q'^2", "m q'^2"])
def test_a_kinetic_form_that_is_not_positive_is_fatal(kinetic: str) -> None:
    assert "fatal" in severities(f"q(t)\nL = {kinetic} - q^2\nm = -1")


def test_a_coupled_kinetic_form_is_judged_as_a_whole() -> None:
    body = "x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 + c x' y' - x^2 - y^2\nc = {}"
    assert severities(body.format(0.5)) == set()
    assert severities(body.format(1.5)) == {"fatal"}


def test_values_that_are_no_numbers_do_not_crash() -> None:
    act = declare("q(t)\nL = 1/2 m q'^2 - k q^2\nm = 1, k = 1")
    for bad in (float("nan"), float("inf"), -float("inf")):
        assert check(act.euclidean, {"m": bad, "k": 1.0})
