"""Demand for a precipitant by sink: metals, ferric iron, acid, oxygen, water, and what is lost."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.feasibility import Feasibility, feasibility, refuse_infeasible
from leachkin.cementation.law import as_received, net_demand, taken_by_recovery, water_demand
from leachkin.cementation.result import CementationDemand, SinkLine
from leachkin.cementation.solution import Precipitant, Solution, metal_couples
from leachkin.chemistry import (
    cell,
    electron_factor,
    hydrogen_Nm3_per_kg,
    molar_mass,
    potential_by_source,
)
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.tables import read_table

Array = NDArray[np.float64]

#: Share of the electrons that go to water, lowest and highest, for the stoichiometries in print.
STOICHIOMETRIES = {"2:1": (0.0, 0.0), "1:1": (0.5, 0.5), "both": (0.0, 0.5)}
#: Equilibrium residuals below this share of the feed are not worth a remark.
_RESIDUAL_SHARE = 1e-3


def cementation_demand(
    solution: Solution,
    precipitant: Precipitant,
    *,
    recovery: ArrayLike | Mapping[str, ArrayLike] | None = None,
    barren_g_per_L: Mapping[str, ArrayLike] | None = None,
    acid_taken_g_per_L: ArrayLike | None = None,
    ferric_taken: float = 1.0,
    oxygen_taken: float = 1.0,
    stoichiometry: str = "both",
    hydrogen_share: float | None = None,
    excess_kg_per_m3: float = 0.0,
) -> CementationDemand:
    """Return how much precipitant a solution takes, by sink.

    Parameters
    ----------
    solution : Solution
        May hold arrays of draws, shape B.
    precipitant : Precipitant
    recovery : array_like or mapping of str to array_like
        Fraction of each metal put out; one figure for every metal of the solution, or by metal
        (those left out stay in solution). Either this or barren_g_per_L.
    barren_g_per_L : mapping of str to array_like
        What is left of each metal; those left out stay in solution.
    acid_taken_g_per_L : array_like, optional
        Free acid that the precipitant uses up in the vessels. None: not known, a range up to the
        free acid of the solution.
    ferric_taken, oxygen_taken : float
        Shares of ferric iron and oxygen that are reduced, 0 to 1.
    stoichiometry : str
        For cyanide solutions: "2:1" (two gold or silver for one zinc), "1:1" (half of the zinc
        goes to water), or "both" for the range.
    hydrogen_share : float, optional
        Share of the zinc that goes to water, 0 to below 1, in place of stoichiometry.
    excess_kg_per_m3 : float
        The user's own excess, as pure metal.

    Returns
    -------
    CementationDemand
        Fields of shape B; a sink that was not measured is named, carried as a range where it has
        a bound, and the total is marked provisional.

    Raises
    ------
    InputProblems
        If a number has no meaning, a metal is unknown, or the precipitant is nobler than a metal
        that is to be put out.

    Notes
    -----
    Every sink takes electrons, every mole of precipitant gives its own [molar_masses]:
    iron 0.879 per copper, 0.500 per Fe3+, 0.569 per H2SO4, 3.49 per O2.

    Examples
    --------
    >>> liquor = Solution({"Cu": 2.036}, ferric_g_per_L=0.9, oxygen_mg_per_L=6.0)
    >>> iron = Precipitant("iron", purity=0.96, fines=0.05)
    >>> demand = cementation_demand(liquor, iron, recovery=0.95, acid_taken_g_per_L=0.7)
    >>> round(float(demand.net_kg_per_m3), 3), round(float(demand.net_factor), 3)
    (2.569, 1.328)
    """
    _check_shares(ferric_taken, oxygen_taken, excess_kg_per_m3)
    medium = solution.kind
    removed = _removed(solution, recovery, barren_g_per_L)
    targets = [metal for metal, grams in removed.items() if np.any(grams > 0.0)]
    refuse_infeasible(feasibility(solution, precipitant, targets), precipitant)
    lines = [_metal_line(precipitant, medium, metal, removed[metal]) for metal in targets]
    if medium == "cyanide":
        lines.append(_water_line(lines, _hydrogen_range(stoichiometry, hydrogen_share)))
    else:
        lines.append(_ferric_line(solution, precipitant, ferric_taken))
        if _dissolves_in_acid(solution, precipitant):
            lines.append(_acid_line(solution, precipitant, acid_taken_g_per_L))
    lines.append(_oxygen_line(solution, precipitant, oxygen_taken))
    if excess_kg_per_m3:
        lines.append(_excess_line(excess_kg_per_m3))
    return _result(solution, precipitant, tuple(lines), removed)


def _result(
    solution: Solution,
    precipitant: Precipitant,
    lines: tuple[SinkLine, ...],
    removed: Mapping[str, Array],
) -> CementationDemand:
    net, high = _total(lines)
    dissolved = net - _sum(line.low_kg_per_m3 for line in lines if line.kind == "excess")
    ion = float(np.median(dissolved)) / molar_mass(precipitant.metal)
    targets = [line.name for line in lines if line.kind == "metal"]
    found = feasibility(solution, precipitant, targets, ion)
    metal = _sum(line.taken_g_per_L for line in lines if line.kind == "metal")
    share = precipitant.active_share
    gas = hydrogen_Nm3_per_kg(precipitant.metal, precipitant.electrons(solution.kind))
    gas_low, gas_high = _total(tuple(line for line in lines if line.makes_hydrogen))
    ferrous = _sum(line.taken_g_per_L for line in lines if line.kind == "ferric")
    return CementationDemand(
        solution=solution,
        precipitant=precipitant,
        medium=solution.kind,
        sinks=lines,
        net_kg_per_m3=net,
        net_high_kg_per_m3=high,
        received_kg_per_m3=None if share is None else as_received(net, share),
        received_high_kg_per_m3=None if share is None or high is None else as_received(high, share),
        metal_kg_per_m3=metal,
        hydrogen_Nm3_per_m3=gas_low * gas,
        hydrogen_high_Nm3_per_m3=None if gas_high is None else gas_high * gas,
        barren_g_per_L={
            name: np.asarray(solution.grade(name) - taken) for name, taken in removed.items()
        },
        precipitant_gain_g_per_L=dissolved,
        ferrous_from_ferric_g_per_L=ferrous,
        feasibility=found,
        missing=_missing(precipitant, lines),
        warnings=_warnings(solution, precipitant, found, removed),
        defaults=tuple(line.default for line in lines if line.default),
        sources=_sources(found),
    )


def _removed(
    solution: Solution,
    recovery: ArrayLike | Mapping[str, ArrayLike] | None,
    barren: Mapping[str, ArrayLike] | None,
) -> dict[str, Array]:
    if (recovery is None) == (barren is None):
        raise argument_error(
            "recovery",
            "both a recovery and a barren" if recovery is not None else "no recovery, no barren",
            "one of the two",
            'recovery=0.95, or barren_g_per_L={"Cu": 0.05}',
        )
    if barren is not None:
        return {metal: _by_barren(solution, metal, barren) for metal in _known(solution, barren)}
    if not isinstance(recovery, Mapping):
        recovery = dict.fromkeys(solution.metals, np.asarray(recovery, dtype=np.float64))
    removed = {}
    for metal in _known(solution, recovery):
        share = np.asarray(recovery.get(metal, 0.0), dtype=np.float64)
        if not np.all((share >= 0.0) & (share <= 1.0)):
            raise argument_error(
                "recovery", f"{share.max():g} for {metal}", "a fraction from 0 to 1", "95 % is 0.95"
            )
        removed[metal] = taken_by_recovery(solution.grade(metal), share)
    return removed


def _by_barren(solution: Solution, metal: str, barren: Mapping[str, ArrayLike]) -> Array:
    feed = solution.grade(metal)
    left = np.asarray(barren.get(metal, feed), dtype=np.float64)
    if not np.all((left >= 0.0) & (left <= feed)):
        raise argument_error(
            "barren_g_per_L",
            f"{left.max():g} g/L {metal} left of {feed.min():g} g/L",
            "0 g/L to what the solution holds",
            "look at the units of both",
        )
    return feed - left


def _known(solution: Solution, by_metal: Mapping[str, ArrayLike]) -> list[str]:
    for metal in by_metal:
        if metal not in solution.metals:
            raise InputProblems(
                [unknown_name("metal of the solution", metal, solution.metals, column="recovery")]
            )
    return list(solution.metals)


def _check_shares(ferric_taken: float, oxygen_taken: float, excess: float) -> None:
    for name, share in (("ferric_taken", ferric_taken), ("oxygen_taken", oxygen_taken)):
        if not 0.0 <= share <= 1.0:
            raise argument_error(name, f"{share}", "a fraction from 0 to 1", "1 if all is reduced")
    if not (np.isfinite(excess) and excess >= 0.0):
        raise argument_error("excess_kg_per_m3", f"{excess} kg/m3", "0 kg/m3 or more", "")


def _hydrogen_range(stoichiometry: str, share: float | None) -> tuple[float, float]:
    if share is not None:
        if not 0.0 <= share < 1.0:
            raise argument_error(
                "hydrogen_share", f"{share}", "0 to below 1", "0 is 2:1, 0.5 is 1:1"
            )
        return share, share
    if stoichiometry not in STOICHIOMETRIES:
        problem = unknown_name(
            "stoichiometry", stoichiometry, STOICHIOMETRIES, column="stoichiometry"
        )
        raise InputProblems([problem])
    return STOICHIOMETRIES[stoichiometry]


def _metal_line(precipitant: Precipitant, medium: str, metal: str, taken: Array) -> SinkLine:
    row = metal_couples(medium)[metal]
    electrons = potential_by_source(row.text("couple")).electrons
    factor = electron_factor(precipitant.metal, precipitant.electrons(medium), metal, electrons)
    net = net_demand(taken, factor)
    return SinkLine(metal, "metal", taken, factor, net, net, "given", row.text("note"))


def _ferric_line(solution: Solution, precipitant: Precipitant, share: float) -> SinkLine:
    factor = electron_factor(precipitant.metal, precipitant.electrons(solution.kind), "Fe", 1)
    if solution.ferric_g_per_L is not None:
        taken = taken_by_recovery(solution.ferric_g_per_L, share)
        net = net_demand(taken, factor)
        return SinkLine("Fe3+", "ferric", taken, factor, net, net, "measured")
    high, note = None, "ferric iron not measured, all iron neither: no upper bound"
    if solution.iron_g_per_L is not None:
        high = net_demand(taken_by_recovery(solution.iron_g_per_L, share), factor)
        note = "ferric iron not measured: from none to all iron of the solution"
    return SinkLine(
        "Fe3+", "ferric", None, factor, np.zeros(()), high, "not measured", note
    )  # fmt: skip


def _acid_line(solution: Solution, precipitant: Precipitant, taken: ArrayLike | None) -> SinkLine:
    factor = electron_factor(precipitant.metal, precipitant.electrons(solution.kind), "H2SO4", 2)
    if taken is not None:
        grams = _acid_taken(solution, taken)
        net = net_demand(grams, factor)
        return SinkLine("H2SO4", "acid", grams, factor, net, net, "given", makes_hydrogen=True)
    high, note = None, "acid taken in the vessels not known, free acid neither: no upper bound"
    if solution.acid_g_per_L is not None:
        high = net_demand(solution.acid_g_per_L, factor)
        note = "acid taken in the vessels not known: from none to all free acid"
    return SinkLine(
        "H2SO4", "acid", None, factor, np.zeros(()), high, "not measured", note, "", True
    )


def _acid_taken(solution: Solution, taken: ArrayLike) -> Array:
    grams = np.asarray(taken, dtype=np.float64)
    if not np.all(np.isfinite(grams) & (grams >= 0.0)):
        raise argument_error(
            "acid_taken_g_per_L", f"{grams.min():g} g/L", "0 g/L or more", "acid in less acid out"
        )
    if solution.acid_g_per_L is not None and np.any(grams > np.asarray(solution.acid_g_per_L)):
        raise argument_error(
            "acid_taken_g_per_L",
            f"{grams.max():g} g/L",
            "up to the free acid of the solution in g/L",
            "look at both titrations",
        )
    return grams


def _oxygen_line(solution: Solution, precipitant: Precipitant, share: float) -> SinkLine:
    factor = electron_factor(precipitant.metal, precipitant.electrons(solution.kind), "O2", 4)
    if solution.oxygen_mg_per_L is not None:
        taken = taken_by_recovery(np.asarray(solution.oxygen_mg_per_L) / 1e3, share)
        net = net_demand(taken, factor)
        return SinkLine("O2", "oxygen", taken, factor, net, net, "measured")
    row = read_table("solution_defaults").first("name", "oxygen_air_saturation")
    saturation = row.number("value")
    return SinkLine(
        "O2",
        "oxygen",
        None,
        factor,
        np.zeros(()),
        net_demand(saturation * share / 1e3, factor),
        "not measured",
        f"dissolved oxygen not measured: from none to {saturation:g} mg/L, {row.text('note')}",
        f"dissolved oxygen up to {saturation:g} mg/L ({row.text('status')})",
    )


def _water_line(metals: list[SinkLine], share: tuple[float, float]) -> SinkLine:
    metal = _sum(line.low_kg_per_m3 for line in metals)
    note = f"{100 * share[0]:g} to {100 * share[1]:g} % of the electrons go to water"
    return SinkLine(
        "water",
        "water",
        None,
        None,
        water_demand(metal, share[0]),
        water_demand(metal, share[1]),
        "given" if share[0] == share[1] else "range",
        note,
        makes_hydrogen=True,
    )


def _excess_line(excess: float) -> SinkLine:
    kilograms = np.asarray(excess, dtype=np.float64)
    return SinkLine("excess", "excess", None, None, kilograms, kilograms, "given", "user's own")


def _dissolves_in_acid(solution: Solution, precipitant: Precipitant) -> bool:
    return cell("H+/H2", precipitant.couple(solution.kind), solution.temperature_K).feasible


def _total(lines: tuple[SinkLine, ...]) -> tuple[Array, Array | None]:
    low = _sum(line.low_kg_per_m3 for line in lines)
    if any(line.high_kg_per_m3 is None for line in lines):
        return low, None
    return low, _sum(line.high_kg_per_m3 for line in lines)


def _sum(values: Iterable[Array | None]) -> Array:
    total = np.zeros(())
    for value in values:
        total = total + (0.0 if value is None else value)
    return np.asarray(total, dtype=np.float64)


def _missing(precipitant: Precipitant, lines: tuple[SinkLine, ...]) -> tuple[str, ...]:
    missing = [line.note for line in lines if line.state == "not measured"]
    if precipitant.purity is None:
        missing.append(f"purity of the {precipitant.kind} not known: nothing as received")
    return tuple(missing)


def _warnings(
    solution: Solution,
    precipitant: Precipitant,
    found: tuple[Feasibility, ...],
    removed: Mapping[str, Array],
) -> tuple[str, ...]:
    warnings = []
    for item in found:
        if item.verdict.startswith("depends"):
            warnings.append(f"{item.metal} by {precipitant.kind}: feasible or not {item.verdict}")
        feed = solution.grade(item.metal)
        left = float(np.median(feed - removed[item.metal]))
        floor = item.residual_g_per_L or 0.0
        if floor > max(left, _RESIDUAL_SHARE * float(np.median(feed))):
            warnings.append(
                f"{item.metal}: equilibrium with the default potentials leaves {floor:.2g} g/L, "
                f"more than the {left:.2g} g/L asked for"
            )
        warnings.extend(f"{item.metal}: {note}" for note in item.cell.notes)
        if item.note:
            warnings.append(f"{item.metal}: {item.note}")
    stated = (solution.medium, solution.acid_g_per_L, solution.pH)
    if solution.kind == "acid" and precipitant.kind == "zinc" and stated == (None, None, None):
        warnings.append("taken for an acid solution: no free cyanide, no acid and no pH is given")
    if solution.kind == "acid":
        warnings.extend(_arsenic(solution))
    return tuple(warnings)


def _arsenic(solution: Solution) -> list[str]:
    names = (("arsenic", solution.arsenic_mg_per_L), ("antimony", solution.antimony_mg_per_L))
    return [
        f"{name} not measured in the solution: measure it before metal meets acid"
        for name, value in names
        if value is None
    ]


def _sources(found: tuple[Feasibility, ...]) -> tuple[str, ...]:
    keys = ["molar_masses", *(key for item in found for key in item.cell.sources)]
    return tuple(dict.fromkeys(keys))
