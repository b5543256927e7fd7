"""What a call asks for: couplings, lattice, and when to stop, from the keywords of a call.

Any keyword that is a coupling of the action sets it; `a`, `beta`, `sites` set the lattice; anything else is an error
that lists what there is.
"""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from quarterturn.actions.findings import check
from quarterturn.actions.in_units import known
from quarterturn.actions.model import Action, Finding
from quarterturn.errors import ActionError, RequestError, SpectrumError
from quarterturn.units.unit import amount

LATTICE_WORDS = ("a", "beta", "sites", "temperature")
DEFAULT_ERROR = "1%"
DEFAULT_SECONDS = 60.0
SAME_HBAR = 1e-6  # relative; a record may hold hbar from another release of the constants
UNITS_OF_TIME = {"s": 1.0, "sec": 1.0, "ms": 1e-3, "min": 60.0, "m": 60.0, "h": 3600.0}


@dataclass(frozen=True)
class Settings:
    """Couplings and lattice of one run, complete."""

    couplings: Mapping[str, float]
    sites: int  # in time
    spacing: float
    findings: tuple[Finding, ...] = ()
    extents: tuple[int, ...] = ()  # of fields: sites and spacing of every direction, time first
    spacings: tuple[float, ...] = ()

    @property
    def beta(self) -> float:
        return self.sites * self.spacing


@dataclass(frozen=True)
class Precision:
    """A target error: relative or absolute, for every number or for one label."""

    size: float
    relative: bool

    def met(self, value: float, error: float) -> bool:
        return error <= self.allowed(value)

    def allowed(self, value: float) -> float:
        return self.size * abs(value) if self.relative else self.size

    def __str__(self) -> str:
        return f"{self.size * 100:g}%" if self.relative else f"{self.size:g}"


@dataclass(frozen=True)
class Goal:
    """When to stop: at the first met of precision, seconds and draws (per chain)."""

    precision: Mapping[str, Precision] = field(default_factory=dict)  # "" stands for every number
    seconds: float | None = None
    draws: int | None = None


def resolve(action: Action, keywords: Mapping[str, Any]) -> Settings:
    """Settings of a call.

    `a` alone keeps beta, `beta` or `sites` alone keep a. Raises RequestError for an unknown or unusable keyword, and
    ActionError where a finding at these couplings makes the integral diverge.
    """
    couplings, lattice = split(action, keywords)
    if "temperature" in keywords:
        lattice = _at_temperature(action, lattice)
    sites, spacing = _geometry(action, couplings, lattice)
    return Settings(couplings, sites, spacing, examined(action, couplings))


def require_paths(action: Action, what: str) -> None:
    """Raises ActionError for what the solvers of paths can't treat: fields on space, lattice actions, unit vectors."""
    euclidean = action.euclidean
    kinds = (
        (euclidean.dimension > 1, "a field on space"),
        (euclidean.links, "a lattice action SE"),
        (euclidean.spheres, "an action of unit vectors"),
    )
    for there, words in kinds:
        if there:
            raise ActionError(f"{what} is solved for paths; {action.name} is {words}: sample it instead")


def split(action: Action, keywords: Mapping[str, Any]) -> tuple[dict[str, float], dict[str, float]]:
    """The couplings, complete with their defaults, and the words of the lattice. Raises RequestError for others."""
    couplings, lattice = split_words(action, keywords)
    return couplings, {word: _number(word, value) for word, value in lattice.items()}


def split_words(action: Action, keywords: Mapping[str, Any]) -> tuple[dict[str, float], dict[str, Any]]:
    """As `split`, with the words of the lattice as they were given."""
    couplings = {name: coupling.default for name, coupling in action.couplings.items()}
    lattice: dict[str, Any] = {}
    for word, value in keywords.items():
        if word in couplings:
            couplings[word] = _number(word, value)
            if known(action, word) and abs(couplings[word] / action.couplings[word].default - 1) > SAME_HBAR:
                raise RequestError(
                    f"{word} is known in these units, {action.couplings[word].default:.10g}: leave it out"
                )
        elif word in LATTICE_WORDS:
            lattice[word] = value if isinstance(value, (list, tuple)) else _measured(action, word, value)
        else:
            raise unknown_keyword(word, action)
    if "temperature" in lattice:
        if "beta" in lattice:
            raise RequestError("temperature and beta are one thing: give one of them")
        lattice["beta"] = lattice.pop("temperature")
    return couplings, lattice


def _measured(action: Action, word: str, value: Any) -> float:
    """A word of the lattice as the action counts it, from a number or from an amount such as 300 K or 0.5 fs.

    The entry of `temperature` is the inverse temperature.
    """
    if word == "temperature":
        return action.system.beta_at(value if isinstance(value, str) else _number(word, value))
    if isinstance(value, str) and word != "sites" and not _is_number(value):
        return action.system.beta(*amount(value))
    return _number(word, value)


MOST_SITES = 200_000  # that `beta = vacuum` chooses
DIVERGES = ("fatal", "unconfined")  # on a periodic lattice
NO_SPECTRUM = ("fatal",)  # in the continuum, where bound states may lie below a threshold


def examined(action: Action, couplings: Mapping[str, float], stops: tuple[str, ...] = DIVERGES) -> tuple[Finding, ...]:
    """The findings at these couplings. Raises ActionError at a finding whose severity is among `stops`."""
    findings = check(action.euclidean, couplings, action.places)
    fatal = [f for f in findings if f.severity in stops]
    if fatal:
        known = (f.span for f in action.findings if f.topic == fatal[0].topic and f.span)
        place = fatal[0].span or next(known, None)
        raise ActionError(fatal[0].message, span=place, text=action.text if place else None)
    return findings


def unknown_keyword(word: str, action: Action) -> RequestError:
    """The complaint about a keyword that is neither a coupling nor a word of the lattice."""
    there = [*action.couplings, *LATTICE_WORDS]
    near = difflib.get_close_matches(word, there, n=1)
    names = ", ".join(action.couplings) or "none"
    return RequestError(
        f"{action.name} has no coupling {word}; its couplings are {names}, the lattice is set by a, beta, sites, "
        "temperature",
        repair=f"{near[0]} = …" if near else None,
    )


def _number(word: str, value: Any) -> float:
    try:
        number = float(value)
    except (TypeError, ValueError):
        raise RequestError(f"{word} must be a number, got {value!r}") from None
    if not math.isfinite(number):
        raise RequestError(f"{word} must be finite, got {number}")
    return number


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True


def _at_temperature(action: Action, asked: Mapping[str, float]) -> dict[str, float]:
    """Where a temperature comes with a spacing or with none, beta gets a whole number of spacings, none longer."""
    spacing = asked.get("a", action.geometry.spacing if action.geometry else 0.0)
    if "sites" in asked or not spacing > 0:
        return dict(asked)
    return {"beta": asked["beta"], "sites": max(math.ceil(asked["beta"] / spacing * (1 - 1e-9)), 3)}


def _geometry(action: Action, couplings: Mapping[str, float], asked: Mapping[str, float]) -> tuple[int, float]:
    given = action.geometry
    if given is not None and given.vacuum is not None and not set(asked) & {"beta", "sites"}:
        return cold_enough(action, couplings, asked.get("a", given.spacing), given.vacuum)
    if len(asked) == 3:
        raise RequestError("a, beta and sites together say one thing twice: beta = sites a; give two of them")
    if given is None and len(asked) < 2:
        raise RequestError(
            f"{action.name} declares no lattice: add a line such as 'lattice 200, a = 0.1', "
            "or give two of a, beta, sites"
        )
    spacing, beta, sites = asked.get("a"), asked.get("beta"), asked.get("sites")
    for word, value in asked.items():
        if not value > 0:
            raise RequestError(f"{word} must be positive, got {value:g}")
    if sites is not None and sites != int(sites):
        raise RequestError(f"sites must be a whole number, got {sites:g}")
    if given is not None and not asked:
        return given.sites, given.spacing
    if given is not None and len(asked) == 1:
        beta, spacing = (given.beta, spacing) if spacing is not None else (beta, given.spacing)
    if sites is None:
        assert beta is not None and spacing is not None
        sites = round(beta / spacing)
        if abs(sites * spacing - beta) > 1e-9 * beta:
            raise RequestError(
                f"beta = {beta:g} is not a whole number of spacings a = {spacing:g}; "
                f"the nearest is beta = {sites * spacing:g} with {sites} sites"
            )
    if spacing is None:
        assert beta is not None
        spacing = beta / sites
    return int(sites), float(spacing)


def cold_enough(action: Action, couplings: Mapping[str, float], spacing: float, tolerance: float) -> tuple[int, float]:
    """Sites and spacing for `beta = vacuum`: the smallest lattice with exp(-beta gap) below the tolerance.

    Raises RequestError where the gap of the action isn't known without sampling, or there is none.
    """
    from quarterturn.imaginary.binding import problem_of
    from quarterturn.imaginary.solve import spectrum_of

    try:
        energies = spectrum_of(problem_of(action.euclidean, couplings), 2).energies
    except SpectrumError as trouble:
        raise RequestError(
            f"beta = vacuum needs the gap of {action.name} beforehand, and it is not known: {trouble.message}; give "
            "beta or sites, and look at the size of exp(-beta gap) in the report"
        ) from trouble
    gap = float(energies[1] - energies[0])
    wanted = -math.log(tolerance) / gap if gap > 0 else math.inf
    if not wanted / spacing < MOST_SITES:
        raise RequestError(
            f"the gap of {action.name} is {gap:.3g} here, so that beta = vacuum would need {wanted / spacing:.3g} "
            "sites; give beta yourself, or a larger tolerance"
        )
    return max(math.ceil(wanted / spacing), 3), spacing


def goal(error: Any, time: Any, draws: Any) -> Goal:
    """When to stop, from the words of a call; `error` defaults to 1 % and `time` to a minute if nothing is given.

    Raises RequestError for a target that can't be read or isn't positive.
    """
    if error is None and time is None and draws is None:
        error, time = DEFAULT_ERROR, DEFAULT_SECONDS
    precision: dict[str, Precision] = {}
    if isinstance(error, Mapping):
        precision = {str(label): _precision(value) for label, value in error.items()}
    elif error is not None:
        precision = {"": _precision(error)}
    if draws is not None and (isinstance(draws, bool) or int(draws) != draws or draws < 1):
        raise RequestError(f"draws must be a whole number of draws per chain, at least 1, got {draws!r}")
    if time is None and draws is None:
        time = DEFAULT_SECONDS
    return Goal(precision, None if time is None else seconds(time), None if draws is None else int(draws))


def _precision(value: Any) -> Precision:
    relative = isinstance(value, str) and value.strip().endswith("%")
    try:
        size = float(str(value).strip().removesuffix("%"))
    except ValueError:
        raise RequestError(f"error must be a number or a percentage such as '1%', got {value!r}") from None
    if not (size > 0 and math.isfinite(size)):
        raise RequestError(f"error must be positive, got {value!r}: an error of zero takes for ever")
    return Precision(size / 100 if relative else size, relative)


def seconds(value: Any) -> float:
    """A duration: a number of seconds, or words such as '60s', '2 min', '1.5h'."""
    match = re.fullmatch(r"\s*([0-9.]+(?:e[+-]?\d+)?)\s*([a-z]*)\s*", str(value), re.IGNORECASE)
    unit = match.group(2).lower() if match else ""
    if match is None or (unit and unit not in UNITS_OF_TIME):
        raise RequestError(f"time must be a duration such as '60s' or '2 min', got {value!r}")
    try:
        length = float(match.group(1)) * UNITS_OF_TIME.get(unit, 1.0)
    except ValueError:
        raise RequestError(f"time must be a duration such as '60s' or '2 min', got {value!r}") from None
    if not length > 0:
        raise RequestError(f"time must be positive, got {value!r}")
    return length
