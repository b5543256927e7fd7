"""From the words of a magic line to the keywords of a call."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from quarterturn.errors import RequestError
from quarterturn.magics.numbers import measured, number
from quarterturn.magics.words import Line, LineError, Setting, Words

if TYPE_CHECKING:
    from quarterturn.actions.model import Action

LATTICE_WORDS = ("a", "beta", "sites", "temperature")
Reader = Callable[[Line, Setting], Any]  # of the value of an option; raises LineError


def keywords(words: Words, action: Action, options: Mapping[str, Reader]) -> dict[str, Any]:
    """The settings of a line as keywords: couplings and lattice as numbers, each option by its own reader.

    A setting with a label, error[gap(q)]=2%, becomes an entry of a mapping; the entry "" is what holds for the rest.

    Raises
    ------
    LineError
        A key that is neither a coupling nor a word of the lattice nor an option, or a value that can't be read.
    """
    plain: dict[str, Any] = {}
    labelled: dict[str, dict[str, Any]] = {}
    for setting in words.settings:
        if setting.key not in (*options, *action.couplings, *LATTICE_WORDS):
            raise _unknown(words.line, setting, action, options)
        plainly = measured if setting.key in LATTICE_WORDS and setting.key != "sites" else number
        value = options.get(setting.key, plainly)(words.line, setting)
        if setting.label is None:
            plain[setting.key] = value
        elif setting.key == "error" and "error" in options:
            labelled.setdefault("error", {})[setting.label] = value
        else:
            raise words.line.at(setting, "only error takes a label in square brackets, as in error[gap(q)]=2%")
    for key, targets in labelled.items():
        plain[key] = {**targets, **({"": plain[key]} if key in plain else {})}
    return plain


@contextmanager
def placed(words: Words) -> Iterator[None]:
    """Complaints of the call about a value of this line are shown at the value."""
    try:
        yield
    except RequestError as complaint:
        setting = next((s for s in words.settings if _is_about(complaint.message, s)), None)
        if setting is None or complaint.span is not None:
            raise
        raise words.line.at_value(setting, complaint.message, complaint.repair) from None


def _is_about(message: str, setting: Setting) -> bool:
    """Whether a complaint begins with the key of a setting, or quotes its label."""
    return message.startswith(f"{setting.key} ") or (setting.label is not None and repr(setting.label) in message)


def nearest(word: str, there: Sequence[str]) -> str | None:
    """The one of `there` that `word` may stand for."""
    return next(iter(difflib.get_close_matches(word, there, n=1, cutoff=0.5)), None)


def _unknown(line: Line, setting: Setting, action: Action, options: Mapping[str, Reader]) -> LineError:
    near = nearest(setting.key, [*action.couplings, *options, *LATTICE_WORDS])
    return line.complaint(
        f"{action.name} has no coupling {setting.key}; "
        f"its couplings are {', '.join(action.couplings) or 'none'}, "
        f"the lattice is set by {', '.join(LATTICE_WORDS)}, options are {', '.join(options)}",
        setting.start,
        setting.start + len(setting.key),
        f"{near}={setting.value}" if near else None,
    )
