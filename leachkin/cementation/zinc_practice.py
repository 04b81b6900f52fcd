"""Zinc in cyanide: what deaeration buys, the window of free cyanide, lead salt as a dose."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.demand import cementation_demand
from leachkin.cementation.middle import middle
from leachkin.cementation.mixed_potential import MixedPotential, Transport, mixed_potential
from leachkin.cementation.solution import Precipitant, Solution
from leachkin.chemistry import (
    check_temperature,
    factor,
    molar_mass,
    saturation_indices,
    speciate,
)
from leachkin.constants import (
    DAYS_PER_MONTH,
    HOURS_PER_DAY,
    STANDARD_TEMPERATURE_K,
    ZERO_CELSIUS_K,
    FARADAY_C_per_mol,
)
from leachkin.problems import argument_error
from leachkin.result_table import Column, ResultTable
from leachkin.tables import read_table

Array = NDArray[np.float64]

#: Oxygen left in solution that a trade-off is worked out for, beside saturation [mg/L].
OXYGEN_LEFT_mg_per_L = (4.0, 2.0, 1.0, 0.5, 0.2)
#: Share of the zinc spent on water at which the window of free cyanide ends at the top.
MOST_WATER_SHARE = 0.5
_G_PER_KG = 1e3


def air_saturation_mg_per_L(
    temperature_K: ArrayLike = STANDARD_TEMPERATURE_K, altitude_m: ArrayLike = 0.0
) -> Array:
    """Return dissolved oxygen of water under air [mg/L]: a table from memory, editable.

    Parameters
    ----------
    temperature_K : array_like, shape B
        0 to 60 degC.
    altitude_m : array_like, shape B
        By the standard atmosphere, up to 6,000 m.

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If temperature or altitude lie outside.

    Examples
    --------
    >>> round(float(air_saturation_mg_per_L(298.15)), 2)
    8.26
    """
    celsius = check_temperature(temperature_K) - ZERO_CELSIUS_K
    height = np.asarray(altitude_m, dtype=np.float64)
    if not np.all((celsius >= -0.5) & (celsius <= 60.5)):
        raise argument_error("temperature_K", "outside the table", "0 to 60 degC")
    if not np.all((height >= -500.0) & (height <= 6000.0)):
        raise argument_error("altitude_m", f"{height.max():g} m", "-500 to 6000 m")
    rows = read_table("oxygen_solubility").rows
    known = [row.number("temperature_degC") for row in rows]
    oxygen = [row.number("oxygen_mg_per_L") for row in rows]
    pressure = (1.0 - 2.25577e-5 * height) ** 5.25588
    return np.asarray(np.interp(celsius, known, oxygen) * pressure)


def deaeration_table(
    solution: Solution,
    precipitant: Precipitant,
    recovery: Mapping[str, float] | float,
    *,
    oxygen_left_mg_per_L: Sequence[float] = OXYGEN_LEFT_mg_per_L,
    altitude_m: float = 0.0,
    stoichiometry: str = "both",
) -> ResultTable:
    """Return the zinc demand against the oxygen left in solution.

    Parameters
    ----------
    solution : Solution
        Its own oxygen is one of the rows.
    precipitant : Precipitant
    recovery, stoichiometry
        As in :func:`cementation_demand`.
    oxygen_left_mg_per_L : sequence of float
    altitude_m : float
        For the saturated row.

    Returns
    -------
    ResultTable
        Zinc to oxygen, net zinc, and what is saved against the solution as it stands, per m3 and
        by the month where a flow is given.
    """
    saturated = float(air_saturation_mg_per_L(solution.temperature_K, altitude_m))
    own = None if solution.oxygen_mg_per_L is None else middle(solution.oxygen_mg_per_L)
    levels = sorted({saturated, *oxygen_left_mg_per_L, *(() if own is None else (own,))})[::-1]
    demands = [
        cementation_demand(
            replace(solution, oxygen_mg_per_L=level), precipitant, recovery=recovery,
            stoichiometry=stoichiometry, acid_taken_g_per_L=_no_acid(solution),
        )
        for level in levels
    ]  # fmt: skip
    base = demands[levels.index(own if own is not None else saturated)]
    flow = solution.flow_m3_per_h
    monthly = None if flow is None else middle(flow) * HOURS_PER_DAY * DAYS_PER_MONTH
    records = []
    for level, demand in zip(levels, demands, strict=True):
        low, high = middle(demand.net_kg_per_m3), demand.net_high_kg_per_m3
        to_oxygen = next(line for line in demand.sinks if line.kind == "oxygen")
        saved = _G_PER_KG * (middle(base.net_kg_per_m3) - low)
        records.append(
            {
                "oxygen_mg_per_L": level,
                "to_oxygen": _G_PER_KG * middle(to_oxygen.low_kg_per_m3),
                "net": _G_PER_KG * low,
                "net_high": None if high is None else _G_PER_KG * middle(high),
                "saved": saved,
                "saved_month": None if monthly is None else saved * monthly / _G_PER_KG,
                "note": _level_words(level, saturated, own),
            }
        )
    columns = (
        Column("oxygen_mg_per_L", "Oxygen left", "mg/L", 3),
        Column("to_oxygen", "Zinc to oxygen", "g/m3", 3),
        Column("net", "Net zinc", "g/m3", 3),
        Column("net_high", "Upper end", "g/m3", 3),
        Column("saved", "Saved", "g/m3", 3),
        Column("saved_month", "Saved by the month", "kg", 3),
        Column("note", "Note"),
    )
    caption = "What deaeration buys in zinc; gold and silver also stick better without oxygen"
    return ResultTable.from_records("cementation_deaeration", columns, records, caption)


def _level_words(level: float, saturated: float, own: float | None) -> str:
    if own is not None and level == own:
        return "as the solution stands"
    return "saturated with air" if level == saturated else ""


def _no_acid(solution: Solution) -> float | None:
    return 0.0 if solution.kind == "acid" else None


@dataclass(frozen=True)
class CyanideWindow:
    """Free cyanide, as CN, between too little and too much for zinc.

    Attributes
    ----------
    by_supply_g_per_L : float
        Below this less cyanide arrives than the dissolving zinc needs.
    by_solid_g_per_L : float or None
        Below this zinc hydroxide or cyanide precipitates at the end of the pass; None where none
        does.
    high_g_per_L : float or None
        Above this more than half of the zinc goes to water, by the mixed potential of the feed;
        None where that is not so up to the highest looked at.
    present_g_per_L : float or None
        What the solution holds.
    text : str
    defaults : tuple of str
    """

    by_supply_g_per_L: float
    by_solid_g_per_L: float | None
    high_g_per_L: float | None
    present_g_per_L: float | None
    text: str
    defaults: tuple[str, ...]

    @property
    def low_g_per_L(self) -> float:
        """The higher of the two lower ends."""
        return max(self.by_supply_g_per_L, self.by_solid_g_per_L or 0.0)

    def table(self) -> ResultTable:
        """Return the window as a table."""
        columns = (Column("item", "Free cyanide, as CN"), Column("value", "Value", "g/L", 3))
        items = [
            ("Least, so that it arrives as fast as zinc dissolves", self.by_supply_g_per_L),
            ("Least, so that no zinc hydroxide or cyanide precipitates", self.by_solid_g_per_L),
            ("Most, with half of the zinc going to water", self.high_g_per_L),
            ("In the solution", self.present_g_per_L),
        ]
        records = [{"item": item, "value": value} for item, value in items if value is not None]
        return ResultTable.from_records("cementation_cyanide_window", columns, records, self.text)


def cyanide_window(
    solution: Solution,
    precipitant: Precipitant,
    transport_m_per_s: Transport,
    zinc_gain_g_per_L: float = 0.0,
    highest_g_per_L: float = 5.0,
) -> CyanideWindow:
    """Return the window of free cyanide for a solution on zinc.

    Parameters
    ----------
    solution : Solution
        A cyanide solution with a pH; metals that are to stay in solution left out.
    precipitant : Precipitant
    transport_m_per_s : array_like or mapping
        As in :func:`mixed_potential`.
    zinc_gain_g_per_L : float
        Zinc that one pass adds.
    highest_g_per_L : float
        Looked at for the upper end.

    Returns
    -------
    CyanideWindow
        The ends by kinetics rest on figures from memory: they explain and rank.

    Raises
    ------
    InputProblems
        If it is no cyanide solution or has no pH.
    """
    if solution.kind != "cyanide" or solution.pH is None:
        raise argument_error("solution", "no cyanide solution with a pH", "free cyanide and pH")
    levels = np.geomspace(1e-4, highest_g_per_L, 240)
    trial = replace(_median_solution(solution), free_cyanide_g_per_L=levels)
    found = mixed_potential(trial, precipitant, transport_m_per_s)
    water = found.shares["hydrogen"]
    high = _crossing(levels, water - MOST_WATER_SHARE)
    supply = _supply_end(found, levels)
    solid = _solid_end(solution, zinc_gain_g_per_L, levels)
    present = solution.free_cyanide_g_per_L
    now = None if present is None else middle(present)
    window = CyanideWindow(supply, solid, high, now, "", found.kinetics.defaults)
    return replace(window, text=_window_words(window))


def _supply_end(found: MixedPotential, levels: Array) -> float:
    """Free cyanide whose supply equals what the zinc takes, hydroxide not counted."""
    supply = (
        FARADAY_C_per_mol * found.transport_m_per_s["CN-"] * found.state.cyanide_mol_per_L * 1e3
    )
    gap = 0.5 * supply - found.anodic_A_per_m2
    at = _crossing(levels, gap)
    return float(levels[0] if at is None and gap[0] > 0.0 else levels[-1] if at is None else at)


def _solid_end(solution: Solution, zinc: float, levels: Array) -> float | None:
    """Free cyanide below which a zinc solid is oversaturated with the zinc of one pass."""
    held = middle(solution.metals.get("Zn", 0.0))
    total = (held + zinc) / molar_mass("Zn")
    if total <= 0.0:
        return None
    # total cyanide: the free part and four for each zinc
    cyanide = levels / molar_mass("CN") + 4.0 * total
    pH = middle(solution.pH)
    found = speciate({"CN-": cyanide, "Zn2+": total}, pH, solution.temperature_K)
    free = (found.of("CN-") + found.of("HCN")) * molar_mass("CN")
    indices = saturation_indices(found)
    worst = np.maximum.reduce([indices[name][0] for name in ("Zn(OH)2", "Zn(CN)2")])
    if not np.any(worst > 0.0):
        return None
    return float(free[worst > 0.0].max())


def _crossing(levels: Array, values: Array) -> float | None:
    """Lowest level at which values turn from below to above zero, in logarithms."""
    up = np.flatnonzero((values[:-1] < 0.0) & (values[1:] >= 0.0))
    if up.size == 0:
        return None
    i = int(up[0])
    share = -values[i] / (values[i + 1] - values[i])
    return float(np.exp(np.log(levels[i]) + share * np.log(levels[i + 1] / levels[i])))


def _window_words(window: CyanideWindow) -> str:
    low, high, now = window.low_g_per_L, window.high_g_per_L, window.present_g_per_L
    span = f"{low:.2g} g/L and more" if high is None else f"{low:.2g} to {high:.2g} g/L"
    text = f"free cyanide for zinc: {span} as CN, by figures from memory: it ranks and explains"
    if now is None:
        return f"{text}; what the solution holds is not known"
    if now < low:
        return f"{text}; the solution's {now:.2g} g/L is below: zinc films over, metal comes back"
    if high is not None and now > high:
        return f"{text}; the solution's {now:.2g} g/L is above: most zinc goes to water"
    return f"{text}; the solution's {now:.2g} g/L lies inside"


def _median_solution(solution: Solution) -> Solution:
    metals = {m: middle(solution.grade(m)) for m in solution.metals}
    oxygen = solution.oxygen_mg_per_L
    return replace(
        solution,
        metals=metals,
        oxygen_mg_per_L=None if oxygen is None else middle(oxygen),
        pH=middle(solution.pH),
    )


@dataclass(frozen=True)
class LeadSalt:
    """Lead nitrate as a dose.

    Attributes
    ----------
    dose_g_per_m3 : float
    lead_g_per_m3 : float
    zinc_g_per_m3 : float
        That plates the lead.
    kg_per_h, kg_per_month : float or None
    note : str
    """

    dose_g_per_m3: float
    lead_g_per_m3: float
    zinc_g_per_m3: float
    kg_per_h: float | None
    kg_per_month: float | None
    note: str


def lead_salt(dose_g_per_m3: float, flow_m3_per_h: float | None = None) -> LeadSalt:
    """Return a dose of lead nitrate by the hour and month, and the zinc that plates its lead.

    Parameters
    ----------
    dose_g_per_m3 : float
        0 or more.
    flow_m3_per_h : float, optional

    Returns
    -------
    LeadSalt

    Raises
    ------
    InputProblems
        If the dose is negative.

    Examples
    --------
    >>> round(lead_salt(10.0).zinc_g_per_m3, 2)
    1.97
    """
    if not (np.isfinite(dose_g_per_m3) and dose_g_per_m3 >= 0.0):
        raise argument_error("dose_g_per_m3", f"{dose_g_per_m3:g} g/m3", "0 g/m3 or more")
    row = read_table("solution_defaults").first("name", "lead_nitrate_dose")
    low, high = row.number("low"), row.number("high")
    note = f"{low:g} to {high:g} g/m3 is usual ({row.text('status')})"
    if dose_g_per_m3 > high:
        note += "; more passivates the zinc and goes into the precipitate"
    per_h = None if flow_m3_per_h is None else dose_g_per_m3 * flow_m3_per_h / _G_PER_KG
    return LeadSalt(
        dose_g_per_m3,
        dose_g_per_m3 * factor("Pb", "Pb(NO3)2"),
        dose_g_per_m3 * factor("Zn", "Pb(NO3)2"),
        per_h,
        None if per_h is None else per_h * HOURS_PER_DAY * DAYS_PER_MONTH,
        note,
    )
