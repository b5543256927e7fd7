"""Where straight rays mislead: curved valleys, angles, slow falls, oscillations, singular origins. Each verdict is
elementary calculus, written beside the potential; searches start from a fixed seed, so there is no false alarm."""

import pytest

from quarterturn.actions.declare import declare

HEADS = {
    1: "q(t)\nL = 1/2 q'^2 - ({})",
    2: "x(t), y(t)\nL = 1/2 x'^2 + 1/2 y'^2 - ({})",
    3: "x(t), y(t), z(t)\nL = 1/2 x'^2 + 1/2 y'^2 + 1/2 z'^2 - ({})",
}


def severities(body: str) -> set[str]:
    return {f.severity for f in declare(body).findings if f.topic in ("kinetic", "bounded", "period")}


@pytest.mark.parametrize(
    ("count", "potential", "severity"),
    [
        (2, "(y - x^2)^2 - x^2", "fatal"),  # along y = x^2 it is -x^2, along every ray it grows
        (2, "(y - x^2)^2 - 1/100 x^2", "fatal"),
        (2, "(y - x^2)^2", "unconfined"),  # 0 along y = x^2
        (2, "(y - x^2)^2 + 1/100 x^2", None),
        (2, "(y - x^3)^2 - x", "fatal"),
        (2, "(x y - 1)^2", "unconfined"),  # 1 on the axes, 0 on the hyperbola; never negative
        (2, "(x y - 1)^2 + x^2 + y^2", None),
        (2, "(x - 2 y)^2 sqrt(1 + x^2)", "unconfined"),  # 0 along x = 2 y, which is no axis and no diagonal
        (2, "sqrt(1 + x^2 + y^2) - x", "unconfined"),  # 1/(2 x) along the axis
        (2, "sqrt(1 + x^2 + y^2) - x/2", None),
        (2, "cos(x) + cos(y)", "unconfined"),
        (3, "(z - x y)^2 + x^2 + y^2", None),
        (3, "(x - 2 y + 3 z)^4 + (x + y - z)^4", "unconfined"),  # two forms in three variables
        # Motzkin, in: Inequalities (1967) 205: not negative, zero at x^2 = y^2 = z^2
        (3, "x^4 y^2 + x^2 y^4 + z^6 - 3 x^2 y^2 z^2 + x^2 + y^2 + z^2", None),
        (3, "x^4 y^2 + x^2 y^4 + z^6 - 3.01 x^2 y^2 z^2 + x^2 + y^2 + z^2", "fatal"),
        (1, "-log(1 + q^2)", "fatal"),  # falls, if slowly
        (1, "log(1 + q^2)", None),
        (1, "q^4 cos(q)", "fatal"),  # -q^4 at q = pi, 3 pi, …
        (1, "q cos(q)", "fatal"),
        (1, "cos(q)", "unconfined"),
        (1, "-1/q^2 + q^2", "unconfined"),  # exp(a/q^2) is not integrable at 0
        (1, "1/q^2 + q^2", None),
        (1, "log(q^2) + q^2", None),  # |q|^(-2a) is, for small a
    ],
)
def test_a_potential_is_judged_where_it_is_lowest(count: int, potential: str, severity: str | None) -> None:
    assert severities(HEADS[count].format(potential)) == ({severity} if severity else set())


def test_an_angle_is_turned_to_where_the_potential_falls() -> None:
    body = "x(t)\ntheta(t) mod 2 pi\nL = 1/2 x'^2 + 1/2 theta'^2 - x^2 ({} + cos(theta))"
    assert severities(body.format("0")) == {"fatal"}  # -x^2 at theta = pi
    assert severities(body.format("2")) == set()


@pytest.mark.parametrize(
    ("term", "severity"),
    [
        ("- theta^2", "fatal"),
        ("+ cos(theta/2)", "fatal"),
        ("+ cos(3 theta) + sin(theta)^2", None),
        ("+ theta theta'", "fatal"),
        ("+ vartheta theta'", None),
        ("+ cos(k theta)", "fatal"),
    ],
)
def test_a_circle_has_one_value_at_each_point(term: str, severity: str | None) -> None:
    body = f"theta(t) mod 2 pi\nL = 1/2 theta'^2 {term}\nk = 0.7, vartheta = 0.3"
    assert severities(body) == ({severity} if severity else set())


def test_a_period_other_than_a_whole_turn_is_kept_to() -> None:
    assert severities("x(t) mod 3\nL = 1/2 x'^2 + cos(2 pi x/3)") == set()
    (default,) = declare("x(t) mod 3\nL = 1/2 x'^2 + cos(2 pi x/3)").measurements
    assert default.label == "<cos(2/3 pi x)>"
    assert severities("x(t) mod 3\nL = 1/2 x'^2 + cos(x)") == {"fatal"}


@pytest.mark.parametrize(
    "body",
    [
        "q(t)\nL = 1/2 q'^2/m - q^2\nm = 0",
        "q(t)\nL = 1/2 q'^2 - q^2/m\nm = 0",
        "q(t)\nL = 1/2 q'^2 - lam^2 q^2\nlam = 1e200",
        "q(t)\nL = 1/2 q'^2 - sqrt(lam) q^2\nlam = -1",
        "q(t)\nL = 1/2 q'^2 - exp(lam) q^2\nlam = 1e4",
        "q(t)\nL = 1/2 q'^2 - 1e300 1e300 q^2",
        "q(t)\nL = 1/2 q'^2 - sqrt(lam) cosh(q)\nlam = -1",
        "theta(t) mod 2 pi\nL = 1/2 theta'^2 + sqrt(lam) cos(theta)\nlam = -1",
    ],
)
def test_couplings_at_which_a_coefficient_is_no_number_are_fatal(body: str) -> None:
    assert severities(body) == {"fatal"}
