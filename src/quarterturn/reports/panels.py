"""What each panel of a picture shows: which curves belong together, and how one panel is drawn.

Measured points always carry their error bars, or their band where they lie too close; exact lines are drawn over in
thin ink, fits as a band over the stretch that was fitted.
"""

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure, SubFigure
from matplotlib.mathtext import MathTextParser
from numpy.typing import NDArray

from quarterturn.estimates.printing import format_value_error
from quarterturn.reports.cells import one_line
from quarterturn.reports.palette import DATA, FIT, SERIES
from quarterturn.reports.report import Curve

Array = NDArray[np.float64]

MOST_BARS = 60  # beyond, error bars become a band
MOST_POINTS = 200  # of a line; a longer history is drawn by means over blocks, a longer curve by one point in so many
LOG_RATIO = 5.0  # a correlator that falls by less is drawn on a linear axis
WAVE_FILL = 0.8  # height of the largest wave function over the smallest distance of levels
WAVE_ENDS = 0.003  # of the tallest; what is lower all the way out is not worth paper
HEADROOM = 1.15
IN_POTENTIAL = ("wave", "potential", "course")  # styles that share one panel
DASHES = ("-", "--", "-.", ":")
ORDERS_REACH = 2.5  # times the distance of the first sum: where a diverging series leaves the picture
MOST_MARKS = 25  # on one line


@dataclass(frozen=True, slots=True)
class Panel:
    """Curves that are drawn together. kind: correlator | gap | history | orders | paths | waves."""

    kind: str
    curves: tuple[Curve, ...]
    words: str  # what the picture shows, for those who do not see it


def panels(curves: Sequence[Curve]) -> list[Panel]:
    """The panels of a report, in the order of its curves. An effective gap joins the correlator before it."""
    found: list[Panel] = []
    waves = tuple(curve for curve in curves if curve.style in IN_POTENTIAL and curve.x)
    for curve in curves:
        if not curve.x or curve.style in IN_POTENTIAL:
            continue
        last = found[-1] if found else None
        if curve.style == "gap" and last and last.kind == "correlator" and len(last.curves) == 1:
            found[-1] = Panel("correlator", (*last.curves, curve), f"{last.words}; below, {_words(curve)}")
        elif curve.style == "history" and last and last.kind == "history" and last.curves[0].label == curve.label:
            found[-1] = Panel("history", (*last.curves, curve), last.words)
        elif curve.style == "path" and last and last.kind == "paths":
            found[-1] = Panel("paths", (*last.curves, curve), f"{last.words}; {_words(curve)}")
        elif curve.style == "orders" and last and last.kind == "orders":
            found[-1] = Panel("orders", (*last.curves, curve), f"{last.words}; {_words(curve)}")
        else:
            kind = {"gap": "gap", "history": "history", "path": "paths", "orders": "orders"}.get(
                curve.style, "correlator"
            )
            found.append(Panel(kind, (curve,), _words(curve)))
    if waves:
        names = ", ".join(one_line(curve.label) for curve in waves)
        what = (
            "wave functions in the potential" if any(c.style == "wave" for c in waves) else "the path in the potential"
        )
        found.append(Panel("waves", waves, f"{what}: {names}"))
    return found


def draw(panel: Panel, figure: Figure | SubFigure, ink: str) -> None:
    """`panel` on the empty `figure`; axes and words in the colour `ink`."""
    if panel.kind == "correlator" and len(panel.curves) == 2:
        above, below = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": (3, 2)})
        _correlator(above, panel.curves[0], ink)
        _gap(below, panel.curves[1], ink)
        _dress(above, panel.curves[0], ink)
        above.set_xlabel("")
        _dress(below, panel.curves[1], ink)
        figure.align_ylabels([above, below])
        return
    if panel.kind == "orders":
        _orders(figure, panel.curves, ink)
        return
    axes = figure.subplots()
    if panel.kind == "correlator":
        _correlator(axes, panel.curves[0], ink)
    elif panel.kind == "gap":
        _gap(axes, panel.curves[0], ink)
    elif panel.kind == "history":
        _history(axes, panel.curves)
    elif panel.kind == "paths":
        _paths(axes, panel.curves, ink)
    else:
        _waves(axes, panel.curves, ink)
    _dress(axes, panel.curves[0], ink)
    if panel.kind == "waves":
        axes.set_ylabel(f"energy{_bracketed(panel.curves[0].unit)}", parse_math=False)
    elif panel.kind == "paths" and len(panel.curves) > 1:
        axes.set_ylabel("")  # the legend names them


def _words(curve: Curve) -> str:
    variable = one_line(curve.x_label)
    return f"{one_line(curve.label)} against {variable}, {len(curve.x)} points"


def _correlator(axes: Axes, curve: Curve, ink: str) -> None:
    _points(axes, curve, ink)
    if curve.exact:
        axes.legend(frameon=False, fontsize="small", labelcolor=ink, loc="upper right", borderaxespad=0)
    y = _numbers(curve.y)
    seen = y[np.isfinite(y)]
    if seen.size and seen.min() > 0 and seen.max() > LOG_RATIO * seen.min():
        axes.set_yscale("log", nonpositive="clip")
        # an error bar that reaches below zero must not stretch the axis to the smallest float
        axes.set_ylim(seen.min() / 2, seen.max() * 2)


def _gap(axes: Axes, curve: Curve, ink: str) -> None:
    _points(axes, curve, ink)
    y, error = _numbers(curve.y), _numbers(curve.error)
    if curve.plateau is not None:
        value, sigma, start, stop = curve.plateau
        fit = f"fit {format_value_error(value, sigma)}"
        axes.fill_between([start, stop], value - sigma, value + sigma, color=FIT, alpha=0.35, linewidth=0)
        axes.plot([start, stop], [value, value], color=FIT, linewidth=1.2, zorder=4)
        axes.text(0.02, 0.98, fit, transform=axes.transAxes, va="top", fontsize="small", parse_math=False)
    if error.size == y.size and np.isfinite(y).any():
        # the noise at long times would hide the plateau: the axis follows the well-measured half
        sure = np.isfinite(y) & (error <= np.nanmedian(error))
        if sure.any():
            low, high = np.min((y - error)[sure]), np.max((y + error)[sure])
            margin = 1.5 * max(high - low, 1e-9 * abs(high), 1e-300)
            axes.set_ylim(low - margin, high + margin)
            outside = int(np.sum((y < low - margin) | (y > high + margin)))
            if outside:
                note = f"{outside} point{'s' * (outside > 1)} beyond"
                axes.text(0.99, 0.98, note, transform=axes.transAxes, ha="right", va="top", fontsize="small")


def _points(axes: Axes, curve: Curve, ink: str) -> None:
    """Measured points with their errors, and the exact line over them."""
    step = -(-len(curve.x) // MOST_POINTS)
    x, y, error, exact = (_numbers(part)[::step] for part in (curve.x, curve.y, curve.error, curve.exact))
    if step > 1:
        _note_above(axes, f"one point in {step}")
    if error.size != x.size:
        axes.plot(x, y, color=DATA, linewidth=1.2)
    elif x.size <= MOST_BARS:
        gap = np.full_like(x, np.nan)  # all bars are one line with gaps: a quarter of the size of one line a bar
        bars = np.stack([y - error, y + error, gap], axis=1).ravel()
        axes.plot(np.repeat(x, 3), bars, color=DATA, linewidth=0.9)
        axes.plot(x, y, color=DATA, linestyle="", marker="o", markersize=2.6, label="sampled")
    else:
        axes.fill_between(x, y - error, y + error, color=DATA, alpha=0.3, linewidth=0)
        axes.plot(x, y, color=DATA, linewidth=1.0, zorder=2, label="sampled")
    if exact.size == x.size and x.size:
        axes.plot(x, exact, color=ink, linewidth=0.8, zorder=3, label="exact")


def _orders(figure: Figure | SubFigure, curves: Sequence[Curve], ink: str) -> None:
    """Sums of a series against order, each method with a mark of its own; below, their distance from the exact one."""
    exact = next((curve.exact[0] for curve in curves if curve.exact), None)
    if exact is None:
        above, below = figure.subplots(), None
    else:
        above, below = figure.subplots(2, 1, sharex=True, gridspec_kw={"height_ratios": (3, 3)})
        above.axhline(exact, color=ink, linewidth=0.8, zorder=3, label="exact")
    best = exact if exact is not None else float(_numbers(curves[-1].y)[-1])
    reach = ORDERS_REACH * max(abs(curves[0].y[0] - best), 1e-9 * abs(best), 1e-300)
    for index, curve in enumerate(curves):
        x, y = _numbers(curve.x), _numbers(curve.y)
        step = -(-len(x) // MOST_MARKS)
        style: dict[str, Any] = {
            "color": (*SERIES, ink)[index % 4],
            "marker": "osx^"[index % 4],
            "markersize": 2.6,
            "linewidth": 0.7,
        }
        seen = np.isfinite(y) & (np.abs(y - best) <= reach)
        above.plot(x, np.where(seen, y, np.nan), label=curve.label, markevery=step, **style)
        if below is not None:
            away = np.abs(y - best)
            away[~np.isfinite(away) | (away == 0) | (away > ORDERS_REACH**2 * reach)] = np.nan
            below.plot(x, away, markevery=step, **style)
    above.legend(frameon=False, fontsize="x-small", labelcolor=ink, ncols=2, borderaxespad=0)
    for axes, label in ((above, "sum"), (below, "distance from exact")):
        if axes is not None:
            _dress(axes, replace(curves[0], label=label, latex=""), ink)
    if below is not None:
        above.set_xlabel("")
        below.set_yscale("log")
        figure.align_ylabels([above, below])


def _history(axes: Axes, curves: Sequence[Curve]) -> None:
    block = max(-(-len(curve.x) // MOST_POINTS) for curve in curves)
    for index, curve in enumerate(curves):
        x, y = _block_means(_numbers(curve.x), block), _block_means(_numbers(curve.y), block)
        axes.plot(x, y, color=SERIES[index % len(SERIES)], linewidth=0.7)
    if block > 1:
        _note_above(axes, f"means of {block} points")


def _paths(axes: Axes, curves: Sequence[Curve], ink: str) -> None:
    """Paths in time, told apart by their dashes as well as by colour."""
    for index, curve in enumerate(curves):
        dashes, colour = DASHES[index % len(DASHES)], SERIES[index % len(SERIES)]
        label = one_line(curve.label)
        axes.plot(curve.x, curve.y, color=colour, linestyle=dashes, linewidth=1.4, label=label)
    if len(curves) > 1:
        axes.legend(frameon=False, fontsize="small", labelcolor=ink)


def _waves(axes: Axes, curves: Sequence[Curve], ink: str) -> None:
    """Wave functions, each on its energy and all to one scale, in the potential."""
    potential = [curve for curve in curves if curve.style == "potential"]
    waves = [curve for curve in curves if curve.style == "wave"]
    energies = sorted({curve.baseline or 0.0 for curve in waves})
    tallest = max((float(np.nanmax(np.abs(_numbers(curve.y)))) for curve in waves), default=1.0) or 1.0
    distance = min(np.diff(energies)) if len(energies) > 1 else abs(energies[0]) if energies else 1.0
    if len(energies) > 1:  # a tunnelling pair must not flatten all the others
        distance = max(distance, (energies[-1] - energies[0]) / (2 * len(energies)))
    scale = WAVE_FILL * (distance or 1.0) / tallest
    for curve in potential:
        axes.plot(curve.x, curve.y, color=ink, linewidth=1.0, zorder=3)
    for curve in curves:
        if curve.style == "course":
            axes.plot(curve.x, curve.y, color=DATA, linewidth=2.6, alpha=0.8, zorder=4, solid_capstyle="butt")
            axes.plot([curve.x[0], curve.x[-1]], [curve.y[0], curve.y[-1]], color=DATA, linestyle="", marker="o")
    for index, curve in enumerate(waves):
        base, colour = curve.baseline or 0.0, SERIES[index % len(SERIES)]
        x, y = _numbers(curve.x), base + scale * _numbers(curve.y)
        axes.fill_between(x, base, y, color=colour, alpha=0.2, linewidth=0)
        axes.plot(x, y, color=colour, linewidth=1.0, zorder=2)
        axes.plot(x[[0, -1]], [base, base], color=ink, linewidth=0.4, zorder=1)
    reach = [_numbers(curve.x)[np.abs(_numbers(curve.y)) > WAVE_ENDS * tallest] for curve in waves]
    if any(part.size for part in reach):
        ends = np.concatenate(reach)
        axes.set_xlim(ends.min(), ends.max())
    if waves and potential:
        floor = min(float(np.nanmin(_numbers(curve.y))) for curve in potential)
        ceiling = energies[-1] + scale * tallest
        axes.set_ylim(floor - 0.05 * (ceiling - floor), floor + HEADROOM * (ceiling - floor))


def _dress(axes: Axes, curve: Curve, ink: str) -> None:
    """Labels, and axes in the colour of the words; two sides only."""
    variable, _, unit = one_line(curve.x_label).removesuffix("]").partition(" [")
    _label(axes.set_xlabel, _with_unit(variable, unit), one_line(curve.x_label))
    _label(axes.set_ylabel, _with_unit(curve.latex, curve.unit), f"{one_line(curve.label)}{_bracketed(curve.unit)}")
    axes.spines[["top", "right"]].set_visible(False)
    axes.spines[["left", "bottom"]].set_color(ink)
    axes.tick_params(which="both", color=ink, labelcolor=ink, direction="in")
    axes.set_facecolor("none")
    axes.margins(x=0.02)
    for words in (axes.xaxis.label, axes.yaxis.label, *axes.texts):
        words.set_color(ink)


def _bracketed(unit: str) -> str:
    return f" [{one_line(unit)}]" if unit else ""


def _with_unit(latex: str, unit: str) -> str:
    """A label and its unit typeset; the powers of units raised."""
    if not unit or not latex:
        return latex
    raised = re.sub(r"\^(\([^()]*\)|-?\d+)", r"^{\1}", one_line(unit).replace(" ", r"\ ").replace("_", r"\_"))
    return rf"{latex}\ [\mathrm{{{raised}}}]"


def _label(set_label: Callable[..., object], latex: str, plain: str) -> None:
    """Typeset `latex` where matplotlib can; else write the plain notation. Words stay upright."""
    if latex.isalpha() and len(latex) > 1:
        set_label(latex)
        return
    try:
        MathTextParser("path").parse(f"${latex}$")
    except ValueError:
        set_label(plain, parse_math=False)
    else:
        set_label(f"${latex}$")


def _note_above(axes: Axes, note: str) -> None:
    axes.annotate(note, (1, 1), xycoords="axes fraction", ha="right", va="bottom", fontsize="small")


def _block_means(values: Array, block: int) -> Array:
    """Means over blocks of `block` points; the last block may be shorter."""
    if block == 1:
        return values
    starts = np.arange(0, values.size, block)
    means: Array = np.add.reduceat(values, starts) / np.diff(np.append(starts, values.size))
    return means


def _numbers(values: Sequence[float]) -> Array:
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)
