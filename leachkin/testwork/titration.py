"""Titration arithmetic: strength found, and what brings a solution back to its set-point."""

from __future__ import annotations

from leachkin.chemistry import molar_mass
from leachkin.problems import argument_error

#: Moles of reagent a mole of the usual titrant: silver nitrate for cyanide, a base of one
#: equivalent for acids, an acid of one equivalent for bases.
MOLES_PER_TITRANT = {
    "NaCN": 2.0, "KCN": 2.0, "CN": 2.0, "H2SO4": 0.5, "HCl": 1.0, "HNO3": 1.0, "NaOH": 1.0,
    "KOH": 1.0, "CaO": 0.5, "Ca(OH)2": 0.5, "Na2CO3": 0.5, "NH3": 1.0,
}  # fmt: skip


def strength_by_titration_g_per_L(
    reagent: str,
    titrant_mL: float,
    titrant_mol_per_L: float,
    sample_mL: float,
    *,
    blank_mL: float = 0.0,
    moles_per_titrant: float | None = None,
) -> float:
    """Return the strength of a reagent that a titration found [g/L].

    Parameters
    ----------
    reagent : str
        Formula that the strength is given as.
    titrant_mL, blank_mL : float
        Burette readings of sample and blank.
    titrant_mol_per_L : float
        A normality of a titrant with one equivalent a mole is its molarity.
    sample_mL : float
        Volume titrated, before any dilution.
    moles_per_titrant : float, optional
        Moles of reagent a mole of titrant; that of the usual titrant where not given.

    Returns
    -------
    float

    Raises
    ------
    InputProblems
        If a volume has no meaning, or the reagent has no usual titrant.

    Examples
    --------
    A solution of 4.33 g/L silver nitrate on 25 mL makes 1 mL worth 0.1 g/L NaCN:

    >>> silver = 4.33 / 169.87
    >>> round(strength_by_titration_g_per_L("NaCN", 1.0, silver, 25.0), 3)
    0.1
    """
    if sample_mL <= 0.0 or titrant_mL < 0.0 or titrant_mol_per_L <= 0.0:
        found = f"{titrant_mL:g} mL of {titrant_mol_per_L:g} mol/L on {sample_mL:g} mL"
        raise argument_error("titration", found, "volumes and a strength above 0")
    moles = MOLES_PER_TITRANT.get(reagent) if moles_per_titrant is None else moles_per_titrant
    if moles is None:
        raise argument_error(
            "reagent", reagent, ", ".join(MOLES_PER_TITRANT), "give moles_per_titrant"
        )
    used_mL = titrant_mL - blank_mL
    return used_mL * titrant_mol_per_L * moles * molar_mass(reagent) / sample_mL


def stock_strength_g_per_L(mass_share: float, density_g_per_mL: float) -> float:
    """Return grams of reagent in a litre of a stock that is given in per cent by mass.

    Examples
    --------
    >>> round(stock_strength_g_per_L(0.98, 1.84))
    1803
    """
    if not 0.0 < mass_share <= 1.0 or density_g_per_mL <= 0.0:
        found = f"{mass_share:g} at {density_g_per_mL:g} g/mL"
        raise argument_error("stock", found, "a share from 0 to 1, and a density above 0")
    return 1000.0 * mass_share * density_g_per_mL


def grams_to_set_point(found_g_per_L: float, set_point_g_per_L: float, volume_mL: float) -> float:
    """Return the grams of 100 % reagent that bring a solution to its set-point; 0 where above it.

    Examples
    --------
    >>> round(grams_to_set_point(0.35, 0.50, 980.0), 3)
    0.147
    """
    if volume_mL <= 0.0:
        raise argument_error("volume_mL", f"{volume_mL:g}", "above 0")
    return max(set_point_g_per_L - found_g_per_L, 0.0) * volume_mL / 1000.0


def stock_to_set_point_mL(
    found_g_per_L: float, set_point_g_per_L: float, volume_mL: float, stock_g_per_L: float
) -> float | None:
    """Return the stock solution that brings a solution to its set-point [mL].

    The volume that comes with it is counted: ``V (set - found) / (stock - set)``. None where the
    stock is not stronger than the set-point.

    Examples
    --------
    >>> round(stock_to_set_point_mL(0.35, 0.50, 980.0, 50.0), 2)
    2.97
    """
    if set_point_g_per_L <= found_g_per_L:
        return 0.0
    if stock_g_per_L <= set_point_g_per_L:
        return None
    missing = set_point_g_per_L - found_g_per_L
    return volume_mL * missing / (stock_g_per_L - set_point_g_per_L)
