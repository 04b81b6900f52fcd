"""Consumption by sink: acid by metal and gangue, cyanide by what ties it up, precipitant."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation import CementationDemand
from leachkin.chemistry import named_factor, stoichiometric_uses
from leachkin.problems import argument_error
from leachkin.reagents.lines import BudgetLine

Array = NDArray[np.float64]

#: Named use of cyanide for each sink that has a stoichiometry.
CYANIDE_USES = {
    "Cu": "NaCN per Cu, Cu(CN)3 2-",
    "S to SCN-": "NaCN per S to SCN-",
    "Fe": "NaCN per Fe to ferrocyanide",
    "Zn": "NaCN per Zn",
    "Ag": "NaCN per Ag",
    "Au": "NaCN per Au",
}


def acid_per_metal(metal: str) -> float:
    """Return the sulphuric acid that dissolves a metal from its oxide or carbonate [kg/kg].

    Parameters
    ----------
    metal : str
        As "Cu", "Zn", "Ni", "Mg", "Mn", "Al", "Co", "Cd".

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        If no factor is held for the metal.

    Examples
    --------
    >>> round(acid_per_metal("Cu"), 3)
    1.543
    """
    known = [use.per for use in stoichiometric_uses() if use.use == f"H2SO4 per {use.per}"]
    if metal not in known:
        raise argument_error(
            "metal",
            f"no acid factor is held for {metal!r}",
            ", ".join(known),
            "give the acid of this metal as your own line",
        )
    return named_factor(f"H2SO4 per {metal}")


def gangue_acid_kg_per_t(
    net_acid_kg_per_t: ArrayLike, extracted_kg_per_t: Mapping[str, ArrayLike]
) -> Array:
    """Return what gangue took: net acid less what the dissolved metals account for [kg/t].

    Parameters
    ----------
    net_acid_kg_per_t : array_like, shape B
        Acid added less free acid returned.
    extracted_kg_per_t : mapping of str to array_like
        Metals dissolved.

    Returns
    -------
    ndarray, shape B
        Below 0 where the ore makes acid; the sign is kept.
    """
    metals = sum(
        (acid_per_metal(metal) * np.asarray(mass) for metal, mass in extracted_kg_per_t.items()),
        np.zeros(()),
    )
    return np.asarray(np.asarray(net_acid_kg_per_t) - metals)


def acid_lines(
    metal_kg_per_t: Mapping[str, ArrayLike],
    gangue_kg_per_t: ArrayLike,
    *,
    names: Mapping[str, str] | None = None,
    vessels_g_per_L: ArrayLike | None = None,
    solution_m3_per_t: ArrayLike | None = None,
    source: str = "",
) -> tuple[BudgetLine, ...]:
    """Return the acid of a leach as budget lines, one a sink.

    Parameters
    ----------
    metal_kg_per_t : mapping of str to array_like
        Acid taken by each metal, as 100 % H2SO4.
    gangue_kg_per_t : array_like, shape B
    names : mapping of str to str, optional
        What to call each metal's sink; by default its symbol.
    vessels_g_per_L : array_like, optional
        Acid that the precipitant takes in the cementation vessels.
    solution_m3_per_t : array_like, optional
        Needed with vessels_g_per_L.
    source : str

    Returns
    -------
    tuple of BudgetLine

    Raises
    ------
    InputProblems
        If the acid of the vessels comes without the solution.
    """
    named = names or {}
    lines = [
        BudgetLine("H2SO4", named.get(metal, metal), kilograms, source=source)
        for metal, kilograms in metal_kg_per_t.items()
    ]
    lines.append(BudgetLine("H2SO4", "gangue", gangue_kg_per_t, source=source))
    if vessels_g_per_L is None:
        return tuple(lines)
    if solution_m3_per_t is None:
        raise argument_error(
            "solution_m3_per_t", "none", "m3 of solution by the tonne of ore", "give m3/t"
        )
    kilograms = np.asarray(vessels_g_per_L) * np.asarray(solution_m3_per_t)
    lines.append(BudgetLine("H2SO4", "cementation vessels", kilograms, source=source))
    return tuple(lines)


def cyanide_kg_per_t(
    tied_kg_per_t: Mapping[str, ArrayLike], lost_kg_per_t: Mapping[str, ArrayLike] | None = None
) -> dict[str, Array]:
    """Return sodium cyanide by what takes it [kg/t].

    Parameters
    ----------
    tied_kg_per_t : mapping of str to array_like
        Mass of each element that ties cyanide up, by the keys of :data:`CYANIDE_USES`.
    lost_kg_per_t : mapping of str to array_like, optional
        Losses already in NaCN: hydrogen cyanide, moisture of the tails.

    Returns
    -------
    dict of str to ndarray
        In the order given, losses last.

    Raises
    ------
    InputProblems
        If an element has no use of cyanide here.

    Examples
    --------
    >>> parts = cyanide_kg_per_t({"Cu": 0.1575}, {"HCN": 0.03})
    >>> {sink: round(float(kilograms), 3) for sink, kilograms in parts.items()}
    {'Cu': 0.364, 'HCN': 0.03}
    """
    parts = {}
    for element, mass in tied_kg_per_t.items():
        if element not in CYANIDE_USES:
            raise argument_error(
                "tied_kg_per_t",
                f"{element!r}",
                ", ".join(CYANIDE_USES),
                "give it as a loss",
            )
        parts[element] = np.asarray(named_factor(CYANIDE_USES[element]) * np.asarray(mass))
    for name, kilograms in (lost_kg_per_t or {}).items():
        parts[name] = np.asarray(kilograms, dtype=np.float64)
    return parts


def cementation_lines(
    demand: CementationDemand, reagent: str, *, by_sink: bool = False, source: str = ""
) -> tuple[BudgetLine, ...]:
    """Return the precipitant of a cementation as budget lines per m3 of solution.

    Parameters
    ----------
    demand : CementationDemand
    reagent : str
        Name that the products know, as "scrap iron".
    by_sink : bool
        One line a sink instead of one in all.
    source : str

    Returns
    -------
    tuple of BudgetLine
        Net amounts, the middle of each range; what was not measured makes the line incomplete.
    """
    if by_sink:
        return tuple(
            BudgetLine(
                reagent,
                line.name,
                _middle_of_range(line.low_kg_per_m3, line.high_kg_per_m3),
                "m3",
                source=source,
                missing=(line.note,) if line.state == "not measured" else (),
            )
            for line in demand.sinks
        )
    missing = tuple(line.note for line in demand.sinks if line.state == "not measured")
    amount = _middle_of_range(demand.net_kg_per_m3, demand.net_high_kg_per_m3)
    return (BudgetLine(reagent, "cementation", amount, "m3", source=source, missing=missing),)


def _middle_of_range(low: Array, high: Array | None) -> Array:
    return low if high is None else np.asarray(0.5 * (low + high))
