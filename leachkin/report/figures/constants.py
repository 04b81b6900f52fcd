"""Pictures of the constants of a fit: with intervals, against size, strength and temperature."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.report.figures.kinetics import celsius_axis, plain_logarithmic
from leachkin.report.figures.style import (
    GREY,
    LINES,
    MARKERS,
    SERIES,
    draw,
    figure_legend,
)

Array = NDArray[np.float64]

#: An axis whose values spread further than this is logarithmic.
LOGARITHMIC_BEYOND = 20.0
#: Groups of points at one place stand so far apart, relative.
BESIDE = 0.03


@dataclass(frozen=True)
class ForestRow:
    """One parameter by one law.

    Attributes
    ----------
    group : str
        Label of the axis on which it stands, with the unit.
    label, law : str
    value : float
    low, high : float or None
        None where that side is open; both where nothing can be said.
    ratio : bool
        A time or a rate: its axis may be logarithmic.
    """

    group: str
    label: str
    law: str
    value: float
    low: float | None
    high: float | None
    ratio: bool = False

    @property
    def unknown(self) -> bool:
        """Whether nothing can be said."""
        return self.low is None and self.high is None


def value_forest(name: str, rows: Sequence[ForestRow], laws: Sequence[str]) -> str:
    """Return the SVG of parameters with their intervals, an axis for each scale.

    Parameters
    ----------
    name : str
    rows : sequence of ForestRow
    laws : sequence of str
        In the order of the legend, the one that is used first.
    """
    groups = list(dict.fromkeys(row.group for row in rows))
    names = {g: list(dict.fromkeys(r.label for r in rows if r.group == g)) for g in groups}
    step = max(0.3, 0.15 * len(laws))
    heights = [step * len(names[g]) + 0.52 for g in groups]

    def paint(figure: Any) -> None:
        all_axes = figure.subplots(
            len(groups), 1, squeeze=False, gridspec_kw={"height_ratios": heights}
        )[:, 0]
        for axes, group in zip(all_axes, groups, strict=True):
            own = [row for row in rows if row.group == group]
            _paint_group(axes, own, names[group], laws)
            axes.set_xlabel(group)
        _forest_legend(figure, rows, laws)

    return draw(name, sum(heights) + 0.4, paint)


def _paint_group(
    axes: Any, rows: Sequence[ForestRow], labels: Sequence[str], laws: Sequence[str]
) -> None:
    low, high, logarithmic = _span(rows)
    if logarithmic:
        axes.set_xscale("log")
    axes.set_xlim(low, high)
    for row in rows:
        i = laws.index(row.law)
        y = len(labels) - 1 - labels.index(row.label)
        _paint_row(axes, row, y + 0.22 * (0.5 * (len(laws) - 1) - i), i)
    axes.set_yticks(range(len(labels)), labels[::-1])
    axes.set_ylim(-0.6, len(labels) - 0.4)
    if logarithmic:
        plain_logarithmic(axes.xaxis)
    axes.grid(visible=False, axis="y")


def _span(rows: Sequence[ForestRow]) -> tuple[float, float, bool]:
    """Return the ends of an axis with a margin, and whether it is logarithmic."""
    values = [v for r in rows for v in (r.value, r.low, r.high) if v is not None]
    above = [v for v in values if v > 0.0]
    wide = bool(above) and max(above) > LOGARITHMIC_BEYOND * min(above)
    if wide and any(row.ratio for row in rows):
        margin = (max(above) / min(above)) ** 0.08
        return min(above) / margin, max(above) * margin, True
    margin = 0.08 * ((max(values) - min(values)) or abs(max(values)) or 1.0)
    return min(values) - margin, max(values) + margin, False


def _paint_row(axes: Any, row: ForestRow, y: float, i: int) -> None:
    color = SERIES[i % len(SERIES)]
    edges = axes.get_xlim()
    if not row.unknown:
        known = (row.low, row.high)
        ends = [edge if end is None else end for end, edge in zip(known, edges, strict=True)]
        axes.plot(ends, [y, y], color=color, linewidth=2.0, solid_capstyle="butt")
        for at, end, arrow in zip(ends, known, "<>", strict=True):
            marker = arrow if end is None else "|"
            axes.plot([at], [y], marker=marker, color=color, markersize=6, clip_on=False)
    if row.value >= edges[0]:
        axes.plot(
            [row.value],
            [y],
            marker="D" if row.unknown else MARKERS[i % len(MARKERS)],
            color=color,
            fillstyle="none" if row.unknown else "full",
        )


def _forest_legend(figure: Any, rows: Sequence[ForestRow], laws: Sequence[str]) -> None:
    from matplotlib.lines import Line2D

    handles = [
        Line2D([], [], color=SERIES[i % len(SERIES)], marker=MARKERS[i % len(MARKERS)], label=law)
        for i, law in enumerate(laws)
    ]
    plain: dict[str, Any] = {"color": GREY, "linestyle": "none"}
    if any((row.low is None) != (row.high is None) for row in rows):
        handles.append(Line2D([], [], marker=">", label="no end on that side", **plain))
    if any(row.unknown for row in rows):
        handles.append(Line2D([], [], marker="D", fillstyle="none", label="no interval", **plain))
    figure.legend(handles=handles, loc="outside lower center", ncols=4)


@dataclass(frozen=True)
class RatePoints:
    """Rate constants of single tests on logarithmic axes.

    Attributes
    ----------
    group : tuple of str
        Of each point, for marker and legend, as its temperature.
    at, rate, low, high : ndarray, shape (n,)
        low and high are NaN without an interval.
    line_at, line_rate : ndarray, shape (t,)
        The law of all tests together.
    """

    group: tuple[str, ...]
    at: Array
    rate: Array
    low: Array
    high: Array
    line_at: Array
    line_rate: Array


def rate_loglog(
    name: str, points: RatePoints, x_label: str, guides: Sequence[tuple[float, str]]
) -> str:
    """Return the SVG of rate constants against size or strength, with lines of given powers.

    Parameters
    ----------
    name : str
    points : RatePoints
    x_label : str
        With the unit.
    guides : sequence of (power, label)
        Drawn through the middle of the points.
    """
    groups = list(dict.fromkeys(points.group))

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        middle = np.exp(np.mean(np.log(points.at))), np.exp(np.mean(np.log(points.rate)))
        ends = np.array([points.line_at[0], points.line_at[-1]])
        for i, (power, label) in enumerate(guides):
            axes.plot(
                ends,
                middle[1] * (ends / middle[0]) ** power,
                color=GREY,
                linewidth=1.0,
                linestyle=LINES[1 + i % 3],
                label=label,
            )
        axes.plot(points.line_at, points.line_rate, color=SERIES[0], label="all tests together")
        for i, group in enumerate(groups):
            chosen = np.array([g == group for g in points.group])
            _rate_points(axes, points, chosen, i, group)
        axes.set_xscale("log")
        axes.set_yscale("log")
        for axis in (axes.xaxis, axes.yaxis):
            plain_logarithmic(axis)
        axes.set_xlabel(x_label)
        axes.set_ylabel("rate constant (1/h), logarithmic")
        figure_legend(figure, axes)

    return draw(name, 3.3, paint)


def _rate_points(axes: Any, points: RatePoints, chosen: Any, i: int, label: str) -> None:
    rate = points.rate[chosen]
    spread = np.array([rate - points.low[chosen], points.high[chosen] - rate])
    # so that tests of one size do not hide each other
    shift = 1.0 + BESIDE * (i - 0.5 * (len(set(points.group)) - 1))
    axes.errorbar(
        points.at[chosen] * shift,
        rate,
        yerr=np.where(np.isfinite(spread), np.maximum(spread, 0.0), 0.0),
        fmt=MARKERS[i % len(MARKERS)],
        color=SERIES[(i + 1) % len(SERIES)],
        fillstyle="full" if i % 2 == 0 else "none",
        elinewidth=0.8,
        capsize=2,
        label=label,
    )


@dataclass(frozen=True)
class WaysPanel:
    """One rate constant against temperature, in two ways.

    Attributes
    ----------
    title, two_steps, together : str
        Name, and what the legend says of each line: energy, degrees of freedom, t.
    temperature_K, ln_rate, ln_rate_sd : ndarray, shape (n,)
    grid_K, line_ln_rate, shared_ln_rate : ndarray, shape (t,)
    """

    title: str
    two_steps: str
    together: str
    temperature_K: Array
    ln_rate: Array
    ln_rate_sd: Array
    grid_K: Array
    line_ln_rate: Array
    shared_ln_rate: Array


def arrhenius_ways(name: str, panels: Sequence[WaysPanel]) -> str:
    """Return the SVG of ln k against 1/T: a fit a temperature with its line, and the global one."""

    def paint(figure: Any) -> None:
        all_axes = figure.subplots(1, len(panels), squeeze=False)[0]
        for axes, panel in zip(all_axes, panels, strict=True):
            _paint_ways(axes, panel)
        all_axes[0].set_ylabel("ln(rate constant / (1/h))")

    return draw(name, 3.6, paint)


def _paint_ways(axes: Any, panel: WaysPanel) -> None:
    axes.errorbar(
        1000.0 / panel.temperature_K,
        panel.ln_rate,
        yerr=2.0 * np.nan_to_num(panel.ln_rate_sd),
        fmt="s",
        color=SERIES[1],
        elinewidth=0.8,
        capsize=2,
        label="a fit a temperature, 2 standard errors",
        zorder=3,
    )
    inverse = 1000.0 / panel.grid_K
    axes.plot(inverse, panel.line_ln_rate, "--", color=SERIES[1], label=panel.two_steps)
    axes.plot(inverse, panel.shared_ln_rate, "-", color=SERIES[0], label=panel.together)
    axes.set_xlabel("1000 / T (1/K)")
    axes.set_title(panel.title)
    celsius_axis(axes)
    axes.legend(
        loc="upper center", bbox_to_anchor=(0.5, -0.2), ncols=1, fontsize=7, borderaxespad=0.0
    )
