"""The card that shows after an action is declared."""

import pytest

from quarterturn.reports.action_card import ActionCard, action_bundle, render_html, render_latex, render_text

CARD = ActionCard(
    name="quartic",
    latex=r"L=\tfrac12\dot q^2-\lambda q^4",
    euclidean_latex=r"L_E=\tfrac12\dot q^2+\lambda q^4",
    canonical="q(t)\nL = 1/2 q'^2 - lam q^4",
    findings=(
        ("note", "couplings", "lam has the dimension mass^3"),
        ("fatal", "bounded", "the potential falls without limit along q -> infinity"),
    ),
    couplings=(("lam", 0.1, "mass^3"), ("g", -2.0, "")),
    measurements=("<q^2>", "gap(q)"),
    lattice="200 sites, a = 0.1",
    digest="9a0c" * 16,
)

GOLDEN = """\
action quartic

    q(t)
    L = 1/2 q'^2 - lam q^4

lattice    200 sites, a = 0.1
measured   <q^2>
           gap(q)

coupling    dimension
lam = 0.1   mass^3
g = -2      not determined

Note: lam has the dimension mass^3
The integral diverges: the potential falls without limit along q -> infinity

digest   9a0c9a0c9a0c"""


def test_card_reads_as_agreed():
    assert render_text(CARD) == GOLDEN


def test_page_typesets_both_actions_and_says_the_findings_in_words():
    page = render_html(CARD)
    assert page.index(r"$L=\tfrac12\dot q^2-\lambda q^4$") < page.index(r"$L_E=\tfrac12\dot q^2+\lambda q^4$")
    assert "<strong>The integral diverges:</strong> the potential falls" in page
    assert "<td>mass^3</td>" in page
    assert "&lt;q^2&gt;" in page


def test_source_has_both_actions():
    source = render_latex(CARD)
    assert r"\[ L=\tfrac12\dot q^2-\lambda q^4 \]" in source
    assert r"\[ L_E=\tfrac12\dot q^2+\lambda q^4 \]" in source
    assert r"lam = 0.1, dimension mass\textasciicircum{}3" in source


@pytest.mark.parametrize("text", ["<script>x</script>", '"><b>', "</pre></td><i>"])
def test_texts_are_escaped(text):
    page = render_html(
        ActionCard(text, text, text, text, ((text, text, text),), ((text, 1.0, text),), (text,), text, text)
    )
    assert text not in page


def test_bundle_has_the_three_forms():
    data, metadata = action_bundle(CARD)
    assert set(data) == {"text/plain", "text/html", "text/latex"}
    assert metadata == {}
