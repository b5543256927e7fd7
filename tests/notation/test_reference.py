"""The page of the notation says what the parser reads: every row parses, and every word of the tables is on it."""

import pytest

import quarterturn as qt
from quarterturn.actions.tables import INTERPOLATIONS
from quarterturn.notation import symbols
from quarterturn.notation.reference import Row, reference, sections
from quarterturn.notation.statements import parse

ROWS = [row for section in sections() for row in section.rows]
TABLES = ("FUNCTIONS", "MEASURES", "COMPLEX", "PIECES", "FORMS", "KEYWORDS", "BOUNDARIES", "RESERVED")
TUPLES = ("CONSTANTS", "COORDINATES", "GEOMETRY")


@pytest.mark.parametrize("row", [row for row in ROWS if row.cell], ids=lambda row: row.written)
def test_every_row_parses(row: Row) -> None:
    assert row.written in row.body
    parse(row.body)


@pytest.mark.parametrize("table", [*TABLES, *TUPLES, "LETTERS", "SPELLINGS"])
def test_every_word_of_the_tables_is_on_the_page(table: str) -> None:
    written = " ".join(row.written for row in ROWS) + " " + " ".join(row.meaning for row in ROWS)
    words = set("".join(c if c.isalnum() or c == "_" else " " for c in written).split())
    for name in getattr(symbols, table):
        assert name in words, f"{name} of {table} is not on the page"


def test_a_row_that_does_not_parse_is_found() -> None:
    """The test above can fail: a row with a bracket too many is refused."""
    with pytest.raises(qt.NotationError):
        parse(Row("q^2)", "", ROWS[0].cell + "q(t)\nL = {}").body)


def test_every_interpolation_is_named() -> None:
    table = next(row for row in ROWS if row.written.startswith("table"))
    assert all(name in table.meaning for name in INTERPOLATIONS)


def test_the_page_is_text_and_html_and_the_help_of_the_magic() -> None:
    from quarterturn.magics.action import ActionMagic

    text = str(reference())
    assert max(map(len, text.splitlines())) <= 100
    assert len(text.splitlines()) < 120
    assert all(row.written.split()[0] in text for row in ROWS)
    table = qt.reference()._repr_html_()
    assert table.count("<tr>") == len(ROWS) and "&lt;q^2&gt;" in table and "<q^2>" not in table
    help_text = ActionMagic.action.__doc__ or ""
    assert all(line.strip() in help_text for line in text.splitlines())
