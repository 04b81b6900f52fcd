"""The list of rules and the cautions they raise."""

from __future__ import annotations

from collections.abc import Callable

from leachkin.hazards import gas_rules, reagent_rules, site_rules
from leachkin.hazards.caution import Caution
from leachkin.hazards.facts import Facts

#: Every rule gives a caution, or None where its hazard has no part in the circuit.
RULES: tuple[Callable[[Facts], Caution | None], ...] = (
    gas_rules.hydrogen_cyanide,
    gas_rules.arsine,
    gas_rules.stibine,
    gas_rules.hydrogen,
    site_rules.strong_acid,
    gas_rules.carbon_dioxide,
    gas_rules.hydrogen_sulphide,
    reagent_rules.ammonia,
    reagent_rules.sulphur_dioxide,
    reagent_rules.chlorine,
    site_rules.zinc_dust,
    site_rules.mercury,
    site_rules.open_water,
    site_rules.heap_stability,
    site_rules.containment,
)
_ORDER = {"present": 0, "not measured": 1, "below limit": 2}


def cautions(facts: Facts) -> tuple[Caution, ...]:
    """Return the cautions that the facts raise: present first, then not measured, then below.

    Parameters
    ----------
    facts : Facts

    Returns
    -------
    tuple of Caution
        Hazards that have no part in the circuit are left out.

    Examples
    --------
    >>> found = cautions(Facts(cyanide=True, cyanide_g_per_L=0.5, pH=10.0))
    >>> found[0].name, found[0].state
    ('hydrogen cyanide', 'present')
    """
    raised = [caution for rule in RULES if (caution := rule(facts)) is not None]
    return tuple(sorted(raised, key=lambda caution: _ORDER[caution.state]))
