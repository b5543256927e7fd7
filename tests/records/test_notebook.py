"""Records in notebooks: found, checked, and never trusted."""

import json
import math
import sys
import time
from copy import deepcopy

import nbformat
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from quarterturn.errors import RecordError
from quarterturn.records import notebook as reading
from quarterturn.records.canonical import record_name
from quarterturn.records.notebook import RESULT_MIME, embedded, parsed
from quarterturn.reports import report
from quarterturn.reports.bundle import mimebundle


def test_intact_record_is_found_with_its_place(saved, output, record):
    (found,) = embedded(saved(output))
    assert (found.status, found.reasons) == ("intact", ())
    assert found.record == record
    assert found.name == record_name(record)
    assert found.place == "cell 2 [7], output 1"
    assert str(found) == f"cell 2 [7], output 1: record {found.name[:12]}: intact"


def test_output_of_the_reports_room_is_intact(saved, record):
    """The two rooms agree on where a record travels and on how numbers are printed."""
    numbers = [result for result in record["results"] if result["kind"] == "number"]
    curve = record["results"][4]
    shown = report.Report(
        "sample",
        "oscillator, sampled",
        "",
        "",
        (),
        tuple(
            report.Row(r["label"], "", r["value"], None if r["state"] == "unresolved" else r["error"], state=r["state"])
            for r in numbers
        ),
        (report.Curve(curve["label"], "", "t", *(tuple(curve[key]) for key in ("t", "value", "error"))),),
        record_name=record_name(record),
        record=record,
    )
    data, metadata = mimebundle(shown)
    assert RESULT_MIME == report.RESULT_MIME
    (found,) = embedded(saved({"output_type": "display_data", "data": data, "metadata": metadata}))
    assert (found.status, found.reasons) == ("intact", ())


def test_record_survives_nbformat(saved, output, tmp_path):
    path = tmp_path / "again.ipynb"
    nbformat.write(nbformat.read(saved(output), as_version=4), path)
    assert [found.status for found in embedded(path)] == ["intact"]


def test_record_survives_a_browser(saved, output, record):
    """JavaScript writes 1.0 as 1 and 2.5e20 as 250000000000000000000."""
    record["method"]["large"] = 2.5e20
    output["metadata"]["quarterturn"] = {"record": record, "name": record_name(record)}
    output["data"][RESULT_MIME]["record_name"] = record_name(record)
    path = saved(output)
    as_browser = path.read_text().replace("2.5e+20", "250000000000000000000").replace('"w": 1.0', '"w": 1')
    assert as_browser != path.read_text()
    path.write_text(as_browser)
    assert [found.status for found in embedded(path)] == ["intact"]


@pytest.mark.parametrize(
    ("key", "value"), [("value", 0.49963), ("value", math.nextafter(0.49962, 1)), ("error", 0.0012), ("label", "<q^4>")]
)
def test_altered_record_is_told_by_its_name(saved, output, key, value):
    output["metadata"]["quarterturn"]["record"]["results"][0][key] = value
    (found,) = embedded(saved(output))
    assert found.status == "altered"
    assert "SHA-256" in found.reasons[0]


@pytest.mark.parametrize(
    ("row", "key", "value", "words"),
    [
        (0, "value", 0.51, "<q^2>: value shown as 0.51, recorded as 0.49962"),
        (0, "value", "0.49962", "<q^2>: value shown as '0.49962'"),
        (0, "value", True, "<q^2>: value shown as True"),
        (0, "error", 0.000121, "<q^2>: error shown"),
        (0, "label", "<q^4>", "shown, but not recorded: <q^4>"),
        (0, "label", "gap(q)", "shown, but not recorded: gap(q)"),
        (0, "label", ["x"], "shown, but not recorded"),
        (2, "state", "good", "binder: state shown as 'good'"),
        (2, "error", 0.0002, "binder: error shown as 0.0002"),
        (3, "value", 0.7, "<Q^2>: value shown as 0.7, recorded as None"),
    ],
)
def test_altered_display_is_told(saved, output, row, key, value, words):
    output["data"][RESULT_MIME]["rows"][row][key] = value
    (found,) = embedded(saved(output))
    assert found.status == "altered"
    assert any(words in reason for reason in found.reasons)


def test_removed_row_is_told(saved, output):
    del output["data"][RESULT_MIME]["rows"][1]
    (found,) = embedded(saved(output))
    assert "recorded, but not shown: gap(q)" in found.reasons


@pytest.mark.parametrize(("key", "at"), [("x", 3), ("y", 3), ("error", 3)])
def test_altered_curve_is_told(saved, output, key, at):
    output["data"][RESULT_MIME]["curves"][0][key][at] += 0.01
    (found,) = embedded(saved(output))
    assert found.reasons == ("<q(t) q(0)>: 1 points of the curve shown are not the recorded ones",)


@pytest.mark.parametrize("mime", ["text/plain", "text/html"])
def test_altered_text_is_told(saved, output, mime):
    whole = output["data"][mime] if isinstance(output["data"][mime], str) else output["data"][mime][0]
    output["data"][mime] = whole.replace("4996", "4997")
    (found,) = embedded(saved(output))
    assert found.reasons == (f"<q^2>: 0.4996(12) is recorded, but does not occur in the {mime} shown",)


def test_result_without_a_record_says_so(saved, output):
    output["metadata"] = {}
    (found,) = embedded(saved(output))
    assert (found.status, found.record) == ("no record", None)
    assert str(found).startswith("cell 2 [7], output 1: a result: no record")


def test_other_outputs_are_passed_over(saved):
    others = [
        {"output_type": "stream", "name": "stdout", "text": "quarterturn"},
        {"output_type": "display_data", "data": {"text/plain": "1"}, "metadata": {"other": 1}},
        {"output_type": "error", "ename": "x"},
        None,
        3,
        [],
        {"data": [], "metadata": []},
    ]
    assert embedded(saved(*others)) == []


@pytest.mark.parametrize(
    "beside", [None, 1, [], {}, {"record": []}, {"record": {}}, {"record": None, "name": 3}, {"name": "x" * 64}]
)
def test_malformed_records_are_told(saved, output, beside):
    output["metadata"]["quarterturn"] = beside
    (found,) = embedded(saved(output))
    assert found.status in ("malformed", "no record")
    assert found.record is None
    assert found.reasons


@pytest.mark.parametrize(
    "payload", [1, [], {}, {"rows": 1}, {"rows": [1]}, {"rows": [], "curves": [1]}, {"rows": [{}]}]
)
def test_malformed_displays_are_told(saved, output, payload):
    output["data"][RESULT_MIME] = payload
    (found,) = embedded(saved(output))
    assert found.status == "altered"


def test_scripts_are_text_like_any_other(saved, output, record):
    record["action"]["name"] = "<script>alert(1)</script>__import__('os').system('false')"
    output["metadata"]["quarterturn"] = {"record": record, "name": record_name(record)}
    output["data"][RESULT_MIME]["record_name"] = record_name(record)
    before = set(sys.modules)
    (found,) = embedded(saved(output))
    assert found.status == "intact"
    assert set(sys.modules) == before


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "not JSON"),
        (b"\x00\xff", "not UTF-8"),
        (b"{", "not JSON"),
        (b"[1]", "no list of cells"),
        (b'{"cells": 3}', "no list of cells"),
        (b'{"worksheets": []}', "no list of cells"),
        (b'{"cells": [], "cells": []}', "'cells' stands twice"),
        (b'{"cells": [{"a": {"b": 1, "b": 2}}]}', "'b' stands twice"),
        (b'{"cells": [1e999]}', "too large"),
        (b'{"cells": [' + b"9" * 5000 + b"]}", "too large"),
        (b'{"cells": ' + b"[" * 200_000 + b"]" * 200_000 + b"}", "nested too deeply"),
        (b'{"a":' * 200_000, "nested too deeply"),
    ],
)
def test_broken_files_are_refused_in_words(tmp_path, content, words):
    path = tmp_path / "broken.ipynb"
    path.write_bytes(content)
    with pytest.raises(RecordError, match=words) as complaint:
        embedded(path)
    assert len(complaint.value.message) < 500


def test_missing_file_and_folder_are_refused_in_words(tmp_path):
    for path in (tmp_path / "none.ipynb", tmp_path, "\0"):
        with pytest.raises(RecordError):
            embedded(path)


def test_huge_file_is_not_read(tmp_path, monkeypatch):
    monkeypatch.setattr(reading, "LARGEST_FILE", 1000)
    path = tmp_path / "huge.ipynb"
    path.write_bytes(b" " * 1001)
    with pytest.raises(RecordError, match="larger than"):
        embedded(path)


def test_not_a_number_is_refused_in_records_and_let_pass_elsewhere(saved, output, record):
    other = {"output_type": "display_data", "data": {"application/x": float("nan")}, "metadata": {}}
    assert [found.status for found in embedded(saved(other, output))] == ["intact"]
    record["results"][0]["value"] = float("nan")
    output["metadata"]["quarterturn"]["record"] = record
    (found,) = embedded(saved(output))
    assert found.status == "malformed"
    assert found.reasons == ("results[0].value: nan is no finite number",)


def test_many_outputs_are_read_in_good_time(saved, output):
    start = time.perf_counter()
    assert len(embedded(saved(*[output] * 200))) == 200
    assert time.perf_counter() - start < 10


def test_long_texts_are_read_in_good_time(saved, output):
    """Neither an unclosed tag nor an unclosed quotation mark makes the search for numbers slow."""
    for text in ("<a" * 500_000, '"data:' * 200_000, "&" * 500_000):
        output["data"]["text/html"] = text
        start = time.perf_counter()
        embedded(saved(output))
        assert time.perf_counter() - start < 5


json_values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False) | st.text(max_size=5),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=8,
)
PLACES = [
    ("metadata",), ("metadata", "quarterturn"), ("metadata", "quarterturn", "name"), ("data",), ("data", RESULT_MIME),
    ("data", RESULT_MIME, "rows"), ("data", RESULT_MIME, "rows", 0), ("data", RESULT_MIME, "rows", 0, "value"),
    ("data", RESULT_MIME, "curves"), ("data", RESULT_MIME, "curves", 0), ("data", RESULT_MIME, "curves", 0, "x"),
    ("data", RESULT_MIME, "curves", 0, "x", 0), ("data", RESULT_MIME, "curves", 0, "y", 0), ("data", "text/html"),
]  # fmt: skip


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None, max_examples=150)
@given(place=st.sampled_from(PLACES), value=json_values)
def test_no_value_anywhere_breaks_the_reading(saved, output, place, value):
    output = deepcopy(output)
    holder = output
    for step in place[:-1]:
        holder = holder[step]
    holder[place[-1]] = value
    assert all(found.status in ("intact", "altered", "malformed", "no record") for found in embedded(saved(output)))


@given(st.binary(max_size=200) | st.text(max_size=200).map(str.encode))
def test_any_bytes_are_json_or_a_record_error(content):
    try:
        value = parsed(content, "bytes")
    except RecordError:
        return
    assert value == json.loads(content) or "NaN" in content.decode()
