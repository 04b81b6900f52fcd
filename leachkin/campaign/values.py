"""Reads one value of the campaign file: its kind, its unit, its limits, its range.

Reading raises ``ValueProblem`` with what was found, what is allowed and what to try; the caller
adds file and line.
"""

from __future__ import annotations

import datetime
import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from leachkin.campaign.schema import Key
from leachkin.errors import InputProblems, UnitError, nearest_names
from leachkin.problems import Level, Problem, unit_problem
from leachkin.testwork import read_precision
from leachkin.units import parse_quantity

_RANGE_NAMES = ("value", "low", "high", "source", "by")


class ValueProblem(Exception):  # noqa: N818 - never leaves this layer
    """A value that cannot be read, before its place is known."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        super().__init__(str(problem))


@dataclass(frozen=True)
class Value:
    """A value as read: in the key's unit, with its range where one was stated."""

    value: Any
    low: float | None = None
    high: float | None = None
    source: str = ""
    by: str = ""


def read_value(key: Key, raw: Any, loose: bool = False) -> Value:
    """Return the value of a key in the key's unit.

    Parameters
    ----------
    key : Key
    raw : object
        What the TOML reader found, or text from the command line.
    loose : bool
        True for text from the command line: numbers, lists and yes/no may be text.

    Returns
    -------
    Value

    Raises
    ------
    ValueProblem
        If the value has no meaning for this key.
    """
    try:
        if isinstance(raw, Mapping) and key.kind in _RANGED_KINDS:
            return _read_range(key, raw, loose)
        read = _READERS[key.kind](key, raw, loose)
    except UnitError as error:
        raise ValueProblem(unit_problem(error)) from None
    return Value(read)


def _read_range(key: Key, raw: Mapping[str, Any], loose: bool) -> Value:
    if not key.ranged:
        raise _stop("a range", "one value", "give the value alone; use --vary to compare values")
    for name in raw:
        if name not in _RANGE_NAMES:
            near = nearest_names(name, _RANGE_NAMES)
            raise _stop(
                f"unknown name {name!r}",
                ", ".join(_RANGE_NAMES),
                f"did you mean {near[0]}?" if near else "leave it out",
            )
    if "value" not in raw:
        raise _stop("a range without value", "{ value, low, high, source, by }", "add value")
    if ("low" in raw) != ("high" in raw):
        raise _stop("one end of a range", "low and high, or neither", "add the other end")
    one = _READERS[key.kind]
    value = one(key, raw["value"], loose)
    low, high = (one(key, raw[end], loose) if end in raw else None for end in ("low", "high"))
    if low is not None and high is not None and not low <= value <= high:
        raise _stop(
            f"low {low:g}, value {value:g}, high {high:g}",
            "low <= value <= high",
            "put the ends in order round the value",
        )
    return Value(value, low, high, str(raw.get("source", "")), str(raw.get("by", "")))


def _stop(found: str, allowed: str, try_this: str = "", level: Level = "stop") -> ValueProblem:
    return ValueProblem(Problem("", None, "", level, found, allowed, try_this))


def _text(key: Key, raw: Any, loose: bool) -> str:
    del loose
    if not isinstance(raw, str) or not raw.strip():
        raise _stop(f"{raw!r}", "text in quotes", f'{key.name} = "..."')
    if any(ord(character) < 32 for character in raw):
        raise _stop("a control character in the text", "plain text", "retype it")
    return raw.strip()


def _texts(key: Key, raw: Any, loose: bool) -> tuple[str, ...]:
    if isinstance(raw, str) and raw.strip() and not loose:
        raw = [raw]  # one entry needs no brackets
    items = _items(key, raw, loose)
    return tuple(_text(key, item, loose) for item in items)


def _law(key: Key, raw: Any, loose: bool) -> str:
    """Return a law by the name the program writes."""
    from leachkin.kinetics import canonical_law

    try:
        return canonical_law(_text(key, raw, loose))
    except InputProblems as error:
        problem = error.problems[0]
        if isinstance(problem, Problem):
            raise _stop(problem.found, problem.allowed, problem.try_this) from None
        raise


def _laws(key: Key, raw: Any, loose: bool) -> tuple[str, ...]:
    return tuple(_law(key, item, loose) for item in _items(key, raw, loose))


def _items(key: Key, raw: Any, loose: bool) -> list[Any]:
    if loose and isinstance(raw, str):
        raw = [part.strip() for part in raw.strip("[] ").split(",")]
    if not isinstance(raw, list) or not raw:
        raise _stop(f"{raw!r}", "a list with at least one entry", f"{key.name} = [...]")
    return raw


def _choice(key: Key, raw: Any, loose: bool) -> str:
    del loose
    if isinstance(raw, str) and raw.strip() in key.choices:
        return raw.strip()
    near = nearest_names(str(raw), key.choices)
    hint = f"did you mean {near[0]!r}?" if near else ""
    raise _stop(f"{raw!r}", ", ".join(repr(choice) for choice in key.choices), hint)


def _choices(key: Key, raw: Any, loose: bool) -> tuple[str, ...]:
    return tuple(_choice(key, item, loose) for item in _items(key, raw, loose))


def _boolean(key: Key, raw: Any, loose: bool) -> bool:
    if isinstance(raw, bool):
        return raw
    if loose and isinstance(raw, str) and raw.lower() in ("true", "false"):
        return raw.lower() == "true"
    raise _stop(f"{raw!r}", "true or false", f"{key.name} = true")


def _date(key: Key, raw: Any, loose: bool) -> str:
    del loose
    if isinstance(raw, datetime.datetime):
        return raw.date().isoformat()
    if isinstance(raw, datetime.date):
        return raw.isoformat()
    try:
        return datetime.date.fromisoformat(str(raw)).isoformat()
    except ValueError:
        raise _stop(f"{raw!r}", "a date as year-month-day", f'{key.name} = "2026-01-31"') from None


def _number(key: Key, raw: Any, loose: bool) -> float:
    if loose and isinstance(raw, str):
        try:
            raw = float(raw)
        except ValueError:
            raise _stop(f"{raw!r}", "a number", f"{key.name}=1.5") from None
    if isinstance(raw, bool) or not isinstance(raw, int | float):
        raise _stop(f"{raw!r}", "a number without quotes", f"{key.name} = 1.5")
    return _within(key, float(raw))


def _integer(key: Key, raw: Any, loose: bool) -> int:
    number = _number(key, raw, loose)
    if number != int(number):
        raise _stop(f"{raw!r}", "a whole number", f"{key.name} = {round(number)}")
    return int(number)


def _fraction(key: Key, raw: Any, loose: bool) -> float:
    del loose
    if isinstance(raw, bool) or not isinstance(raw, int | float | str):
        raise _stop(f"{raw!r}", "a fraction", f'{key.name} = 0.95 or "95 %"')
    number = parse_quantity(str(raw), "1") if isinstance(raw, str) else float(raw)
    if isinstance(raw, int | float) and number > 1.0 and key.at_most == 1.0:
        raise _stop(f"{raw!r}", "0 to 1, or text with %", f'{key.name} = "{raw:g} %"')
    return _within(key, number)


def _quantity(key: Key, raw: Any, loose: bool) -> float:
    del loose
    if isinstance(raw, bool) or not isinstance(raw, int | float | str):
        raise _stop(f"{raw!r}", "a number and a unit", f'{key.name} = "1 {key.unit}"')
    text = raw if isinstance(raw, str) else f"{raw:g}"
    return _within(key, parse_quantity(text, key.unit))


def _within(key: Key, number: float) -> float:
    unit = "" if key.unit in ("", "1") else f" {key.unit}"
    if not math.isfinite(number):
        raise _stop(f"{number}", "a finite number", "retype it")
    if key.above is not None and not number > key.above:
        raise _stop(f"{number:g}{unit}", f"above {key.above:g}{unit}", "check sign and unit")
    if key.at_least is not None and number < key.at_least:
        raise _stop(f"{number:g}{unit}", f"{key.at_least:g}{unit} or more", "check sign and unit")
    if key.at_most is not None and number > key.at_most:
        raise _stop(f"{number:g}{unit}", f"{key.at_most:g}{unit} or less", "check the unit")
    return number


def _precision(key: Key, raw: Any, loose: bool) -> tuple[float, float]:
    """Return (floor, proportional): the floor in the key's unit, the part as a fraction."""
    del loose
    if not isinstance(raw, str):
        raise _stop(f"{raw!r}", f'"1.5 %" or "1.5 % + 0.002 {key.unit}"', f'{key.name} = "1.5 %"')
    floor, part = read_precision(raw, key.unit)
    if not (part < 1.0 and floor + part > 0.0):
        raise _stop(f"{raw!r}", "above zero and below 100 %", f'{key.name} = "1.5 %"')
    return floor, part


def _choice_or(other: Callable[[Key, Any, bool], Any]) -> Callable[[Key, Any, bool], Any]:
    def read(key: Key, raw: Any, loose: bool) -> Any:
        if isinstance(raw, str) and raw.strip() in key.choices:
            return raw.strip()
        if isinstance(raw, str) and not any(character.isdigit() for character in raw):
            return _choice(key, raw, loose)
        return other(key, raw, loose)

    return read


def _number_or_quantity(key: Key, raw: Any, loose: bool) -> tuple[float, str]:
    """Return the number and its unit as written; the parameter's name decides what fits."""
    if isinstance(raw, str) and raw.strip():
        number, _, unit = raw.strip().partition(" ")
        try:
            return _within(key, float(number)), unit.strip()
        except ValueError:
            raise _stop(f"{raw!r}", "a number and a unit", 'value = "40 kJ/mol"') from None
    return _number(key, raw, loose), ""


def _many(one: Callable[[Key, Any, bool], float]) -> Callable[[Key, Any, bool], Any]:
    def read(key: Key, raw: Any, loose: bool) -> tuple[float, ...]:
        return tuple(one(key, item, loose) for item in _items(key, raw, loose))

    return read


_READERS: dict[str, Callable[[Key, Any, bool], Any]] = {
    "text": _text,
    "texts": _texts,
    "law": _law,
    "laws": _laws,
    "choice": _choice,
    "choices": _choices,
    "boolean": _boolean,
    "integer": _integer,
    "number": _number,
    "numbers": _many(_number),
    "fraction": _fraction,
    "fractions": _many(_fraction),
    "quantity": _quantity,
    "quantities": _many(_quantity),
    "precision": _precision,
    "date": _date,
    "choice or number": _choice_or(_number),
    "choice or fraction": _choice_or(_fraction),
    "choice or quantity": _choice_or(_quantity),
    "number or quantity": _number_or_quantity,
}

_RANGED_KINDS = ("number", "fraction", "quantity")
