"""The barren: iron gained, acid and pH, what that costs later, and the line to the plant."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from leachkin.cementation.liquor_state import liquor_state
from leachkin.cementation.middle import middle
from leachkin.cementation.result import CementationDemand
from leachkin.cementation.solution import Solution
from leachkin.chemistry import ferric_limit_g_per_L, log10_water_product, molar_mass, named_factor
from leachkin.constants import DAYS_PER_MONTH, HOURS_PER_DAY
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Array = NDArray[np.float64]


@dataclass(frozen=True)
class BarrenDrift:
    """What one pass makes of the liquor, at the medians.

    Attributes
    ----------
    precipitant_gain_g_per_L : float
        Ion of the precipitant gained from the metal added.
    ferrous_rise_g_per_L : float or None
        With ferric iron that became ferrous; None where iron is not the precipitant.
    acid_in_g_per_L, acid_out_g_per_L : float or None
        Free acid; out is less what the vessels and the oxygen took.
    acid_by_oxygen_g_per_L : float
    pH_in, pH_out : float or None
    ferric_limit_g_per_L : tuple of float, or None
        Ferric iron that the barren's pH holds in solution: value, low, high.
    reoxidation_acid_g_per_L, reoxidation_oxygen_g_per_L : float or None
        What the ferrous rise takes when it is oxidised again.
    returned_as_hydroxide_g_per_L, returned_as_jarosite_g_per_L : float or None
        Acid that comes back when that iron precipitates.
    notes : tuple of str
    """

    precipitant_gain_g_per_L: float
    ferrous_rise_g_per_L: float | None
    acid_in_g_per_L: float | None
    acid_out_g_per_L: float | None
    acid_by_oxygen_g_per_L: float
    pH_in: float | None
    pH_out: float | None
    ferric_limit_g_per_L: tuple[float, float, float] | None
    reoxidation_acid_g_per_L: float | None
    reoxidation_oxygen_g_per_L: float | None
    returned_as_hydroxide_g_per_L: float | None
    returned_as_jarosite_g_per_L: float | None
    notes: tuple[str, ...] = ()

    def table(self) -> ResultTable:
        """Return the drift as a table, without what is not known."""
        columns = (Column("item", "Barren"), Column("value", "Value"), Column("unit", "Unit"))
        limit = self.ferric_limit_g_per_L
        items: list[tuple[str, float | None, str]] = [
            ("Precipitant gained", self.precipitant_gain_g_per_L, "g/L"),
            ("Ferrous iron gained, with that from ferric", self.ferrous_rise_g_per_L, "g/L"),
            ("Free acid in", self.acid_in_g_per_L, "g/L"),
            ("Acid that oxygen takes", self.acid_by_oxygen_g_per_L, "g/L"),
            ("Free acid out", self.acid_out_g_per_L, "g/L"),
            ("pH in", self.pH_in, ""),
            ("pH out", self.pH_out, ""),
            ("Ferric iron that this pH holds", None if limit is None else limit[0], "g/L"),
            ("Acid to oxidise the iron again", self.reoxidation_acid_g_per_L, "g/L"),
            ("Oxygen to oxidise the iron again", self.reoxidation_oxygen_g_per_L, "g/L"),
            ("Acid back, iron as hydroxide", self.returned_as_hydroxide_g_per_L, "g/L"),
            ("Acid back, iron as jarosite", self.returned_as_jarosite_g_per_L, "g/L"),
        ]
        records = [
            {"item": item, "value": value, "unit": unit}
            for item, value, unit in items
            if value is not None
        ]
        return ResultTable.from_records(
            "cementation_barren", columns, records, "; ".join(("one pass", *self.notes))
        )


def barren_drift(demand: CementationDemand) -> BarrenDrift:
    """Return what one pass makes of iron, acid and pH.

    Parameters
    ----------
    demand : CementationDemand
        Of draws, the medians.

    Returns
    -------
    BarrenDrift
        The acid taken is the line of the demand (None where not known: then no acid out, no pH
        out), and that of the oxygen beside it; in a cyanide solution hydroxide is made instead.
    """
    iron = demand.precipitant.metal == "Fe"
    gain = middle(demand.precipitant_gain_g_per_L)
    rise = middle(demand.ferrous_rise_g_per_L) if iron else None
    oxygen = _taken(demand, "oxygen")
    by_oxygen = 0.0
    if demand.medium == "acid" and oxygen is not None:
        by_oxygen = oxygen * 2.0 * molar_mass("H2SO4") / molar_mass("O2")
    acid_in = _acid(demand)
    taken = _taken(demand, "acid")
    acid_out = None
    notes = []
    if acid_in is not None and taken is not None:
        acid_out = acid_in - taken - by_oxygen
        if acid_out < 0.0:
            notes.append("more acid is taken than the liquor holds: look at the titrations")
            acid_out = None
    if demand.medium == "cyanide":
        pH_in, pH_out = _alkaline(demand, notes)
        limit = None
    else:
        pH_in, pH_out = _acidic(demand, acid_in, acid_out)
        limit = None if pH_out is None else _limit(pH_out)
    if limit is not None and rise is not None and rise > limit[0]:
        notes.append(
            f"if it is all oxidised at this pH, {limit[0]:.2g} g/L of ferric iron stays dissolved "
            f"({limit[1]:.2g} to {limit[2]:.2g}, from memory): the rest precipitates"
        )
    acid, gas, hydroxide, jarosite = (
        None if rise is None else rise * factor for factor in _iron_factors()
    )
    return BarrenDrift(
        gain, rise, acid_in, acid_out, by_oxygen, pH_in, pH_out, limit,
        acid, gas, hydroxide, jarosite, tuple(notes),
    )  # fmt: skip


def _iron_factors() -> tuple[float, ...]:
    return tuple(
        named_factor(use)
        for use in (
            "H2SO4 per Fe2+ re-oxidised",
            "O2 per Fe2+ re-oxidised",
            "H2SO4 per Fe3+ dissolved",
            "H2SO4 returned per Fe as jarosite",
        )
    )


def _acidic(
    demand: CementationDemand, acid_in: float | None, acid_out: float | None
) -> tuple[float | None, float | None]:
    """pH before and after, the metals standing as sulphates."""
    if acid_in is None:
        pH = demand.solution.pH
        return (None if pH is None else middle(pH)), None
    before = liquor_state(_medians(demand), demand.precipitant)
    if before.pH is None:
        return None, None
    if acid_out is None:
        return float(before.pH), None
    after_solution = replace(
        _medians(demand),
        metals={m: middle(g) for m, g in demand.barren_g_per_L.items()},
        ferric_g_per_L=0.0,
        iron_g_per_L=None,
        acid_g_per_L=acid_out,
        pH=None,
    )
    dissolved = middle(demand.precipitant_gain_g_per_L)
    dissolved += middle(demand.ferrous_from_ferric_g_per_L)
    after = liquor_state(after_solution, demand.precipitant, dissolved)
    return float(before.pH), None if after.pH is None else float(after.pH)


def _medians(demand: CementationDemand) -> Solution:
    """The solution of a demand at its medians."""
    solution = demand.solution
    numbers = {
        name: None if value is None else middle(value)
        for name, value in vars(solution).items()
        if name not in ("metals", "temperature_K", "medium")
    }
    metals = {m: middle(g) for m, g in solution.metals.items()}
    return replace(solution, metals=metals, **numbers)  # type: ignore[arg-type]


def _alkaline(demand: CementationDemand, notes: list[str]) -> tuple[float | None, float | None]:
    """pH before and after: four hydroxides an oxygen, one an electron of water."""
    pH = demand.solution.pH
    if pH is None:
        return None, None
    kelvin = demand.solution.temperature_K
    oxygen = _taken(demand, "oxygen") or 0.0
    made = 4.0 * oxygen / molar_mass("O2")
    water = next((line for line in demand.sinks if line.kind == "water"), None)
    if water is not None and water.high_kg_per_m3 is not None:
        zinc = 0.5 * (middle(water.low_kg_per_m3) + middle(water.high_kg_per_m3))
        made += 2.0 * zinc / molar_mass(demand.precipitant.metal)
    hydroxide = 10.0 ** (float(log10_water_product(kelvin)) + middle(pH))
    notes.append("pH out without the buffer of HCN and carbonate: at most so much")
    after = np.log10(hydroxide + made) - float(log10_water_product(kelvin))
    return middle(pH), float(after)


def _limit(pH: float) -> tuple[float, float, float]:
    value, low, high = ferric_limit_g_per_L(min(max(pH, 0.0), 14.0))
    return float(value), float(low), float(high)


def _taken(demand: CementationDemand, kind: str) -> float | None:
    for line in demand.sinks:
        if line.kind == kind:
            return None if line.taken_g_per_L is None else middle(line.taken_g_per_L)
    return None


def _acid(demand: CementationDemand) -> float | None:
    acid = demand.solution.acid_g_per_L
    return None if acid is None else middle(acid)


@dataclass(frozen=True)
class FactorReconciliation:
    """The computed factor beside the plant's, and what is left to explain.

    Attributes
    ----------
    basis : str
        "as received" or "net".
    computed_kg_per_kg, computed_high_kg_per_kg : float
        Low and upper end of the demand by measured sinks; equal where all are known.
    plant_kg_per_kg : float
    unexplained_kg_per_kg : float
        Plant less computed; the upper end counts where sinks are a range.
    unexplained_share : float
        Of the plant's factor.
    unexplained_kg_per_m3, unexplained_t_per_month : float or None
    text : str
    """

    basis: str
    computed_kg_per_kg: float
    computed_high_kg_per_kg: float | None
    plant_kg_per_kg: float
    unexplained_kg_per_kg: float
    unexplained_share: float
    unexplained_kg_per_m3: float | None
    unexplained_t_per_month: float | None
    text: str

    def table(self) -> ResultTable:
        """Return the line as a table."""
        columns = (Column("item", "Item"), Column("value", "Value"), Column("unit", "Unit"))
        items: list[tuple[str, float | None, str]] = [
            (f"Computed factor, {self.basis}", self.computed_kg_per_kg, "kg/kg"),
            ("Computed factor, upper end", self.computed_high_kg_per_kg, "kg/kg"),
            ("Factor of the plant", self.plant_kg_per_kg, "kg/kg"),
            ("Not explained", self.unexplained_kg_per_kg, "kg/kg"),
            ("Not explained, of the plant's", 100.0 * self.unexplained_share, "%"),
            ("Not explained, per solution", self.unexplained_kg_per_m3, "kg/m3"),
            ("Not explained, by the month", self.unexplained_t_per_month, "t/month"),
        ]
        records = [
            {"item": item, "value": value, "unit": unit}
            for item, value, unit in items
            if value is not None
        ]
        return ResultTable.from_records("cementation_site", columns, records, self.text)


def reconcile_factor(
    demand: CementationDemand, plant_kg_per_kg: float, basis: str = "as received"
) -> FactorReconciliation:
    """Return the computed factor beside that of the plant, with the part that is not explained.

    Parameters
    ----------
    demand : CementationDemand
        Of draws, the medians.
    plant_kg_per_kg : float
        Precipitant bought per metal recovered, from stock and production of some months.
    basis : "as received" or "net"

    Returns
    -------
    FactorReconciliation

    Raises
    ------
    InputProblems
        If the factor is not above 0, the basis is unknown, or nothing can be computed on it.

    Examples
    --------
    >>> from leachkin.cementation import Precipitant, Solution, cementation_demand
    >>> liquor = Solution({"Cu": 2.0}, ferric_g_per_L=0.5, oxygen_mg_per_L=0.0)
    >>> iron = Precipitant("iron", purity=0.96)
    >>> demand = cementation_demand(liquor, iron, recovery=0.95, acid_taken_g_per_L=0.0)
    >>> line = reconcile_factor(demand, 1.6)
    >>> round(line.computed_kg_per_kg + line.unexplained_kg_per_kg, 12)
    1.6
    """
    if not (np.isfinite(plant_kg_per_kg) and plant_kg_per_kg > 0.0):
        raise argument_error("plant_kg_per_kg", f"{plant_kg_per_kg:g} kg/kg", "above 0 kg/kg")
    factors = {
        "as received": (demand.gross_factor, demand.gross_factor_high),
        "net": (demand.net_factor, demand.net_factor_high),
    }
    if basis not in factors:
        raise argument_error("basis", repr(basis), '"as received" or "net"')
    low, high = factors[basis]
    if low is None:
        raise argument_error(
            "basis", f"no factor {basis}", "a metal put out, and a purity", 'basis="net"'
        )
    computed = middle(low)
    top = None if high is None else middle(high)
    ranged = top is not None and top > computed * (1.0 + 1e-9)
    left = plant_kg_per_kg - (top if ranged and top is not None else computed)
    if ranged and top is not None and computed <= plant_kg_per_kg <= top:
        left = 0.0
    metal = middle(demand.metal_kg_per_m3)
    flow = demand.solution.flow_m3_per_h
    monthly = None
    if flow is not None:
        monthly = left * metal * middle(flow) * HOURS_PER_DAY * DAYS_PER_MONTH / 1e3
    return FactorReconciliation(
        basis, computed, top if ranged else None, plant_kg_per_kg, left, left / plant_kg_per_kg,
        left * metal, monthly, _factor_words(demand, computed, plant_kg_per_kg, left),
    )  # fmt: skip


def _factor_words(demand: CementationDemand, computed: float, plant: float, left: float) -> str:
    share = 100.0 * left / plant
    if demand.provisional:
        return (
            f"computed {computed:.3g} and plant {plant:.3g} kg/kg: sinks are not all measured, so "
            "nothing follows yet: " + "; ".join(demand.missing)
        )
    if abs(share) < 5.0:
        return f"computed {computed:.3g} and plant {plant:.3g} kg/kg agree within 5 %"
    if left > 0.0:
        return (
            f"{share:.0f} % of the plant's {plant:.3g} kg/kg is not explained by the sinks as "
            "measured: corrosion at standstill, rust, fines swept out, air drawn in, recycle of "
            "re-oxidised iron, or the weighing"
        )
    return (
        f"the plant reports {-share:.0f} % less than the sinks take: look at the assays of ferric "
        "iron and acid, and at the stock count"
    )
