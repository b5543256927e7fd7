"""Results that follow from others and carry no record of their own: how they show themselves."""

from __future__ import annotations

from quarterturn.reports.html import html
from quarterturn.reports.latex import latex
from quarterturn.reports.plots import pictures
from quarterturn.reports.report import Report
from quarterturn.reports.text import text


class Shown:
    """Text in a terminal, a page in a notebook, LaTeX by `.latex()`, all from `report()`."""

    def report(self) -> Report:
        """Everything a person sees, as plain data."""
        raise NotImplementedError

    def latex(self) -> str:
        """The report as LaTeX source."""
        return latex(self.report())

    def __repr__(self) -> str:
        return text(self.report())

    def _repr_html_(self) -> str:
        report = self.report()
        return html(report, pictures(report))
