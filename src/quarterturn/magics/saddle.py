"""`%saddle`: instantons and bounces of a declared action."""

from __future__ import annotations

from typing import TYPE_CHECKING

from IPython.core.magic import Magics, line_magic, magics_class

from quarterturn.magics.numbers import number
from quarterturn.magics.registry import session
from quarterturn.magics.request import Reader, keywords, placed
from quarterturn.magics.words import Line, Setting, read

if TYPE_CHECKING:
    from quarterturn.runs.saddle import Saddles

KINDS = ("instanton", "bounce")


def _kind(line: Line, setting: Setting) -> str:
    if setting.value not in KINDS:
        raise line.at_value(setting, "kind is instanton or bounce, or is left out", "kind=bounce")
    return setting.value


def _vacuum(line: Line, setting: Setting) -> list[float]:
    """One number for each path, with colons between."""
    return [number(line, setting, part) for part in setting.value.split(":")]


OPTIONS: dict[str, Reader] = {"vacuum": _vacuum, "kind": _kind}


@magics_class
class SaddleMagic(Magics):
    """The line magic `%saddle`."""

    @line_magic
    def saddle(self, line: str) -> Saddles:
        """Instantons and bounces: stationary paths of the Euclidean action, and their one-loop rates.

            %saddle NAME [COUPLING=VALUE ...] [OPTION=VALUE ...] [as VARIABLE]

        An instanton between minima of equal height gives their splitting, or the width of a band; a bounce
        out of a higher minimum gives its rate of decay. Shows the action, duration, zero and negative
        modes, and the determinant of the fluctuations, had in two ways. Up to four paths, or one field.

        COUPLING=VALUE     a coupling of the action: 0.2, 1e-3, 1/4, pi/2; {x} takes the Python variable x
        vacuum=-1          start from the minimum next to this point; vacuum=1:0 for two paths
        kind=bounce        a bounce where minima are level too; or kind=instanton
        beta=8             a periodic bounce at this inverse temperature; above the crossover temperature
                           the path that rests on the barrier
        as VARIABLE        also put the result into a Python variable

        Example
        -------
            %saddle well lam=1 as tunnel
            tunnel["S"], tunnel["E_1 - E_0"]
        """
        words = read("%saddle", line)
        action = session.action(words)
        settings = keywords(words, action, OPTIONS)
        from quarterturn.runs.saddle import saddle

        with placed(words):
            result = saddle(action, **settings)
        session.keep(result, words, self.shell)
        return result
