"""Pictures for checking a fit: residuals, leverage, correlation, straightened curves."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.report.figures.kinetics import panel_grid, plain_logarithmic
from leachkin.report.figures.style import (
    GREY,
    INK,
    LINES,
    MARKERS,
    PALE,
    SERIES,
    draw,
    figure_legend,
)

Array = NDArray[np.float64]

#: Fills that go with the markers, so that tests beyond the first few stay apart.
FILLS = ("full", "none", "left", "bottom")
#: Letters that fit across a figure.
LETTERS_ACROSS = 105
#: So many rows of the highest leverage carry their time.
NAMED_ROWS = 4


def residual_pair(
    name: str,
    time_h: Array,
    extraction: Array,
    residual: Array,
    group: Sequence[str],
) -> str:
    """Return the SVG of standardised residuals against time and against fitted extraction.

    Parameters
    ----------
    name : str
    time_h, extraction, residual : ndarray, shape (n,)
        Times above 0; extraction as a fraction of all the metal.
    group : sequence of str
        Test of each row.
    """
    tests = list(dict.fromkeys(group))
    columns = legend_columns(tests)

    def paint(figure: Any) -> None:
        left, right = figure.subplots(1, 2, sharey=True)
        for axes, x in ((left, time_h), (right, 100.0 * extraction)):
            axes.axhspan(-2, 2, color=PALE, linewidth=0)
            axes.axhline(0.0, color=GREY, linewidth=0.8)
            for i, test in enumerate(tests):
                chosen = np.array([g == test for g in group])
                _points(axes, x[chosen], residual[chosen], i, test)
        left.set_xscale("log")
        plain_logarithmic(left.xaxis)
        left.set_xlabel("time (h), logarithmic")
        right.set_xlabel("fitted extraction (% of total metal)")
        left.set_ylabel("standardised residual (-)\nfitted less measured")
        most = float(np.abs(residual).max(initial=2.5))
        left.set_ylim(-1.08 * most, 1.08 * most)
        figure_legend(figure, left, columns=columns)

    return draw(name, 2.75 + 0.17 * -(-len(tests) // columns), paint)


def legend_columns(labels: Sequence[str]) -> int:
    """Return how many entries of a legend stand side by side."""
    longest = max((len(label) for label in labels), default=1)
    return max(1, min(len(labels), LETTERS_ACROSS // (longest + 7)))


def _points(axes: Any, x: Array, y: Array, i: int, label: str) -> None:
    """Plot the points of test i with a marker and a fill of its own."""
    color = SERIES[i % len(SERIES)]
    axes.plot(
        x,
        y,
        linestyle="none",
        marker=MARKERS[i % len(MARKERS)],
        fillstyle=FILLS[(i // len(MARKERS)) % len(FILLS)],
        color=color,
        markerfacecoloralt="white",
        label=label,
    )


_KINDS = {
    "solution": ("solution assay", "o"),
    "extraction": ("extraction", "o"),
    "tail": ("tail assay", "s"),
    "head": ("head assay", "^"),
}


def leverage_strips(
    name: str,
    test: Sequence[str],
    kind: Sequence[str],
    time_h: Array,
    leverage: Array,
    mean: float,
) -> str:
    """Return the SVG of the leverage of every row, test by test, twice the mean marked.

    Parameters
    ----------
    name : str
    test, kind : sequence of str
        kind is "solution", "extraction", "tail" or "head".
    time_h, leverage : ndarray, shape (n,)
    mean : float
    """
    tests = list(dict.fromkeys(test))
    kinds = [k for k in _KINDS if k in kind]

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        place = np.array([tests.index(one) for one in test], dtype=float)
        for i, one in enumerate(kinds):
            words, marker = _KINDS[one]
            chosen = np.array([k == one for k in kind])
            axes.plot(
                place[chosen] + 0.16 * (i - 0.5 * (len(kinds) - 1)),
                leverage[chosen],
                linestyle="none",
                marker=marker,
                color=SERIES[i],
                fillstyle=FILLS[i % 2],
                label=words,
            )
        for level, words in ((mean, "mean"), (2.0 * mean, "twice the mean")):
            style = "-" if words == "mean" else "--"
            axes.axhline(level, color=GREY, linewidth=0.9, linestyle=style, label=words)
        _name_highest(axes, place, kind, kinds, time_h, leverage, 2.0 * mean)
        turned = sum(len(one) + 2 for one in tests) > LETTERS_ACROSS
        axes.set_xticks(range(len(tests)), tests, rotation=45 if turned else 0)
        axes.set_xlim(-0.6, len(tests) - 0.4)
        axes.set_ylim(0.0, min(1.1 * float(leverage.max()) + 0.03, 1.05))
        axes.set_xlabel("test", color=INK)
        axes.set_ylabel("leverage (-)")
        axes.grid(visible=False, axis="x")
        figure_legend(figure, axes, columns=5)

    return draw(name, 2.7, paint)


def _name_highest(
    axes: Any,
    place: Array,
    kind: Sequence[str],
    kinds: Sequence[str],
    time_h: Array,
    leverage: Array,
    above: float,
) -> None:
    """Write the times of the rows that hold the fit most."""
    highest = np.argsort(-leverage, kind="stable")[:NAMED_ROWS]
    for i in highest:
        if leverage[i] > above and np.isfinite(time_h[i]):
            shift = 0.16 * (kinds.index(kind[i]) - 0.5 * (len(kinds) - 1))
            axes.annotate(
                f"{time_h[i]:g} h",
                (place[i] + shift, leverage[i]),
                xytext=(5, 0),
                textcoords="offset points",
                va="center",
                fontsize=7,
            )


def correlation_squares(name: str, labels: Sequence[str], correlation: Array) -> str:
    """Return the SVG of a correlation matrix: squares by size, numbers in the lower half.

    Full squares are positive, hollow ones negative, so that grey print tells them apart.
    """

    def paint(figure: Any) -> None:
        from matplotlib.patches import Rectangle

        axes = figure.subplots()
        count = len(labels)
        for row in range(count):
            for column in range(count):
                value = float(correlation[row, column])
                if row < column:
                    _square(axes, Rectangle, column, row, value)
                elif row > column:
                    text = f"{value:+.2f}" if np.isfinite(value) else "-"
                    weight = "bold" if abs(value) >= 0.9 else "normal"
                    axes.text(
                        column, row, text, ha="center", va="center", fontsize=7, fontweight=weight
                    )
        axes.set_xticks(range(count), labels, rotation=40, ha="right", rotation_mode="anchor")
        axes.set_yticks(range(count), labels)
        axes.set_xlim(-0.5, count - 0.5)
        axes.set_ylim(count - 0.5, -0.5)
        axes.set_aspect("equal")
        axes.grid(visible=False)
        axes.plot([-0.5, count - 0.5], [-0.5, count - 0.5], color=GREY, linewidth=0.7)
        axes.set_title(
            "correlation (-): full squares rise together, hollow ones against each other",
            loc="center",
            fontweight="normal",
            fontsize=7.5,
        )

    return draw(name, max(2.4, 0.36 * len(labels) + 1.5), paint)


def _square(axes: Any, shape: Any, column: int, row: int, value: float) -> None:
    if not np.isfinite(value):
        return
    side = 0.9 * np.sqrt(abs(value))
    positive = value > 0
    axes.add_patch(
        shape(
            (column - 0.5 * side, row - 0.5 * side),
            side,
            side,
            facecolor=SERIES[0] if positive else "white",
            edgecolor=SERIES[0] if positive else SERIES[1],
            linewidth=1.2,
        )
    )


@dataclass(frozen=True)
class StraightPanel:
    """One test, straightened; ``size`` and ``temperature`` name its column and row."""

    test: str
    size: str
    temperature: str
    time_h: Array
    g: Mapping[str, Array]
    slope_per_h: Mapping[str, float]


def straightened_panels(
    name: str, panels: Sequence[StraightPanel], words: Mapping[str, str]
) -> str:
    """Return the SVG of g(X) against time by every law, a panel a test.

    Parameters
    ----------
    name : str
    panels : sequence of StraightPanel
    words : mapping of law to str
        As the legend names them.
    """
    places, rows, columns = panel_grid(panels)

    def paint(figure: Any) -> None:
        all_axes = figure.subplots(rows, columns, sharey=True, squeeze=False)
        used = set(places)
        for panel, place in zip(panels, places, strict=True):
            _paint_straightened(all_axes[place], panel, words)
        for place in np.ndindex(rows, columns):
            all_axes[place].set_visible(place in used)
        for column in range(columns):
            lowest = max(row for row, c in used if c == column)
            all_axes[lowest, column].set_xlabel("time (h)")
        figure.supylabel("straightened conversion g(X) (-)", fontsize=8)
        figure.suptitle("diagnostic only: not used for the choice", fontsize=8.5, color=SERIES[1])
        figure_legend(figure, all_axes[places[0]])

    return draw(name, 1.0 + 1.55 * rows, paint)


def _paint_straightened(axes: Any, panel: StraightPanel, words: Mapping[str, str]) -> None:
    known = [np.isfinite(values) for values in panel.g.values()]
    shown = np.any(known, axis=0) if known else np.zeros(0, dtype=bool)
    last = float(panel.time_h[shown].max()) if shown.any() else 1.0
    for i, (law, values) in enumerate(panel.g.items()):
        color = SERIES[i]
        axes.plot(
            panel.time_h,
            values,
            linestyle="none",
            marker=MARKERS[i],
            fillstyle=FILLS[i % 2],
            color=color,
            label=words[law],
        )
        slope = panel.slope_per_h[law]
        if np.isfinite(slope):
            axes.plot([0.0, last], [0.0, slope * last], LINES[i], color=color, linewidth=0.9)
    axes.set_xlim(0.0, 1.06 * last)
    axes.set_ylim(0.0, 1.05)
    axes.locator_params(nbins=4)
    axes.set_title(", ".join(word for word in (panel.test, panel.size, panel.temperature) if word))
