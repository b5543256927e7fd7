"""Words such as "q^2" or "<q(t) q(0)>" as measurements of a declared action."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from quarterturn.actions.declare import declare
from quarterturn.actions.expression import Expression
from quarterturn.actions.model import Action, Measurement
from quarterturn.errors import QuarterturnError, RequestError
from quarterturn.runs.recording import notation_of


def measured(action: Action, label: str) -> Measurement:
    """The measurement that `label` would be in the action's cell. Raises RequestError with the reason."""
    body = notation_of(replace(action, measurements=()))
    try:
        if not label.strip() or "\n" in label or ";" in label:
            raise RequestError("one measurement is expected")
        (found,) = declare(f"{body}\nmeasure {label}", action.name).measurements
    except (QuarterturnError, ValueError) as trouble:
        reason = trouble.message if isinstance(trouble, QuarterturnError) else "one measurement is expected"
        raise RequestError(f"{label!r} can't be measured: {reason}") from None
    return found


def operator(action: Action, words: str) -> Expression:
    """The function of the paths that `words` name, such as q or q^2 - 1. Raises RequestError with the reason."""
    found = measured(action, f"<{words}>")
    if len(found.brackets) != 1 or len(found.brackets[0].groups) != 1 or found.brackets[0].over != "sites":
        raise RequestError(f"{words!r} is no function of the path at one time, such as 'q' or 'q^2'")
    bracket = found.brackets[0]
    return bracket.groups[0][1]


def point(word: str, place: Any, degrees: int) -> tuple[float, ...]:
    """A place with one number for each degree of freedom. Raises RequestError where it is none."""
    try:
        found: tuple[float, ...] = tuple(float(x) for x in np.atleast_1d(np.asarray(place, dtype=np.float64)))
    except (TypeError, ValueError):
        found = ()
    if len(found) != degrees or not np.isfinite(found).all():
        raise RequestError(f"{word} must be a point of {degrees} finite numbers, got {place!r}")
    return found
