"""The demand for a precipitant as a result: sinks, totals, factors, hydrogen, what is missing."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.feasibility import Feasibility, feasibility_table
from leachkin.cementation.solution import Precipitant, Solution
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]


@dataclass(frozen=True)
class SinkLine:
    """One sink of the precipitant.

    Attributes
    ----------
    name : str
        Metal, "Fe3+", "H2SO4", "O2", "water" or "excess".
    kind : str
        "metal", "ferric", "acid", "oxygen", "water" or "excess".
    taken_g_per_L : ndarray, shape B, or None
        What is reduced; None where it is not measured or has no mass of its own.
    factor_kg_per_kg : float or None
        Precipitant per mass of it.
    low_kg_per_m3 : ndarray, shape B
    high_kg_per_m3 : ndarray, shape B, or None
        Equal to low for a known sink; None where there is no upper bound.
    state : str
        "measured", "given", "range" or "not measured".
    note : str
    default : str
        A default that the line rests on, "" if none.
    makes_hydrogen : bool
    """

    name: str
    kind: str
    taken_g_per_L: Array | None
    factor_kg_per_kg: float | None
    low_kg_per_m3: Array
    high_kg_per_m3: Array | None
    state: str
    note: str = ""
    default: str = ""
    makes_hydrogen: bool = False


@dataclass(frozen=True)
class CementationDemand:
    """How much precipitant a solution takes, per pass.

    Attributes
    ----------
    solution, precipitant : Solution, Precipitant
        What was given.
    medium : str
    sinks : tuple of SinkLine
    net_kg_per_m3 : ndarray, shape B
        Pure metal by the sinks that are known.
    net_high_kg_per_m3 : ndarray, shape B, or None
        With the upper ends of the ranges; None where a missing sink has no bound.
    received_kg_per_m3, received_high_kg_per_m3 : ndarray, shape B, or None
        As delivered: purity, oxide and fines allowed for. None where the purity is not known.
    metal_kg_per_m3 : ndarray, shape B
        Metals put out.
    hydrogen_Nm3_per_m3, hydrogen_high_Nm3_per_m3 : ndarray, shape B (high may be None)
        At 0 degC and 1 atm.
    barren_g_per_L : mapping of str to ndarray
        What is left of each metal.
    precipitant_gain_g_per_L : ndarray, shape B
        Ion of the precipitant that the barren gains from the metal added.
    ferrous_from_ferric_g_per_L : ndarray, shape B
        Ferrous iron that was ferric before; not part of the gain.
    feasibility : tuple of Feasibility
        Noblest first.
    missing : tuple of str
        What was not measured, in sentences.
    warnings, defaults, sources : tuple of str
    """

    solution: Solution
    precipitant: Precipitant
    medium: str
    sinks: tuple[SinkLine, ...]
    net_kg_per_m3: Array
    net_high_kg_per_m3: Array | None
    received_kg_per_m3: Array | None
    received_high_kg_per_m3: Array | None
    metal_kg_per_m3: Array
    hydrogen_Nm3_per_m3: Array
    hydrogen_high_Nm3_per_m3: Array | None
    barren_g_per_L: Mapping[str, Array]
    precipitant_gain_g_per_L: Array
    ferrous_from_ferric_g_per_L: Array
    feasibility: tuple[Feasibility, ...]
    missing: tuple[str, ...]
    warnings: tuple[str, ...]
    defaults: tuple[str, ...]
    sources: tuple[str, ...]

    @property
    def provisional(self) -> bool:
        """True where a sink was not measured: the net demand then counts the known ones only."""
        return any(line.state == "not measured" for line in self.sinks)

    @property
    def net_factor(self) -> Array | None:
        """Pure precipitant per metal put out [kg/kg]; None where no metal is put out."""
        return self._per_metal(self.net_kg_per_m3)

    @property
    def net_factor_high(self) -> Array | None:
        """The same with the upper ends of the ranges."""
        return self._per_metal(self.net_high_kg_per_m3)

    @property
    def gross_factor(self) -> Array | None:
        """Precipitant as received per metal put out [kg/kg]."""
        return self._per_metal(self.received_kg_per_m3)

    @property
    def gross_factor_high(self) -> Array | None:
        """The same with the upper ends of the ranges."""
        return self._per_metal(self.received_high_kg_per_m3)

    @property
    def ferrous_rise_g_per_L(self) -> Array:
        """Rise of ferrous iron in the barren: from the scrap and from ferric iron."""
        from_metal = self.precipitant_gain_g_per_L if self.precipitant.metal == "Fe" else 0.0
        return np.asarray(from_metal + self.ferrous_from_ferric_g_per_L)

    @property
    def hydrogen_Nm3_per_h(self) -> Array | None:
        """Hydrogen by the hour, known sinks; None without a flow."""
        return self._per_hour(self.hydrogen_Nm3_per_m3)

    @property
    def hydrogen_high_Nm3_per_h(self) -> Array | None:
        """Hydrogen by the hour with the upper ends of the ranges."""
        return self._per_hour(self.hydrogen_high_Nm3_per_m3)

    @property
    def received_kg_per_h(self) -> Array | None:
        """Precipitant as received by the hour; None without flow or purity."""
        return self._per_hour(self.received_kg_per_m3)

    def received_t_per_month(self, solution_m3_per_month: ArrayLike) -> Array | None:
        """Return the precipitant as received by the month [t], None where purity is not known.

        Raises
        ------
        InputProblems
            If the volume is not a positive number.
        """
        volume = np.asarray(solution_m3_per_month, dtype=np.float64)
        if not np.all(np.isfinite(volume) & (volume > 0.0)):
            raise argument_error(
                "solution_m3_per_month", f"{volume.min():g} m3", "above 0 m3", "m3/t times t/month"
            )
        if self.received_kg_per_m3 is None:
            return None
        return np.asarray(self.received_kg_per_m3 * volume / 1e3)

    def table(self) -> ResultTable:
        """Return the sinks as a table; of draws, the medians."""
        columns = (
            Column("sink", "Sink"),
            Column("taken_g_per_L", "Reduced", "g/L", 4),
            Column("factor_kg_per_kg", "Factor", "kg/kg", 4),
            Column("low_kg_per_m3", f"Net {self.precipitant.kind}", "kg/m3", 4),
            Column("high_kg_per_m3", "Upper end", "kg/m3", 4),
            Column("per_metal_kg_per_kg", "Per metal put out", "kg/kg", 4),
            Column("state", "State"),
            Column("note", "Note"),
        )
        caption = f"Net demand by sink, {self.medium} solution, one pass"
        if self.provisional:
            caption += "; PROVISIONAL: " + "; ".join(self.missing)
        return ResultTable.from_records("cementation_sinks", columns, self._records(), caption)

    def summary_table(self) -> ResultTable:
        """Return totals, factors, hydrogen and the barren as a table; of draws, the medians."""
        columns = (
            Column("item", "Item"),
            Column("value", "Value"),
            Column("high", "Upper end"),
            Column("unit", "Unit"),
        )
        records = [
            {"item": item, "value": _middle(low), "high": _middle(high), "unit": unit}
            for item, low, high, unit in self._items()
            if low is not None
        ]
        return ResultTable.from_records("cementation_summary", columns, records)

    def tables(self) -> tuple[ResultTable, ...]:
        """Return sinks, totals and feasibility."""
        return self.table(), self.summary_table(), feasibility_table(self.feasibility)

    def _items(self) -> list[tuple[str, Array | None, Array | None, str]]:
        kind = self.precipitant.kind
        gain, ferrous = self.precipitant_gain_g_per_L, self.ferrous_rise_g_per_L
        left = [(f"{m} left in the barren", g, g, "g/L") for m, g in self.barren_g_per_L.items()]
        return [
            (f"net {kind}", self.net_kg_per_m3, self.net_high_kg_per_m3, "kg/m3"),
            (f"{kind} as received", self.received_kg_per_m3, self.received_high_kg_per_m3, "kg/m3"),
            ("metal put out", self.metal_kg_per_m3, self.metal_kg_per_m3, "kg/m3"),
            ("net factor", self.net_factor, self.net_factor_high, "kg/kg"),
            ("gross factor", self.gross_factor, self.gross_factor_high, "kg/kg"),
            ("hydrogen", self.hydrogen_Nm3_per_m3, self.hydrogen_high_Nm3_per_m3, "Nm3/m3"),
            ("hydrogen", self.hydrogen_Nm3_per_h, self.hydrogen_high_Nm3_per_h, "Nm3/h"),
            (f"{kind} gained by the barren", gain, gain, "g/L"),
            ("ferrous iron gained by the barren", ferrous, ferrous, "g/L"),
            *left,
        ]

    def _records(self) -> list[dict[str, object]]:
        records: list[dict[str, object]] = [
            {
                "sink": line.name,
                "taken_g_per_L": _middle(line.taken_g_per_L),
                "factor_kg_per_kg": line.factor_kg_per_kg,
                "low_kg_per_m3": _middle(line.low_kg_per_m3),
                "high_kg_per_m3": _middle(line.high_kg_per_m3),
                "per_metal_kg_per_kg": _middle(self._per_metal(line.low_kg_per_m3)),
                "state": line.state,
                "note": line.note,
            }
            for line in self.sinks
        ]
        records.append(self._total_record("net", self.net_kg_per_m3, self.net_high_kg_per_m3))
        records.extend(self._loss_records())
        return records

    def _loss_records(self) -> list[dict[str, object]]:
        """Lines for what is bought and does no work, so that the table adds up."""
        purity, metallic = self.precipitant.purity, self.precipitant.metallic
        if purity is None:
            return []
        steps = (("not metal", purity * metallic), ("fines and rust", 1 - self.precipitant.fines))
        records, low, high = [], self.net_kg_per_m3, self.net_high_kg_per_m3
        for name, useful in steps:
            lost = 1.0 / useful - 1.0
            records.append(
                self._total_record(name, low * lost, None if high is None else high * lost)
            )
            low, high = low / useful, None if high is None else high / useful
        records.append(self._total_record("as received", low, high))
        return records

    def _total_record(self, name: str, low: Array, high: Array | None) -> dict[str, object]:
        per_metal = _middle(self._per_metal(low))
        return {
            "sink": name,
            "low_kg_per_m3": _middle(low),
            "high_kg_per_m3": _middle(high),
            "per_metal_kg_per_kg": per_metal,
            "state": "provisional" if self.provisional else "",
        }

    def _per_metal(self, demand: Array | None) -> Array | None:
        if demand is None or not np.all(self.metal_kg_per_m3 > 0.0):
            return None
        return np.asarray(demand / self.metal_kg_per_m3)

    def _per_hour(self, per_m3: Array | None) -> Array | None:
        if per_m3 is None or self.solution.flow_m3_per_h is None:
            return None
        return np.asarray(per_m3 * np.asarray(self.solution.flow_m3_per_h))


def _middle(values: Array | None) -> float | None:
    """A number for a table: the value itself, or the median of draws."""
    return None if values is None else float(np.median(values))
