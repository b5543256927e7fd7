"""What an output holds."""

import base64
import json
from dataclasses import replace

from quarterturn.reports.bundle import mimebundle
from quarterturn.reports.report import PAYLOAD_VERSION, RESULT_MIME, Curve


def test_output_holds_every_form_and_the_record_beside_it(sampled):
    data, metadata = mimebundle(sampled)
    assert set(data) == {"text/plain", "text/html", "text/latex", "image/png", RESULT_MIME}
    assert base64.b64decode(data["image/png"]).startswith(b"\x89PNG")
    assert metadata == {"quarterturn": {"record": sampled.record, "name": sampled.record_name}}


def test_payload_survives_strict_json_and_holds_the_numbers_exactly(sampled):
    hole = Curve("c", "c", "t", (0.0, 1.0), (float("nan"), 0.1), (float("inf"), 0.01))
    payload = mimebundle(replace(sampled, curves=(hole,)))[0][RESULT_MIME]
    assert json.loads(json.dumps(payload, allow_nan=False)) == payload
    assert payload["version"] == PAYLOAD_VERSION
    assert payload["rows"][0]["value"] == sampled.rows[0].value
    assert payload["curves"][0]["y"] == [None, 0.1]
    assert "record" not in payload


def test_report_without_record_and_curves_has_neither(sampled):
    data, metadata = mimebundle(replace(sampled, record={}, curves=()))
    assert metadata == {}
    assert "image/png" not in data


def test_output_is_light(sampled):
    data, _ = mimebundle(sampled)
    assert sum(len(json.dumps(part)) for part in data.values()) < 300_000
