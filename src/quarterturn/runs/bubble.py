"""The bounce of a field: from a declared action to the O(D)-symmetric problem and back to its own lengths."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from quarterturn.actions.confinement import value_at
from quarterturn.actions.expression import PathAtom
from quarterturn.actions.model import Action
from quarterturn.errors import SaddleError
from quarterturn.reports.report import Curve, Row
from quarterturn.saddles.problem import field_problem
from quarterturn.saddles.radial import RadialBounce, radial_bounce

Floats = NDArray[np.float64]
DRAWN = 201  # points of a curve
MARGIN = 0.3  # of the extent of the field, that the potential is drawn beyond it


def field_saddle(action: Action, couplings: Mapping[str, float], start: Sequence[float] | None) -> dict[str, Any]:
    """The parts of a `Saddles` for one real scalar field in D dimensions.

    With K/2 (d_t phi)^2 + sum G_k/2 (d_k phi)^2 each coordinate is measured in units of the root of its coefficient.
    Raises SaddleError for other fields.
    """
    atom, scales = _one_scalar(action, couplings)
    dimension = len(action.coordinates)
    found = radial_bounce(
        action.euclidean.potential, atom, couplings, dimension, None if start is None else float(start[0])
    )
    volume, unit = math.prod(scales), scales[0]
    name = atom.name
    rows = [
        Row("S", "S", volume * found.action, volume * found.errors["action"]),
        Row("radius", "R", unit * found.radius, unit * found.errors["radius"]),
        Row(f"{name}(0)", f"{name}(0)", found.centre, found.errors.get("centre")),
        Row("false vacuum", f"{name}_f", found.false_vacuum),
    ]
    if found.thickness is not None:
        rows.append(Row("thickness", r"\Delta R", unit * found.thickness, unit * found.errors["thickness"]))
    if found.negative_mode is not None:
        rows.append(Row("lambda_-", r"\lambda_-", found.negative_mode, found.errors["negative_mode"]))
    if found.thin_wall is not None and found.tension is not None:
        rows += [
            Row("tension", r"\sigma", found.tension),
            Row("S, thin wall", r"S_{\mathrm{thin\,wall}}", volume * found.thin_wall),
        ]
    return {
        "kind": "field bounce",
        "t": unit * found.r,
        "path": found.phi[None],
        "rows": tuple(rows),
        "curves": tuple(_curves(action, atom, couplings, found, unit)),
        "warnings": tuple(_doubts(found)),
        "facts": tuple(_facts(action, found, scales)),
    }


def _one_scalar(action: Action, couplings: Mapping[str, float]) -> tuple[PathAtom, tuple[float, ...]]:
    """The field, and the roots of the coefficients of its squared derivatives."""
    e = action.euclidean
    if len(e.variables) != 1 or e.periods[0] is not None or e.spheres:
        raise SaddleError(
            f"bounces are solved for one real scalar field; {action.name} has {len(e.variables)} real "
            "components or lives on "
            "a circle or a sphere: sample it instead"
        )
    if e.links:
        raise SaddleError("SE is an action on a lattice; bounces are solved in the continuum: write L or LE, or sample")
    if e.sources:
        raise SaddleError("a source breaks the symmetry of the bounce: leave it out, or sample")
    slanted = [*e.drift, *(b for row in e.tilt for b in row)]
    if any(a.paths for a in slanted) and len(e.variables) > 1:
        raise SaddleError("terms linear in the derivatives break the symmetry of the bounce: sample it instead")
    (atom,) = e.variables
    coefficients = [value_at(e.mass[0][0], couplings), *(value_at(g[0][0], couplings) for g in e.stiffness)]
    return atom, tuple(math.sqrt(c) for c in coefficients)


def _curves(
    action: Action, atom: PathAtom, couplings: Mapping[str, float], found: RadialBounce, unit: float
) -> list[Curve]:
    name = atom.name
    r = np.linspace(0.0, float(min(found.r[-1], found.radius + 8 * (found.thickness or found.radius))), DRAWN)
    phi = np.interp(r, found.r, found.phi)
    low, high = float(np.min(found.phi)), float(np.max(found.phi))
    problem = field_problem(action.euclidean.potential, atom, couplings)
    beyond = MARGIN * (high - low)
    wide, course = np.linspace(low - beyond, high + beyond, DRAWN), np.linspace(low, high, DRAWN)
    return [
        Curve(f"{name}(r)", f"{name}(r)", "r", _plain(unit * r), _plain(phi), style="path"),
        Curve("V", "V", name, _plain(wide), _plain(problem.value(wide[None])), style="potential"),
        Curve("the path", "", name, _plain(course), _plain(problem.value(course[None])), style="course"),
    ]


def _plain(values: Floats) -> tuple[float, ...]:
    return tuple(map(float, values))


def _facts(action: Action, found: RadialBounce, scales: Sequence[float]) -> list[tuple[str, str]]:
    dimension = found.dimension
    symmetry = f"O({dimension}) in {', '.join(action.coordinates)}"
    if max(scales) - min(scales) > 1e-12 * max(scales):
        symmetry += ", each in units of the root of its coefficient; lengths are along t"
    method = "collocation with Newton's method, continued in the dimension from the bounce of a path, without shooting"
    if found.free_size:
        method = "initial-value problem from 1 at the centre; the potential has no scale"
    return [
        ("symmetry", symmetry),
        ("method", method),
        ("action", "from the gradient term by Derrick's theorem; its error is the difference from the direct sum"),
        ("rate", f"exp(-S) per volume; the prefactor of a field is not calculated, nor are the {dimension} zero modes"),
    ]


def _doubts(found: RadialBounce) -> list[str]:
    if found.free_size:
        return [
            "the potential has no scale: there is a bounce of every size with this action, a continuous "
            "family, of which "
            "the one that is 1 at its centre is shown; a rate needs an integral over sizes and quantum corrections"
        ]
    if found.negative_mode is None:
        return ["no negative mode was found: this may be no bounce"]
    return []
