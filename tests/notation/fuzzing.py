"""Bodies that nobody would write: mutations of actions, random letters and words, splices of two actions.

    python -m tests.notation.fuzzing 100000 1

declares so many bodies from a seed, and prints the slowest one, the growth of memory, and what was no answer. A body
has been answered when there is an action or a complaint of ours; nothing may be handed to Python's evaluator.
"""

from __future__ import annotations

import builtins
import random
import resource
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any
from unittest import mock

from quarterturn.actions.declare import declare
from quarterturn.errors import QuarterturnError

ACTIONS = [
    "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2 - lam q^4\nw = 1, lam = 0.1\nlattice 200, a = 0.1\n"
    "measure <q^2>, <q(t) q(0)>, gap(q)",
    "theta(t) mod 2 pi\nL = 1/2 I theta'^2 + g cos(theta) + vartheta/(2 pi) theta'\nI = 1; g = 2; vartheta = 0.3",
    "r[2](t)\nL = 1/2 m r'.r' - V(r)\nV(r) = k/2 (sqrt(r.r) - R)^2\nm = 1, k = 40, R = 1\nmeasure <r.r>, energy",
    "x(t), y(t)\nH = p_x^2/2 + p_y^2/(2 m) + x^2 y^2 + x^2 + y^2\nm = 2\nmeasure <x y>_c, <(mean x)^2>, binder(y)",
    "phi(t,x)\nmetric -+\nL = -1/2 (d phi)^2 - 1/2 m2 phi^2 - lam/4! phi^4\nm2 = -0.5, lam = 1\nlattice 64 x 64\n"
    "measure <phi^2>, <|mean phi|>, binder(phi), G(t) = <sum_x phi(t,x) phi(0,0)>, xi2(phi)",
    "n[3](t, x), n.n = 1\nL = 1/(2 g2) d_mu n . d^mu n\ng2 = 1",
    "φ[2](t, x)\nL = ½ ∂_μφ[a] ∂^μφ[a] − ½ g[a,b] φ[a] φ[b] − λ (φ·φ)²\ng = [[1, 0.5], [0.5, 2]], λ = 0.1",
    "psi(t,x) complex\nL = d_mu psi^* d^mu psi - m^2 |psi|^2 - lam (psi^* psi)^2\nm = 1, lam = 1\nmeasure <|psi|^2>",
    "phi(t, x)\nSE = -2 kappa sum_mu phi phi(+mu) + phi^2 + lam (phi^2 - 1)^2\nkappa = 0.2, lam = 0.5\nlattice 32 x 32",
    "q(t)\nL = 1/2 q'^2 - V(q) + J q\nV(q) = {1/2 k q^2 where |q| < 1, k (|q| - 1/2) otherwise}\nJ(t) = j0 exp(-t^2)\n"
    "k = 1, j0 = 0.5\nlattice beta = 10, a = 0.1\nmeasure log Z[J], <q>",
    "q(t)\nL = 1/2 q'^2 - table([[-1, 0.5], [0, 0], [1, 0.5], [2, 3]], q, monotone) - q^4\nunits amu, angstrom, 1/cm\n"
    "lattice beta = vacuum 1e-6, a = 0.1, periodic",
]
WORDS = tuple(
    word
    for line in (
        "q phi psi n r t x mu a b = + - * / ^ ( ) [ ] { } < > | . , ; : ' ! # d_t d_mu d^mu d ∂ sum_a sum_x",
        "mean energy gap binder xi2 charge conj Re Im where otherwise and table cubic linear lattice",
        "measure metric units periodic open fixed twist vacuum beta vol mod complex in su(2) L = LE = SE =",
        "H = 1/2 0.1 2 64 x 1e300 1e-300 9^9^9 20! pi sqrt exp log log Z[J] (t) (0) (t,x) (0,0) [1] [a]",
        '[a,b] (+mu) (-x) ^* ^2 ² ⁻¹ ½ √ λ φ ∂_μ ∂^μ ₀ \u0307 \u0304 † ⟨ ⟩ · − ** _c "well.csv"',
        "[[1,2],[3,4]] np. import lambda __class__ eval( \x00 \u202e \ufeff а \\frac{1}{2} $ % & ~ ` @",
    )
    for word in line.split()
)
LETTERS = "q t L = 1/2'^*+-()[]<>|.,;#\n λθ²½√̇ gap mean d_t e9 0.1 \x00\u202eа{}\\\"%!~φψ∂_μ₀†⟩⟨"
SLOW = 1.0  # seconds of processor time


def body(generator: random.Random) -> str:
    """One body: a mutated action, two spliced ones, a heap of words, or letters of any kind."""
    choice = generator.random()
    if choice < 0.6:
        return _mutated(list(generator.choice(ACTIONS)), generator)
    if choice < 0.75:
        one, other = generator.choice(ACTIONS), generator.choice(ACTIONS)
        spliced = one[: generator.randrange(len(one))] + other[generator.randrange(len(other)) :]
        return _mutated(list(spliced), generator)
    if choice < 0.93:
        words = (generator.choice(WORDS) for _ in range(generator.randint(1, 40)))
        head = generator.choice(
            ["q(t)\nL = q'^2 - ", "phi(t,x)\nL = (d phi)^2 - ", "r[3](t)\nLE = ", "", "psi(t) complex\nL = "]
        )
        return head + generator.choice(["", " "]).join(words)
    return "".join(chr(generator.choice([generator.randrange(128), generator.randrange(0x3000)])) for _ in range(60))


def _mutated(text: list[str], generator: random.Random) -> str:
    for _ in range(generator.randint(1, 6)):
        place = generator.randrange(len(text) + 1)
        change = generator.random()
        if change < 0.3 and place < len(text):
            text[place] = generator.choice(LETTERS)
        elif change < 0.5:
            text.insert(place, generator.choice(LETTERS))
        elif change < 0.65:
            text[place:place] = list(generator.choice(WORDS))
        elif change < 0.85:
            del text[place : place + generator.randint(1, 4)]
        else:
            end = min(len(text), place + generator.randint(1, 12))
            text[place:place] = text[place:end] * generator.randint(1, 3)
    return "".join(text)


@contextmanager
def without_evaluation() -> Iterator[None]:
    """Python's evaluator fails inside. Whatever is imported late has to be imported before."""

    def refused(*arguments: Any, **names: Any) -> Any:
        raise AssertionError(f"handed to the evaluator: {arguments[:1]!r}")

    with mock.patch.multiple(builtins, eval=refused, exec=refused, compile=refused):
        yield


def answered(text: str) -> float:
    """Seconds of processor time that an answer took. Any exception but ours goes through."""
    began = time.process_time()
    try:
        declare(text)
    except QuarterturnError as complaint:
        assert str(complaint)
    return time.process_time() - began


def main(count: int, seed: int) -> int:
    """Declare `count` bodies; the number of those without an answer."""
    generator = random.Random(seed)
    for action in ACTIONS:
        declare(action)
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    slowest, which, failures, slow = 0.0, "", 0, 0
    with without_evaluation():
        for _ in range(count):
            text = body(generator)
            try:
                took = answered(text)
            except Exception as trouble:
                failures += 1
                print(f"NO ANSWER to {text!r}: {trouble!r}", flush=True)
                continue
            slow += took > SLOW
            if took > slowest:
                slowest, which = took, text
    grown = (resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before) // 1024
    print(f"{count} bodies, {failures} without an answer, {slow} slower than {SLOW} s, memory grown by {grown} MB")
    print(f"slowest: {slowest:.2f} s, {which!r}")
    return failures + slow


if __name__ == "__main__":
    sys.exit(min(main(int(sys.argv[1]), int(sys.argv[2])), 1))
