"""Pieces of HTML that reports and action cards share: escaped words, formulas, aligned numbers, the frame.

Every text that comes from outside passes `words`; no other door leads into the page. The markup also reads without
its style, as it stands in a notebook that is not trusted, where style and SVG elements are taken out.
"""

import html
import re
from collections.abc import Iterable, Sequence
from functools import cache
from importlib.resources import files

from quarterturn.reports.cells import SCIENTIFIC, head_length, one_line

HEAD_MARGIN = 0.4  # in widths of a digit: a minus is wider than a digit


def words(text: str) -> str:
    """`text` on one line, escaped for elements and attributes alike."""
    return html.escape(one_line(text), quote=True)


def verbatim(text: str) -> str:
    """A text of several lines, escaped and set as it was written."""
    lines = "\n".join("".join(letter if letter.isprintable() else " " for letter in line) for line in text.splitlines())
    return f"<pre>{html.escape(lines, quote=True)}</pre>"


def formula(latex: str, plain: str) -> str:
    """A formula in TeX, and in `plain` notation for pages that typeset nothing; one of the two may be empty."""
    tex, note = words(latex.replace("$", r"\$")), words(plain)
    if not latex or not plain:
        return f"<span>${tex}$</span>" if latex else f"<code>{note}</code>"
    return (
        f'<span class="qt-formula" title="{note}"><span class="qt-tex">${tex}$</span>'
        f' <code class="qt-plain">{note}</code></span>'
    )


def number(text: str, width: int) -> str:
    """A printed number with its decimal point `width` digits into the cell, its error a shade quieter."""
    if not text or text[0] not in "+-0123456789":
        return f'<span class="qt-words">{words(text)}</span>' if text else ""
    split = head_length(text)
    head, tail = text[:split].replace("-", "−"), text[split:]
    scientific = SCIENTIFIC.match(tail)
    power = ""
    if scientific:
        tail = scientific[1]
        power = f"\u2009×\u200910<sup>{scientific[2].replace('-', '−').strip('+')}{scientific[3]}</sup>"
    shown = re.sub(r"\(.*\)", lambda error: f'<span class="qt-error">{error.group()}</span>', words(tail))
    return f'<span class="qt-head" style="min-width:{width + HEAD_MARGIN}ch">{head}</span>{shown}{power}'


def head_width(texts: Iterable[str]) -> int:
    """Digits in front of the decimal point, at most."""
    return max((head_length(text) for text in texts), default=0)


def saying(lines: Sequence[tuple[str, str, str]]) -> str:
    """Sentences in a list, each with the word that says how serious it is: (class, word, sentence)."""
    if not lines:
        return ""
    items = "".join(
        f'<li class="{style}"><strong>{words(mark)}</strong> {words(text)}</li>' for style, mark, text in lines
    )
    return f'<ul class="qt-says">{items}</ul>'


def definitions(pairs: Iterable[tuple[str, str]]) -> str:
    """Names and what they stand for, in two columns; the second of each pair is markup already."""
    rows = "".join(f'<tr><th scope="row">{words(name)}</th><td>{markup}</td></tr>' for name, markup in pairs)
    return f'<table class="qt-facts"><tbody>{rows}</tbody></table>' if rows else ""


def framed(*parts: str) -> str:
    """The parts in one element, with the style that belongs to it."""
    return f'<div class="quarterturn"><style>{_style()}</style>{"".join(parts)}</div>'


@cache
def _style() -> str:
    text = files("quarterturn.reports").joinpath("page.css").read_text(encoding="utf-8")
    return re.sub(r"\s+", " ", re.sub(r"/\*.*?\*/", "", text, flags=re.DOTALL)).strip()
