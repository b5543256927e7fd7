"""The canonical form is that of RFC 8785, whose own examples are repeated here."""

import hashlib
import json
import struct

import pytest
from hypothesis import given
from hypothesis import strategies as st

from quarterturn.errors import RecordError
from quarterturn.records.canonical import canonical_json, record_name, short_name

NUMBERS = [  # RFC 8785, appendix B: IEEE 754 bits and their spelling
    ("0000000000000000", "0"),
    ("8000000000000000", "0"),
    ("0000000000000001", "5e-324"),
    ("8000000000000001", "-5e-324"),
    ("7fefffffffffffff", "1.7976931348623157e+308"),
    ("ffefffffffffffff", "-1.7976931348623157e+308"),
    ("4340000000000000", "9007199254740992"),
    ("c340000000000000", "-9007199254740992"),
    ("4430000000000000", "295147905179352830000"),
    ("44b52d02c7e14af5", "9.999999999999997e+22"),
    ("44b52d02c7e14af6", "1e+23"),
    ("44b52d02c7e14af7", "1.0000000000000001e+23"),
    ("444b1ae4d6e2ef4e", "999999999999999700000"),
    ("444b1ae4d6e2ef4f", "999999999999999900000"),
    ("444b1ae4d6e2ef50", "1e+21"),
    ("3eb0c6f7a0b5ed8c", "9.999999999999997e-7"),
    ("3eb0c6f7a0b5ed8d", "0.000001"),
    ("41b3de4355555553", "333333333.3333332"),
    ("41b3de4355555554", "333333333.33333325"),
    ("41b3de4355555555", "333333333.3333333"),
    ("41b3de4355555556", "333333333.3333334"),
    ("41b3de4355555557", "333333333.33333343"),
    ("becbf647612f3696", "-0.0000033333333333333333"),
    ("43143ff3c1cb0959", "1424953923781206.2"),
]


@pytest.mark.parametrize(("bits", "spelling"), NUMBERS)
def test_numbers_are_spelt_as_in_appendix_b(bits, spelling):
    (number,) = struct.unpack(">d", bytes.fromhex(bits))
    assert canonical_json({"n": number}) == f'{{"n":{spelling}}}'.encode()


@pytest.mark.parametrize("bits", ["7fffffffffffffff", "7ff0000000000000", "fff0000000000000"])
def test_numbers_that_are_not_finite_are_refused_as_in_appendix_b(bits):
    with pytest.raises(RecordError, match="no canonical form"):
        canonical_json({"n": struct.unpack(">d", bytes.fromhex(bits))[0]})


def test_example_of_section_3_2_2():
    source = r"""{
      "numbers": [333333333.33333329, 1E30, 4.50, 2e-3, 0.000000000000000000000000001],
      "string": "\u20ac$\u000F\u000aA'\u0042\u0022\u005c\\\"\/",
      "literals": [null, true, false]
    }"""
    expected = (
        r'{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],'
        '"string":"€$' + r"\u000f\nA'B" + r'\"\\\\\"/"}'
    )
    assert canonical_json(json.loads(source)).decode() == expected


def test_keys_are_sorted_by_utf_16_as_in_section_3_2_3():
    source = {
        "\u20ac": "Euro Sign",
        "\r": "Carriage Return",
        "\ufb33": "Hebrew Letter Dalet With Dagesh",
        "1": "One",
        "\U0001f600": "Emoji: Grinning Face",
        "\u0080": "Control",
        "\u00f6": "Latin Small Letter O With Diaeresis",
    }
    assert list(json.loads(canonical_json(source)).values()) == [
        "Carriage Return",
        "One",
        "Control",
        "Latin Small Letter O With Diaeresis",
        "Euro Sign",
        "Emoji: Grinning Face",
        "Hebrew Letter Dalet With Dagesh",
    ]


@pytest.mark.parametrize("value", [2**53, -(2**53), "\ud800", {1: 2}, object(), float("nan")])
def test_what_json_cannot_hold_is_refused(value):
    with pytest.raises(RecordError):
        canonical_json({"a": value})


def test_endless_nesting_is_refused():
    loop: dict = {}
    loop["a"] = loop
    with pytest.raises(RecordError):
        canonical_json(loop)


def test_name_is_the_sha256_of_the_canonical_form(record):
    assert record_name(record) == hashlib.sha256(canonical_json(record)).hexdigest()
    assert short_name(record_name(record)) == record_name(record)[:12]


texts = st.text(st.characters(exclude_categories=("Cs",)))
numbers = st.integers(-(2**53) + 1, 2**53 - 1) | st.floats(allow_nan=False, allow_infinity=False)
values = st.recursive(
    st.none() | st.booleans() | numbers | texts,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(texts, inner),
    max_leaves=20,
)


@given(st.dictionaries(texts, values))
def test_name_survives_another_order_of_keys_and_a_journey_through_json(record):
    shuffled = dict(reversed(record.items()))
    assert record_name(shuffled) == record_name(record)
    if all(abs(number) < 2**53 for number in _numbers(record)):  # beyond, notebook.parsed is needed
        assert record_name(json.loads(json.dumps(record, indent=3))) == record_name(record)
        assert record_name(json.loads(canonical_json(record))) == record_name(record)


def _numbers(value):
    if isinstance(value, dict):
        return [number for item in value.values() for number in _numbers(item)]
    if isinstance(value, list):
        return [number for item in value for number in _numbers(item)]
    return [value] if isinstance(value, (int, float)) else []
