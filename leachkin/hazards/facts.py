"""What is known about a circuit, for the cautions; None is "not measured"."""

from __future__ import annotations

from dataclasses import dataclass, fields, replace

import numpy as np

from leachkin.cementation import CementationDemand
from leachkin.chemistry import check_pH, check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name


@dataclass(frozen=True)
class Facts:
    """What the data of a campaign say about its hazards.

    Attributes
    ----------
    acid, cyanide, heap : bool
        Whether sulphuric acid or cyanide is in use and whether ore is leached in heaps.
    acid_g_per_L : float or None
        Strongest leach solution.
    cyanide_g_per_L : float or None
        Strongest leach solution, as NaCN.
    pH : float or None
        Lowest pH at which cyanide is present.
    temperature_K : float
    precipitant : str or None
        "iron", "zinc", "copper" where metal is put into the solution.
    hydrogen_Nm3_per_h : float or None
        Upper figure of the hydrogen made.
    arsenic_mg_per_L, antimony_mg_per_L, mercury_mg_per_L : float or None
        In the solution.
    arsenic_mg_per_kg, antimony_mg_per_kg, mercury_mg_per_kg : float or None
        In the ore.
    wad_cyanide_mg_per_L : float or None
        At open water.
    sulphide_share, carbonate_share : float or None
        Fraction of the ore that is sulphide sulphur, and CaCO3.
    bottle_solids_g : float or None
        Ore in a closed bottle, where acid bottles are rolled.
    reagents : frozenset of str
        Other reagents in use, by formula or name as the table of gas reagents has them.
    solution_pH : float or None
        Lowest pH of the solutions that these reagents meet.
    ammonia_g_per_L : float or None
        All ammonia of the solution, as NH3.
    chloride_g_per_L : float or None
    lift_m, solution_m3_per_h : float or None
    below_detection : frozenset of str
        Fields whose figure is a detection limit, the reading being below it.
    """

    acid: bool = False
    cyanide: bool = False
    heap: bool = False
    acid_g_per_L: float | None = None
    cyanide_g_per_L: float | None = None
    pH: float | None = None
    temperature_K: float = STANDARD_TEMPERATURE_K
    precipitant: str | None = None
    hydrogen_Nm3_per_h: float | None = None
    arsenic_mg_per_L: float | None = None
    antimony_mg_per_L: float | None = None
    mercury_mg_per_L: float | None = None
    arsenic_mg_per_kg: float | None = None
    antimony_mg_per_kg: float | None = None
    mercury_mg_per_kg: float | None = None
    wad_cyanide_mg_per_L: float | None = None
    sulphide_share: float | None = None
    carbonate_share: float | None = None
    bottle_solids_g: float | None = None
    reagents: frozenset[str] = frozenset()
    solution_pH: float | None = None
    ammonia_g_per_L: float | None = None
    chloride_g_per_L: float | None = None
    lift_m: float | None = None
    solution_m3_per_h: float | None = None
    below_detection: frozenset[str] = frozenset()

    def __post_init__(self) -> None:
        object.__setattr__(self, "below_detection", frozenset(self.below_detection))
        object.__setattr__(self, "reagents", frozenset(self.reagents))
        names = [item.name for item in fields(self)]
        for name in self.below_detection:
            if name not in names:
                raise InputProblems([unknown_name("fact", name, names, column="below_detection")])
        for acidity in (self.pH, self.solution_pH):
            if acidity is not None:
                check_pH(acidity)
        check_temperature(self.temperature_K)
        for name in names:
            _check_number(name, getattr(self, name))

    def state_of(self, name: str) -> str:
        """Return "present", "not measured" or "below limit" for a reading.

        Parameters
        ----------
        name : str
            A field.

        Returns
        -------
        str
            "below limit" for a reading below its detection limit, and for none.
        """
        value = getattr(self, name)
        if value is None:
            return "not measured"
        return "below limit" if name in self.below_detection or value == 0.0 else "present"


def facts_with_cementation(facts: Facts, demand: CementationDemand) -> Facts:
    """Return the facts with what a cementation says filled in where they have nothing.

    Parameters
    ----------
    facts : Facts
    demand : CementationDemand
        Of draws, the 90th percentile of hydrogen and the medians of assays.

    Returns
    -------
    Facts
    """
    solution = demand.solution
    hydrogen = demand.hydrogen_high_Nm3_per_h
    known = {
        "precipitant": demand.precipitant.kind,
        "hydrogen_Nm3_per_h": None if hydrogen is None else float(np.quantile(hydrogen, 0.9)),
        "arsenic_mg_per_L": _median(solution.arsenic_mg_per_L),
        "antimony_mg_per_L": _median(solution.antimony_mg_per_L),
        "mercury_mg_per_L": _median(solution.mercury_mg_per_L),
        "solution_m3_per_h": _median(solution.flow_m3_per_h),
        "solution_pH": _median(solution.pH),
        "acid_g_per_L": _median(solution.acid_g_per_L),
        "acid": facts.acid or demand.medium == "acid",
        "cyanide": facts.cyanide or demand.medium == "cyanide",
    }
    given = {name: value for name, value in known.items() if getattr(facts, name) in (None, False)}
    return replace(facts, **given)  # type: ignore[arg-type]


def _median(values: object) -> float | None:
    return None if values is None else float(np.median(np.asarray(values, dtype=np.float64)))


def _check_number(name: str, value: object) -> None:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return
    if not (np.isfinite(value) and value >= 0.0):
        raise argument_error(name, f"{value}", "0 or more", "leave it out if it was not measured")
    if name.endswith("_share") and value > 1.0:
        raise argument_error(name, f"{value}", "a fraction from 0 to 1", "write 0.9 % as 0.009")
