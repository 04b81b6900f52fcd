"""Pictures of the plant: heap by day and by m3/t, supply against demand, tanks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.report.figures.style import (
    GREY,
    INK,
    LINES,
    MARKERS,
    SERIES,
    band,
    draw,
    figure_legend,
)

Array = NDArray[np.float64]
_RULE_TINTS = ("#f1e0cf", "#dbe7ec", "#e6e2d3", "#e9dfe8")


@dataclass(frozen=True)
class HeapCurves:
    """What the heap picture shows; extractions as fractions of all the metal.

    Attributes
    ----------
    days, m3_per_t : ndarray, shape (t,)
    curves : mapping-like sequence of (label, ndarray (t,))
        The first is the answer and is drawn strongest.
    low, high : ndarray, shape (t,), or None
        Band of the answer.
    rules : sequence of str
        What rules at each day.
    """

    days: Array
    m3_per_t: Array
    curves: Sequence[tuple[str, Array]]
    low: Array | None
    high: Array | None
    rules: Sequence[str]


def heap_twin(name: str, heap: HeapCurves, metal: str, band_label: str, stamp: str) -> str:
    """Return the SVG of heap extraction against days and against solution to ore."""

    def paint(figure: Any) -> None:
        left, right = figure.subplots(1, 2, sharey=True)
        for axes, x, label in (
            (left, heap.days, "days under irrigation"),
            (right, heap.m3_per_t, "solution to ore (m\u00b3 per dry tonne)"),
        ):
            _tint_rules(axes, x, heap.rules)
            if heap.low is not None and heap.high is not None:
                band(axes, x, 100 * heap.low, 100 * heap.high, SERIES[0], band_label)
            for i, (text, curve) in enumerate(heap.curves):
                axes.plot(
                    x,
                    100 * curve,
                    LINES[i % 4],
                    color=SERIES[i % len(SERIES)],
                    linewidth=2.0 if i == 0 else 1.2,
                    label=text,
                )
            axes.set_xlabel(label)
            axes.set_ylim(0, 100)
            axes.set_xlim(0, float(x[-1]))
        left.set_ylabel(f"extracted (% of total {metal})")
        _stamp(right, stamp)
        figure_legend(figure, left, columns=3)

    return draw(name, 3.6, paint)


def supply_demand(
    name: str,
    days: Array,
    supplied: Array,
    taken: Array,
    reagent: str,
    stamp: str,
    taken_low: Array | None = None,
    taken_high: Array | None = None,
    wanted: Array | None = None,
) -> str:
    """Return the SVG of reagent delivered and taken by day [kg per dry tonne]."""

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        axes.plot(days, supplied, color=SERIES[0], linewidth=2.0, label=f"{reagent} supplied")
        if taken_low is not None and taken_high is not None:
            band(axes, days, taken_low, taken_high, SERIES[1])
        axes.plot(days, taken, "--", color=SERIES[1], linewidth=1.8, label=f"{reagent} taken")
        if wanted is not None:
            axes.plot(
                days,
                wanted,
                ":",
                color=GREY,
                linewidth=1.6,
                label=f"{reagent} the ore would take if never short",
            )
        axes.set_xlabel("days under irrigation")
        axes.set_ylabel(f"{reagent} (kg 100 % per dry tonne)")
        axes.set_xlim(0, float(days[-1]))
        axes.set_ylim(bottom=0)
        _stamp(axes, stamp)
        figure_legend(figure, axes)

    return draw(name, 2.9, paint)


def tank_bars(
    name: str,
    extraction: Sequence[float],
    reagent: Sequence[float] | None,
    labels: tuple[str, str],
    stamp: str,
) -> str:
    """Return the SVG of cumulative extraction and reagent left, tank by tank.

    Parameters
    ----------
    extraction : sequence of float
        Fractions of all the metal at each outlet.
    reagent : sequence of float or None
        g/L in each tank.
    labels : (str, str)
        Metal and reagent.
    """

    def paint(figure: Any) -> None:
        panels = figure.subplots(1, 2 if reagent is not None else 1, squeeze=False)[0]
        tanks = np.arange(1, len(extraction) + 1)
        series = [(100 * np.asarray(extraction), f"extraction (% of total {labels[0]})")]
        if reagent is not None:
            series.append((np.asarray(reagent), f"{labels[1]} left (g/L)"))
        for i, (axes, (values, text)) in enumerate(zip(panels, series, strict=True)):
            bars = axes.bar(tanks, values, width=0.6, color=SERIES[i])
            axes.bar_label(bars, fmt="%.1f", padding=2, fontsize=7.5)
            axes.set_xticks(tanks)
            axes.set_xlabel("tank")
            axes.set_ylabel(text)
            axes.margins(y=0.3)
            axes.grid(visible=False, axis="x")
        _stamp(panels[0], stamp, corner=(0.02, 0.97))

    return draw(name, 2.6, paint)


def plain_lines(
    name: str, x: Array, series: Sequence[tuple[str, Array]], axis: tuple[str, str], stamp: str
) -> str:
    """Return the SVG of a few series against one axis."""

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        for i, (label, y) in enumerate(series):
            axes.plot(
                x,
                y,
                LINES[i % 4],
                color=SERIES[i % len(SERIES)],
                label=label,
                marker=MARKERS[i] if len(x) < 12 else None,
            )
        axes.set_xlabel(axis[0])
        axes.set_ylabel(axis[1])
        axes.set_ylim(bottom=0)
        _stamp(axes, stamp)
        figure_legend(figure, axes)

    return draw(name, 2.7, paint)


def _tint_rules(axes: Any, x: Array, rules: Sequence[str]) -> None:
    """A background for each stretch in which one thing rules."""
    names = list(dict.fromkeys(rules))
    start = 0
    seen: set[str] = set()
    for i in range(1, len(rules) + 1):
        if i < len(rules) and rules[i] == rules[start]:
            continue
        end = float(x[min(i, len(x) - 1)])
        tint = _RULE_TINTS[names.index(rules[start]) % len(_RULE_TINTS)]
        label = f"{rules[start]} rules" if rules[start] not in seen else None
        axes.axvspan(float(x[start]) if start else 0.0, end, color=tint, linewidth=0, label=label)
        seen.add(rules[start])
        start = i


def _stamp(axes: Any, text: str, corner: tuple[float, float] = (0.985, 0.03)) -> None:
    """The grade of evidence, inside the picture so that a copy keeps it."""
    across, up = corner
    axes.annotate(
        text,
        corner,
        xycoords="axes fraction",
        ha="right" if across > 0.5 else "left",
        va="top" if up > 0.5 else "bottom",
        fontsize=7.5,
        fontweight="bold",
        color=INK,
        bbox={
            "facecolor": "white",
            "edgecolor": GREY,
            "linewidth": 0.6,
            "boxstyle": "square,pad=0.3",
        },
    )
