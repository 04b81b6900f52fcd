"""Pictures of the solution and of the money: precipitant by sink, cost by reagent."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from leachkin.report.figures.style import GREY, SERIES, draw
from leachkin.report.numbers import format_number


def sink_bars(name: str, sinks: Sequence[tuple[str, float]], unit: str, title: str) -> str:
    """Return the SVG of what takes the precipitant, largest first."""
    ordered = sorted(sinks, key=lambda sink: -sink[1])
    return _bars(name, ordered, unit, title)


def cost_bars(
    name: str, lines: Sequence[tuple[str, float]], unit: str, title: str, missing: Sequence[str]
) -> str:
    """Return the SVG of cost by line, largest first; lines without a cost are named."""
    ordered = sorted(lines, key=lambda line: -line[1])
    note = f"INCOMPLETE: no cost for {', '.join(missing)}" if missing else ""
    return _bars(name, ordered, unit, title, note)


def _bars(
    name: str, ordered: Sequence[tuple[str, float]], unit: str, title: str, note: str = ""
) -> str:
    total = sum(value for _, value in ordered)

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        place = np.arange(len(ordered))[::-1]
        for y, (_, value) in zip(place, ordered, strict=True):
            axes.barh(y, value, height=0.62, color=SERIES[0])
            share = f" ({100 * value / total:.0f} %)" if total > 0 else ""
            axes.annotate(
                f"{format_number(value, 3)}{share}",
                (value, y),
                xytext=(4, 0),
                textcoords="offset points",
                va="center",
                fontsize=7.5,
            )
        axes.set_yticks(place, [label for label, _ in ordered])
        axes.set_xlabel(f"{title} ({unit})" if unit else title)
        axes.margins(x=0.16)
        axes.set_xlim(left=0)
        axes.grid(visible=False, axis="y")
        if note:
            axes.annotate(
                note,
                (0.985, 0.04),
                xycoords="axes fraction",
                ha="right",
                va="bottom",
                color=GREY,
                fontsize=7.5,
            )

    return draw(name, 0.9 + 0.3 * len(ordered), paint)
