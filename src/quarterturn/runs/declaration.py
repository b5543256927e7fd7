"""`action`: a body of notation becomes an action that shows itself."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

from quarterturn.actions.declare import declare
from quarterturn.actions.model import Action
from quarterturn.errors import ActionError
from quarterturn.reports.action_card import ActionCard, action_bundle, render_text
from quarterturn.runs.settings import LATTICE_WORDS

RESERVED = frozenset(
    {
        "action",
        "error",
        "time",
        "draws",
        "chains",
        "seed",
        "progress",
        "stop",
        "count",
        "spacing",
        "vacuum",
        "kind",
        *LATTICE_WORDS,
    }
)


@dataclass(frozen=True)
class DeclaredAction(Action):
    """An `Action` that displays as a card: both actions, the findings, the couplings."""

    def card(self) -> ActionCard:
        """What a person sees of a declaration, as plain data."""
        geometry = self.geometry
        lattice = f"{geometry.sites} sites, a = {geometry.spacing:g}, beta = {geometry.beta:g}" if geometry else "none"
        couplings = tuple(
            (name, c.default, "" if c.dimension is None else str(c.dimension)) for name, c in self.couplings.items()
        )
        return ActionCard(
            name=self.name,
            latex=self.latex,
            euclidean_latex=self.euclidean.latex,
            canonical=self.canonical,
            findings=tuple((f.severity, f.topic, f.message) for f in self.findings),
            couplings=couplings,
            measurements=tuple(m.label for m in self.measurements),
            lattice=lattice,
            digest=self.digest,
        )

    def __repr__(self) -> str:
        return render_text(self.card())

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> Any:
        return action_bundle(self.card())


def action(text: str, name: str = "action") -> DeclaredAction:
    """Declare an action from a body of notation.

    Parameters
    ----------
    text
        The body of an `%%action` cell; `%%action?` shows the notation.
    name
        What the action is called in reports.

    Returns
    -------
    DeclaredAction
        With `.findings`, `.latex`, `.digest`, `.couplings`, and the turned action in `.euclidean`.

    Raises
    ------
    NotationError
        The text can't be read; says where and what was expected.
    ActionError
        The text can be read but is no action, or one that is not available yet.
    """
    declared = declare(text, name)
    for word in sorted(RESERVED & set(declared.couplings)):
        raise ActionError(
            f"{word} is a word of the calls (sample(…, {word}=…)) and can't name a coupling",
            span=declared.couplings[word].span,
            text=text,
            repair=f"{word}_1",
        )
    return DeclaredAction(**{f.name: getattr(declared, f.name) for f in fields(declared)})
