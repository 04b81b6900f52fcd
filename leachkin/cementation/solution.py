"""The solution that is cemented and the metal that is put into it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.chemistry import check_pH, check_temperature, potential_by_source
from leachkin.constants import STANDARD_TEMPERATURE_K
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.tables import Row, read_table

#: Metals whose presence says that a solution of unstated kind is a cyanide solution.
_CYANIDE_METALS = frozenset({"Au"})


@dataclass(frozen=True)
class Solution:
    """A solution before cementation; None is "not measured", which is never zero.

    Any concentration may be an array of draws, shape B.

    Attributes
    ----------
    metals : mapping of str to array_like
        Metals in solution [g/L], by element.
    flow_m3_per_h : array_like, optional
        Above 0.
    ferric_g_per_L, iron_g_per_L : array_like, optional
        Ferric iron, and all iron.
    acid_g_per_L : array_like, optional
        Free sulphuric acid.
    oxygen_mg_per_L : array_like, optional
        Dissolved oxygen.
    free_cyanide_g_per_L : array_like, optional
        As CN.
    pH : array_like, optional
        0 to 14.
    arsenic_mg_per_L, antimony_mg_per_L, mercury_mg_per_L : array_like, optional
    temperature_K : float
    medium : str, optional
        "acid" or "cyanide"; by default "cyanide" where free cyanide is given or gold is present.
    """

    metals: Mapping[str, ArrayLike]
    flow_m3_per_h: ArrayLike | None = None
    ferric_g_per_L: ArrayLike | None = None
    iron_g_per_L: ArrayLike | None = None
    acid_g_per_L: ArrayLike | None = None
    oxygen_mg_per_L: ArrayLike | None = None
    free_cyanide_g_per_L: ArrayLike | None = None
    pH: ArrayLike | None = None
    arsenic_mg_per_L: ArrayLike | None = None
    antimony_mg_per_L: ArrayLike | None = None
    mercury_mg_per_L: ArrayLike | None = None
    temperature_K: float = STANDARD_TEMPERATURE_K
    medium: str | None = None

    def __post_init__(self) -> None:
        for metal, value in self.metals.items():
            _not_negative(f"metals[{metal!r}]", value, "g/L")
        for name in ("ferric_g_per_L", "iron_g_per_L", "acid_g_per_L", "oxygen_mg_per_L",
                     "free_cyanide_g_per_L", "arsenic_mg_per_L", "antimony_mg_per_L",
                     "mercury_mg_per_L"):  # fmt: skip
            value = getattr(self, name)
            if value is not None:
                unit = "mg/L" if name.endswith("mg_per_L") else "g/L"
                _not_negative(name, value, unit)
        if self.flow_m3_per_h is not None:
            flow = _not_negative("flow_m3_per_h", self.flow_m3_per_h, "m3/h")
            if np.any(flow == 0.0):
                raise argument_error("flow_m3_per_h", "0 m3/h", "above 0 m3/h", "leave it out")
        if self.pH is not None:
            check_pH(self.pH)
        check_temperature(self.temperature_K)
        self._check_medium()
        self._check_metals()

    def grade(self, metal: str) -> NDArray[np.float64]:
        """Return the concentration of a metal [g/L], shape B."""
        return np.asarray(self.metals[metal], dtype=np.float64)

    @property
    def kind(self) -> str:
        """The medium, "acid" or "cyanide", inferred where it is not stated."""
        if self.medium is not None:
            return self.medium
        if self.free_cyanide_g_per_L is not None and np.any(self.free_cyanide_g_per_L):
            return "cyanide"
        return "cyanide" if _CYANIDE_METALS & set(self.metals) else "acid"

    def _check_medium(self) -> None:
        if self.medium not in (None, "acid", "cyanide"):
            raise argument_error(
                "medium", f"{self.medium!r}", '"acid" or "cyanide"', "leave it out to infer it"
            )

    def _check_metals(self) -> None:
        known = metal_couples(self.kind)
        for metal in self.metals:
            if metal not in known:
                what = f"metal in a solution of the kind {self.kind!r}:"
                raise InputProblems([unknown_name(what, metal, known, column="metals")])
        if self.ferric_g_per_L is None or self.iron_g_per_L is None:
            return
        if np.any(np.asarray(self.ferric_g_per_L) > np.asarray(self.iron_g_per_L)):
            raise argument_error(
                "ferric_g_per_L",
                "more ferric iron than iron",
                "up to all iron in g/L",
                "look at dilution and units of both assays",
            )


@dataclass(frozen=True)
class Precipitant:
    """The metal that is put into the solution.

    Attributes
    ----------
    kind : str
        "iron" or "zinc" (also "scrap iron", "zinc dust"); "copper" for silver.
    purity : float, optional
        Share of the metal in what is delivered, above 0 to 1. None: not known, and then nothing
        is said about what has to be bought.
    fines : float
        Share of it lost as fines or rust before it works, 0 to below 1.
    metallic : float
        Share of it that is metal and not oxide, above 0 to 1.
    """

    kind: str
    purity: float | None = None
    fines: float = 0.0
    metallic: float = 1.0
    metal: str = field(init=False)

    def __post_init__(self) -> None:
        row = _precipitant_row(self.kind)
        object.__setattr__(self, "kind", row.text("precipitant"))
        object.__setattr__(self, "metal", row.text("metal"))
        for name, share in (("purity", self.purity), ("metallic", self.metallic)):
            if share is not None and not 0.0 < share <= 1.0:
                raise argument_error(
                    name, f"{share}", "a fraction above 0, up to 1", "write 96 % as 0.96"
                )
        if not 0.0 <= self.fines < 1.0:
            raise argument_error(
                "fines", f"{self.fines}", "a fraction from 0 to below 1", "write 5 % as 0.05"
            )

    def couple(self, medium: str) -> str:
        """Return the couple of the dissolving metal in a medium.

        Raises
        ------
        InputProblems
            If this metal is not used in that medium.
        """
        rows = read_table("precipitants").where("precipitant", self.kind)
        by_medium = {row.text("medium"): row.text("couple") for row in rows}
        if medium not in by_medium:
            serves = [
                r.text("precipitant") for r in read_table("precipitants").where("medium", medium)
            ]
            raise argument_error(
                "precipitant",
                f"{self.kind} in a solution of the kind {medium!r}",
                ", ".join(dict.fromkeys(serves)),
                "state the medium of the solution if it was inferred wrongly",
            )
        return by_medium[medium]

    def electrons(self, medium: str) -> int:
        """Return the electrons that a mole of it gives up in a medium."""
        return potential_by_source(self.couple(medium)).electrons

    @property
    def active_share(self) -> float | None:
        """Share of what is delivered that does work, None where the purity is not known."""
        if self.purity is None:
            return None
        return self.purity * self.metallic * (1.0 - self.fines)


def metal_couples(medium: str) -> dict[str, Row]:
    """Return the couple of every metal that can be cemented in a medium, as table rows."""
    rows = read_table("cementation_couples").where("medium", medium)
    return {row.text("metal"): row for row in rows}


def _precipitant_row(kind: str) -> Row:
    rows = read_table("precipitants").rows
    for row in rows:
        if kind.strip().casefold() in (row.text("precipitant"), row.text("also")):
            return row
    known = dict.fromkeys(row.text("precipitant") for row in rows)
    raise InputProblems([unknown_name("precipitant", kind, known, column="kind")])


def _not_negative(name: str, value: ArrayLike, unit: str) -> NDArray[np.float64]:
    array = np.asarray(value, dtype=np.float64)
    if not np.all(np.isfinite(array)):
        raise argument_error(
            name, "a value that is not a finite number", f"0 {unit} or more", "leave it out"
        )
    if np.any(array < 0.0):
        raise argument_error(
            name, f"{array.min():g} {unit}", f"0 {unit} or more", "is it a code for below limit?"
        )
    return array
