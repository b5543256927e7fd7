"""Records and notebooks to read: an oscillator as a run would record it, its output as a notebook keeps it."""

import json
import math
from pathlib import Path
from typing import Any

import pytest

from quarterturn.records.canonical import record_name

RESULT_MIME = "application/vnd.quarterturn.result+json"


def make_record(kind: str = "sample") -> dict[str, Any]:
    times = [0.1 * n for n in range(12)]
    return {
        "schema": "quarterturn-record/1",
        "kind": kind,
        "action": {
            "name": "oscillator",
            "notation": "q(t)\nL = 1/2 q'^2 - 1/2 w^2 q^2\nw = 1.0",
            "digest": "0a" * 32,
            "turned_digest": "0b" * 32,
        },
        "couplings": {"w": 1.0},
        "lattice": {"sites": 200, "spacing": 0.1, "boundary": "periodic"},
        "request": {"seed": 1, "chains": 64, "draws": 25600, "warm_up": 200},
        "method": {"sampler": "Hamiltonian Monte Carlo", "steps": 3, "angle": 0.91},
        "results": [
            {"label": "<q^2>", "kind": "number", "value": 0.49962, "error": 0.00121, "tau": 0.63, "n_eff": 12400.0,
             "state": "good"},
            {"label": "gap(q)", "kind": "number", "value": -1.0003e-7, "error": 3.4e-9, "tau": None, "n_eff": None,
             "state": "good"},
            {"label": "binder", "kind": "number", "value": 0.41234, "error": 0.2, "state": "unresolved"},
            {"label": "<Q^2>", "kind": "number", "value": None, "error": None, "state": "withheld"},
            {"label": "<q(t) q(0)>", "kind": "curve", "t": times, "value": [math.exp(-t) / 2 for t in times],
             "error": [0.001] * 12, "state": "good"},
        ],
        "warnings": ["binder: the autocorrelation time could not be resolved"],
        "stop": "target error met",
        "versions": {"python": "3.11.2", "jax": "0.7.1"},
        "platform": {"system": "Linux", "machine": "x86_64", "processors": 2},
        "precision": "float64",
        "wall_seconds": 4.2,
        "parents": [],
    }  # fmt: skip


def make_output(record: dict[str, Any]) -> dict[str, Any]:
    """An output as `mimebundle` and a notebook make it."""
    name = record_name(record)
    rows = []
    for result in record["results"]:
        if result["kind"] == "number":
            error = None if result["state"] == "unresolved" else result["error"]
            rows.append({"label": result["label"], "value": result["value"], "error": error, "state": result["state"]})
    curves = [
        {"label": r["label"], "style": "correlator", "x": r["t"], "y": r["value"], "error": r["error"]}
        for r in record["results"]
        if r["kind"] == "curve"
    ]
    payload = {"version": 1, "rows": rows, "curves": curves, "record_name": name}
    plain = "<q^2> 0.4996(12)\ngap(q) -1.000(34)e-07\nbinder 0.4123(unresolved)\n<Q^2> withheld"
    page = (
        "<table><tr><th>&lt;q^2&gt;</th><td><span>0</span>.4996<i>(12)</i></td></tr><tr><td><span>−1</span>.000(34)"
        "\u2009×\u200910<sup>−7</sup></td></tr><tr><td>0.4123(unresolved)</td></tr></table>"
    )
    output = {
        "output_type": "display_data",
        "data": {"text/plain": [plain], "text/html": page, RESULT_MIME: payload},
        "metadata": {"quarterturn": {"record": record, "name": name}},
    }
    copied: dict[str, Any] = json.loads(json.dumps(output))  # display and record must not share their lists
    return copied


def make_notebook(*outputs: Any) -> dict[str, Any]:
    code = {"cell_type": "code", "id": "a", "execution_count": 7, "source": "%sample oscillator", "metadata": {}}
    return {
        "nbformat": 4,
        "nbformat_minor": 5,
        "metadata": {},
        "cells": [
            {"cell_type": "markdown", "id": "b", "source": "words", "metadata": {}},
            {**code, "outputs": list(outputs)},
        ],
    }


@pytest.fixture
def record() -> dict[str, Any]:
    return make_record()


@pytest.fixture
def output(record) -> dict[str, Any]:
    return make_output(record)


@pytest.fixture
def saved(tmp_path):
    """Saves a notebook and returns its path."""

    def save(*outputs: Any) -> Path:
        path = tmp_path / "paper.ipynb"
        path.write_text(json.dumps(make_notebook(*outputs)), encoding="utf-8")
        return path

    return save
