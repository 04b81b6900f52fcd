"""Cautions on gases: hydrogen cyanide, arsine, stibine, hydrogen, carbon dioxide, sulphide."""

from __future__ import annotations

from leachkin.chemistry import hcn_headspace_ppm, hcn_share, molar_mass
from leachkin.constants import (
    STANDARD_TEMPERATURE_K,
    GAS_CONSTANT_J_per_mol_K,
    STANDARD_ATMOSPHERE_Pa,
)
from leachkin.hazards.caution import Caution, common_rule, limit_value, limits_of
from leachkin.hazards.facts import Facts

_CYANIDE_CODES = (
    "International Cyanide Management Code; national exposure limits; supplier's data sheet"
)
_GAS_CODES = (
    "national exposure limits (MSHA 30 CFR 56.5001 at mines of the United States); "
    "OSHA 29 CFR 1910.119 lists arsine; occupational physician"
)
_HYDROGEN_CODES = "national rules on explosive atmospheres and hot work; NFPA 497; IEC 60079-20-1"
#: Precipitants that make hydrogen, and with it arsine and stibine.
_BASE_METALS = ("iron", "zinc")


def hydrogen_cyanide(facts: Facts) -> Caution | None:
    """Return the caution on hydrogen cyanide, None where no cyanide is in use."""
    if not facts.cyanide:
        return None
    limit, sources = limits_of("HCN")
    if facts.pH is None:
        state = "not measured"
        text = "cyanide is in use and no pH was recorded: measure pH at every reading"
    else:
        lowest = common_rule("lowest_pH_with_cyanide")
        state = "present" if facts.pH < lowest else "below limit"
        share = 100.0 * float(hcn_share(facts.pH, facts.temperature_K))
        relation = "below" if state == "present" else "at or above"
        text = (
            f"lowest pH {facts.pH:g} is {relation} the commonly held {lowest:g}; "
            f"{share:.2g} % of the free cyanide is HCN at that pH{_headspace(facts)}"
        )
    text += (
        ". Hold pH at the site's rule, keep acid and cyanide streams apart, ventilate, use gas "
        "monitors; not everyone can smell it"
    )
    keys = ", ".join(("nist46", "common_practice", *sources))
    return Caution("hydrogen cyanide", state, facts.pH, "pH", text, limit, keys, _CYANIDE_CODES)


def arsine(facts: Facts) -> Caution | None:
    """Return the caution on arsine, None where no metal is put into the solution."""
    return _hydride(facts, "arsine", "AsH3", "arsenic")


def stibine(facts: Facts) -> Caution | None:
    """Return the caution on stibine, None where no metal is put into the solution."""
    return _hydride(facts, "stibine", "SbH3", "antimony")


def hydrogen(facts: Facts) -> Caution | None:
    """Return the caution on hydrogen, None where no metal meets acid or water."""
    if facts.precipitant not in _BASE_METALS:
        return None
    state = facts.state_of("hydrogen_Nm3_per_h")
    limit, sources = limits_of("H2")
    flow = facts.hydrogen_Nm3_per_h
    if state == "not measured" or flow is None:
        text = (
            f"{facts.precipitant} in the solution makes hydrogen and its rate is not known: "
            "measure flow, acid before and after the vessels, and gas above them"
        )
    elif state == "below limit":
        text = "no acid and no water is reduced by the figures given: confirm by the acid balance"
    else:
        lower = limit_value("H2", "LFL NFPA") / 100.0
        air = flow / (common_rule("share_of_lower_flammable_limit") * lower)
        text = (
            f"hydrogen up to {flow:.3g} Nm3/h; a quarter of the lower limit (common practice) is "
            f"reached in {air:,.0f} Nm3/h of air. Ventilate high points, no sparks, permits for "
            "hot work"
        )
    keys = ", ".join(("molar_masses", "common_practice", *sources))
    return Caution("hydrogen", state, flow, "Nm3/h", text, limit, keys, _HYDROGEN_CODES)


def carbon_dioxide(facts: Facts) -> Caution | None:
    """Return the caution on carbon dioxide in closed acid bottles, None without such bottles."""
    if not facts.acid or facts.bottle_solids_g is None:
        return None
    state = facts.state_of("carbonate_share")
    litres = None
    if facts.carbonate_share is None:
        text = "carbonate not assayed: acid on carbonate makes gas in a closed bottle; vent it"
    else:
        litres = carbon_dioxide_L(facts.bottle_solids_g, facts.carbonate_share)
        text = (
            f"{100 * facts.carbonate_share:g} % CaCO3 in {facts.bottle_solids_g:g} g makes up to "
            f"{litres:.2g} L of carbon dioxide: add acid slowly and vent the closed bottle"
        )
    return Caution(
        "carbon dioxide in a closed bottle",
        state,
        litres,
        "L a bottle",
        text,
        limits_of("CO2")[0],
        ", ".join(("molar_masses", *limits_of("CO2")[1])),
        "laboratory rules on closed vessels",
    )


def hydrogen_sulphide(facts: Facts) -> Caution | None:
    """Return the caution on hydrogen sulphide, None where no acid is in use."""
    if not facts.acid:
        return None
    limit, sources = limits_of("H2S")
    state = facts.state_of("sulphide_share")
    number = None if facts.sulphide_share is None else 100.0 * facts.sulphide_share
    text = {
        "not measured": "sulphide sulphur not assayed: some sulphides give H2S in acid; monitor",
        "below limit": "no sulphide sulphur found by the assay",
        "present": "sulphides and acid: some give H2S; monitor where solutions are handled",
    }[state]
    return Caution(
        "hydrogen sulphide",
        state,
        number,
        "% S2-",
        text,
        limit,
        ", ".join(sources),
        "national exposure limits; supplier's data sheet",
    )


def carbon_dioxide_L(solids_g: float, carbonate_share: float) -> float:
    """Return the carbon dioxide that acid drives out of an ore, at 25 degC and 1 atm [L].

    Parameters
    ----------
    solids_g : float
    carbonate_share : float
        Fraction of the ore that is CaCO3.

    Returns
    -------
    float

    Examples
    --------
    >>> round(carbon_dioxide_L(500.0, 0.009), 1)
    1.1
    """
    moles = solids_g * carbonate_share / molar_mass("CaCO3")
    volume = GAS_CONSTANT_J_per_mol_K * STANDARD_TEMPERATURE_K / STANDARD_ATMOSPHERE_Pa
    return moles * volume * 1e3


def _headspace(facts: Facts) -> str:
    if facts.cyanide_g_per_L is None or facts.pH is None:
        return ""
    ppm = float(hcn_headspace_ppm(facts.cyanide_g_per_L, facts.pH))
    return (
        f"; over {facts.cyanide_g_per_L:g} g/L NaCN a closed space comes to about {ppm:.0f} ppm "
        "at 25 degC (constant from memory): vent before opening"
    )


def _hydride(facts: Facts, name: str, gas: str, element: str) -> Caution | None:
    if facts.precipitant not in _BASE_METALS or not (facts.acid or facts.cyanide):
        return None
    limit, sources = limits_of(gas)
    reading = getattr(facts, f"{element}_mg_per_L")
    state = facts.state_of(f"{element}_mg_per_L")
    where = "in the cementation vessels" if facts.acid else "when the precipitate meets acid"
    text = {
        "present": f"{element} {reading} mg/L in the solution, {facts.precipitant} and acid: "
        f"{name} can form {where}. Stop and assess; closed vessels with extraction, continuous "
        "monitor, no aluminium; harm may show late",
        "not measured": f"{element} in the solution not measured: measure it before metal meets "
        f"acid, for {name} can form {where}",
        "below limit": f"{element} below {reading} mg/L in the solution: no proof of absence, "
        "scrap and dust may bring it in",
    }[state]
    ore = getattr(facts, f"{element}_mg_per_kg")
    if state != "present" and ore:
        text += f"; the ore holds {ore:g} mg/kg"
    keys = ", ".join(sources)
    return Caution(name, state, reading, "mg/L", text, limit, keys, _GAS_CODES)
