"""Any body gets an answer: the short run of `tests.notation.fuzzing`; the long one is started by hand."""

import random
import resource

import pytest

from quarterturn.actions.declare import declare
from tests.notation.bombs import BOMBS
from tests.notation.fuzzing import ACTIONS, SLOW, WORDS, answered, body, without_evaluation


@pytest.mark.parametrize("action", ACTIONS)
def test_the_actions_that_are_mutated_are_sound(action: str) -> None:
    assert declare(action).digest


def test_three_thousand_bodies_are_answered_without_evaluation() -> None:
    """Seeded; any exception but ours, a slow answer or 200 MB fail it."""
    generator = random.Random(7)
    for action in ACTIONS:
        declare(action)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    with without_evaluation():
        slowest = max(answered(body(generator)) for _ in range(3000))
    assert slowest < SLOW
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before < 200 * 1024


def test_the_guard_against_evaluation_guards() -> None:
    with without_evaluation(), pytest.raises(AssertionError, match="handed to the evaluator"):
        eval("1 + 1")


@pytest.mark.parametrize("name", sorted({w for w in WORDS if w.isidentifier()} - {"q", "t"}))
def test_a_name_that_shadows_a_word_is_an_action_or_a_complaint(name: str) -> None:
    for text in (
        f"{name}(t)\nL = 1/2 {name}'^2 - {name}^2",
        f"q(t)\n{name} = 2\nL = 1/2 q'^2 - {name} q^2",
        f"q(t)\nV({name}) = {name}^2\nL = 1/2 q'^2 - V(q)",
    ):
        answered(text)


@pytest.mark.parametrize("name", BOMBS)
def test_a_short_text_that_asks_for_much_is_answered(name: str) -> None:
    """One second of an idle core; the bound leaves room for a slower one. 200 MB."""
    declare("q(t)\nL = q'^2 - table([[0, 1], [1, 2], [2, 1], [3, 5]], q, cubic)")
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    assert len(BOMBS[name]) <= 20_000
    assert answered(BOMBS[name]) < 2 * SLOW
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before < 200 * 1024
