"""The quarter turn step by step: what is shown agrees with what was done."""

from quarterturn.actions.declare import declare
from quarterturn.actions.steps import turn_steps
from quarterturn.runs.declaration import action


def shown(text: str) -> list[str]:
    return [step.notation for step in turn_steps(declare(text))]


def test_the_steps_of_a_magnetic_term() -> None:
    """L -> L(i q') -> -L, each sign in its place (Feynman and Hibbs, 1965, section 10-2)."""
    steps = shown("r[2](t)\nL = 1/2 r'.r' + b r[1] r[2]' - 1/2 r.r\nb = 1")
    assert " b r[1] r[2]'" in steps[0] and "1/2 r[1]'^2" in steps[0] and "I" not in steps[0]
    assert "I b r[1] r[2]'" in steps[1] and "- 1/2 r[1]'^2" in steps[1]
    assert "-I b r[1] r[2]'" in steps[2] and "1/2 r[1]'^2" in steps[2]
    assert len(steps) == 3


def test_a_total_derivative_has_a_step_of_its_own() -> None:
    steps = shown("q(t)\nL = 1/2 q'^2 + q q' - 1/2 q^2")
    assert len(steps) == 4 and "I" in steps[2] and "I" not in steps[3]


def test_the_metric_is_named_and_imaginary_actions_have_one_step() -> None:
    first = turn_steps(declare("phi(t,x)\nmetric -+\nL = -1/2 (d phi)^2 - 1/2 phi^2"))[0]
    assert "mostly plus" in first.words and "-+" in first.words
    assert len(turn_steps(declare("q(t)\nLE = 1/2 q'^2 + q^2"))) == 1
    assert len(turn_steps(declare("phi(t,x)\nSE = -sum_mu phi phi(+mu) + 4 phi^2"))) == 1


def test_steps_show_themselves() -> None:
    steps = action("q(t)\nL = 1/2 q'^2 - 1/2 q^2", "oscillator").steps
    bundle = steps._repr_mimebundle_()
    assert set(bundle) == {"text/plain", "text/html", "text/latex"}
    assert "oscillator" in bundle["text/plain"] and "L_E" in bundle["text/latex"]
