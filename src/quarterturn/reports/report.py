"""The report: everything a person sees of a result, as plain immutable data.

Whoever makes results fills a `Report`; the renderers of this room (text, HTML, LaTeX, picture, vendor JSON) read
nothing else. `Report.payload()` is the vendor JSON that the Lab extension draws.
"""

import math
from dataclasses import asdict, dataclass, field
from typing import Any

RESULT_MIME = "application/vnd.quarterturn.result+json"
PAYLOAD_VERSION = 1


@dataclass(frozen=True, slots=True)
class Row:
    """One number. `value` is None when it is withheld; `state` then says why, in `remark`."""

    label: str  # canonical notation, such as <q^2>
    latex: str  # the same, for typesetting, without dollar signs
    value: float | None
    error: float | None = None  # one sigma; None where there is none or it is unresolved
    exact: float | None = None  # independent solution at the same spacing (sample), or None
    pull: float | None = None  # (value - exact) / error
    tau: float | None = None  # integrated autocorrelation time [draws], 1/2 + sum rho
    tau_error: float | None = None
    n_eff: float | None = None  # effective number of samples
    state: str = "good"  # good | unresolved | withheld
    remark: str = ""  # words beside the number
    unit: str = ""  # of value, error and exact; empty in natural units with a free scale


@dataclass(frozen=True, slots=True)
class Curve:
    """A function of one variable, with errors; `exact` on the same abscissae where known."""

    label: str
    latex: str
    x_label: str
    x: tuple[float, ...]
    y: tuple[float, ...]
    error: tuple[float, ...] = ()
    exact: tuple[float, ...] = ()
    style: str = "correlator"  # correlator | gap | history | orders | wave | potential | course (a path in it) | path
    plateau: tuple[float, float, float, float] | None = None  # value, error, x from, x to of a fit drawn in
    baseline: float | None = None  # wave: the energy at which the wave function is drawn
    unit: str = ""  # of y


@dataclass(frozen=True, slots=True)
class Report:
    """A whole result: `rows` and `curves` are data, `warnings` sentences, `facts` the method line by line."""

    kind: str  # sample | levels | saddle | series
    title: str  # such as: quartic, sampled
    action_text: str  # canonical notation of the action
    latex: str  # Euclidean action, typeset, without dollar signs
    couplings: tuple[tuple[str, float], ...]
    rows: tuple[Row, ...]
    curves: tuple[Curve, ...] = ()
    warnings: tuple[str, ...] = ()
    facts: tuple[tuple[str, str], ...] = ()
    record_name: str = ""  # SHA-256 of the record, hexadecimal
    record: dict[str, Any] = field(default_factory=dict, compare=False, repr=False)

    def payload(self) -> dict[str, Any]:
        """The vendor JSON: this report without the record, which travels in the output's metadata.

        Numbers that JSON cannot hold (points of a curve that do not exist) become null.
        """
        data = asdict(self)
        del data["record"]
        plain: dict[str, Any] = _plain(data)
        return {"version": PAYLOAD_VERSION, **plain}


def _plain(value: Any) -> Any:
    """`value` as JSON has it: lists for tuples, null for numbers that are not finite."""
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item) for item in value]
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    return value
