"""Lattice statements of paths and fields: extents, spacings, edges, and a beta chosen for the vacuum."""

import math

import pytest

import quarterturn as qt
from quarterturn.actions.declare import declare
from quarterturn.actions.model import Edge
from quarterturn.runs.settings import resolve

FIELD = "phi(t,x)\nL = 1/2 (d phi)^2 - 1/2 phi^2\n"
PATH = "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2\nw = 1\n"


@pytest.mark.parametrize(
    ("words", "extents", "spacings"),
    [
        ("lattice 8 x 12", (8, 12), (1.0, 1.0)),
        ("lattice 8 x 12, a = 0.5", (8, 12), (0.5, 0.5)),
        ("lattice 8 x 12, a = 0.5, a_t = 0.1", (8, 12), (0.1, 0.5)),
        ("lattice 8 x 12, beta = 2", (8, 12), (0.25, 1.0)),
    ],
)
def test_a_field_has_extents_and_spacings_in_every_direction(
    words: str, extents: tuple[int, ...], spacings: tuple[float, ...]
) -> None:
    geometry = declare(FIELD + words).geometry
    assert geometry is not None and (geometry.extents, geometry.spacings) == (extents, spacings)


def test_edges_belong_to_directions() -> None:
    geometry = declare(FIELD + "lattice 8 x 8, antiperiodic t, open x").geometry
    assert geometry is not None and geometry.edges == (Edge("antiperiodic"), Edge("open"))
    twisted = declare("psi(t,x) complex\nL = |psi'|^2 - |d_x psi|^2 - |psi|^2\nlattice 8 x 8, twist x = pi/3").geometry
    assert twisted is not None and twisted.edges[1].kind == "twist"
    assert twisted.edges[1].values[0] == pytest.approx(math.pi / 3)


@pytest.mark.parametrize(
    ("words", "said"),
    [
        ("lattice 8", "2 coordinates"),
        ("lattice 8 x 8 x 8", "2 coordinates"),
        ("lattice 8 x 2", "at least 3"),
        ("lattice 8 x 8, a_y = 1", "no field has"),
        ("lattice 8 x 8, a_t = 1, beta = 4", "twice"),
        ("lattice beta = 4", "every direction"),
        ("lattice 8 x 8, open y", "depends on y"),
        ("lattice 8 x 8, beta = vacuum", "paths"),
    ],
)
def test_a_lattice_that_does_not_fit_is_refused(words: str, said: str) -> None:
    with pytest.raises(qt.ActionError, match=said) as caught:
        declare(FIELD + words)
    assert caught.value.span is not None


def test_a_beta_for_the_vacuum_follows_the_gap() -> None:
    """exp(-beta gap) below the tolerance, with as few sites as that takes; the oscillator has the gap w."""
    action = declare(PATH + "lattice beta = vacuum 1e-6, a = 0.1")
    for w in (1.0, 2.5):
        settings = resolve(action, {"w": w})
        assert math.exp(-settings.beta * w) <= 1e-6 < math.exp(-(settings.beta - 0.1) * w)
    assert resolve(action, {"beta": 4.0}).sites == 40
    assert (
        declare(PATH + "lattice beta = vacuum, a = 0.1").geometry
        == declare(PATH + "lattice beta = vacuum 1e-6, a = 0.1").geometry
    )


def test_a_vacuum_out_of_reach_is_refused() -> None:
    text = "q(t)\nL = 1/2 q'^2 - lam (q^2 - 25)^2\nlam = 1\nlattice beta = vacuum, a = 0.1"
    with pytest.raises(qt.RequestError, match="would need"):
        resolve(declare(text), {})
