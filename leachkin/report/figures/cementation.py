"""Pictures of cementation: concentration against time with its law, sinks along the way."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.report.figures.style import GREY, LINES, MARKERS, SERIES, draw, figure_legend

Array = NDArray[np.float64]
_MOST_LEGEND = 8


@dataclass(frozen=True)
class RateCurve:
    """One test: readings, those that are limits, and the fitted curve.

    Attributes
    ----------
    label : str
    time_min, value : ndarray, shape (m,)
    limit : ndarray of bool, shape (m,)
    fit_min, fit : ndarray, shape (t,)
    """

    label: str
    time_min: Array
    value: Array
    limit: NDArray[np.bool_]
    fit_min: Array
    fit: Array


def rate_curves(
    name: str, curves: Sequence[RateCurve], metal: str, unit: str, barren: float | None
) -> str:
    """Return the SVG of concentration against time, logarithmic, with the fitted law."""

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        for i, curve in enumerate(curves):
            color, marker = SERIES[i % len(SERIES)], MARKERS[i % len(MARKERS)]
            label = curve.label if len(curves) <= _MOST_LEGEND else None
            axes.plot(curve.fit_min, curve.fit, LINES[i % 4], color=color, linewidth=1.2)
            read = ~curve.limit & (curve.value > 0.0)
            axes.plot(
                curve.time_min[read], curve.value[read], marker, color=color, markersize=4.0,
                linestyle="none", label=label,
            )  # fmt: skip
            axes.plot(
                curve.time_min[curve.limit], curve.value[curve.limit], "v", color=color,
                markerfacecolor="none", markersize=5.0, linestyle="none",
            )  # fmt: skip
        if barren is not None:
            axes.axhline(barren, color=GREY, linestyle=":", linewidth=1.2, label="barren asked for")
        axes.set_yscale("log")
        axes.set_xlim(left=0.0)
        axes.set_xlabel("contact (min)")
        axes.set_ylabel(f"{metal} left ({unit})")
        figure_legend(figure, axes)

    return draw(name, 3.0, paint)


def sinks_along(
    name: str, removed: Array, taken: Sequence[tuple[str, Array]], metal: str, unit: str
) -> str:
    """Return the SVG of precipitant taken by sink against the share of the metal put out."""
    ordered = sorted(taken, key=lambda pair: -float(pair[1][-1]))

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        axes.stackplot(
            100 * removed,
            [series for _, series in ordered],
            labels=[label for label, _ in ordered],
            colors=[SERIES[i % len(SERIES)] for i in range(len(ordered))],
            edgecolor="white",
            linewidth=0.5,
        )
        axes.set_xlim(0.0, float(100 * removed[-1]))
        axes.set_ylim(bottom=0.0)
        axes.set_xlabel(f"{metal} put out on the way (% of the feed)")
        axes.set_ylabel(f"taken so far ({unit})")
        figure_legend(figure, axes)

    return draw(name, 2.8, paint)
