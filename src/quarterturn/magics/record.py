"""`%record`: where a result comes from, and results made earlier."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import Any

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.registry import SHORT_NAME, Kept, session
from quarterturn.magics.words import plain_words

VIEWS = ("json", "result")
Pairs = list[tuple[str, str]]


@dataclass(frozen=True)
class Sheet:
    """Names and what they stand for, in two columns."""

    title: str
    pairs: Pairs

    def __repr__(self) -> str:
        from quarterturn.errors import display_width
        from quarterturn.reports.text import GAP, WIDTH, padded, wrapped

        width = max((display_width(name) for name, _ in self.pairs), default=0)
        lines = [self.title, ""]
        for name, text in self.pairs:
            first, *more = wrapped(text, WIDTH - width - len(GAP))
            lines += [padded(name, width) + GAP + first, *(" " * width + GAP + line for line in more)]
        return "\n".join(lines)

    def _repr_html_(self) -> str:
        from quarterturn.reports.markup import definitions, framed, words

        rows = definitions([(name, words(text)) for name, text in self.pairs])
        return framed(f'<p class="qt-title"><strong>{words(self.title)}</strong></p>', rows)


@dataclass(frozen=True)
class Source:
    """A record as JSON, for reading; `record` is the plain dict."""

    record: dict[str, Any]

    def __repr__(self) -> str:
        return json.dumps(self.record, indent=2, ensure_ascii=False)


@magics_class
class RecordMagic(Magics):
    """The line magic `%record`."""

    @line_magic
    def record(self, line: str) -> Any:
        """Show where a result comes from: what was asked, what it was made with, what it is called.

            %record [NAME] [json | result]
            %record all

        NAME      last (or nothing), a Python variable, an action (its latest result), or the first letters
                  of a record's name
        json      the record itself, as it travels in the notebook
        result    the result again, as when it was made
        all       every result of this session, most recent first

        Example
        -------
            %record last
            %record quartic result
        """
        shown, names = plain_words("%record", line)
        view = names.pop().text if names and names[-1].text in VIEWS else None
        if len(names) > 1:
            raise shown.at(names[1], f"after the name of a result stands nothing, {' or '.join(VIEWS)}")
        if view is None and names and names[0].text == "all":
            return Sheet("results of this session", [(kept.short_name, kept.line) for kept in session.results])
        kept = session.result(shown, names[0] if names else None, self.shell)
        if view == "result":
            return kept.result
        return Source(kept.result.record) if view == "json" else provenance(kept)


def provenance(kept: Kept) -> Sheet:
    """What a record says of how its result was made."""
    record = kept.result.record
    action, lattice, request = record["action"], record["lattice"], record["request"]
    pairs = [
        ("record", f"{kept.result.record_name}"),
        ("made by", kept.line or "a call in Python"),
        (
            "action",
            f"{action['name']}, digest {action['digest'][:SHORT_NAME]}, turned {action['turned_digest'][:SHORT_NAME]}",
        ),
        ("notation", "; ".join(action["notation"].splitlines())),
        ("couplings", _listed(record["couplings"])),
        ("lattice", "none: the continuum" if lattice is None else _listed(lattice)),
        ("request", _listed(request)),
        ("results", ", ".join(result["label"] for result in record["results"])),
        ("warnings", f"{len(record['warnings'])}" if record["warnings"] else "none"),
        ("stopped by", f"{record['stop']}, {record['wall_seconds']:.1f} s"),
        ("made with", _listed(record["versions"])),
        ("platform", _listed(record["platform"])),
        ("precision", record["precision"]),
    ]
    title = f"{record['kind']} of {action['name']}, record {kept.short_name}"
    return Sheet(title, [(name, text) for name, text in pairs if text])


def _listed(values: dict[str, Any]) -> str:
    shown = ((name.replace("_", " "), f"{v:g}" if isinstance(v, float) else v) for name, v in values.items())
    return ", ".join(f"{name} {value}" for name, value in shown if value is not None) or "none"
