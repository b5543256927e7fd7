"""What a call asks for: keywords, targets, durations, and what is said about mistakes."""

import pytest

from quarterturn.errors import ActionError, RequestError
from quarterturn.runs.declaration import DeclaredAction, action
from quarterturn.runs.settings import goal, resolve, seconds

QUARTIC = "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1\nlattice 200, a = 0.1"


@pytest.fixture(scope="module")
def quartic() -> DeclaredAction:
    return action(QUARTIC, "quartic")


def test_couplings_and_lattice_have_the_declared_defaults(quartic: DeclaredAction) -> None:
    settings = resolve(quartic, {})
    assert settings.couplings == {"lam": 0.1, "w": 1.0}
    assert (settings.sites, settings.spacing) == (200, 0.1)


def test_a_spacing_alone_keeps_beta(quartic: DeclaredAction) -> None:
    settings = resolve(quartic, {"a": 0.2})
    assert settings.sites == 100 and settings.beta == pytest.approx(20)


def test_beta_alone_and_sites_alone_keep_the_spacing(quartic: DeclaredAction) -> None:
    assert resolve(quartic, {"beta": 10}).sites == 100
    assert resolve(quartic, {"sites": 50}).spacing == 0.1


def test_beta_and_sites_give_the_spacing(quartic: DeclaredAction) -> None:
    assert resolve(quartic, {"beta": 10, "sites": 20}).spacing == pytest.approx(0.5)


@pytest.mark.parametrize(
    ("keywords", "words"),
    [
        ({"lamb": 0.2}, "no coupling lamb; its couplings are lam, w"),
        ({"lam": "big"}, "lam must be a number, got 'big'"),
        ({"lam": float("nan")}, "lam must be finite"),
        ({"a": -0.1}, "a must be positive"),
        ({"sites": 10.5}, "sites must be a whole number"),
        ({"a": 0.3}, "the nearest is beta = 20.1 with 67 sites"),
        ({"a": 0.1, "beta": 2, "sites": 20}, "say one thing twice"),
    ],
)
def test_a_mistaken_keyword_is_named(quartic: DeclaredAction, keywords: dict, words: str) -> None:
    with pytest.raises(RequestError) as complaint:
        resolve(quartic, keywords)
    assert words in str(complaint.value)


def test_the_nearest_coupling_is_offered(quartic: DeclaredAction) -> None:
    with pytest.raises(RequestError) as complaint:
        resolve(quartic, {"lamb": 0.2})
    assert complaint.value.repair == "lam = …"


def test_a_coupling_that_makes_the_integral_diverge_stops_the_call(quartic: DeclaredAction) -> None:
    with pytest.raises(ActionError) as complaint:
        resolve(quartic, {"lam": -0.1})
    assert "bounded below" in str(complaint.value)


def test_an_action_without_a_lattice_says_what_to_add() -> None:
    bare = action("q(t)\nL = 1/2 q'^2 - 1/2 q^2", "bare")
    with pytest.raises(RequestError) as complaint:
        resolve(bare, {})
    assert "lattice 200, a = 0.1" in str(complaint.value)
    assert resolve(bare, {"a": 0.1, "beta": 2}).sites == 20


def test_targets_are_relative_with_a_percent_sign_and_absolute_without() -> None:
    assert goal("1%", None, None).precision[""].allowed(5.0) == pytest.approx(0.05)
    assert goal(0.01, None, None).precision[""].allowed(5.0) == pytest.approx(0.01)
    assert goal({"gap(q)": "2%"}, None, None).precision["gap(q)"].relative


def test_without_any_limit_there_is_an_error_and_a_minute() -> None:
    default = goal(None, None, None)
    assert default.precision and default.seconds == 60 and default.draws is None


@pytest.mark.parametrize(("text", "length"), [("60s", 60), ("2 min", 120), ("1.5h", 5400), (3, 3), ("0.5", 0.5)])
def test_durations(text: object, length: float) -> None:
    assert seconds(text) == pytest.approx(length)


@pytest.mark.parametrize(
    ("error", "time", "draws", "words"),
    [
        (0, None, None, "error must be positive"),
        ("-1%", None, None, "error must be positive"),
        ("small", None, None, "a percentage such as '1%'"),
        (None, "soon", None, "a duration such as '60s'"),
        (None, -1, None, "a duration such as '60s'"),
        (None, "0s", None, "time must be positive"),
        (None, None, 0, "draws must be a whole number"),
        (None, None, 1.5, "draws must be a whole number"),
    ],
)
def test_a_limit_that_makes_no_sense_is_refused(error: object, time: object, draws: object, words: str) -> None:
    with pytest.raises(RequestError) as complaint:
        goal(error, time, draws)
    assert words in str(complaint.value)


def test_a_coupling_can_not_take_a_word_of_the_calls() -> None:
    with pytest.raises(ActionError) as complaint:
        action("q(t)\nL = 1/2 q'^2 - time q^2\ntime = 1")
    assert "word of the calls" in str(complaint.value)
