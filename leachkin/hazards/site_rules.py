"""Cautions on acid, zinc dust, mercury, open water, heaps and containment."""

from __future__ import annotations

from leachkin.hazards.caution import Caution, limit_value, limits_of
from leachkin.hazards.facts import Facts

_PRACTICE = "common_practice"


def strong_acid(facts: Facts) -> Caution | None:
    """Return the caution on sulphuric acid, None where none is in use."""
    if not facts.acid:
        return None
    limit, sources = limits_of("H2SO4")
    state = facts.state_of("acid_g_per_L")
    return Caution(
        "sulphuric acid",
        state,
        facts.acid_g_per_L,
        "g/L",
        "acid into water, never the other way; heat and mist; bunds; steel or plastic that stands "
        "the strength in use; strong acid is handled at make-up and cure whatever the leach holds",
        limit,
        ", ".join(sources),
        "supplier's data sheet; local storage and transport rules (ADR, IMDG)",
    )


def zinc_dust(facts: Facts) -> Caution | None:
    """Return the caution on zinc dust, None where zinc is not the precipitant."""
    if facts.precipitant != "zinc":
        return None
    return Caution(
        "zinc dust",
        "present",
        None,
        "",
        "keep dry, for damp zinc gives off hydrogen; no ignition sources; control the dust; store "
        "apart from acid and oxidisers",
        "",
        _PRACTICE,
        "supplier's data sheet; local storage and transport rules (ADR, IMDG)",
    )


def mercury(facts: Facts) -> Caution | None:
    """Return the caution on mercury, None where no cyanide is in use."""
    if not facts.cyanide:
        return None
    in_solution = facts.mercury_mg_per_L is not None
    name = "mercury_mg_per_L" if in_solution else "mercury_mg_per_kg"
    number, unit = getattr(facts, name), "mg/L" if in_solution else "mg/kg ore"
    state = facts.state_of(name)
    text = {
        "present": "mercury follows gold and silver: control retort and vapour",
        "not measured": "mercury in ore and solution not measured: it follows gold and silver",
        "below limit": "mercury below its detection limit: it gathers in the precipitate",
    }[state]
    limit, sources = limits_of("Hg")
    keys = ", ".join((_PRACTICE, *sources))
    return Caution("mercury", state, number, unit, text, limit, keys, "national exposure limits")


def open_water(facts: Facts) -> Caution | None:
    """Return the caution on cyanide at open water, None where no cyanide is in use."""
    if not facts.cyanide:
        return None
    number = facts.wad_cyanide_mg_per_L
    state = facts.state_of("wad_cyanide_mg_per_L")
    trigger = limit_value("WAD cyanide", "open water trigger")
    limit, sources = limits_of("WAD cyanide")
    if number is not None:
        state = "present" if number > trigger else "below limit"
    text = {
        "present": "cyanide at open water above the management trigger: net, cover, treat",
        "not measured": "weak-acid-dissociable cyanide at open water not measured",
        "below limit": "below the management trigger, which is no toxicological limit",
    }[state]
    return Caution(
        "cyanide at open water",
        state,
        number,
        "mg/L WAD",
        text,
        limit,
        ", ".join(sources),
        "International Cyanide Management Code; discharge permit",
    )


def heap_stability(facts: Facts) -> Caution | None:
    """Return the caution on heap stability, None without a heap."""
    if not facts.heap:
        return None
    return Caution(
        "heap stability",
        "not measured" if facts.lift_m is None else "present",
        facts.lift_m,
        "m lift",
        "lift, solution, fines and liner act together: water levels in the heap have to be "
        "watched, and no leach figure says anything about stability",
        "",
        _PRACTICE,
        "geotechnical engineer of record; national slope rules (MSHA 30 CFR 56.3130 in the United "
        "States); dam and tailings guides",
    )


def containment(facts: Facts) -> Caution | None:
    """Return the caution on containment, None where no solution flows."""
    if not facts.heap and facts.solution_m3_per_h is None:
        return None
    return Caution(
        "containment",
        "not measured" if facts.solution_m3_per_h is None else "present",
        facts.solution_m3_per_h,
        "m3/h",
        "ponds have to hold operating volume, drain-down, the design storm and freeboard; double "
        "liner with leak detection",
        "",
        _PRACTICE,
        "water and mine permits of the place",
    )
