"""Any text gets an answer, quickly: an action, or a complaint of ours."""

import random
import time

import pytest

from quarterturn.actions.declare import declare
from quarterturn.errors import QuarterturnError

SEEDS = [
    "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1\nlattice 200, a = 0.1\n"
    "measure <q^2>, <q(t) q(0)>, gap(q)",
    "theta(t) mod 2 pi\nL = 1/2 I theta'^2 + g cos(theta) + vartheta/(2 pi) theta'\nI = 1; g = 2; vartheta = 0.3",
    "r[2](t)\nL = 1/2 m r'.r' - V(r)\nV(r) = k/2 (sqrt(r.r) - R)^2\nm = 1, k = 40, R = 1\nmeasure <r.r>, energy",
    "x(t), y(t)\nH = p_x^2/2 + p_y^2/(2 m) + x^2 y^2 + x^2 + y^2\nm = 2\nmeasure <x y>_c, <(mean x)^2>, binder(y)",
]
LETTERS = "q t L = 1/2'^*+-()[]<>|.,;#\n λθ²½√̇ gap mean d_t e9 0.1 \x00\u202eа{}\\\"%!~"
BOMBS = {
    "deep brackets": "q(t)\nL = " + "(" * 5000 + "q" + ")" * 5000,
    "long product": "q(t)\nL = 1/2 q'^2 - " + "q " * 6000,
    "long sum": "q(t)\nL = 1/2 q'^2 " + "- q^2 " * 2500,
    "towers of powers": "q(t)\nL = q'^2 - q^" + "9^" * 400 + "9",
    "huge number": "q(t)\nL = q'^2 - " + "9" * 10000 + " q^2",
    "huge exponent of ten": "q(t)\nL = q'^2 - 1e999999999 q^2",
    "factorial tower": "q(t)\nL = q'^2 - 20!!!! q^2",
    "growing definitions": "q(t)\nL = q'^2 - V(V(V(V(V(V(q))))))\nV(x) = (x + x^2 + x^3)^8",
    "doubling definitions": "q(t)\nL = q'^2 - a9\na0 = q\n"
    + "\n".join(f"a{i + 1} = a{i} + a{i} a{i}" for i in range(12)),
    "many signs": "q(t)\nL = q'^2 - " + "-" * 5000 + "q^2",
    "many primes": "q(t)\nL = q" + "'" * 5000,
    "many moduli": "q(t)\nL = q'^2 - " + "|" * 3001,
    "many statements": "q(t)\n" + "\n".join(f"c{i} = {i}" for i in range(2500)),
    "many paths": ", ".join(f"q{i}(t)" for i in range(2000)) + "\nL = q1'^2",
    "wide vector": "r[999999999](t)\nL = r'.r'",
    "wide products": "r[60](t)\nL = r'.r' - (r.r)^8",
    "nothing": "",
    "only space": " \n\t ; \n",
    "null bytes": "\x00" * 100,
    "too long": "q" * 20001,
}


def answered(text: str) -> float:
    began = time.monotonic()
    try:
        declare(text)
    except QuarterturnError as complaint:
        assert str(complaint)
    return time.monotonic() - began


@pytest.mark.parametrize("name", BOMBS)
def test_a_bomb_is_answered_within_a_second(name: str) -> None:
    answered("q(t)\nL = q'^2 - q^2")  # the parser is built once
    assert answered(BOMBS[name]) < 2.0  # one second on an idle core; the bound leaves room for a loaded one


def test_mutated_bodies_are_always_answered() -> None:
    """3000 mutations of four actions, seeded; any exception but ours fails."""
    generator = random.Random(7)
    slowest = 0.0
    for number in range(3000):
        text = list(SEEDS[number % len(SEEDS)])
        for _ in range(generator.randint(1, 6)):
            place = generator.randrange(len(text))
            change = generator.random()
            if change < 0.4:
                text[place] = generator.choice(LETTERS)
            elif change < 0.7:
                text.insert(place, generator.choice(LETTERS))
            elif change < 0.9:
                del text[place]
            else:
                end = min(len(text), place + generator.randint(1, 12))
                text[place:place] = text[place:end] * generator.randint(1, 3)
        slowest = max(slowest, answered("".join(text)))
    assert slowest < 2.0


def test_random_letters_are_always_answered() -> None:
    generator = random.Random(11)
    for _ in range(1000):
        answered("q(t)\nL = " + "".join(generator.choice(LETTERS) for _ in range(generator.randint(0, 60))))
