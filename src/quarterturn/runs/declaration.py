"""`action`: a body of notation becomes an action that shows itself."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

from quarterturn.actions.declare import declare
from quarterturn.actions.model import Action, Geometry
from quarterturn.actions.steps import turn_steps
from quarterturn.errors import ActionError
from quarterturn.reports.action_card import ActionCard, action_bundle, render_text
from quarterturn.reports.turn_steps import TurnSteps
from quarterturn.runs.settings import LATTICE_WORDS
from quarterturn.runs.unit_words import counted, lattice_units

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
        *("coupling", "order", "level", "start", "end", "scheme"),
        *LATTICE_WORDS,
    }
)


@dataclass(frozen=True)
class DeclaredAction(Action):
    """An `Action` that displays as a card: both actions, the findings, the couplings."""

    def card(self) -> ActionCard:
        """What a person sees of a declaration, as plain data."""
        couplings = tuple((name, c.default, counted(self, name)) for name, c in self.couplings.items())
        return ActionCard(
            name=self.name,
            latex=self.latex,
            euclidean_latex=self.euclidean.latex,
            canonical=self.canonical,
            findings=tuple((f.severity, f.topic, f.message) for f in self.findings),
            couplings=couplings,
            measurements=tuple(m.label for m in self.measurements),
            lattice=_in_words(self.geometry) + lattice_units(self),
            metric=_metric_in_words(self),
            counted="unit" if self.units else "dimension",
            digest=self.digest,
        )

    @property
    def steps(self) -> TurnSteps:
        """The quarter turn step by step; shows itself."""
        return TurnSteps(self.name, tuple((s.words, s.notation, s.latex) for s in turn_steps(self)))

    def __repr__(self) -> str:
        return render_text(self.card())

    def _repr_mimebundle_(self, include: Any = None, exclude: Any = None) -> Any:
        return action_bundle(self.card())


def _in_words(geometry: Geometry | None) -> str:
    """The lattice as a person reads it."""
    if geometry is None:
        return "none"
    edges = "" if not geometry.edges else "; " + ", ".join(edge.kind for edge in geometry.edges)
    if geometry.vacuum is not None:
        return f"a = {geometry.spacing:g}, beta such that exp(-beta gap) < {geometry.vacuum:g}{edges}"
    if not geometry.space:
        return f"{geometry.sites} sites, a = {geometry.spacing:g}, beta = {geometry.beta:g}{edges}"
    spacings = sorted(set(geometry.spacings))
    a = f"a = {spacings[0]:g}" if len(spacings) == 1 else f"a = {', '.join(f'{s:g}' for s in geometry.spacings)}"
    return f"{' x '.join(map(str, geometry.extents))} sites, {a}, beta = {geometry.beta:g}{edges}"


def _metric_in_words(action: Action) -> str:
    if action.form != "L":
        return ""
    kind = "mostly minus" if action.metric.startswith("+") else "mostly plus"
    return f"{action.metric} ({kind})"


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
