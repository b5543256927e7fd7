"""The lattice of a path: its extent, and what is refused."""

import pytest

from quarterturn.actions.expression import ONE, PI, ZERO, Expression, PathAtom
from quarterturn.actions.model import EuclideanAction
from quarterturn.errors import RequestError
from quarterturn.lattice.path import discretise

Q, THETA = PathAtom("q"), PathAtom("theta")
ACTION = EuclideanAction(
    (Q, THETA),
    (None, Expression.of(PI).scaled(2)),
    ((ONE, ZERO), (ZERO, ONE)),
    Expression.of(Q, 2),
    (ZERO, ZERO),
    (),
)


def test_a_lattice_knows_its_extent_and_its_angles() -> None:
    lattice = discretise(ACTION, 40, 0.25)
    assert lattice.beta == 10 and lattice.components == 2 and lattice.angles == (1,)
    assert not lattice.is_complex


def test_a_first_order_term_makes_the_weight_complex() -> None:
    turned = EuclideanAction((Q,), (None,), ((ONE,),), ZERO, (ONE,), ())
    assert discretise(turned, 3, 1.0).is_complex


@pytest.mark.parametrize("sites", [2, 1, 0, -5])
def test_fewer_than_three_sites_are_refused(sites: int) -> None:
    with pytest.raises(RequestError, match="at least 3 sites"):
        discretise(ACTION, sites, 1.0)


@pytest.mark.parametrize("spacing", [0.0, -0.1, float("inf"), float("nan")])
def test_a_spacing_that_is_no_length_is_refused(spacing: float) -> None:
    with pytest.raises(RequestError, match="positive and finite"):
        discretise(ACTION, 8, spacing)
