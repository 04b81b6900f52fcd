"""Pictures of the fit: extraction against time, residuals, parameters, temperature."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.report.figures.style import (
    GREY,
    INK,
    LINES,
    MARKERS,
    PALE,
    SERIES,
    band,
    draw,
    figure_legend,
)

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Panel:
    """One test in the small multiples; extractions as fractions of all the metal.

    Attributes
    ----------
    test, size, temperature : str
        Names of the test, of its size column and of its temperature row.
    time_h, extraction, sd : ndarray, shape (m,)
    fit_time_h, fit : ndarray, shape (t,)
    low, high : ndarray, shape (t,), or None
        Band of the fitted curve.
    ultimate : float or None
    """

    test: str
    size: str
    temperature: str
    time_h: Array
    extraction: Array
    sd: Array
    fit_time_h: Array
    fit: Array
    low: Array | None = None
    high: Array | None = None
    ultimate: float | None = None


def extraction_panels(name: str, panels: Sequence[Panel], metal: str, band_label: str) -> str:
    """Return the SVG of extraction against time, sizes across and temperatures down.

    Tests without a size and temperature grid are laid out in rows of three.
    """
    places, rows, columns = _grid(panels)

    def paint(figure: Any) -> None:
        all_axes = figure.subplots(rows, columns, sharex=False, sharey=True, squeeze=False)
        used = set()
        for panel, place in zip(panels, places, strict=True):
            _paint_panel(all_axes[place], panel, band_label)
            used.add(place)
        for place in np.ndindex(rows, columns):
            all_axes[place].set_visible(place in used)
        figure.supylabel(f"extraction (% of total {metal})", fontsize=8)
        for column in range(columns):
            lowest = max(row for row, c in used if c == column)
            all_axes[lowest, column].set_xlabel("time (h)")
        figure_legend(figure, all_axes[places[0]])

    return draw(name, 0.75 + 1.75 * rows, paint)


def residual_plot(
    name: str, time_h: Array, residual: Array, group: Sequence[str], unit: str
) -> str:
    """Return the SVG of standardised residuals against time on a logarithmic axis."""
    names = list(dict.fromkeys(group))

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        axes.axhspan(-2, 2, color=PALE, linewidth=0)
        axes.axhline(0.0, color=GREY, linewidth=0.8)
        for i, label in enumerate(names):
            chosen = np.array([g == label for g in group])
            axes.plot(
                time_h[chosen],
                residual[chosen],
                linestyle="none",
                marker=MARKERS[i % len(MARKERS)],
                color=SERIES[i % len(SERIES)],
                markerfacecolor="none" if i >= len(SERIES) else None,
                label=label,
            )
        axes.set_xscale("log")
        axes.xaxis.set_major_formatter(_plain_ticks())
        axes.set_xlabel("time (h), logarithmic")
        axes.set_ylabel(f"(fitted - measured) /\n{unit}")
        figure_legend(figure, axes, columns=min(len(names), 9))

    return draw(name, 2.7, paint)


def parameter_forest(
    name: str, labels: Sequence[str], ratio_low: Sequence[float], ratio_high: Sequence[float]
) -> str:
    """Return the SVG of intervals as a ratio to each estimate, logarithmic where they are wide."""

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        place = np.arange(len(labels))[::-1]
        axes.axvline(1.0, color=GREY, linewidth=0.8)
        for y, low, high in zip(place, ratio_low, ratio_high, strict=True):
            axes.plot([low, high], [y, y], color=SERIES[0], linewidth=2.2, solid_capstyle="butt")
            axes.plot([1.0], [y], marker="o", color=SERIES[0])
        axes.set_yticks(place, labels)
        wide = min(ratio_low, default=1.0) < 0.4 or max(ratio_high, default=1.0) > 2.5
        if wide:
            axes.set_xscale("log")
            axes.xaxis.set_major_formatter(_plain_ticks())
        scale = "logarithmic; 1 is the estimate" if wide else "1 is the estimate"
        axes.set_xlabel(f"interval / estimate ({scale})")
        axes.grid(visible=False, axis="y")
        axes.set_ylim(-0.7, len(labels) - 0.3)

    return draw(name, 0.9 + 0.26 * len(labels), paint)


@dataclass(frozen=True)
class TemperatureLine:
    """A time of the law against temperature: name, median and band [h]."""

    label: str
    tau_h: Array
    low: Array
    high: Array


def arrhenius_plot(
    name: str,
    temperature_K: Array,
    lines: Sequence[TemperatureLine],
    tested_K: Sequence[float],
    used_K: Sequence[tuple[str, float]] = (),
) -> str:
    """Return the SVG of ln(tau) against 1/T from the common fit.

    Parameters
    ----------
    temperature_K : ndarray, shape (t,)
    lines : sequence of TemperatureLine
    tested_K : sequence of float
        Temperatures of the tests; what lies outside is extrapolated.
    used_K : sequence of (label, float)
        Where the law is used at another temperature.
    """

    def paint(figure: Any) -> None:
        axes = figure.subplots()
        inverse = 1000.0 / temperature_K
        for i, line in enumerate(lines):
            color = SERIES[i % len(SERIES)]
            band(axes, inverse, np.log(line.low), np.log(line.high), color)
            axes.plot(inverse, np.log(line.tau_h), LINES[i % 4], color=color, label=line.label)
        for i, kelvin in enumerate(tested_K):
            axes.axvline(
                1000 / kelvin,
                color=GREY,
                linewidth=0.7,
                linestyle=":",
                label="tested" if i == 0 else None,
            )
        for label, kelvin in used_K:
            axes.axvline(1000 / kelvin, color=SERIES[1], linewidth=1.1, linestyle="--", label=label)
        axes.set_xlabel("1000 / T (1/K)")
        axes.set_ylabel("ln(time for complete conversion / h)")
        _celsius_axis(axes)
        figure_legend(figure, axes)

    return draw(name, 3.0, paint)


def _paint_panel(axes: Any, panel: Panel, band_label: str) -> None:
    if panel.low is not None and panel.high is not None:
        band(axes, panel.fit_time_h, 100 * panel.low, 100 * panel.high, SERIES[0], band_label)
    axes.plot(panel.fit_time_h, 100 * panel.fit, color=SERIES[0], label="fitted law")
    if panel.ultimate is not None:
        axes.axhline(
            100 * panel.ultimate,
            color=GREY,
            linewidth=0.9,
            linestyle="--",
            label="ultimate extraction",
        )
    known = bool(np.any(panel.sd > 0))
    axes.errorbar(
        panel.time_h,
        100 * panel.extraction,
        yerr=200 * panel.sd if known else None,
        fmt="o",
        color=SERIES[1],
        markersize=3.2,
        elinewidth=0.8,
        label="measured, 2 sd" if known else "measured",
    )
    axes.set_title(", ".join(word for word in (panel.test, panel.size, panel.temperature) if word))
    axes.set_ylim(0, 105)
    axes.set_xlim(left=0)


def _grid(panels: Sequence[Panel]) -> tuple[list[tuple[int, int]], int, int]:
    """Place of each panel, rows and columns: temperatures by sizes where that holds one each."""
    rows = list(dict.fromkeys(panel.temperature for panel in panels))
    columns = list(dict.fromkeys(panel.size for panel in panels))
    places = [(rows.index(p.temperature), columns.index(p.size)) for p in panels]
    fits = len(set(places)) == len(panels) and 1 < len(columns) <= 4
    if fits and len(places) >= 0.6 * len(rows) * len(columns):
        return places, len(rows), len(columns)
    across = min(len(panels), 3)
    return [divmod(i, across) for i in range(len(panels))], math.ceil(len(panels) / across), across


def _plain_ticks() -> Any:
    from matplotlib.ticker import FuncFormatter

    return FuncFormatter(lambda value, _: f"{value:g}")


def _celsius_axis(axes: Any) -> None:
    """Degrees Celsius above, where a person looks first."""
    low, high = sorted(1000.0 / edge - ZERO_CELSIUS_K for edge in axes.get_xlim())
    step = 10 if high - low > 25 else 5
    marks = np.arange(math.ceil(low / step) * step, high + 1e-9, step)
    above = axes.secondary_xaxis("top")
    above.set_xticks(1000.0 / (marks + ZERO_CELSIUS_K), [f"{mark:g} \u00b0C" for mark in marks])
    above.tick_params(length=2, color=INK)
