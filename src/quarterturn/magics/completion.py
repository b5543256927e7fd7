"""Completion of magic lines: actions, then the couplings of the action, the lattice and the options.

Nothing is computed for it but what the session holds already.
"""

from __future__ import annotations

import re
from collections.abc import Callable

from IPython.core.completer import CompletionContext, SimpleCompletion, SimpleMatcherResult, context_matcher
from IPython.core.getipython import get_ipython

from quarterturn.magics.levels import OPTIONS as LEVELS_OPTIONS
from quarterturn.magics.record import VIEWS
from quarterturn.magics.registry import session
from quarterturn.magics.request import LATTICE_WORDS
from quarterturn.magics.saddle import KINDS as SADDLE_KINDS
from quarterturn.magics.saddle import OPTIONS as SADDLE_OPTIONS
from quarterturn.magics.sample import OPTIONS as SAMPLE_OPTIONS
from quarterturn.magics.series import OPTIONS as SERIES_OPTIONS

LINE = re.compile(r"^\s*(?:[^\W\d]\w*\s*=\s*)?%(?P<magic>\w+)\s+(?P<before>.*?)(?P<typed>[^\s,=]*)$")


@context_matcher()
def complete_line(context: CompletionContext) -> SimpleMatcherResult:
    """The matcher for IPython's completer: our words alone where a line of ours is being typed."""
    line = LINE.match(context.text_until_cursor)
    if line is None or line["magic"] not in OFFERS:
        return {"completions": [], "suppress": False}
    offers = OFFERS[line["magic"]](line["before"])
    found = [SimpleCompletion(offer, type="magic") for offer in offers if offer.startswith(line["typed"])]
    return {"completions": found, "suppress": True, "matched_fragment": line["typed"], "ordered": True}


def _settings(options: tuple[str, ...], lattice: tuple[str, ...] = LATTICE_WORDS) -> Callable[[str], list[str]]:
    def offers(before: str) -> list[str]:
        name, *rest = before.replace(",", " ").split() or [""]
        if not name:
            return list(session.actions)
        if re.search(r"spacing\s*=\s*$", before) and "spacing" in options:
            return ["lattice"]
        if re.search(r"kind\s*=\s*$", before) and "kind" in options:
            return list(SADDLE_KINDS)
        action = session.actions.get(name)
        if action is not None and re.search(r"coupling\s*=\s*$", before) and "coupling" in options:
            return list(action.couplings)
        if action is None or before.rstrip().endswith("="):
            return []
        given = {word.partition("=")[0] for word in rest}
        there = (*action.couplings, *lattice, *options)
        return [f"{word}=" for word in there if word not in given]

    return offers


def _results(before: str) -> list[str]:
    if not before.strip():
        return [*session.names(get_ipython()), "all"] if session.results else []
    return list(VIEWS) if len(before.split()) == 1 else []


OFFERS: dict[str, Callable[[str], list[str]]] = {
    "sample": _settings(tuple(SAMPLE_OPTIONS)),
    "levels": _settings(tuple(LEVELS_OPTIONS)),
    "saddle": _settings(tuple(SADDLE_OPTIONS)),
    "series": _settings(tuple(SERIES_OPTIONS), ()),
    "record": _results,
    "turn": lambda before: [] if before.strip() else list(session.actions),
}
