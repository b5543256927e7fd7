"""Records of runs: everything needed to get the numbers again, from the notation alone."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from quarterturn.actions.in_units import known
from quarterturn.actions.model import Action, Geometry
from quarterturn.estimates.estimate import CurveEstimate, Estimate
from quarterturn.notation.symbols import COORDINATES
from quarterturn.records.schema import SCHEMA, environment, validate
from quarterturn.runs.settings import Settings
from quarterturn.sampling.driver import Chain
from quarterturn.sampling.fields.warm_up import FieldRecipe
from quarterturn.sampling.tuning import Recipe
from quarterturn.units.constants import release
from quarterturn.units.quantity import Quantity


def notation_of(action: Action) -> str:
    """The canonical notation with its couplings, lattice and measurements: a body that declares the action again."""
    lines = [action.canonical]
    given = [f"{name} = {c.default!r}" for name, c in action.couplings.items() if not known(action, name)]
    if given:
        lines.append(", ".join(given))
    if action.measurements:
        lines.append("measure " + ", ".join(getattr(m, "source", "") or m.label for m in action.measurements))
    if action.geometry is not None and action.geometry.edges:
        lines.append(edges_line(action.geometry))
    return "\n".join(lines)


def edges_line(geometry: Geometry) -> str:
    """The lattice with its edges as notation; sites and spacings stand beside it in the record."""
    edges = [
        f"twist {name} = {edge.values[0]!r}" if edge.kind == "twist" else f"{edge.kind} {name}"
        for name, edge in zip(COORDINATES, geometry.edges, strict=False)
    ]
    spacings = [f"a_{name} = {a!r}" for name, a in zip(COORDINATES, geometry.spacings, strict=False)]
    return ", ".join(["lattice " + " x ".join(map(str, geometry.extents)), *spacings, *edges])


def base_record(kind: str, action: Action, settings: Settings) -> dict[str, Any]:
    """The part of a record that every kind of run shares."""
    versions, platform = environment()
    return {
        "schema": SCHEMA,
        "kind": kind,
        "action": {
            "name": action.name,
            "notation": notation_of(action),
            "digest": action.digest,
            "turned_digest": action.euclidean.digest,
        },
        "couplings": {name: float(value) for name, value in settings.couplings.items()},
        "lattice": _lattice(action, settings),
        "versions": versions,
        "platform": platform,
        "precision": "float64",
        "parents": [],
        **_units(action),
    }


def _units(action: Action) -> dict[str, Any]:
    """The units by name and the release of the constants behind them; nothing where the scale is free."""
    if action.units is None:
        return {}
    return {"units": {"names": list(action.units.names), "constants": release()}}


def with_unit(quantity: Quantity) -> dict[str, str]:
    """The entry of a result that names its unit; none where it has no name."""
    return {"unit": quantity.name} if quantity.name else {}


def _lattice(action: Action, settings: Settings) -> dict[str, Any]:
    if not settings.extents:
        return {"sites": settings.sites, "spacing": settings.spacing, "boundary": "periodic"}
    edges = action.geometry.edges if action.geometry else ()
    kinds = {edge.kind for edge in edges} or {"periodic"}
    boundary = kinds.pop() if len(kinds) == 1 else ", ".join(edge.kind for edge in edges)
    return {"sites": list(settings.extents), "spacing": list(settings.spacings), "boundary": boundary}


def field_record(
    action: Action,
    settings: Settings,
    chain: Chain,
    seed: int,
    numbers: Mapping[str, Estimate],
    curves: Mapping[str, CurveEstimate],
    warnings: tuple[str, ...],
) -> dict[str, Any]:
    """The record of a Monte Carlo run of fields."""
    recipe = chain.recipe
    assert isinstance(recipe, FieldRecipe)
    method = {
        "sampler": "Hamiltonian Monte Carlo in real space",
        "moves": dict(chain.acceptance or {}),
        "integrator": "minimum norm",
        "step": recipe.step,
        "steps": recipe.steps,
        "scale": list(recipe.scale),
        "clusters": recipe.clusters,
        "exp_minus_dH": list(chain.exp_change),
    }
    return _with_results(base_record("sample", action, settings), chain, method, seed, numbers, curves, warnings)


def sample_record(
    action: Action,
    settings: Settings,
    chain: Chain,
    seed: int,
    numbers: Mapping[str, Estimate],
    curves: Mapping[str, CurveEstimate],
    warnings: tuple[str, ...],
) -> dict[str, Any]:
    """The record of a Monte Carlo run."""
    recipe = chain.recipe
    assert isinstance(recipe, Recipe)
    method = {
        "sampler": "Hamiltonian Monte Carlo, reference form evolved exactly",
        "moves": dict(chain.acceptance or {}),
        "integrator": recipe.integrator,
        "steps": recipe.steps,
        "angle": recipe.angle,
        "reference_frequency_squared": list(recipe.frequency_squared),
        "reference_centre": list(recipe.centre),
        "segment_flips": recipe.segments,
        "exp_minus_dH": list(chain.exp_change),
    }
    return _with_results(base_record("sample", action, settings), chain, method, seed, numbers, curves, warnings)


def _with_results(
    record: dict[str, Any],
    chain: Chain,
    method: dict[str, Any],
    seed: int,
    numbers: Mapping[str, Estimate],
    curves: Mapping[str, CurveEstimate],
    warnings: tuple[str, ...],
) -> dict[str, Any]:
    record["request"] = {
        "seed": seed,
        "chains": chain.program.chains,
        "draws": chain.draws,
        "warm_up": chain.warm_up,
        "generator": "threefry2x32",
    }
    record["method"] = method
    record["results"] = [
        *(number_result(label, e) for label, e in numbers.items()),
        *(curve_result(label, c) for label, c in curves.items()),
    ]
    record["warnings"] = list(warnings)
    record["stop"] = chain.stop
    record["wall_seconds"] = round(chain.seconds, 3)
    validate(record)
    return record


def _finite(value: float | None) -> float | None:
    return None if value is None or not np.isfinite(value) else float(value)


def number_result(label: str, e: Estimate) -> dict[str, Any]:
    return {
        "label": label,
        "kind": "number",
        "value": _finite(e.value),
        "error": _finite(e.error),
        "tau": _finite(e.tau),
        "n_eff": _finite(e.n_eff),
        "state": e.state,
        **with_unit(e.quantity),
    }


def curve_result(label: str, c: CurveEstimate) -> dict[str, Any]:
    return {
        "label": label,
        "kind": "curve",
        "t": [float(v) for v in c.t],
        "value": [_finite(v) for v in c.value],
        "error": [_finite(v) for v in c.error],
        "state": c.state,
        **with_unit(c.quantity),
    }
