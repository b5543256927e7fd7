"""Mistakes that a tired physicist makes, and what is said about each, word for word.

Each pair in gallery/ is a body and the complaint; a body without a complaint beside it shows what the action card says
about it. To renew the texts after a deliberate change, delete the .expected files, run this test once (it writes them
and fails), read every one of them aloud, and commit.
"""

from pathlib import Path

import pytest

from quarterturn.errors import QuarterturnError
from quarterturn.runs.declaration import action
from quarterturn.runs.settings import examined

GALLERY = Path(__file__).parent / "gallery"
BODIES = sorted(GALLERY.glob("*.txt"))


def said(body: str) -> str:
    """The complaint about a body, at declaration or at the first attempt to use it."""
    try:
        declared = action(body, "mistaken")
        examined(declared, {name: c.default for name, c in declared.couplings.items()})
    except QuarterturnError as complaint:
        return str(complaint)
    return "\n".join(finding.message for finding in declared.findings) or "nothing"


def test_the_gallery_holds_at_least_thirty_mistakes() -> None:
    assert len(BODIES) >= 30


@pytest.mark.parametrize("body", BODIES, ids=lambda path: path.stem)
def test_a_mistake_gets_the_words_that_help(body: Path) -> None:
    expected = body.with_suffix(".expected")
    text = said(body.read_text(encoding="utf-8"))
    if not expected.exists():
        expected.write_text(text + "\n", encoding="utf-8")
        pytest.fail(f"{expected.name} was written; read it aloud")
    assert text + "\n" == expected.read_text(encoding="utf-8")
    assert "Traceback" not in text and "Token" not in text


def test_a_refused_declaration_leaves_earlier_ones_alone() -> None:
    good = action("q(t)\nL = 1/2 q'^2 - 1/2 q^2", "good")
    digest = good.digest
    for body in BODIES:
        said(body.read_text(encoding="utf-8"))
    assert good.digest == digest and action(good.text, "again").digest == digest
