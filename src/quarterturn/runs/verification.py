"""`verify`: every record in a notebook, checked and made again from the record alone.

Nothing of the notebook's code is executed: the record holds the action in our notation, which is parsed and never
evaluated, the couplings, the lattice, the seed and the number of draws.
"""

from __future__ import annotations

import html
import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from quarterturn.errors import QuarterturnError
from quarterturn.records.canonical import short_name
from quarterturn.records.notebook import Found, embedded
from quarterturn.records.verdict import Verdict, altered, cannot_be_rerun, compare, severest
from quarterturn.runs.declaration import action
from quarterturn.runs.saddle import saddle
from quarterturn.runs.sampling import sample
from quarterturn.runs.series import series
from quarterturn.runs.spectrum import levels

LONGEST = 1800.0  # seconds that one rerun may be expected to take
SECONDS_PER_SITE = 2e-7  # a cautious estimate for one draw of one site
WORDS = ("identical", "consistent")


@dataclass(frozen=True)
class Verification:
    """What `verify` returns: for each result in a notebook what was found and the verdict on it."""

    path: str
    results: tuple[tuple[Found, Verdict], ...]

    @property
    def answer(self) -> str:
        """The severest of the verdicts; "undecided" where there are no records."""
        return severest([verdict.answer for _, verdict in self.results])

    @property
    def passed(self) -> bool:
        return self.answer in WORDS

    def to_json(self) -> dict[str, Any]:
        """Plain data for JSON."""
        results = [
            {"place": found.place, "name": found.name, "status": found.status, "verdict": verdict.to_json()}
            for found, verdict in self.results
        ]
        return {"file": self.path, "answer": self.answer, "results": results}

    def __str__(self) -> str:
        lines = [f"{self.path}: {self.answer if self.results else 'holds no records'}"]
        for found, verdict in self.results:
            name = f"record {short_name(found.name)}" if found.name else "a result without a record"
            what = f", {_what(found.record)}" if found.record else ""
            lines.append(f"  {found.place}: {name}{what}")
            lines += [f"    {line}" for line in str(verdict).split("\n")]
        return "\n".join(lines)

    __repr__ = __str__

    def _repr_html_(self) -> str:
        return f"<pre>{html.escape(str(self))}</pre>"


def _what(record: dict[str, Any]) -> str:
    couplings = ", ".join(f"{name} = {value:g}" for name, value in record["couplings"].items())
    return f"{record['kind']} of {record['action']['name']}" + (f" at {couplings}" if couplings else "")


def verify(path: str | Path, progress: Callable[[str], None] | None = None) -> Verification:
    """Check every record in a notebook and make its numbers again.

    Parameters
    ----------
    path
        A notebook of format 4. None of its code is executed.
    progress
        Called with a line of words before each rerun.

    Returns
    -------
    Verification
        `.answer` is identical (bit for bit), consistent (within errors), different (which number, by how many
        sigma), altered (what is shown is not what was recorded), undecided or cannot be rerun (why).

    Raises
    ------
    RecordError
        The file can't be read or is no notebook.
    """
    found = embedded(path)
    results = []
    for number, item in enumerate(found, 1):
        if progress is not None:
            what = f": {_what(item.record)}" if item.record else ""
            progress(f"record {number} of {len(found)}, {item.place}{what}")
        results.append((item, _judged(item)))
    return Verification(str(path), tuple(results))


def _judged(item: Found) -> Verdict:
    if item.status == "altered":
        return altered("; ".join(item.reasons) or "the record does not match its name")
    if item.record is None:
        return cannot_be_rerun("; ".join(item.reasons) or "there is no record beside this result")
    try:
        return compare(item.record, rerun(item.record))
    except QuarterturnError as reason:
        return cannot_be_rerun(reason.message)


def rerun(record: dict[str, Any]) -> dict[str, Any]:
    """The record of a new run of the same request. Takes a valid record.

    Raises
    ------
    QuarterturnError
        The notation no longer gives the recorded action, or the run can't or shouldn't be made.
    """
    declared = action(record["action"]["notation"], record["action"]["name"])
    if declared.digest != record["action"]["digest"]:
        raise QuarterturnError("the recorded notation does not declare the recorded action: their digests differ")
    settings: dict[str, Any] = dict(record["couplings"])
    request, lattice = record["request"], record["lattice"]
    if lattice is not None:
        settings |= {"sites": lattice["sites"], "a": lattice["spacing"]}
    if record["kind"] == "levels":
        if lattice is None and request.get("beta") is not None:
            settings["beta"] = request["beta"]
        spacing = None if lattice is None else "lattice"
        return levels(declared, count=request["count"], spacing=spacing, **settings).record
    if record["kind"] == "saddle":
        asked = {key: request[key] for key in ("vacuum", "kind", "beta") if request.get(key) is not None}
        return saddle(declared, **asked, **settings).record
    if record["kind"] == "series":
        asked = {word: request[word] for word in ("coupling", "order", "level")}
        return series(declared, **asked, **settings).record
    _refuse_the_endless(record, len(declared.euclidean.variables))
    run = sample(declared, draws=request["draws"], chains=request["chains"], seed=request["seed"], **settings)
    if run.stop == "interrupted":  # half a rerun proves nothing: Ctrl-C ends the verification
        raise KeyboardInterrupt
    return run.record


def _refuse_the_endless(record: dict[str, Any], components: int) -> None:
    request = record["request"]
    draws = request["draws"] + request.get("warm_up", 0)
    sites = record["lattice"]["sites"]
    volume, steps = (math.prod(sites), 2 * record["method"].get("steps", 1)) if isinstance(sites, list) else (sites, 1)
    expected = SECONDS_PER_SITE * draws * request["chains"] * volume * components * max(1, min(float(steps), 200))
    if expected > LONGEST:
        raise QuarterturnError(
            f"the rerun would take some {expected / 3600:.1f} hours; the limit is {LONGEST / 60:.0f} minutes"
        )
