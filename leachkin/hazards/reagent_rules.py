"""Cautions that the reagents bring: ammonia, sulphur dioxide, chlorine."""

from __future__ import annotations

from collections.abc import Iterable

from leachkin.chemistry import check_pH
from leachkin.hazards.caution import Caution, common_rule, limits_of
from leachkin.hazards.facts import Facts
from leachkin.tables import read_table

_CODES = (
    "national exposure limits (MSHA 30 CFR 56.5001 at mines of the United States); supplier's "
    "data sheet"
)
_MEMORY = "from_memory"
_NEUTRAL = 7.0


def gas_reagents(names: Iterable[str]) -> frozenset[str]:
    """Return the formulas of those reagents that can give off a gas of this list.

    Parameters
    ----------
    names : iterable of str
        Formulas or names, as a budget has them.

    Returns
    -------
    frozenset of str

    Examples
    --------
    >>> sorted(gas_reagents(["H2SO4", "sodium chlorate", "NaCl"]))
    ['NaCl', 'NaClO3']
    """
    known = {}
    for row in read_table("gas_reagents").rows:
        known[row.text("reagent").casefold()] = row.text("reagent")
        known[row.text("also").casefold()] = row.text("reagent")
    folded = (name.strip().casefold() for name in names)
    return frozenset(known[name] for name in folded if name in known)


def ammonia_share(pH: float) -> float:
    """Return the share of all ammonia that is NH3 and not ammonium, at 25 degC.

    Raises
    ------
    InputProblems
        If pH lies outside 0 to 14.

    Examples
    --------
    >>> round(ammonia_share(9.25), 2)
    0.5
    """
    return float(1.0 / (1.0 + 10.0 ** (common_rule("ammonia_pKa") - check_pH(pH))))


def sulphur_dioxide_share(pH: float) -> float:
    """Return the share of dissolved sulphite that is sulphur dioxide, at 25 degC.

    Raises
    ------
    InputProblems
        If pH lies outside 0 to 14.

    Examples
    --------
    >>> round(sulphur_dioxide_share(1.85), 2)
    0.5
    """
    return float(1.0 / (1.0 + 10.0 ** (check_pH(pH) - common_rule("sulphurous_acid_pKa"))))


def ammonia(facts: Facts) -> Caution | None:
    """Return the caution on ammonia, None where none is in use."""
    if not (_used(facts, "ammonia", "source") or facts.ammonia_g_per_L is not None):
        return None
    limit, sources = limits_of("NH3")
    reading = facts.ammonia_g_per_L
    number, unit = reading, "g/L as NH3"
    if reading is not None and facts.state_of("ammonia_g_per_L") == "below limit":
        state, text = "below limit", "ammonia below its detection limit: no proof of absence"
    elif facts.solution_pH is None:
        state = "not measured"
        text = "ammonia is in use and no pH is known: above about pH 9 most of it is gas in waiting"
    else:
        state = "present"
        share = 100.0 * ammonia_share(facts.solution_pH)
        text = (
            f"{share:.2g} % of the ammonia is NH3 at pH {facts.solution_pH:g}: it leaves with air"
        )
        if reading is None:
            number, unit = share, "% as NH3"
    text += ". Close tanks, ventilate, monitor; heat and lime drive it out"
    keys = ", ".join(("common_practice", _MEMORY, *sources))
    return Caution("ammonia", state, number, unit, text, limit, keys, _CODES)


def sulphur_dioxide(facts: Facts) -> Caution | None:
    """Return the caution on sulphur dioxide, None where no sulphite is in use."""
    if not _used(facts, "sulphur dioxide", "source"):
        return None
    limit, sources = limits_of("SO2")
    acidity = facts.solution_pH
    number = None if acidity is None else 100.0 * sulphur_dioxide_share(acidity)
    if acidity is None:
        state = "not measured"
        text = "sulphite or sulphur dioxide is in use and no pH is known: acid brings the gas out"
    elif acidity < _NEUTRAL or facts.acid:
        state = "present"
        text = (
            f"{number:.2g} % of the dissolved sulphite is SO2 at pH {acidity:g}: it leaves with air"
        )
    else:
        state = "below limit"
        text = f"at pH {acidity:g} nearly all is sulphite; acid brings the gas out"
    text += ". Keep acid apart, close mixing tanks, monitor"
    keys = ", ".join(("common_practice", _MEMORY, *sources))
    return Caution("sulphur dioxide", state, number, "% as SO2", text, limit, keys, _CODES)


def chlorine(facts: Facts) -> Caution | None:
    """Return the caution on chlorine, None where no hypochlorite and no oxidant is in use."""
    hypochlorite = _used(facts, "chlorine", "hypochlorite")
    oxidants = _used(facts, "chlorine", "oxidant")
    if not hypochlorite and not oxidants:
        return None
    if not hypochlorite and not _sour(facts):
        return None
    limit, sources = limits_of("Cl2")
    state, text = _chlorine_state(facts, hypochlorite, oxidants)
    if facts.cyanide and hypochlorite:
        text += ". With cyanide it makes cyanogen chloride: keep pH high and never let acid in"
    number = facts.chloride_g_per_L
    keys = ", ".join(("common_practice", *sources))
    return Caution("chlorine", state, number, "g/L chloride", text, limit, keys, _CODES)


def _chlorine_state(
    facts: Facts, hypochlorite: tuple[str, ...], oxidants: tuple[str, ...]
) -> tuple[str, str]:
    if hypochlorite:
        named = ", ".join(hypochlorite)
        if _sour(facts):
            return "present", f"{named} and acid are in use: where they meet chlorine comes off"
        if facts.solution_pH is None:
            return "not measured", f"{named} is in use and no pH is known: below about 7 it is gas"
        return "below limit", f"{named} at pH {facts.solution_pH:g}: acid brings chlorine out"
    named = ", ".join(oxidants)
    chloride = facts.state_of("chloride_g_per_L")
    if _used(facts, "chlorine", "chloride") or chloride == "present":
        return "present", f"{named} with chloride in acid: chlorine comes off; ventilate, monitor"
    if chloride == "not measured":
        text = f"{named} in acid, and chloride not measured: salt water or scrap may bring it in"
        return "not measured", text
    return "below limit", f"{named} in acid, no chloride found"


def _sour(facts: Facts) -> bool:
    return facts.acid or (facts.solution_pH is not None and facts.solution_pH < _NEUTRAL)


def _used(facts: Facts, gas: str, part: str) -> tuple[str, ...]:
    rows = read_table("gas_reagents").where("gas", gas)
    formulas = [row.text("reagent") for row in rows if row.text("part") == part]
    return tuple(name for name in formulas if name in facts.reagents)
