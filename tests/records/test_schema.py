"""What is a record and what is not; complaints name the place."""

import copy
import json
import os
import platform
import time
from importlib.resources import files

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from jsonschema import Draft202012Validator

from quarterturn.errors import RecordError
from quarterturn.records.schema import SCHEMA, environment, validate


def changed(record, path, value):
    record = copy.deepcopy(record)
    holder = record
    for step in path[:-1]:
        holder = holder[step]
    holder[path[-1]] = value
    return record


def test_schema_is_a_schema_and_knows_its_name():
    schema = json.loads(files("quarterturn.records").joinpath("record.schema.json").read_text())
    Draft202012Validator.check_schema(schema)
    assert schema["properties"]["schema"]["const"] == SCHEMA


@pytest.mark.parametrize("kind", ["sample", "levels"])
def test_record_of_a_run_is_valid(record, kind):
    validate({**record, "kind": kind})
    validate({**record, "lattice": None})


@pytest.mark.parametrize(
    ("path", "value", "place"),
    [
        (["schema"], "quarterturn-record/2", "schema"),
        (["kind"], "guess", "kind"),
        (["action", "digest"], "xyz", "action.digest"),
        (["action", "digest"], "0a" * 32 + "\n", "action.digest"),
        (["action", "notation"], "", "action.notation"),
        (["action", "file"], "/home/me", "action"),
        (["couplings", "w"], "1", "couplings.w"),
        (["couplings", "w"], True, "couplings.w"),
        (["lattice", "sites"], 0, "lattice"),
        (["request", "seed"], -1, "request.seed"),
        (["request", "seed"], 2**53, "no canonical form"),
        (["results", 0, "error"], -0.1, "results[0].error"),
        (["results", 0, "state"], "great", "results[0].state"),
        (["results", 0, "value"], None, "results[0].value"),
        (["results", 0, "value"], [1.0], "results[0].value"),
        (["results", 4, "value"], [1.0], "results[4]"),
        (["results", 4, "error", 3], -1.0, "results[4].error[3]"),
        (["results", 4, "t", 1], 0.0, "results[4].t"),
        (["results", 1, "label"], "<q^2>", "results[1].label"),
        (["results", 2, "error"], float("nan"), "results[2].error"),
        (["method", "angle"], float("inf"), "method.angle"),
        (["method", "angle"], {1, 2}, "method.angle"),
        (["method", "angle"], {1: 2}, "method.angle"),
        (["wall_seconds"], -1, "wall_seconds"),
        (["parents"], ["short"], "parents[0]"),
        (["extra"], 1, "record"),
    ],
)
def test_complaint_names_the_place(record, path, value, place):
    with pytest.raises(RecordError) as complaint:
        validate(changed(record, path, value))
    assert place in complaint.value.message
    assert len(complaint.value.message) < 1000


def test_missing_part_is_named(record):
    del record["versions"]
    with pytest.raises(RecordError, match="'versions' is a required property"):
        validate(record)


@pytest.mark.parametrize("value", [None, 1, "record", [], {}])
def test_other_values_are_no_records(value):
    with pytest.raises(RecordError):
        validate(value)


def deep(levels):
    value: list = []
    for _ in range(levels):
        value = [value]
    return value


@pytest.mark.parametrize(
    "value", [deep(20), deep(100_000), list(range(60_000)), "x" * 2_000_000, [["x" * 1000]] * 2000]
)
def test_hostile_sizes_are_refused_quickly(record, value):
    start = time.perf_counter()
    with pytest.raises(RecordError):
        validate(changed(record, ["method", "a"], value))
    assert time.perf_counter() - start < 2


def test_largest_permitted_record_is_checked_quickly(record):
    points = list(range(5000))
    curves = [
        {"label": f"c{n}", "kind": "curve", "t": points, "value": points, "error": points, "state": "good"}
        for n in range(3)
    ]
    start = time.perf_counter()
    validate({**record, "results": curves})
    assert time.perf_counter() - start < 5


json_values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=8,
)


@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
@given(data=st.data())
def test_any_change_of_type_passes_or_is_a_record_error(record, data):
    key = data.draw(st.sampled_from(sorted(record)))
    try:
        validate({**record, key: data.draw(json_values)})
    except RecordError as complaint:
        assert complaint.message


def test_environment_has_no_name_and_no_path():
    versions, system = environment()
    assert versions["python"] == platform.python_version()
    assert {"quarterturn", "jax", "numpy", "scipy"} <= set(versions)
    told = json.dumps([versions, system])
    assert platform.node() not in told or len(platform.node()) < 3
    assert os.path.expanduser("~") not in told
    assert "/" not in told
