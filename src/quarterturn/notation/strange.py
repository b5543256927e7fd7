"""Letters and signs that the notation does not have, each with the spelling that it does have."""

from __future__ import annotations

import re
import unicodedata

from quarterturn.errors import NotationError
from quarterturn.notation.source import Source
from quarterturn.notation.symbols import LETTERS

TWINS = dict(zip("аеорсхуіјѕԁѵАВЕКМНОРСТХαɑℓıօ𝑖", "aeopcxyijsdvABEKMHOPCTXaalioi", strict=True))  # look Latin
MEANT = {
    "∇": "the gradient in space is written out, one term a direction: (d_x phi)^2 + (d_y phi)^2; with time, (d phi)^2",
    "□": "the wave operator is d_mu d^mu; in an action, integrate by parts: d_mu phi d^mu phi",
    "∆": "the Laplace operator is written by parts, as in (d_x phi)^2",
    "∫": "the integral over time and space is understood: L = … is the density",
    "∞": "a number is finite here; beta = vacuum stands for a limit of zero temperature",
    "±": "one sign, + or -, for each term",
    "∓": "one sign, + or -, for each term",
    "≤": "a comparison stands in a case, as in {q^2 where q <= 1, q otherwise}",
    "≥": "a comparison stands in a case, as in {q^2 where q >= 1, q otherwise}",
    "≠": "a condition compares with <, <=, > or >=",
    "‖": "the length of a vector is |r|",
    "∥": "the length of a vector is |r|",
    "\u20d7": "a vector has no arrow: r[3](t) declares one, and r is its name",
    "\u0302": "no operators here: under the path integral every factor is a number, and q has no hat",
    "→": "an arrow has no meaning in an action",
    "&": "factors are multiplied by standing side by side",
    "%": "a percentage is written as a number: 0.05",
    "~": "a name has letters, digits and _",
    "$": "formulas stand here without dollar signs",
    "@": "a dot product is written with a dot: r.r",
    ":": "a colon has no place here; name = value gives a value",
    "'": "a text stands in double quotes, as the first part of a table",
    "“": 'a text stands in plain double quotes, as in table("well.csv", q, linear)',
    "”": 'a text stands in plain double quotes, as in table("well.csv", q, linear)',
    "_": "an underscore joins a name, as in m_0; an index stands in square brackets, as in r[a]",
    "∏": "a product is written out",
    "ⁿ": "a power is written q^n",
    "∛": "a cube root is a power: x^(1/3)",
    "†": "the conjugate stands behind its field, as in psi^*",
    "?": "a question mark has no meaning in an action",
}
COMMANDS = {
    "frac": "a/b", "partial": "d_mu", "dot": "q'", "ddot": "q''", "cdot": ".", "left": "(", "right": ")",
    "langle": "<", "rangle": ">", "sum": "sum_a", "bar": "psi^*", "dagger": "psi^*", "vec": "r", "nabla": "d_x",
    "mathcal": "L", "text": "", "hbar": "", "times": "x", "quad": "", "int": "", "lvert": "|", "rvert": "|",
}  # fmt: skip


def strange(source: Source, position: int, end: int) -> NotationError:
    """The complaint about the letter at a position that begins no token."""
    letter = source.text[position]
    if letter == '"':
        return source.error('this text is never closed: " is missing', position, end)
    if letter == "\\":
        return _latex(source, position, end)
    if letter in MEANT and unicodedata.combining(letter):
        return source.error(MEANT[letter], max(position - 1, 0), position + 1)
    if letter in MEANT:
        return source.error(f"{letter!r} is not of this notation: {MEANT[letter]}", position, position + 1)
    name = unicodedata.name(letter, "")
    if unicodedata.category(letter).startswith("C"):
        return source.error(
            f"a control character (U+{ord(letter):04X}) has no place in an action", position, position + 1
        )
    plain = TWINS.get(letter, unicodedata.normalize("NFKC", letter))
    if not (plain.isascii() or plain in LETTERS):
        plain = unicodedata.normalize("NFKD", letter)
    if letter.isalpha() and name:
        known = plain != letter and (plain.isascii() or plain in LETTERS)
        script = "Latin" if plain.isascii() else "Greek"
        twin = f"; did you mean the {script} letter {plain}?" if known else ""
        words = f"the letter {letter} ({name.lower()}) is not one of the notation{twin}"
        return source.error(words, position, position + 1)
    if letter.isdigit():
        words = f"the digit {letter} ({name.lower()}) is not one of the notation: digits are 0 to 9"
        return source.error(words, position, position + 1)
    if name.startswith("COMBINING"):
        words = f"the accent {name.lower()} has no meaning in the notation; a dot is a derivative in time"
        return source.error(words, max(position - 1, 0), position + 1)
    return source.error(f"{letter!r} has no meaning in the notation", position, position + 1)


def _latex(source: Source, position: int, end: int) -> NotationError:
    match = re.compile(r"\\([A-Za-z]*)").match(source.text, position, end)
    word = match.group(1) if match else ""
    greek = next((name for letter, name in LETTERS.items() if name == word), "")
    plain = "lam" if word == "lambda" else greek or COMMANDS.get(word, word if word in ("sqrt", "exp", "cos") else "")
    words = f"\\{word} is LaTeX: an action is written as on paper, without commands"
    return source.error(words, position, position + 1 + len(word), plain or None)
