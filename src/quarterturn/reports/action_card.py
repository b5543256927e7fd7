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
    latex: str  # the action as written, in LaTeX without dollar signs
    euclidean_latex: str  # the Euclidean action, in LaTeX without dollar signs
    canonical: str  # canonical notation
    findings: tuple[tuple[str, str, str], ...]  # (severity, topic, message)
    couplings: tuple[tuple[str, float, str], ...]  # (name, default, dimension in words; empty where undetermined)
    measurements: tuple[str, ...]
    lattice: str
    digest: str
    metric: str = ""  # the signature in which L is read
    counted: str = "dimension"  # heading beside the couplings: dimension, or unit where units have names


def render_text(card: ActionCard) -> str:
    """For a terminal, without a trailing line break."""
    body = ["    " + _printable(line) for line in card.canonical.splitlines()]
    parts = [
        f"action {one_line(card.name)}",
        "\n".join(body),
        "\n".join(
            _columns(
                [
                    ("metric", card.metric),
                    ("lattice", card.lattice),
                    *(("measured", label) for label in card.measurements),
                ]
            )
        ),
        "\n".join(_coupling_lines(card)),
        "\n".join(_sentence(severity, message) for severity, _, message in card.findings),
        f"digest{GAP}{card.digest[:SHORT_NAME]}" if card.digest else "",
    ]
    return "\n\n".join(part for part in parts if part)


def render_html(card: ActionCard) -> str:
    """For a page; self-contained."""
    pairs = [
        ("real time", formula(card.latex, "") if card.latex else ""),
        ("imaginary time", formula(card.euclidean_latex, "") if card.euclidean_latex else ""),
        ("metric", words(card.metric)),
        ("lattice", words(card.lattice)),
        ("measured", "<br>".join(f"<code>{words(label)}</code>" for label in card.measurements)),
        ("notation", verbatim(card.canonical) if card.canonical else ""),
    ]
    says = [
        ("qt-note" if severity == "note" else "qt-warning", _mark(severity), message)
        for severity, _, message in card.findings
    ]
    digest = words(card.digest)
    return framed(
        f'<p class="qt-title"><strong>action {words(card.name)}</strong></p>',
        definitions([pair for pair in pairs if pair[1]]),
        _coupling_table(card),
        saying(says),
        f'<p class="qt-quiet">digest <code title="{digest}">{digest[:SHORT_NAME]}</code></p>' if digest else "",
    )


def render_latex(card: ActionCard) -> str:
    """LaTeX source."""
    parts = [f"\\noindent\\textbf{{action {escaped(card.name)}}}"]
    parts += [f"\\[ {one_line(tex)} \\]" for tex in (card.latex, card.euclidean_latex) if tex]
    parts += [
        f"\\noindent {escaped(f'{name} = {value:.8g}, {card.counted} {dimension or UNKNOWN_DIMENSION}')}"
        for name, value, dimension in card.couplings
    ]
    parts += [f"\\noindent {escaped(f'{_mark(severity)} {message}')}" for severity, _, message in card.findings]
    return "\n\n".join(parts) + "\n"


def action_bundle(card: ActionCard) -> tuple[dict[str, Any], dict[str, Any]]:
    """The data and the metadata of an output that shows `card`."""
    return {"text/plain": render_text(card), "text/html": render_html(card), "text/latex": render_latex(card)}, {}


def _coupling_lines(card: ActionCard) -> list[str]:
    pairs = [(f"{name} = {value:.8g}", dimension or UNKNOWN_DIMENSION) for name, value, dimension in card.couplings]
    return _columns([("coupling", card.counted), *pairs]) if pairs else []


def _coupling_table(card: ActionCard) -> str:
    rows = "".join(
        f'<tr><th scope="row"><code>{words(name)} = {value:.8g}</code></th>'
        f"<td>{words(dimension or UNKNOWN_DIMENSION)}</td></tr>"
        for name, value, dimension in card.couplings
    )
    heading = f'<th scope="col">coupling</th><th scope="col">{words(card.counted)}</th>'
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
