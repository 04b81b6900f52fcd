"""What all vessels share: the task of one metal, its rate, and the vessel as a result."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from leachkin.cementation.charge import DepositGrade, deposit_grade
from leachkin.cementation.middle import middle
from leachkin.cementation.rate_law import CementationLaw
from leachkin.cementation.result import CementationDemand
from leachkin.cementation.solution import metal_couples
from leachkin.chemistry import Transfer, ion_of
from leachkin.constants import HOURS_PER_DAY, ZERO_CELSIUS_K
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable

Rate = CementationLaw | float

S_PER_H = 3600.0


@dataclass(frozen=True)
class CementationVessel:
    """A vessel for a target barren, at the medians of a demand.

    Attributes
    ----------
    kind : str
    metal : str
    feed_g_per_L, barren_g_per_L : float
    flow_m3_per_h : float
    rate_per_h : float
        Of the metal's fall in the vessel.
    k_m_per_s : float or None
        Transfer coefficient behind it; None where the rate was given by the hour.
    contact_h : float
        Of the liquor, all tanks together.
    liquor_m3, vessel_m3 : float
    area_m2 : float or None
        Of precipitant in the vessel.
    length_m : float or None
        Of a launder, or depth of a bed.
    tanks : int
    charge_kg : float or None
        Precipitant that makes the area.
    refill_kg_per_h : float or None
        As received; None where the purity is not known.
    charge_days : float or None
        Until a charge is used up at that rate.
    deposit : DepositGrade
    hydrogen_Nm3_per_h, hydrogen_high_Nm3_per_h : float or None
    correlation : str
        Behind the coefficient, with its source and status; "" where it was given or fitted.
    notes : tuple of str
    """

    kind: str
    metal: str
    feed_g_per_L: float
    barren_g_per_L: float
    flow_m3_per_h: float
    rate_per_h: float
    k_m_per_s: float | None
    contact_h: float
    liquor_m3: float
    vessel_m3: float
    area_m2: float | None
    length_m: float | None
    tanks: int
    charge_kg: float | None
    refill_kg_per_h: float | None
    charge_days: float | None
    deposit: DepositGrade
    hydrogen_Nm3_per_h: float | None
    hydrogen_high_Nm3_per_h: float | None
    correlation: str = ""
    notes: tuple[str, ...] = ()

    def table(self) -> ResultTable:
        """Return the vessel as a table."""
        columns = (Column("item", "Item"), Column("value", "Value"), Column("unit", "Unit"))
        grade = self.deposit
        length = "Length" if self.kind == "launder" else "Depth of bed or cake"
        items: list[tuple[str, float | None, str]] = [
            (f"{self.metal} in the feed", self.feed_g_per_L, "g/L"),
            (f"{self.metal} in the barren", self.barren_g_per_L, "g/L"),
            ("Flow", self.flow_m3_per_h, "m3/h"),
            ("Transfer coefficient", self.k_m_per_s, "m/s"),
            ("Rate", self.rate_per_h, "1/h"),
            ("Contact", 60.0 * self.contact_h, "min"),
            ("Tanks", float(self.tanks) if self.kind == "stirred tanks" else None, ""),
            ("Liquor in the vessel", self.liquor_m3, "m3"),
            ("Vessel", self.vessel_m3, "m3"),
            (length, self.length_m, "m"),
            ("Area of precipitant", self.area_m2, "m2"),
            ("Charge", self.charge_kg, "kg"),
            ("Replenishment, as received", self.refill_kg_per_h, "kg/h"),
            ("Charge lasts", self.charge_days, "d"),
            ("Deposit, dry", grade.deposit_kg_per_h, "kg/h"),
            ("Metal in the deposit, at least", 100.0 * grade.low, "%"),
            ("Metal in the deposit, at most", 100.0 * grade.high, "%"),
            ("Hydrogen", self.hydrogen_Nm3_per_h, "Nm3/h"),
            ("Hydrogen, upper end", self.hydrogen_high_Nm3_per_h, "Nm3/h"),
        ]
        records = [
            {"item": item, "value": value, "unit": unit}
            for item, value, unit in items
            if value is not None
        ]
        caption = "; ".join(filter(None, (self.kind, self.correlation, *self.notes)))
        return ResultTable.from_records("cementation_vessel", columns, records, caption)


@dataclass(frozen=True)
class VesselTask:
    """What every vessel starts from: one metal's fall, and the demand behind it."""

    demand: CementationDemand
    metal: str
    feed: float
    barren: float
    flow: float

    @property
    def share(self) -> float:
        """Share of the metal that is left."""
        return self.barren / self.feed

    @property
    def grade(self) -> DepositGrade:
        """What the deposit holds."""
        return deposit_grade(self.demand)


@dataclass(frozen=True)
class VesselRate:
    """A rate in a vessel and what it rests on."""

    per_h: float
    k_m_per_s: float | None
    law: CementationLaw | None
    conditions: dict[str, float]
    correlation: str
    notes: tuple[str, ...]


def vessel_rate(
    rate: Rate,
    area_m2_per_m3: float | None,
    temperature_K: float | None,
    transfer: Transfer | None = None,
    factor: float = 1.0,
) -> VesselRate:
    """Return a rate in a vessel: of a fitted law, or of a coefficient times an area."""
    if isinstance(rate, CementationLaw):
        conditions: dict[str, float] = {}
        if temperature_K is not None:
            conditions["temperature_K"] = temperature_K
        if rate.by_area:
            if area_m2_per_m3 is None:
                raise argument_error("area_m2_per_m3", "no area", "the area over the liquor")
            conditions["area_m2_per_m3"] = area_m2_per_m3 * factor
        per_h = float(np.median(rate.rate_per_h(**conditions)))
        k = per_h / S_PER_H / area_m2_per_m3 if rate.by_area and area_m2_per_m3 else None
        return VesselRate(
            per_h, k, rate, conditions, "fitted to tests", _outside(rate, temperature_K)
        )
    if area_m2_per_m3 is None:
        raise argument_error("area_m2_per_m3", "no area", "the area over the liquor", "k is in m/s")
    check_above_zero(rate=rate, area_m2_per_m3=area_m2_per_m3)
    words = "transfer coefficient as given"
    notes: tuple[str, ...] = ()
    if transfer is not None:
        words = f"{transfer.correlation} [{transfer.source}], {transfer.status}"
        notes = transfer.outside
    k = rate * factor
    return VesselRate(S_PER_H * k * area_m2_per_m3, k, None, {}, words, notes)


def _outside(law: CementationLaw, temperature_K: float | None) -> tuple[str, ...]:
    low, high = law.temperature_range_K
    if temperature_K is None or low - 0.5 <= temperature_K <= high + 0.5:
        return ()
    return (
        f"{temperature_K - ZERO_CELSIUS_K:.3g} degC lies outside the tests "
        f"({low - ZERO_CELSIUS_K:.3g} to {high - ZERO_CELSIUS_K:.3g} degC)",
    )


def plug_contact_h(task: VesselTask, found: VesselRate) -> float:
    """Return the contact in plug flow that leaves the barren [h]; refuse one never reached."""
    if found.law is None:
        return float(-np.log(task.share) / found.per_h)
    contact = float(np.median(found.law.contact_h(task.share, **found.conditions)))
    if not np.isfinite(contact):
        hours, least = found.law.best_contact_h(**found.conditions)
        raise argument_error(
            "barren_g_per_L",
            f"{task.barren:.3g} g/L {task.metal}",
            f"{float(np.median(least)) * task.feed:.3g} g/L and more, by the fitted law"
            + (f" at {60 * float(np.median(hours)):.3g} min" if np.isfinite(hours).all() else ""),
            "longer contact does not help: more area, fresh precipitant, or less back-dissolution",
        )
    return contact


def vessel_task(demand: CementationDemand, metal: str | None) -> VesselTask:
    """Return the task of one metal of a demand, at its medians; refuse what no vessel can do."""
    flow = demand.solution.flow_m3_per_h
    if flow is None:
        raise argument_error("flow_m3_per_h", "no flow", "above 0 m3/h", "give it to the Solution")
    targets = [line.name for line in demand.sinks if line.kind == "metal"]
    name = metal or next(iter(targets), "")
    if name not in targets:
        raise argument_error("metal", name or "none", ", ".join(targets) or "a metal put out")
    feed = middle(demand.solution.grade(name))
    barren = middle(demand.barren_g_per_L[name])
    if barren <= 0.0:
        raise argument_error(
            "barren_g_per_L", f"0 g/L {name}", "above 0", "no vessel takes out all: give a barren"
        )
    _check_equilibrium(demand, name, barren)
    return VesselTask(demand, name, feed, barren, middle(flow))


def _check_equilibrium(demand: CementationDemand, metal: str, barren: float) -> None:
    for item in demand.feasibility:
        floor = item.residual_g_per_L
        if item.metal == metal and floor is not None and floor > barren:
            raise argument_error(
                "barren_g_per_L",
                f"{barren:.3g} g/L {metal}",
                f"more than the {floor:.3g} g/L that equilibrium leaves",
                "take a baser precipitant or a higher barren",
            )


def vessel_of(
    task: VesselTask,
    kind: str,
    found: VesselRate,
    contact: float,
    liquor: float,
    volume: float,
    *,
    area: float | None,
    length_m: float | None = None,
    tanks: int = 1,
    charge_kg: float | None = None,
    notes: tuple[str, ...] = (),
) -> CementationVessel:
    """Return the vessel as a result, with charge, replenishment, deposit and hydrogen."""
    demand = task.demand
    received = demand.received_kg_per_h
    refill = None if received is None else middle(received)
    days = None
    if charge_kg is not None and charge_kg > 0.0 and refill:
        days = charge_kg / refill / HOURS_PER_DAY
    gas, high = demand.hydrogen_Nm3_per_h, demand.hydrogen_high_Nm3_per_h
    said = [*found.notes, *notes]
    if demand.provisional:
        said.append("PROVISIONAL: " + "; ".join(demand.missing))
    return CementationVessel(
        kind,
        task.metal,
        task.feed,
        task.barren,
        task.flow,
        found.per_h,
        found.k_m_per_s,
        contact,
        liquor,
        volume,
        area,
        length_m,
        tanks,
        charge_kg,
        refill,
        days,
        task.grade,
        None if gas is None else middle(gas),
        None if high is None else middle(high),
        found.correlation,
        tuple(said),
    )


def target_ion(task: VesselTask) -> str:
    """Return the ion that has to reach the precipitant."""
    return ion_of(metal_couples(task.demand.medium)[task.metal].text("couple"))


def kelvin_of(task: VesselTask, temperature_K: float | None) -> float:
    """Return the temperature of the liquor [K]."""
    return float(task.demand.solution.temperature_K if temperature_K is None else temperature_K)


def check_above_zero(**given: float) -> None:
    """Refuse numbers that are not above 0, by name."""
    for name, value in given.items():
        if not (np.isfinite(value) and value > 0.0):
            raise argument_error(name, f"{value:g}", "above 0", "look at the unit in the name")


def check_voids(voids: float) -> None:
    """Refuse a share of voids that is none."""
    if not 0.0 < voids < 1.0:
        raise argument_error("voids", f"{voids:g}", "above 0 and below 1", "50 % is 0.5")
