"""Pictures of a report, by matplotlib's object interface: nothing global is touched and no window is opened.

Every panel is as wide as half a column of print and readable at that size. Pictures are transparent and do not
depend on the user's settings, the clock or the run: equal reports give equal bytes.
"""

import base64
import io
import re
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import matplotlib
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure

from quarterturn.reports.palette import INK
from quarterturn.reports.panels import Panel, draw, panels
from quarterturn.reports.report import Report

PANEL_WIDTH, PANEL_HEIGHT = 3.4, 2.6  # inches: half a column, about 86 mm
MOST_PANELS = 4  # of one report
PNG_DPI = 144
LONG_DATA, LONG_NUMBER = re.compile(r' d="[^"]{200,}"'), re.compile(r"\d+\.\d{3,}")  # a hundredth of a point will do
OURS = ("axes", "errorbar", "figure", "font", "lines", "mathtext", "patch", "path", "savefig", "svg", "text")
STYLE: dict[Any, Any] = {
    "font.family": "STIXGeneral",
    "mathtext.fontset": "stix",
    "font.size": 10,
    "axes.linewidth": 0.6,
    "axes.titlesize": 10,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
    "xtick.minor.width": 0.4,
    "ytick.minor.width": 0.4,
    "svg.fonttype": "path",
    "svg.hashsalt": "quarterturn",
}


@dataclass(frozen=True, slots=True)
class Picture:
    """A panel as SVG, and in words for those who do not see it."""

    svg: str
    words: str

    @property
    def uri(self) -> str:
        """The picture as a `data:` address: an image can hold no script and survives in untrusted notebooks."""
        return f"data:image/svg+xml;base64,{base64.b64encode(self.svg.encode()).decode('ascii')}"


def figure(report: Report, ink: str = INK) -> Figure | None:
    """All panels in one figure, two abreast; None where the report has no curves.

    `ink` colours axes and words: the default reads on light and dark pages, `palette.PRINT_INK` is for paper.
    """
    shown = _shown(report)
    if not shown:
        return None
    with _style():
        return _sheet(shown, ink)


def pictures(report: Report) -> tuple[Picture, ...]:
    """Each panel as an SVG of its own, so that a page can set them abreast or below each other."""
    return tuple(Picture(_svg(panel), panel.words) for panel in _shown(report))


def png(report: Report) -> bytes | None:
    """All panels as one PNG, transparent; None where the report has no curves."""
    shown = _shown(report)
    if not shown:
        return None
    buffer = io.BytesIO()
    with _style():
        sheet = _sheet(shown, INK)
        FigureCanvasAgg(sheet)
        sheet.savefig(buffer, format="png", dpi=PNG_DPI, transparent=True, metadata={"Software": None})
    return buffer.getvalue()


def _shown(report: Report) -> list[Panel]:
    return panels(report.curves)[:MOST_PANELS]


def _sheet(shown: list[Panel], ink: str) -> Figure:
    across = min(2, len(shown))
    down = -(-len(shown) // across)
    sheet = Figure(figsize=(PANEL_WIDTH * across, PANEL_HEIGHT * down), layout="constrained", facecolor="none")
    parts = sheet.subfigures(down, across, squeeze=False)
    for part in parts.flat:
        part.set_facecolor("none")
    for panel, part in zip(shown, parts.flat, strict=False):
        draw(panel, part, ink)
    return sheet


def _svg(panel: Panel) -> str:
    buffer = io.StringIO()
    with _style():
        sheet = Figure(figsize=(PANEL_WIDTH, PANEL_HEIGHT), layout="constrained", facecolor="none")
        draw(panel, sheet, INK)
        FigureCanvasSVG(sheet)
        nothing = dict.fromkeys(("Creator", "Date", "Format", "Type"))
        sheet.savefig(buffer, format="svg", transparent=True, metadata=nothing)
    return LONG_DATA.sub(lambda data: LONG_NUMBER.sub(_rounded, data.group()), buffer.getvalue())


def _rounded(number: re.Match[str]) -> str:
    return f"{float(number.group()):.2f}"


@contextmanager
def _style() -> Iterator[None]:
    """Our settings for as long as we draw, on top of matplotlib's own and not of the user's.

    A letter that no font has is drawn as a box; that is no reason for a warning in somebody's notebook.
    """
    settings: dict[Any, Any] = {
        key: value
        for key, value in matplotlib.rcParamsDefault.items()
        if key.partition(".")[0] in OURS or key.startswith(("xtick", "ytick"))
    }
    with warnings.catch_warnings(), matplotlib.rc_context({**settings, **STYLE}):
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        yield
