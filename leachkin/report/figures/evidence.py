"""Pictures of the tests: do the balances close?"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from leachkin.report.figures.style import GREY, INK, MARKERS, PALE, SERIES, draw


def closure_plot(
    name: str,
    tests: Sequence[str],
    closure: Sequence[float | None],
    sd: Sequence[float | None],
    limits: tuple[float, float],
    unit: str,
) -> str:
    """Return the SVG of calculated over assayed head, test by test.

    Parameters
    ----------
    name : str
    tests : sequence of str
    closure, sd : sequence of float or None
        Calculated head over head assay [-] and one standard deviation; None where it cannot be
        had.
    limits : (float, float)
        Where a balance is looked at again.
    unit : str
        What the ratio is of, for the axis.
    """

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        axes.axhspan(*limits, color=PALE, linewidth=0)
        axes.axhline(1.0, color=GREY, linewidth=0.8)
        for place, (ratio, deviation) in enumerate(zip(closure, sd, strict=True)):
            if ratio is None:
                axes.annotate("no tail", (place, 1.0), ha="center", va="bottom", color=GREY)
                continue
            outside = not limits[0] <= ratio <= limits[1]
            axes.errorbar(
                place,
                ratio,
                yerr=2 * (deviation or 0.0),
                fmt=MARKERS[1] if outside else MARKERS[0],
                color=SERIES[1] if outside else SERIES[0],
                ecolor=GREY,
                elinewidth=0.9,
                capsize=2,
            )
        axes.set_xticks(range(len(tests)), tests, rotation=45 if len(tests) > 12 else 0)
        axes.set_ylabel(f"calculated head / head assay\n({unit})")
        axes.set_xlabel("test", color=INK)
        axes.set_xlim(-0.6, len(tests) - 0.4)
        axes.grid(visible=False, axis="x")

    return draw(name, 2.5, paint)
