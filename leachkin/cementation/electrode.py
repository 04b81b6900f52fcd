"""How fast metal dissolves, and hydrogen and oxygen are reduced on it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.middle import middle
from leachkin.cementation.solution import Precipitant
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.tables import Row, read_table

Array = NDArray[np.float64]

_A_PER_m2 = 1e4  # per A/cm2


@dataclass(frozen=True)
class ElectrodeKinetics:
    """Exchange currents and Tafel slopes of a precipitant and its deposit.

    Every field may be an array, shape B. Slopes are volts per decade.

    Attributes
    ----------
    dissolution_A_per_m2 : array_like
        Exchange current of the dissolving metal at activity 1 of its ion, with the ligand as it
        is; the line through it stays where the ion has another activity.
    dissolution_slope_V : array_like
    hydrogen_bare_A_per_m2, hydrogen_deposit_A_per_m2 : array_like
        Exchange currents of hydrogen on the bare precipitant and on the deposit.
    hydrogen_slope_V : array_like
    deposit_share : array_like
        Share of the surface that the deposit covers, 0 to 1.
    oxygen_A_per_m2, oxygen_slope_V : array_like
    hydrogen_factor : array_like
        What a fit to a site's barren found hydrogen to be, over these figures.
    defaults : tuple of str
        Figures that came from the table, in words, with their status.
    sources : tuple of str
    """

    dissolution_A_per_m2: ArrayLike
    dissolution_slope_V: ArrayLike
    hydrogen_bare_A_per_m2: ArrayLike
    hydrogen_deposit_A_per_m2: ArrayLike
    hydrogen_slope_V: ArrayLike
    deposit_share: ArrayLike = 0.5
    oxygen_A_per_m2: ArrayLike = 1e-6
    oxygen_slope_V: ArrayLike = 0.12
    hydrogen_factor: ArrayLike = 1.0
    defaults: tuple[str, ...] = ()
    sources: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        for name in (
            "dissolution_A_per_m2",
            "dissolution_slope_V",
            "hydrogen_bare_A_per_m2",
            "hydrogen_deposit_A_per_m2",
            "hydrogen_slope_V",
            "oxygen_A_per_m2",
            "oxygen_slope_V",
        ):
            _above_zero(name, getattr(self, name))
        _not_negative("hydrogen_factor", self.hydrogen_factor)
        share = np.asarray(self.deposit_share, dtype=np.float64)
        if not np.all((share >= 0.0) & (share <= 1.0)):
            raise argument_error("deposit_share", f"{share.max():g}", "0 to 1", "50 % is 0.5")

    @property
    def hydrogen_A_per_m2(self) -> Array:
        """Exchange current of hydrogen on the surface as it is covered."""
        share = np.asarray(self.deposit_share, dtype=np.float64)
        bare = np.asarray(self.hydrogen_bare_A_per_m2, dtype=np.float64)
        deposit = np.asarray(self.hydrogen_deposit_A_per_m2, dtype=np.float64)
        covered = (1.0 - share) * bare + share * deposit
        return np.asarray(covered * np.asarray(self.hydrogen_factor))


def electrode_kinetics(
    precipitant: Precipitant,
    deposit: Mapping[str, float] | None = None,
    deposit_share: ArrayLike = 0.5,
    hydrogen_factor: ArrayLike = 1.0,
    medium: str = "acid",
) -> ElectrodeKinetics:
    """Return the kinetics of a precipitant from the table: mostly from memory, to be fitted.

    Parameters
    ----------
    precipitant : Precipitant
    deposit : mapping of str to float, optional
        Metals of the deposit by mass, on which hydrogen runs side by side; copper where left out.
    deposit_share : array_like
    hydrogen_factor : array_like
    medium : str
        "acid" or "cyanide".

    Returns
    -------
    ElectrodeKinetics

    Raises
    ------
    InputProblems
        If the table holds nothing for a metal.

    Examples
    --------
    Hydrogen is slow on bare zinc and faster on copper:

    >>> zinc = electrode_kinetics(Precipitant("zinc"))
    >>> bool(zinc.hydrogen_bare_A_per_m2 < zinc.hydrogen_deposit_A_per_m2)
    True
    """
    reaction = "dissolution in cyanide" if medium == "cyanide" else "dissolution"
    dissolution = _row(precipitant.metal, reaction)
    bare = _row(precipitant.metal, "hydrogen")
    oxygen = _row("any", "oxygen")
    weights, on_deposit = _deposit(deposit or {"Cu": 1.0}, bare)
    return ElectrodeKinetics(
        _current(dissolution),
        dissolution.number("slope_V_per_decade"),
        _current(bare),
        float(sum(w * _current(row) for w, row in zip(weights, on_deposit, strict=True))),
        bare.number("slope_V_per_decade"),
        deposit_share,
        _current(oxygen),
        oxygen.number("slope_V_per_decade"),
        hydrogen_factor,
        (
            *dict.fromkeys(_words(row) for row in (dissolution, bare, *on_deposit, oxygen)),
            f"deposit on {100 * middle(deposit_share):g} % of the surface, not measured",
        ),
        tuple(dict.fromkeys(r.text("source") for r in (dissolution, bare, *on_deposit, oxygen))),
    )


def _deposit(deposit: Mapping[str, float], bare: Row) -> tuple[list[float], list[Row]]:
    """Shares and rows of the metals of a deposit that the table knows; the bare metal if none."""
    known = {row.text("metal"): row for row in _rows("hydrogen")}
    masses = {metal: mass for metal, mass in deposit.items() if metal in known and mass > 0.0}
    total = sum(masses.values())
    if total <= 0.0:
        return [1.0], [bare]
    return [mass / total for mass in masses.values()], [known[metal] for metal in masses]


def _words(row: Row) -> str:
    current = row.number("minus_log10_i0_A_per_cm2")
    low, high = row.number("low"), row.number("high")
    return (
        f"{row.text('reaction')} on {row.text('metal')}: exchange current 10^-{current:g} A/cm2 "
        f"(10^-{high:g} to 10^-{low:g}), {row.number('slope_V_per_decade'):g} V a decade, "
        f"{row.text('status')}"
    )


def _current(row: Row) -> float:
    return float(_A_PER_m2 * 10.0 ** -row.number("minus_log10_i0_A_per_cm2"))


def _rows(reaction: str) -> tuple[Row, ...]:
    return read_table("electrode_kinetics").where("reaction", reaction)


def _row(metal: str, reaction: str) -> Row:
    rows = {row.text("metal"): row for row in _rows(reaction)}
    if metal not in rows:
        raise InputProblems([unknown_name(f"metal for {reaction}", metal, rows, column="metal")])
    return rows[metal]


def _above_zero(name: str, values: ArrayLike) -> None:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise argument_error(name, f"{array.min():g}", "above 0")


def _not_negative(name: str, values: ArrayLike) -> None:
    array = np.asarray(values, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array >= 0.0)):
        raise argument_error(name, f"{array.min():g}", "0 or more")
