"""Properties of generated field theories: meaning-preserving rewritings keep the digest, changes of meaning do not.

A case is a random sum of terms in up to three coordinates and two fields, some of them vectors. Each property is tried
on hundreds of cases; hypothesis shrinks a counterexample.
"""

import random

from hypothesis import given, settings
from hypothesis import strategies as st

from quarterturn.actions.declare import declare

COORDINATES = ("t", "x", "y")
COUPLINGS = "m2 = 1, lam = 0.5, g = 0.3, k = 2, h = [0.1, 0.2]"
CASES = 300


@st.composite
def theories(draw: st.DrawFn) -> tuple[str, list[tuple[int, str, str]], int]:
    """(fields, terms (sign, coefficient, product), number of coordinates)."""
    count = draw(st.integers(2, 3))
    inside = ",".join(COORDINATES[:count])
    kinetic = [(1, "1/2", "d_mu phi . d^mu phi"), (1, "k/2", "d_mu chi d^mu chi")]
    potential = [
        (-1, "1/2 m2", "phi[a] phi[a]"), (-1, "lam", "(phi[a] phi[a])^2"), (-1, "1/2", "chi^2"),
        (-1, "lam/4!", "chi^4"), (1, "g", "chi phi[1] phi[2]"), (-1, "g^2", "phi.phi chi^2"), (-1, "1", "cosh(chi)"),
        (1, "1", "h[a] phi[a]"), (-1, "2/3", "sum_a phi[a]^4"), (-1, "sqrt(k)", "exp(g chi)"),
    ]  # fmt: skip
    chosen = draw(st.lists(st.sampled_from(potential), min_size=1, max_size=6, unique=True))
    signs = draw(st.lists(st.sampled_from((1, -1)), min_size=len(chosen), max_size=len(chosen)))
    terms = [*kinetic, *((s * sign, c, p) for s, (sign, c, p) in zip(signs, chosen, strict=True))]
    return f"phi[2]({inside}), chi({inside})", terms, count


def text(fields: str, terms: list[tuple[int, str, str]], metric: str = "") -> str:
    written = " ".join(f"{'+' if s > 0 else '-'} {c} {p}" for s, c, p in terms)
    return "\n".join(line for line in (fields, metric, f"L = {written}", COUPLINGS) if line)


def turned(body: str) -> str:
    return declare(body).euclidean.digest


@settings(max_examples=CASES, deadline=None, derandomize=True)
@given(theories())
def test_either_signature_gives_the_same_euclidean_action(theory: tuple[str, list, int]) -> None:
    fields, terms, count = theory
    flipped = [(-s if "d_mu" in p else s, c, p) for s, c, p in terms]
    minus, plus = "+" + "-" * (count - 1), "-" + "+" * (count - 1)
    assert turned(text(fields, terms, f"metric {minus}")) == turned(text(fields, flipped, f"metric {plus}"))
    assert turned(text(fields, terms, f"metric {minus}")) != turned(text(fields, terms, f"metric {plus}"))


@settings(max_examples=CASES, deadline=None, derandomize=True)
@given(theories(), st.randoms(use_true_random=False))
def test_rewritings_that_keep_the_meaning_keep_the_digest(theory: tuple[str, list, int], rng: random.Random) -> None:
    fields, terms, count = theory
    shuffled = list(terms)
    rng.shuffle(shuffled)
    other = text(fields, shuffled)
    derivatives = {
        "d_mu chi d^mu chi": "(chi'^2 - (d_x chi)^2" + (" - (d_y chi)^2" if count == 3 else "") + ")",
        "d_mu phi . d^mu phi": "(d phi)^2",
        "phi[a] phi[a]": "phi . phi",
        "sum_a phi[a]^4": "(phi[1]^4 + phi[2]^4)",
        "h[a] phi[a]": "(h_1 phi[1] + h_2 phi[2])",
    }
    for old, new in derivatives.items():
        if rng.random() < 0.5:
            other = other.replace(old, new)
    if rng.random() < 0.5:
        for old, new in (
            ("lam", "λ"),
            ("phi", "φ"),
            ("chi", "χ"),
            ("mu", "μ"),
            ("d_", "∂_"),
            ("d^", "∂^"),
            ("^2", "²"),
        ):
            other = other.replace(old, new)
    assert declare(other).digest == declare(text(fields, terms)).digest


@settings(max_examples=CASES, deadline=None, derandomize=True)
@given(theories())
def test_canonical_notation_declares_the_same_action_again(theory: tuple[str, list, int]) -> None:
    fields, terms, _ = theory
    action = declare(text(fields, terms))
    values = "\n".join(f"{n} = {c.default!r}" for n, c in action.couplings.items())
    again = declare(f"{action.canonical}\n{values}")
    assert (again.digest, again.euclidean.digest) == (action.digest, action.euclidean.digest)


@settings(max_examples=CASES, deadline=None, derandomize=True)
@given(theories(), st.integers(0, 7))
def test_a_changed_sign_changes_the_digest(theory: tuple[str, list, int], place: int) -> None:
    fields, terms, _ = theory
    place %= len(terms)
    changed = [(-s if i == place else s, c, p) for i, (s, c, p) in enumerate(terms)]
    assert turned(text(fields, changed)) != turned(text(fields, terms))
