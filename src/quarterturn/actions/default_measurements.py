"""What is measured where a cell has no measure statement."""

from __future__ import annotations

from collections.abc import Mapping

from quarterturn.actions.circles import phase_of
from quarterturn.actions.model import Path
from quarterturn.actions.printing import notation
from quarterturn.notation.parse import read_formula
from quarterturn.notation.tokens import Source
from quarterturn.notation.tree import Dynamics, MeasureItem
from quarterturn.notation.vocabulary import Names


def default_items(paths: Mapping[str, Path], dynamics: Dynamics) -> list[MeasureItem]:
    """Without a measure statement: the mean and the mean square of each path, or the cosine of an angle."""
    items = []
    for path in paths.values():
        if path.period is not None:
            texts = [f"<cos({notation(phase_of(path.atoms[0], path.period))})>"]
        elif path.kind == "unit":
            texts = [f"<{path.name}[{n}]^2>" for n in range(1, path.components + 1)]
        elif path.kind == "complex":
            texts = [f"<|{path.name}|^2>"]
        elif path.components:
            texts = [f"<{path.name}.{path.name}>"]
        else:
            texts = [f"<{path.name}>", f"<{path.name}^2>"]
        for text in texts:
            body = read_formula(Source(text), 0, len(text), Names({path.name: () for path in paths.values()}))
            items.append(MeasureItem("", text, body, dynamics.span))
    return items
