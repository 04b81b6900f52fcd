"""How a figure of the report looks, and its SVG text, the same bytes for the same numbers."""

from __future__ import annotations

import io
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

INK = "#1f2a30"
GREY = "#7d878d"
PALE = "#e7e4dc"
#: Colours that stay apart for colour-blind readers, and by lightness in grey print.
SERIES = ("#1b4965", "#c8691c", "#6fb3a4", "#8a5a83", "#b8a23c", "#5c6b73")
TINTS = {"reagent supply": "#f3e3d3", "ore": "#dfe9ee"}
MARKERS = ("o", "s", "^", "D", "v", "P")
LINES = ("-", "--", "-.", ":")

_SETTINGS: dict[str, Any] = {
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans", "Arial", "Helvetica", "sans-serif"],
    "font.size": 8.0,
    "axes.labelsize": 8.0,
    "axes.titlesize": 8.5,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.edgecolor": GREY,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.7,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "axes.axisbelow": True,
    "grid.color": PALE,
    "grid.linewidth": 0.6,
    "text.color": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.labelsize": 7.5,
    "ytick.labelsize": 7.5,
    "legend.fontsize": 7.5,
    "legend.frameon": False,
    "lines.linewidth": 1.4,
    "lines.markersize": 4.0,
    "svg.fonttype": "none",
    "savefig.facecolor": "none",
    "figure.facecolor": "none",
    "axes.facecolor": "none",
}
_PAGE_WIDTH_IN = 7.1
_POINTS_PER_IN = 72


@dataclass(frozen=True)
class ReportFigure:
    """One figure of a report.

    Attributes
    ----------
    name : str
        File name without ``.svg``.
    section : str
        Where it stands: "evidence", "kinetics", "plant", "solution" or "money".
    title, caption : str
        The caption says denominator, basis, grade of evidence and what a band holds.
    svg : str
        The SVG text, without an XML declaration.
    folded : bool
        Shown on the page only when the reader opens the part "More figures".
    """

    name: str
    section: str
    title: str
    caption: str
    svg: str
    folded: bool = False


def draw(name: str, height_in: float, paint: Any, width_in: float = _PAGE_WIDTH_IN) -> str:
    """Return the SVG text of a figure that ``paint(figure)`` fills.

    Parameters
    ----------
    name : str
        Salt of the ids, so that figures on one page do not share any.
    height_in, width_in : float
    paint : callable
        Takes a matplotlib Figure.
    """
    import matplotlib
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure

    settings: Any = {**_SETTINGS, "svg.hashsalt": name}
    with matplotlib.rc_context(settings):
        figure = Figure(figsize=(width_in, height_in), dpi=_POINTS_PER_IN, layout="constrained")
        canvas: Any = FigureCanvasSVG(figure)
        paint(figure)
        _lay_out_once(figure)
        buffer = io.StringIO()
        canvas.print_svg(buffer, metadata={"Date": None, "Creator": None})
    return _own_ids(buffer.getvalue(), name)


def _lay_out_once(figure: Figure) -> None:
    """Place the axes now: saving would draw everything a second time for it."""
    engine = figure.get_layout_engine()
    if engine is not None:
        engine.execute(figure)
    figure.set_layout_engine("none")


def band(axes: Axes, x: Any, low: Any, high: Any, color: str, label: str = "") -> None:
    """Draw a band with thin edges, so that it is seen in grey print."""
    axes.fill_between(x, low, high, color=color, alpha=0.18, linewidth=0, label=label or None)
    for edge in (low, high):
        axes.plot(x, edge, color=color, linewidth=0.5, alpha=0.7)


def figure_legend(figure: Figure, axes: Axes, columns: int = 4) -> None:
    """Put one legend under the panels."""
    handles, labels = axes.get_legend_handles_labels()
    if handles:
        figure.legend(handles, labels, loc="outside lower center", ncols=columns)


def _own_ids(svg: str, name: str) -> str:
    """The SVG alone, its ids and references carrying the figure's name."""
    body = svg[svg.index("<svg") :]
    body = re.sub(r"<metadata>.*?</metadata>\s*", "", body, flags=re.DOTALL)
    body = re.sub(r'\bid="([^"]+)"', rf'id="{name}-\1"', body)
    body = re.sub(r"url\(#([^)]+)\)", rf"url(#{name}-\1)", body)
    body = re.sub(r'href="#([^"]+)"', rf'href="#{name}-\1"', body)
    return "\n".join(line.rstrip() for line in body.splitlines()) + "\n"
