"""What the user has answered about how sheets are written: asked once, kept in the settings."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

Meaning = Literal["missing", "below limit"]
Ton = Literal["short", "metric", "long"]

TONS: tuple[Ton, ...] = ("short", "metric", "long")
MESH_SERIES = ("US", "Tyler", "BSS")
CYANIDE_BASES = ("NaCN", "KCN", "CN")
LIME_BASES = ("CaO", "Ca(OH)2")
DATE_ORDERS = ("day first", "month first")
DILUTIONS = ("applied", "to apply")
WITHIN_A_DAY = "within a day"


@dataclass(frozen=True)
class Answers:
    """Answers under ``[sheets]`` of the settings; None or empty where there is none.

    Attributes
    ----------
    decimal_mark : "." or ",", or None
    negative_assays : "missing", "below limit" or None
        What a negative assay stands for.
    codes : mapping of str to "missing" or "below limit"
        What a code in a cell stands for, as "-99".
    limits : mapping of analyte to str
        The limit of an assay with its unit, for codes that say "below limit" alone.
    ton : "short", "metric", "long" or None
        Of ounces and pounds per ton.
    mesh : str or None
        The sieve series, one of ``MESH_SERIES``.
    electrode : str or None
        What Eh was read against, a name of the table ``reference_electrodes``.
    solution_density_g_per_mL : float or None
        For per cent and ppm by mass in solutions.
    cyanide : str or None
        What "cyanide" is given as, one of ``CYANIDE_BASES``.
    lime : str or None
        What "lime" is given as, one of ``LIME_BASES``.
    dates : str or None
        Order of day and month, one of ``DATE_ORDERS``.
    clock_times : str or None
        ``WITHIN_A_DAY``: a clock time is the next one after the row above.
    size_slope : float or None
        Slope of the distribution where only P80 is given.
    dilution : "applied", "to apply" or None
        Whether the values of a laboratory export are multiplied by their dilution already.
    stock_solutions : mapping of formula to float
        Strength of what was added by volume [g/L].
    """

    decimal_mark: str | None = None
    negative_assays: Meaning | None = None
    codes: Mapping[str, Meaning] = field(default_factory=dict)
    limits: Mapping[str, str] = field(default_factory=dict)
    ton: Ton | None = None
    mesh: str | None = None
    electrode: str | None = None
    solution_density_g_per_mL: float | None = None
    cyanide: str | None = None
    lime: str | None = None
    dates: str | None = None
    clock_times: str | None = None
    size_slope: float | None = None
    dilution: str | None = None
    stock_solutions: Mapping[str, float] = field(default_factory=dict)
