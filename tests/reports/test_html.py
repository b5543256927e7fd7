"""A report on a page: escaped, self-contained, well formed, honest about states."""

import re
from dataclasses import replace
from html.parser import HTMLParser

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from quarterturn.reports.html import html
from quarterturn.reports.markup import formula, number
from quarterturn.reports.plots import Picture, pictures
from quarterturn.reports.report import Curve, Report, Row

VOID = {"img", "br"}
KNOWN = {
    "div", "style", "p", "strong", "span", "table", "thead", "tbody", "tr", "th", "td", "code", "ul", "li", "img",
    "details", "summary", "i", "sub", "sup", "pre",
}  # fmt: skip


class Outline(HTMLParser):
    """Collects tags, attributes and words; fails where an element is not closed in order."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self.feed(page)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if "style" not in self.open:
            self.words.append(data)


def hostile(text: str) -> Report:
    return Report(
        kind="sample",
        title=text,
        action_text=text,
        latex=text,
        couplings=((text, 1.0),),
        rows=(
            Row(text, text, 1.0, 0.1, 1.0, 0.0, 0.5, 0.1, 100.0, remark=text),
            Row(text, "", None, state="withheld", remark=text),
        ),
        curves=(Curve(text, "q", text, (0.0, 1.0), (1.0, 2.0), (0.1, 0.1)),),
        warnings=(text,),
        facts=((text, text),),
        record_name=text,
    )


@pytest.mark.parametrize(
    "text",
    [
        "<script>alert(1)</script>",
        '"><img src=x onerror=alert(1)>',
        "' onmouseover='alert(1)",
        "</style><script>alert(1)</script>",
        "</span></td></tr></table></div><iframe src='//x'>",
        "&lt;script&gt;",
        "$\\href{javascript:alert(1)}{x}$</span><script>",
    ],
)
def test_no_text_gets_out_of_its_element(text):
    outline = Outline(html(hostile(text), (Picture("<svg/>", text),)))
    assert {tag for tag, _ in outline.tags} <= KNOWN
    assert not [name for _, attributes in outline.tags for name in attributes if name.startswith("on")]
    assert " ".join(text.split()) in "".join(outline.words)


@settings(max_examples=60, deadline=None)
@given(st.text(max_size=80))
def test_any_text_gives_the_same_outline(text):
    expected = [tag for tag, _ in Outline(html(hostile("plain"), (Picture("<svg/>", "plain"),))).tags]
    if text.split() and any(letter.isprintable() and not letter.isspace() for letter in text):
        assert [tag for tag, _ in Outline(html(hostile(text), (Picture("<svg/>", text),))).tags] == expected


def test_page_fetches_nothing_and_runs_nothing(sampled):
    page = html(sampled, pictures(sampled))
    assert "http" not in re.sub(r'src="data:[^"]*"', "", page)
    assert {attributes["src"][:26] for tag, attributes in Outline(page).tags if tag == "img"} == {
        "data:image/svg+xml;base64,"
    }
    assert not re.search(r"<script|<link|@import|url\(", page)


def test_numbers_read_in_one_piece(sampled):
    words = "".join(Outline(html(sampled, ())).words)
    for shown in ("0.4996(12)", "−12.26(21)", "1.0003(34)", "0.4123(unresolved)", "withheld", "−0.3", "12400"):
        assert shown in words
    assert "0.77" not in words


def test_every_warning_and_remark_is_on_the_page(sampled):
    words = "".join(Outline(html(sampled, ())).words)
    assert all(warning in words for warning in sampled.warnings)
    assert all(row.remark in words for row in sampled.rows)


def test_page_names_the_record_and_the_command_that_checks_it(sampled):
    words = "".join(Outline(html(sampled, ())).words)
    assert "record 3fa2c19b77e0, checked by quarterturn verify NOTEBOOK" in words
    assert "verify" not in "".join(Outline(html(replace(sampled, record_name=""), ())).words)


def test_formula_is_there_for_pages_with_and_without_typesetting():
    shown = formula(r"\langle q^2\rangle", "<q^2>")
    assert r"$\langle q^2\rangle$" in shown
    assert "&lt;q^2&gt;</code>" in shown


def test_powers_of_ten_are_typeset():
    assert number("-1.234(56)e-07", 2).endswith("\u2009×\u200910<sup>−7</sup>")
    assert ">−1</span>.234" in number("-1.234(56)e-07", 2)


def test_ink_is_that_of_the_page_around(sampled):
    """Light and dark need no switch where no colour but the accent of a warning is our own."""
    style = re.search(r"<style>(.*?)</style>", html(sampled, ())).group(1)
    assert re.findall(r"#[0-9a-fA-F]{3,8}\b", style) == ["#c38623"]
    assert "var(--jp-content-font-color1, inherit)" in style
    assert all(".quarterturn" in rule for rule in re.findall(r"([^{}]+)\{[^{}]*\}", style))
