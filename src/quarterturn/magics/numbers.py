"""Values on a magic line: numbers such as 0.1, 1e-3, 1/4, pi/2, 3pi/4, targets, durations; nothing is evaluated."""

from __future__ import annotations

import math
import re

from quarterturn.errors import RequestError
from quarterturn.magics.words import Line, Setting

PLAIN = r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][-+]?[0-9]+)?"
NUMBER = re.compile(rf"(?P<sign>[-+]?)(?:(?P<factor>{PLAIN})\*?)?(?P<pi>pi|π)?(?:/(?P<divisor>{PLAIN}))?")
FORMS = "write 0.1, 1e-3, 1/4 or pi/2"


def number(line: Line, setting: Setting, text: str | None = None) -> float:
    """The value of a setting, or `text` in its place, as a number. Raises LineError."""
    written = setting.value if text is None else text
    match = NUMBER.fullmatch(written.replace("−", "-"))
    if match is None or not (match["factor"] or match["pi"]):
        repair = f"{setting.key}={written.replace(',', '.')}" if re.fullmatch(r"[-+]?\d+,\d+", written) else None
        raise line.at_value(setting, f"{written} is no number: {FORMS}", repair)
    value = float(match["factor"] or 1) * (math.pi if match["pi"] else 1.0)
    divisor = float(match["divisor"] or 1)
    if divisor == 0 or not math.isfinite(value / divisor):
        raise line.at_value(setting, f"{setting.key} must be finite")
    return (-1 if match["sign"] == "-" else 1) * value / divisor


def measured(line: Line, setting: Setting) -> float | str:
    """A number, or a number with its unit, such as 300K or 0.5fs, as the calls read it. Raises LineError."""
    text = setting.value
    if NUMBER.fullmatch(text.replace("−", "-")) or not re.fullmatch(rf"{PLAIN}(?!\*?(?:pi|π))[A-Za-zÅµ(1].*", text):
        return number(line, setting)
    return text


def whole(line: Line, setting: Setting) -> int:
    """The value of a setting as a whole number, not negative. Raises LineError."""
    value = number(line, setting)
    if value != int(value) or value < 0:
        raise line.at_value(setting, f"{setting.key} must be a whole number, not {setting.value}")
    return int(value)


def target(line: Line, setting: Setting) -> str | float:
    """A target error: a number, or a percentage as the calls read it. Raises LineError."""
    percent = setting.value.endswith("%")
    size = number(line, setting, setting.value.removesuffix("%"))
    if size <= 0:
        raise line.at_value(setting, "error must be positive: an error of zero takes for ever")
    return f"{size!r}%" if percent else size


def duration(line: Line, setting: Setting) -> str:
    """A duration such as 60s, as the calls read it. Raises LineError."""
    from quarterturn.runs.settings import seconds

    try:
        seconds(setting.value)
    except RequestError:
        raise line.at_value(setting, "time must be a duration longer than zero, such as 60s, 2min or 1h") from None
    return setting.value
