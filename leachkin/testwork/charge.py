"""The charge of a test: dry solids and solution, however they were weighed and measured."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from leachkin.problems import Problem
from leachkin.testwork.cells import CellReader
from leachkin.testwork.records import Array
from leachkin.testwork.settings import TestworkSettings

#: Columns of masses, volumes and densities: each above 0 where it is written.
CHARGE_COLUMNS = (
    "solids", "wet", "solution", "pulp mass", "pulp volume", "pulp density", "solids density",
    "density", "bottle", "tare", "carbon",
)  # fmt: skip
#: Any of these says how much solution there is.
SOLUTION_COLUMNS = frozenset({"solution", "solids share", "pulp mass", "pulp density"})
WATER_g_per_mL = 1.0


@dataclass(frozen=True)
class Charge:
    """Dry solids and solution of a test; what came with wet ore dilutes what was added."""

    solids_g: float
    solution_mL: float
    dilution: float = 1.0


@dataclass(frozen=True)
class Weighed:
    """What turns masses of a bottle into volumes of solution; None where it was not written.

    Attributes
    ----------
    bottle_g, tare_g : float or None
        The filled bottle at the start, and the empty one.
    carbon_g : float
    density_g_per_mL : float
        Of the solution.
    """

    bottle_g: float | None = None
    tare_g: float | None = None
    carbon_g: float = 0.0
    density_g_per_mL: float = WATER_g_per_mL


def stands_otherwise(problem: Problem, keys: set[str]) -> bool:
    """Return True where a column that is not there can be worked out from others."""
    instead = {"'dry solids (g)'": {"wet"}, "'solution (mL)'": set(SOLUTION_COLUMNS)}
    return any(
        bool(others & keys) and problem.found == f"there is no column {name}"
        for name, others in instead.items()
    )


def weighed_of_row(i: int, columns: Mapping[str, Array], settings: TestworkSettings) -> Weighed:
    """Return the masses of the bottle in a row of the tests sheet."""
    bottle, tare, carbon = (float(columns[key][i]) for key in ("bottle", "tare", "carbon"))
    return Weighed(
        None if np.isnan(bottle) else bottle,
        None if np.isnan(tare) else tare,
        0.0 if np.isnan(carbon) else carbon,
        _density(i, columns, settings),
    )


def _density(i: int, columns: Mapping[str, Array], settings: TestworkSettings) -> float:
    written = float(columns["density"][i])
    answered = settings.answers.solution_density_g_per_mL
    return written if not np.isnan(written) else answered or WATER_g_per_mL


def charge_of_row(
    i: int, reader: CellReader, columns: Mapping[str, Array], settings: TestworkSettings
) -> Charge | None:
    """Return the charge of a row of the tests sheet; None, with problems, where it is not known."""
    solids, water = _dry_solids(i, reader, columns)
    solution = float(columns["solution"][i])
    if np.isnan(solution) and not np.isnan(solids):
        density = _density(i, columns, settings)
        solution, how = _solution_of_pulp(i, columns, solids, density)
        if solution <= 0.0:
            reader.problems.append(_no_room(i, reader, how, solution))
            return None
        if not np.isnan(solution):
            water = 0.0
            found = f"the solution is worked out from {how}: {solution:.5g} mL"
            where = (reader.sheet.file, reader.sheet.rows[i].number, "solution (mL)")
            reader.problems.append(Problem(*where, "note", f"{found}, at {density:g} g/mL"))
    if np.isnan(solids) or np.isnan(solution):
        _say_what_is_missing(i, reader, np.isnan(solids), np.isnan(solution))
        return None
    return Charge(solids, solution + water, solution / (solution + water))


def _solution_of_pulp(
    i: int, columns: Mapping[str, Array], solids_g: float, density: float
) -> tuple[float, str]:
    """Solution [mL] by what is known of the pulp, and by what; NaN where nothing is.

    By its mass, by its volume and density, by its share of solids, or by its density and that of
    the solids: x = rho_s (rho_p - rho_l) / (rho_p (rho_s - rho_l)).
    """
    share, mass, volume, pulp, grain = (
        float(columns[key][i])
        for key in ("solids share", "pulp mass", "pulp volume", "pulp density", "solids density")
    )
    if not np.isnan(mass):
        return (mass - solids_g) / density, "the mass of the pulp"
    if not np.isnan(volume * pulp):
        return (volume * pulp - solids_g) / density, "volume and density of the pulp"
    if not np.isnan(share):
        return solids_g * (1.0 - share) / share / density, f"{100 * share:g} % solids"
    if not np.isnan(pulp * grain) and grain > pulp > density:
        share = grain * (pulp - density) / (pulp * (grain - density))
        how = f"the density of the pulp, {100 * share:.4g} % solids"
        return solids_g * (1.0 - share) / share / density, how
    return float("nan"), ""


def _no_room(i: int, reader: CellReader, how: str, solution: float) -> Problem:
    return Problem(
        reader.sheet.file,
        reader.sheet.rows[i].number,
        "solution (mL)",
        "stop",
        f"{how} leaves {solution:.4g} mL of solution",
        "a pulp heavier than its solids",
        "look at the units, and whether the tare was taken off",
    )


def _dry_solids(i: int, reader: CellReader, columns: Mapping[str, Array]) -> tuple[float, float]:
    """Dry solids [g] and the water that came with them [mL]."""
    dry, wet, moisture = (float(columns[key][i]) for key in ("solids", "wet", "moisture"))
    if np.isnan(wet):
        return dry, 0.0
    where = (reader.sheet.file, reader.sheet.rows[i].number, reader.uses["wet"].heading)
    if not np.isnan(dry):
        return dry, max(wet - dry, 0.0)
    if np.isnan(moisture):
        reader.problems.append(
            Problem(
                *where,
                "ask",
                f"{wet:g} g wet and no moisture; taken as dry meanwhile, which reads heads high "
                "and extraction low",
                "the dry mass, or the moisture in per cent of the wet mass",
                'add a column "moisture (%)" or "dry solids (g)"',
            )
        )
        return wet, 0.0
    dry = wet * (1.0 - moisture)
    found = f"charge {wet:g} g with {100 * moisture:g} % moisture: dry {dry:.1f} g used, and "
    found += f"{wet - dry:.1f} mL of water joins the solution"
    reader.problems.append(Problem(*where, "note", found))
    return dry, wet - dry


def _say_what_is_missing(i: int, reader: CellReader, solids: bool, solution: bool) -> None:
    for key, missing, what in (
        ("solids", solids, "the dry solids are missing"),
        ("solution", solution, "the solution is missing"),
    ):
        if not missing or reader.texts(key)[i]:
            continue
        use = reader.uses.get(key)
        reader.problems.append(
            Problem(
                reader.sheet.file,
                reader.sheet.rows[i].number,
                use.heading if use is not None else "",
                "stop",
                what,
                "a number above 0",
                "dry mass, not as received" if key == "solids" else "the starting volume",
            )
        )
