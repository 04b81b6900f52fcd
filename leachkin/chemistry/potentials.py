"""Standard potentials by source, complexes derived from stability constants, and their spread."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np

from leachkin.chemistry.cyanide import StabilityConstant, stability_constants
from leachkin.chemistry.formulas import canonical_species
from leachkin.chemistry.thermodynamics import check_temperature
from leachkin.constants import (
    STANDARD_TEMPERATURE_K,
    FARADAY_C_per_mol,
    GAS_CONSTANT_J_per_mol_K,
)
from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.result_table import Column, ResultTable
from leachkin.tables import Row, read_table

#: Sources in the order in which they serve as default: one consistent set first.
SOURCE_ORDER = (
    "nbs1982_crc",
    "nist46",
    "llnl",
    "epa_minteq311",
    "zumdahl9",
    "crc_handbook",
    "bratsch1989",
    "from_memory",
)


@dataclass(frozen=True)
class Potential:
    """Standard potential of a couple by one source, against the hydrogen electrode.

    Attributes
    ----------
    couple : str
        Oxidised form, a stroke, reduced form.
    electrons : int
    E0_V : float
        At 298.15 K.
    dE0_dT_mV_per_K : float or None
        None where the source gives none.
    source, status, note : str
    usable : bool
        False for a printed value that better data contradict; never the default.
    """

    couple: str
    electrons: int
    E0_V: float
    dE0_dT_mV_per_K: float | None
    source: str
    status: str
    note: str = ""
    usable: bool = True

    def at(self, temperature_K: float) -> float:
        """Return the standard potential at a temperature [V].

        Raises
        ------
        InputProblems
            If the source gives no temperature coefficient and the temperature is not 298.15 K.
        """
        temperature = float(check_temperature(temperature_K))
        step = temperature - STANDARD_TEMPERATURE_K
        if step == 0.0:
            return self.E0_V
        if self.dE0_dT_mV_per_K is None:
            raise argument_error(
                "temperature_K",
                f"{temperature:g} K for {self.couple} by {self.source}, which gives no "
                "temperature coefficient",
                f"{STANDARD_TEMPERATURE_K:g} K",
                "name a source that gives one, or use the value at 298.15 K and say so",
            )
        return self.E0_V + 1e-3 * self.dE0_dT_mV_per_K * step


@dataclass(frozen=True)
class PotentialSpread:
    """What the sources say about one couple, side by side.

    Attributes
    ----------
    couple : str
    rows : tuple of Potential
        Default first; those not to be used last.
    """

    couple: str
    rows: tuple[Potential, ...]

    @property
    def default(self) -> Potential:
        """The value used when no source is named."""
        return self.rows[0]

    @property
    def low_V(self) -> float:
        """Lowest usable E0 at 298.15 K."""
        return min(row.E0_V for row in self.rows if row.usable)

    @property
    def high_V(self) -> float:
        """Highest usable E0 at 298.15 K."""
        return max(row.E0_V for row in self.rows if row.usable)

    @property
    def spread_V(self) -> float:
        """Highest less lowest usable E0."""
        return self.high_V - self.low_V

    def table(self) -> ResultTable:
        """Return the sources side by side."""
        columns = (
            Column("couple", "Couple"),
            Column("E0_V", "E0 at 298.15 K", "V", 5),
            Column("dE0_dT_mV_per_K", "dE0/dT", "mV/K", 3),
            Column("source", "Source"),
            Column("status", "Status"),
            Column("usable", "Used"),
            Column("note", "Note"),
        )
        records = ({c.key: getattr(row, c.key) for c in columns} for row in self.rows)
        return ResultTable.from_records("potentials", columns, records)


def standard_potential(
    couple: str, temperature_K: float = STANDARD_TEMPERATURE_K, source: str | None = None
) -> float:
    """Return the standard potential of a couple against the hydrogen electrode [V].

    Parameters
    ----------
    couple : str
        Oxidised form, a stroke, reduced form: ``"Cu2+/Cu"``, ``"Fe3+/Fe2+"``,
        ``"Ag(CN)2-/Ag"``, ``"O2,H+/H2O"``.
    temperature_K : float
        250 to 650 K.
    source : str, optional
        A source key; by default the first of :data:`SOURCE_ORDER` that holds the couple.

    Returns
    -------
    float
        ``E0 + dE0/dT (T - 298.15 K)``.

    Raises
    ------
    InputProblems
        If the couple or the source is unknown (the nearest names are given), or the temperature
        is not 298.15 K and the source gives no coefficient.

    Examples
    --------
    >>> round(standard_potential("Cu2+/Cu"), 4)
    0.3394
    >>> round(standard_potential("Fe2+/Fe", source="llnl"), 4)
    -0.4743
    """
    return potential_by_source(couple, source).at(temperature_K)


def potentials_of(couple: str) -> PotentialSpread:
    """Return every potential held for a couple, with its source and status.

    Parameters
    ----------
    couple : str
        As in :func:`standard_potential`.

    Returns
    -------
    PotentialSpread

    Raises
    ------
    InputProblems
        If the couple is unknown; the nearest ones are given.

    Notes
    -----
    For a cyanide complex, values derived from the bare ion and the stability constants stand
    beside the tabulated ones, and a tabulated value that they contradict is not used.

    Examples
    --------
    >>> spread = potentials_of("Fe2+/Fe")
    >>> spread.low_V, spread.high_V
    (-0.4743, -0.4089)
    """
    return _spread(canonical_couple(couple))


def potential_by_source(couple: str, source: str | None = None) -> Potential:
    """Return the potential of a couple by the named source, or the default one.

    Parameters
    ----------
    couple : str
    source : str, optional

    Returns
    -------
    Potential

    Raises
    ------
    InputProblems
        If the couple is unknown or the source does not hold it.
    """
    spread = potentials_of(couple)
    if source is None:
        return spread.default
    by_source: dict[str, Potential] = {}
    for row in spread.rows:
        by_source.setdefault(row.source, row)
    if source not in by_source:
        what = f"source of {spread.couple}"
        raise InputProblems([unknown_name(what, source, by_source, column="source")])
    return by_source[source]


@cache
def known_couples() -> tuple[str, ...]:
    """Return every couple for which a potential is held, tabulated ones first."""
    names = dict.fromkeys(row.text("couple") for row in read_table("electrode_potentials").rows)
    for row in read_table("stability_constants").rows:
        if row.text("ion") != "H+":
            names.setdefault(f"{row.text('species')}/{_metal_of(row.text('ion'))}")
    return tuple(names)


@cache
def canonical_couple(couple: str) -> str:
    """Return a couple as the tables write it: ``"Cu+2 / Cu"`` becomes ``"Cu2+/Cu"``.

    Parameters
    ----------
    couple : str

    Returns
    -------
    str

    Raises
    ------
    InputProblems
        If there is no such couple; the nearest ones are given.
    """
    known = {_folded(name): name for name in known_couples()}
    plain = "/".join(
        ",".join(canonical_species(species) for species in side.split(","))
        for side in couple.split("/")
    )
    found = known.get(_folded(plain))
    if found is None:
        raise InputProblems([unknown_name("couple", couple, known.values(), column="couple")])
    return found


def complex_potential(bare: Potential, constant: StabilityConstant) -> Potential:
    """Return the potential of a complex from its bare ion and its stability constant.

    Parameters
    ----------
    bare : Potential
        Of the bare ion that the constant names.
    constant : StabilityConstant

    Returns
    -------
    Potential
        At free ligand of 1 mol/L; the temperature coefficient where both parts give one.

    Notes
    -----
    ``E0(complex) = E0(ion) - R T ln(beta) / (n F)``; its slope takes the entropy of
    complexation, ``(dH + R T ln beta) / T``.
    """
    electrons = bare.electrons
    energy = -GAS_CONSTANT_J_per_mol_K * STANDARD_TEMPERATURE_K * np.log(10.0) * constant.log10_beta
    slope = None
    if bare.dE0_dT_mV_per_K is not None and constant.dH_kJ_per_mol is not None:
        entropy = (1e3 * constant.dH_kJ_per_mol - energy) / STANDARD_TEMPERATURE_K
        slope = float(bare.dE0_dT_mV_per_K - 1e3 * entropy / (electrons * FARADAY_C_per_mol))
    return Potential(
        couple=f"{constant.species}/{bare.couple.split('/')[1]}",
        electrons=electrons,
        E0_V=float(bare.E0_V + energy / (electrons * FARADAY_C_per_mol)),
        dE0_dT_mV_per_K=slope,
        source=constant.source,
        status="from memory" if constant.status == "from memory" else "computed",
        note=f"bare ion by {bare.source}, log10 beta {constant.log10_beta:g} by {constant.source}",
    )


@cache
def _spread(couple: str) -> PotentialSpread:
    rows = [_potential(row) for row in read_table("electrode_potentials").where("couple", couple)]
    rows.extend(_derived(couple))
    rows.sort(key=lambda row: (not row.usable, SOURCE_ORDER.index(row.source)))
    return PotentialSpread(couple, tuple(rows))


def _derived(couple: str) -> list[Potential]:
    """Potentials of a complex from its constants, the bare ion by its own default source."""
    species = couple.split("/")[0]
    return [
        complex_potential(_spread(f"{c.ion}/{_metal_of(c.ion)}").default, c)
        for c in stability_constants(species)
        if c.ion != "H+"
    ]


def _potential(row: Row) -> Potential:
    return Potential(
        row.text("couple"),
        int(row.number("electrons")),
        row.number("E0_V"),
        row.number_or_none("dE0_dT_mV_per_K"),
        row.text("source"),
        row.text("status"),
        row.text("note"),
        row.text("use") == "yes",
    )


def _metal_of(ion: str) -> str:
    return ion.rstrip("+0123456789")


def _folded(couple: str) -> str:
    return "".join(couple.split())
