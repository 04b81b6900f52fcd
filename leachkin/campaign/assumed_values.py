"""What a row of ``[[assumed]]`` does: a prior of the fit, or a row of the register."""

from __future__ import annotations

import re

from leachkin.campaign.schema_tables import SCHEMA
from leachkin.campaign.settings import Group, Setting, Settings
from leachkin.errors import UnitError
from leachkin.problems import Problem, unit_problem
from leachkin.units import convert

_ENERGY = re.compile(r"activation_energy(?:_(film|ash_layer|chemical|gangue))?")
_EXPONENT = re.compile(r"size_exponent_(film|ash_layer|chemical)")
_SHARE = re.compile(r"ultimate(?:_[0-9.e+-]+_(?:mm|K))?|slow_share|soluble_share")


def assumed_in_fit(settings: Settings) -> dict[str, float]:
    """Return the assumed parameters that a fit holds, by name, in the fit's units.

    Activation energies in kJ/mol, size exponents, shares and the reagent order as bare numbers.
    """
    found = {}
    for group in settings.repeated.get("assumed", ()):
        name = _name(group)
        if name is not None and _acts(name) and "value" in group:
            found[name] = _in_unit(name, group["value"])
    return found


def assumed_deviations(settings: Settings) -> dict[str, tuple[float, float]]:
    """Return value and standard deviation of the assumed parameters that have a range.

    The range is a triangle with its peak at the value, as the draws take it; units as in
    :func:`assumed_in_fit`.
    """
    found = {}
    for group in settings.repeated.get("assumed", ()):
        name = _name(group)
        if name is None or not _acts(name) or not {"low", "value", "high"} <= set(group):
            continue
        low, value, high = (_in_unit(name, group[end]) for end in ("low", "value", "high"))
        if high > low:
            squares = low**2 + value**2 + high**2 - low * value - low * high - value * high
            found[name] = (value, (squares / 18.0) ** 0.5)
    return found


def assumed_problems(settings: Settings, file: str) -> tuple[Problem, ...]:
    """Return what is wrong, or should be known, with the rows of ``[[assumed]]``."""
    problems = []
    for group in settings.repeated.get("assumed", ()):
        name = _name(group)
        if name is None:
            continue
        line = group["parameter"].line
        problems += _row_problems(settings, group, name, file, line)
    return tuple(problems)


def _row_problems(
    settings: Settings, group: Group, name: str, file: str, line: int | None
) -> list[Problem]:
    try:
        ends = [_in_unit(name, group[end]) for end in ("low", "value", "high") if end in group]
    except UnitError as error:
        return [unit_problem(error, file=file, row=line, column=f"assumed {name}")]
    if ends != sorted(ends):
        found = f"low, value, high of {name} are {', '.join(f'{end:g}' for end in ends)}"
        return [
            Problem(
                file, line, "assumed", "stop", found, "low <= value <= high", "put them in order"
            )
        ]
    dotted = {key for key, _ in SCHEMA.dotted_keys()}
    if name in dotted:
        found = f"{name} is a setting, so this row moves no number"
        return [
            Problem(
                file,
                line,
                "assumed",
                "note",
                found,
                "",
                "write the range at the setting: { value, low, high, source, by }",
            )
        ]
    if name == "reagent_order":
        return _order_problems(settings, group, file, line)
    if not _acts(name):
        return [
            Problem(
                file,
                line,
                "assumed",
                "note",
                f"{name} is in the register and moves no number",
                "activation_energy_chemical, size_exponent_ash_layer, ultimate, reagent_order, ...",
            )
        ]
    return []


def _order_problems(settings: Settings, group: Group, file: str, line: int | None) -> list[Problem]:
    stated = settings.get("fit.reagent_order")
    value = group["value"].value if "value" in group else None
    if isinstance(stated, float) and value is not None and stated != value:
        found = f"reagent_order is {value:g} here and {stated:g} in [fit]"
        return [Problem(file, line, "assumed", "stop", found, "one value", "make them equal")]
    if not settings.has("heap"):
        return []
    found = "the range of reagent_order is in the register and not in the bands"
    return [
        Problem(
            file,
            line,
            "assumed",
            "note",
            found,
            "",
            "the plug-flow heap holds for order 1; test a second strength",
        )
    ]


def _name(group: Group) -> str | None:
    return str(group["parameter"].value) if "parameter" in group else None


def _acts(name: str) -> bool:
    known = (_ENERGY, _EXPONENT, _SHARE)
    return any(one.fullmatch(name) for one in known) or name == "reagent_order"


def _in_unit(name: str, setting: Setting) -> float:
    if _ENERGY.fullmatch(name):
        if not setting.unit:
            raise UnitError(
                f"{setting.value:g} has no unit", "kJ/mol", f'write "{setting.value:g} kJ/mol"'
            )
        return convert(setting.value, setting.unit, "kJ/mol")
    return float(setting.value)


def assumed_priors(settings: Settings) -> dict[str, tuple[float, float]]:
    """Return what is assumed of parameters of the fit, as value and standard deviation.

    The order in the reagent is left out where a heap is planned: plug flow holds for order 1.
    """
    found = assumed_deviations(settings)
    found.pop("activation_energy_gangue", None)
    if settings.has("heap"):
        found.pop("reagent_order", None)
    return found
