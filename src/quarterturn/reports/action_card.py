"""What a person sees after declaring an action: both actions typeset, what the turn found, couplings, measurements."""

from dataclasses import dataclass
from typing import Any

from quarterturn.errors import display_width
from quarterturn.reports.cells import one_line
from quarterturn.reports.latex import escaped
from quarterturn.reports.markup import definitions, formula, framed, saying, verbatim, words
from quarterturn.reports.text import GAP, SHORT_NAME, WIDTH, padded, wrapped

MARKS = {"fatal": "The integral diverges:", "note": "Note:"}  # any other severity is its own word
UNKNOWN_DIMENSION = "not determined"


@dataclass(frozen=True, slots=True)
class ActionCard:
    """An action and its turned form, as plain data."""

    name: str
    real_time: str  # the action as written, in LaTeX without dollar signs
    imaginary_time: str  # the Euclidean action, in LaTeX without dollar signs
    canonical: str  # canonical notation
    findings: tuple[tuple[str, str, str], ...]  # (severity, topic, message)
    couplings: tuple[tuple[str, float, str], ...]  # (name, default, dimension in words; empty where undetermined)
    measurements: tuple[str, ...]
    lattice: str
    digest: str

    def text(self) -> str:
        """For a terminal, without a trailing line break."""
        body = ["    " + _printable(line) for line in self.canonical.splitlines()]
        parts = [
            f"action {one_line(self.name)}",
            "\n".join(body),
            "\n".join(_columns([("lattice", self.lattice), *(("measured", label) for label in self.measurements)])),
            "\n".join(self._coupling_lines()),
            "\n".join(_sentence(severity, message) for severity, _, message in self.findings),
            f"digest{GAP}{self.digest[:SHORT_NAME]}" if self.digest else "",
        ]
        return "\n\n".join(part for part in parts if part)

    def html(self) -> str:
        """For a page; self-contained."""
        pairs = [
            ("real time", formula(self.real_time, "") if self.real_time else ""),
            ("imaginary time", formula(self.imaginary_time, "") if self.imaginary_time else ""),
            ("lattice", words(self.lattice)),
            ("measured", "<br>".join(f"<code>{words(label)}</code>" for label in self.measurements)),
            ("notation", verbatim(self.canonical) if self.canonical else ""),
        ]
        says = [
            ("qt-note" if severity == "note" else "qt-warning", _mark(severity), message)
            for severity, _, message in self.findings
        ]
        digest = words(self.digest)
        return framed(
            f'<p class="qt-title"><strong>action {words(self.name)}</strong></p>',
            definitions([pair for pair in pairs if pair[1]]),
            self._coupling_table(),
            saying(says),
            f'<p class="qt-quiet">digest <code title="{digest}">{digest[:SHORT_NAME]}</code></p>' if digest else "",
        )

    def latex(self) -> str:
        """LaTeX source."""
        parts = [f"\\noindent\\textbf{{action {escaped(self.name)}}}"]
        parts += [f"\\[ {one_line(tex)} \\]" for tex in (self.real_time, self.imaginary_time) if tex]
        parts += [
            f"\\noindent {escaped(f'{name} = {value:.8g}, dimension {dimension or UNKNOWN_DIMENSION}')}"
            for name, value, dimension in self.couplings
        ]
        parts += [f"\\noindent {escaped(f'{_mark(severity)} {message}')}" for severity, _, message in self.findings]
        return "\n\n".join(parts) + "\n"

    def mimebundle(self) -> tuple[dict[str, Any], dict[str, Any]]:
        """The data and the metadata of an output that shows this card."""
        return {"text/plain": self.text(), "text/html": self.html(), "text/latex": self.latex()}, {}

    def _coupling_lines(self) -> list[str]:
        pairs = [(f"{name} = {value:.8g}", dimension or UNKNOWN_DIMENSION) for name, value, dimension in self.couplings]
        return _columns([("coupling", "dimension"), *pairs]) if pairs else []

    def _coupling_table(self) -> str:
        rows = "".join(
            f'<tr><th scope="row"><code>{words(name)} = {value:.8g}</code></th>'
            f"<td>{words(dimension or UNKNOWN_DIMENSION)}</td></tr>"
            for name, value, dimension in self.couplings
        )
        heading = '<th scope="col">coupling</th><th scope="col">dimension</th>'
        return f"<table><thead><tr>{heading}</tr></thead><tbody>{rows}</tbody></table>" if rows else ""


def _mark(severity: str) -> str:
    return MARKS.get(severity, f"{severity.capitalize()}:")


def _sentence(severity: str, message: str) -> str:
    mark = _mark(severity) + " "
    return ("\n" + " " * len(mark)).join(wrapped(mark + one_line(message), WIDTH - len(mark)))


def _columns(pairs: list[tuple[str, str]]) -> list[str]:
    """Names and what they stand for; a name that repeats is written once, an empty second leaves the line out."""
    shown = [(one_line(name), one_line(text)) for name, text in pairs if text]
    width = max((display_width(name) for name, _ in shown), default=0)
    before = ["", *(name for name, _ in shown)]
    return [
        padded("" if name == last else name, width) + GAP + text
        for (name, text), last in zip(shown, before, strict=False)
    ]


def _printable(line: str) -> str:
    return "".join(letter if letter.isprintable() else " " for letter in line)
