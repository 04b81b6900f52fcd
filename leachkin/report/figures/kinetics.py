"""Pictures of the fit: extraction against time, residuals, parameters, temperature."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from leachkin.constants import ZERO_CELSIUS_K
from leachkin.report.figures.style import (
    GREY,
    INK,
    LINES,
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
    places, rows, columns = panel_grid(panels)

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
        celsius_axis(axes)
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
    axes.locator_params(axis="x", nbins=5)


class Placed(Protocol):
    """Anything that says in which column and row of panels it stands."""

    @property
    def size(self) -> str:
        """Name of its column."""

    @property
    def temperature(self) -> str:
        """Name of its row."""


def panel_grid(panels: Sequence[Placed]) -> tuple[list[tuple[int, int]], int, int]:
    """Place of each panel, rows and columns: temperatures by sizes where that holds one each."""
    rows = list(dict.fromkeys(panel.temperature for panel in panels))
    columns = list(dict.fromkeys(panel.size for panel in panels))
    places = [(rows.index(p.temperature), columns.index(p.size)) for p in panels]
    fits = len(set(places)) == len(panels) and 1 < len(columns) <= 4
    if fits and len(places) >= 0.6 * len(rows) * len(columns):
        return places, len(rows), len(columns)
    across = min(len(panels), 3)
    return [divmod(i, across) for i in range(len(panels))], math.ceil(len(panels) / across), across


def plain_logarithmic(axis: Any) -> None:
    """Write plain numbers along a logarithmic axis, more of them where it is short."""
    from matplotlib.ticker import FuncFormatter, LogLocator, NullFormatter

    low, high = axis.get_view_interval()
    decades = float(np.log10(high / low))
    if decades < 2.0:
        subs = (1.0, 2.0, 5.0) if decades > 0.7 else (1.0, 1.5, 2.0, 3.0, 4.0, 6.0, 8.0)
        axis.set_major_locator(LogLocator(subs=subs))
    axis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axis.set_minor_formatter(NullFormatter())


def celsius_axis(axes: Any) -> None:
    """Degrees Celsius above, where a person looks first."""
    low, high = sorted(1000.0 / edge - ZERO_CELSIUS_K for edge in axes.get_xlim())
    step = 10 if high - low > 25 else 5
    marks = np.arange(math.ceil(low / step) * step, high + 1e-9, step)
    above = axes.secondary_xaxis("top")
    above.set_xticks(1000.0 / (marks + ZERO_CELSIUS_K), [f"{mark:g} \u00b0C" for mark in marks])
    above.tick_params(length=2, color=INK)
