"""What a row of ``[[assumed]]`` does: hold a parameter of the fit, or stand in the register."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from leachkin.campaign.schema_tables import SCHEMA
from leachkin.campaign.settings import Group, Setting, Settings, draw_setting
from leachkin.errors import UnitError
from leachkin.kinetics import RateLaw
from leachkin.problems import Problem, unit_problem
from leachkin.units import convert

_ENERGY = re.compile(r"activation_energy(?:_(film|ash_layer|chemical|gangue))?")
_EXPONENT = re.compile(r"size_exponent_(film|ash_layer|chemical)")


def assumed_in_fit(settings: Settings) -> dict[str, float]:
    """Return the assumed parameters that a fit holds, by name, in the fit's units.

    Activation energies in kJ/mol, size exponents and the reagent order as bare numbers.
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
                "activation_energy_chemical, size_exponent_ash_layer, reagent_order, ...",
            )
        ]
    return []


def _order_problems(settings: Settings, group: Group, file: str, line: int | None) -> list[Problem]:
    stated = settings.get("fit.reagent_order")
    value = group["value"].value if "value" in group else None
    if isinstance(stated, float) and value is not None and stated != value:
        found = f"reagent_order is {value:g} here and {stated:g} in [fit]"
        return [Problem(file, line, "assumed", "stop", found, "one value", "make them equal")]
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
    return bool(_ENERGY.fullmatch(name) or _EXPONENT.fullmatch(name)) or name == "reagent_order"


def _in_unit(name: str, setting: Setting) -> float:
    if _ENERGY.fullmatch(name):
        if not setting.unit:
            raise UnitError(
                f"{setting.value:g} has no unit", "kJ/mol", f'write "{setting.value:g} kJ/mol"'
            )
        return convert(setting.value, setting.unit, "kJ/mol")
    return float(setting.value)


def with_assumed_ranges(law: RateLaw, settings: Settings, count: int, seed: int) -> RateLaw:
    """Return draws of a law with the assumed activation energies drawn over their ranges."""
    draws = _energy_draws(settings, count, seed)
    if not draws:
        return law
    changed = []
    for one in law.resistances:
        name = "activation_energy" if one.kind == "clock" else f"activation_energy_{one.kind}"
        drawn = draws.get(name)
        changed.append(one if drawn is None else replace(one, activation_energy_kJ_per_mol=drawn))
    return replace(law, resistances=tuple(changed))


def drawn_energies(settings: Settings) -> tuple[str, ...]:
    """Return the names of the assumed activation energies that have a range."""
    return tuple(_energy_draws(settings, 1, 0))


def _energy_draws(settings: Settings, count: int, seed: int) -> Mapping[str, Any]:
    found: dict[str, Any] = {}
    for group in settings.repeated.get("assumed", ()):
        name = _name(group)
        if name is None or not _ENERGY.fullmatch(name) or not {"low", "high"} <= set(group):
            continue
        low, value, high = (_in_unit(name, group[end]) for end in ("low", "value", "high"))
        setting = Setting(f"assumed.{name}", value, "kJ/mol", low, high)
        if setting.has_range:
            found[name] = draw_setting(setting, count, seed)
    return found
