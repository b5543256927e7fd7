"""How a magic line is read: names, settings, variables, numbers."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from quarterturn.errors import QuarterturnError
from quarterturn.magics.numbers import number, target, whole
from quarterturn.magics.words import LineError, Setting, read


def settings(rest: str) -> dict[tuple[str, str | None], str]:
    return {(s.key, s.label): s.value for s in read("%sample", rest).settings}


@pytest.mark.parametrize(
    "rest", ["q lam=0.2 w=1", "q lam = 0.2 w= 1", "  q   lam=0.2,w=1 ", "q lam=0.2, w =1", "q, lam=0.2,  w=1,"]
)
def test_blanks_and_commas_do_not_matter(rest: str) -> None:
    words = read("%sample", rest)
    assert words.name is not None and words.name.text == "q"
    assert settings(rest) == {("lam", None): "0.2", ("w", None): "1"}


def test_a_target_may_carry_a_label_with_brackets_commas_and_blanks() -> None:
    found = settings("q error[gap(q, q^3)]=1% error[<r[1] r[2]>] = 2% error=5%")
    assert found == {("error", "gap(q, q^3)"): "1%", ("error", "<r[1] r[2]>"): "2%", ("error", None): "5%"}


@pytest.mark.parametrize(("rest", "variable"), [("q lam=1 as run", "run"), ("q as λ", "λ"), ("q as=1", None)])
def test_as_names_a_variable(rest: str, variable: str | None) -> None:
    assert read("%sample", rest).variable == variable


def test_every_setting_knows_its_place() -> None:
    words = read("%sample", " q  lam = 0.25")
    setting = words.settings[0]
    assert words.line.text[setting.start : setting.end] == "lam = 0.25"
    assert words.line.text[setting.value_start : setting.end] == "0.25"


VALUES = [
    ("0.1", 0.1),
    ("1e-3", 1e-3),
    (".5", 0.5),
    ("3.", 3.0),
    ("1/4", 0.25),
    ("-2", -2.0),
    ("−2", -2.0),
    ("+1E2", 100.0),
    ("pi", math.pi),
    ("-pi/2", -math.pi / 2),
    ("3pi/4", 3 * math.pi / 4),
    ("2*π", 2 * math.pi),
    ("1e1/2.5", 4.0),
]


def value_of(text: str) -> tuple[object, Setting]:
    words = read("%sample", f"q lam={text}")
    return words.line, words.settings[0]


@pytest.mark.parametrize(("text", "value"), VALUES)
def test_numbers_have_a_few_simple_forms(text: str, value: float) -> None:
    assert number(*value_of(text)) == value  # type: ignore[arg-type]


NOT_NUMBERS = ["x", "1/0", "1e999", "nan", "inf", "1+1", "__import__('os')", "0x10", "1_000", "1//2", "2**3", "/2", "٣"]


@pytest.mark.parametrize("text", NOT_NUMBERS)
def test_nothing_else_is_a_number(text: str) -> None:
    with pytest.raises(LineError):
        number(*value_of(text))  # type: ignore[arg-type]


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_every_float_is_read_as_python_prints_it(value: float) -> None:
    assert number(*value_of(repr(value))) == value  # type: ignore[arg-type]


@pytest.mark.parametrize(("text", "value"), [("1%", "1.0%"), ("0.5%", "0.5%"), ("1/2%", "0.5%"), ("1e-3", 1e-3)])
def test_targets_are_numbers_or_percentages(text: str, value: object) -> None:
    assert target(*value_of(text)) == value  # type: ignore[arg-type]


@pytest.mark.parametrize("text", ["1.5", "-1", "1/3"])
def test_counts_are_whole(text: str) -> None:
    with pytest.raises(LineError, match="whole"):
        whole(*value_of(text))  # type: ignore[arg-type]


@given(st.text(max_size=60))
def test_any_line_is_read_or_complained_about(rest: str) -> None:
    try:
        words = read("%sample", rest)
    except QuarterturnError as complaint:
        assert str(complaint).startswith("request error, column ")
        return
    for setting in words.settings:
        assert words.line.text[setting.value_start : setting.end] == setting.value
