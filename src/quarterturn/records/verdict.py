"""Does a rerun say the same as the record? Identical, consistent or different, with the numbers that say so.

The bounds hold whatever the correlations between the numbers of one run, which a record does not keep: the largest
pull is judged with Bonferroni's correction, and the mean of the squared pulls against the largest tail that a mean of
squares of dependent standard normal numbers can have (the mean is below one such square in convex order, so that the
tail is bounded by the expected shortfall: Rueschendorf, Adv. Appl. Probab. 14 (1982) 623; Embrechts, Puccetti and
Rueschendorf, J. Bank. Finance 37 (2013) 2750). An ordinary chi-squared test at 1e-4 would call one faithful rerun
in ten different where twenty numbers are fully correlated. A rerun that shares random numbers with the record differs
by less than independent errors say, so its pulls are too small, never too large.

Whether a number is withheld or a point of a curve exists can itself be chance, so that a number which only one side
has is told, and not held against the record; a result that is missing altogether is.
"""

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any, Literal

from scipy.optimize import brentq
from scipy.stats import norm

from quarterturn.errors import RecordError
from quarterturn.estimates.printing import format_value_error

Answer = Literal["identical", "consistent", "different", "undecided", "altered", "cannot be rerun"]
SEVEREST = ("altered", "different", "cannot be rerun", "undecided", "consistent", "identical")

FALSE_ALARM = 1e-4  # of each of the two tests, for a faithful independent rerun with Gaussian errors
ROUNDING = 1e-10  # of the largest number in the record: what deterministic results may differ by without a stated error
FAR_OUT = 2000.0  # mean square of pulls whose probability is no longer a normal float
MOST_SHOWN = 10
WORSE_ERROR = 2.0  # a rerun with errors larger by this factor says little: this is told


@dataclass(frozen=True, slots=True)
class Difference:
    """One number that does not agree."""

    label: str
    recorded: float | None
    recorded_error: float | None
    rerun: float | None
    rerun_error: float | None
    pull: float | None  # in sigma, or over the stated error where results are deterministic; None: not comparable
    t: float | None = None  # the point of a curve
    reason: str = ""

    def __str__(self) -> str:
        at = "" if self.t is None else f" at t = {self.t:.6g}"
        if self.pull is None:
            return f"{self.label}{at}: {self.reason}"
        recorded = format_value_error(self.recorded, self.recorded_error)
        rerun = format_value_error(self.rerun, self.rerun_error)
        return f"{self.label}{at}: recorded {recorded}, rerun {rerun}, {abs(self.pull):.1f} {self.reason}"


@dataclass(frozen=True, slots=True)
class Verdict:
    """The answer for one record, and what it rests on."""

    answer: Answer
    reason: str  # a sentence
    differences: tuple[Difference, ...] = ()  # largest first
    compared: int = 0  # numbers
    largest_pull: float | None = None
    bound: float | None = None  # on the largest pull
    mean_square: float | None = None  # of the pulls
    p_value: float | None = None  # of mean_square, upper tail, whatever the correlations
    notes: tuple[str, ...] = ()

    def __str__(self) -> str:
        lines = [f"{self.answer}: {self.reason}"]
        lines += [f"    {difference}" for difference in self.differences[:MOST_SHOWN]]
        if len(self.differences) > MOST_SHOWN:
            lines.append(f"    and {len(self.differences) - MOST_SHOWN} more")
        return "\n".join([*lines, *(f"    {note}" for note in self.notes)])

    def to_json(self) -> dict[str, Any]:
        """Plain data for JSON."""
        return asdict(self)


def altered(reason: str) -> Verdict:
    """The record, or what is shown beside it, is not what was written."""
    return Verdict("altered", reason)


def cannot_be_rerun(reason: str) -> Verdict:
    """The record can't be calculated again here; `reason` says why."""
    return Verdict("cannot be rerun", reason)


def severest(answers: Sequence[str]) -> str:
    """The answer for a whole notebook: the worst of its records."""
    return min(answers, key=SEVEREST.index, default="undecided")


def compare(recorded: Mapping[str, Any], rerun: Mapping[str, Any]) -> Verdict:
    """Compare the results of two valid records of the same request.

    Raises
    ------
    RecordError
        The two answer different questions: another kind, action, coupling or lattice.
    """
    for key in ("kind", "couplings", "lattice"):
        if recorded[key] != rerun[key]:
            raise RecordError(f"the rerun has another {key} than the record")
    if recorded["action"]["digest"] != rerun["action"]["digest"]:
        raise RecordError("the rerun has another action than the record")
    pairs, unmatched = _paired(recorded["results"], rerun["results"])
    numbers = [number for old, new in pairs for number in _numbers(old, new)]
    if not unmatched and numbers and all(number.identical for number in numbers):
        reason = f"all {len(numbers)} numbers and their errors agree bit for bit"
        return Verdict("identical", reason, compared=len(numbers))
    notes = _notes(recorded, rerun, numbers)
    judged = _judged_sample if recorded["kind"] == "sample" else _judged_levels
    return judged([number for number in numbers if not number.undefined], unmatched, notes)


@dataclass(frozen=True, slots=True)
class _Number:
    label: str
    t: float | None
    old: float | None
    old_error: float | None
    new: float | None
    new_error: float | None
    old_state: str
    new_state: str

    @property
    def identical(self) -> bool:
        old = (self.old, self.old_error, self.old_state)
        return old == (self.new, self.new_error, self.new_state)

    @property
    def undefined(self) -> bool:
        """Withheld, or a point that does not exist, in both."""
        return self.old is None and self.new is None and self.old_state == self.new_state

    def differing(self, pull: float | None, reason: str) -> Difference:
        return Difference(self.label, self.old, self.old_error, self.new, self.new_error, pull, self.t, reason)


def _paired(old: list[Any], new: list[Any]) -> tuple[list[tuple[Any, Any]], list[Difference]]:
    """Results of the same label and kind; and those that only one side has."""
    before, after = ({(result["kind"], result["label"]): result for result in side} for side in (old, new))
    pairs = [(result, after[key]) for key, result in before.items() if key in after]
    lone = [(key, "the rerun has no such result") for key in before if key not in after]
    lone += [(key, "the record has no such result") for key in after if key not in before]
    return pairs, [Difference(label, None, None, None, None, None, reason=reason) for (_, label), reason in lone]


def _numbers(old: Mapping[str, Any], new: Mapping[str, Any]) -> Iterator[_Number]:
    """A number, or the points of a curve. A point that only one side has is paired with nothing."""
    states = (old["state"], new["state"])
    if old["kind"] != "curve":
        yield _Number(old["label"], None, old["value"], old["error"], new["value"], new["error"], *states)
        return
    left, right = (
        {t: (value, error) for t, value, error in zip(side["t"], side["value"], side["error"], strict=True)}
        for side in (old, new)
    )
    nothing = (None, None)
    for t in sorted(set(left) | set(right)):
        yield _Number(old["label"], t, *left.get(t, nothing), *right.get(t, nothing), *states)


def _judged_sample(numbers: list[_Number], unmatched: list[Difference], notes: list[str]) -> Verdict:
    pulls = [(number, pull) for number in numbers if (pull := _pull(number)) is not None]
    left = [number for number in numbers if not number.identical and _pull(number) is None]
    if left:
        named = ", ".join(dict.fromkeys(number.label for number in left))
        notes = [*notes, f"not compared, for want of a value or a resolved error on both sides: {named}"]
    if not pulls:
        answer: Answer = "different" if unmatched else "undecided"
        reason = "results are missing" if unmatched else "no number has an error to compare by"
        return Verdict(answer, reason, tuple(unmatched), notes=tuple(notes))
    bound = float(norm.isf(FALSE_ALARM / (2 * len(pulls))))
    largest = max(abs(pull) for _, pull in pulls)
    mean_square = math.fsum(pull**2 for _, pull in pulls) / len(pulls)
    p_value = mean_square_p_value(mean_square)
    beyond = sorted((item for item in pulls if abs(item[1]) > bound), key=lambda item: -abs(item[1]))
    if p_value < FALSE_ALARM and not beyond:
        beyond = sorted(pulls, key=lambda item: -abs(item[1]))[:MOST_SHOWN]
    differences = [number.differing(pull, "sigma") for number, pull in beyond] + unmatched
    alarm = f"fewer than one faithful rerun in {round(1 / (2 * FALSE_ALARM))} fails (Gaussian errors, any correlations)"
    answer = "different" if differences else "consistent"
    summary = (
        f"of {len(pulls)} numbers the largest pull is {largest:.1f} sigma (bound {bound:.1f}), "
        f"the mean square {mean_square:.2f}; {alarm}"
    )
    return Verdict(answer, summary, tuple(differences), len(pulls), largest, bound, mean_square, p_value, tuple(notes))


def _judged_levels(numbers: list[_Number], unmatched: list[Difference], notes: list[str]) -> Verdict:
    """Deterministic results: within the sum of the stated errors, or within rounding where that is larger."""
    differences, largest = list(unmatched), 0.0
    rounding = ROUNDING * max((abs(value) for n in numbers for value in (n.old, n.new) if value), default=0.0)
    for number in numbers:
        if number.old is None or number.new is None:
            differences.append(number.differing(None, _one_side(number)))
            continue
        allowed = max((number.old_error or 0.0) + (number.new_error or 0.0), rounding)
        ratio = abs(number.new - number.old) / allowed if number.new != number.old else 0.0
        largest = max(largest, ratio)
        if ratio > 1:
            differences.append(number.differing(ratio, "times the stated error"))
    if not numbers and not unmatched:
        return Verdict("undecided", "there is no number to compare", notes=tuple(notes))
    differences.sort(key=lambda difference: -(difference.pull or math.inf))
    answer: Answer = "different" if differences else "consistent"
    reason = f"of {len(numbers)} numbers the largest difference is {largest:.2g} of the stated error"
    return Verdict(answer, reason, tuple(differences), len(numbers), largest, 1.0, notes=tuple(notes))


def mean_square_p_value(mean_square: float) -> float:
    """Largest probability that the mean of squares of standard normal numbers, however correlated, exceeds this.

    It is P(|z| > s) for the s at which E[z^2 | |z| > s] = 1 + s phi(s) / (1 - Phi(s)) equals `mean_square`.
    """
    if mean_square <= 1:
        return 1.0
    if mean_square > FAR_OUT:
        return 0.0

    def excess(s: float) -> float:
        return float(1 + s * math.exp(norm.logpdf(s) - norm.logsf(s)) - mean_square)

    # s^2 < E[z^2 | |z| > s] < s^2 + 3 bracket the root
    root = brentq(excess, 0.0, math.sqrt(mean_square))
    return float(2 * norm.sf(root))


def _pull(number: _Number) -> float | None:
    """Difference over the independent errors of both sides; None where there is no such thing."""
    if number.old is None or number.new is None or (number.old_state, number.new_state) != ("good", "good"):
        return None
    error = math.hypot(number.old_error or 0.0, number.new_error or 0.0)
    return (number.new - number.old) / error if error else None


def _one_side(number: _Number) -> str:
    which, state = ("the record", number.old_state) if number.old is None else ("the rerun", number.new_state)
    return f"{which} has no value ({state})"


def _notes(recorded: Mapping[str, Any], rerun: Mapping[str, Any], numbers: Sequence[_Number]) -> list[str]:
    notes = []
    other = [
        f"{name} {recorded[where].get(name, 'none')} / {rerun[where].get(name, 'none')}"
        for where in ("versions", "platform")
        for name in sorted({*recorded[where], *rerun[where]})
        if recorded[where].get(name) != rerun[where].get(name)
    ]
    if other:
        notes.append(f"record and rerun were made with different {', '.join(other)}")
    elif recorded["request"] == rerun["request"]:
        notes.append("versions, platform and request are equal, yet the numbers do not agree bit for bit")
    ratios = [n.new_error / n.old_error for n in numbers if n.old_error and n.new_error]
    if ratios and max(ratios) > WORSE_ERROR:
        notes.append(f"errors of the rerun are up to {max(ratios):.1f} times those of the record: a weaker test")
    return notes
