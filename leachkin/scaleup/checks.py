"""What plant functions check of their arguments, and how they bring them to one batch shape."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics import ReagentDemand
from leachkin.problems import argument_error

Array = NDArray[np.float64]


def finite(name: str, value: ArrayLike) -> Array:
    """Return an argument as an array of finite numbers.

    Raises
    ------
    InputProblems
        If it is not numbers, or one is missing or infinite.
    """
    try:
        array = np.asarray(value, dtype=np.float64)
    except (TypeError, ValueError):
        raise argument_error(name, f"{value!r}", "numbers", "give a number or an array") from None
    if not np.all(np.isfinite(array)):
        wrong = array[~np.isfinite(array)].flat[0]
        raise argument_error(
            name, f"{wrong}", "finite numbers", "leave out or fill in what is missing"
        )
    return array


def above_zero(name: str, value: ArrayLike, unit: str) -> Array:
    """Return an argument as an array of numbers above zero.

    Raises
    ------
    InputProblems
        If one is zero, negative or not finite.
    """
    return _bounded(name, finite(name, value), 0.0, np.inf, unit, open_below=True)


def not_negative(name: str, value: ArrayLike, unit: str) -> Array:
    """Return an argument as an array of numbers not below zero.

    Raises
    ------
    InputProblems
        If one is negative or not finite.
    """
    return _bounded(name, finite(name, value), 0.0, np.inf, unit)


def share(name: str, value: ArrayLike) -> Array:
    """Return an argument as an array of fractions above 0 and up to 1.

    Raises
    ------
    InputProblems
        If one lies outside.
    """
    return _bounded(name, finite(name, value), 0.0, 1.0, "", open_below=True)


def at_least(name: str, value: ArrayLike, low: float, unit: str) -> Array:
    """Return an argument as an array of numbers not below a limit.

    Raises
    ------
    InputProblems
        If one lies below or is not finite.
    """
    return _bounded(name, finite(name, value), low, np.inf, unit)


def _bounded(
    name: str, array: Array, low: float, high: float, unit: str, *, open_below: bool = False
) -> Array:
    outside = (array <= low if open_below else array < low) | (array > high)
    if not np.any(outside):
        return array
    wrong = array[outside].flat[0]
    end = f" and up to {high:g}" if np.isfinite(high) else ""
    allowed = f"{'above' if open_below else 'at least'} {low:g}{end} {unit}".rstrip()
    hint = "a percentage is written as a fraction here: 85 % is 0.85" if high == 1.0 else ""
    if name.endswith("_h") or unit in ("m", "L/h/m2"):
        hint = "check the sign and the unit"
    raise argument_error(name, f"{wrong:g} {unit}".rstrip(), allowed, hint)


def batch_shape(shapes: Mapping[str, tuple[int, ...]]) -> tuple[int, ...]:
    """Return the one batch shape, () or (n,), that all arguments agree on.

    Parameters
    ----------
    shapes : mapping of argument name to batch shape

    Raises
    ------
    InputProblems
        If two arguments carry different numbers of sets, or one has more than one batch axis.
    """
    found = {name: shape for name, shape in shapes.items() if shape}
    lengths = {shape for shape in found.values() if shape != (1,)} or set(found.values())
    if len(lengths) <= 1 and all(len(shape) == 1 for shape in lengths):
        return next(iter(lengths), ())
    listed = ", ".join(f"{name} {shape}" for name, shape in found.items())
    raise argument_error(
        "batch",
        listed,
        "single numbers, or one array of n sets each, n the same for all",
        "draw every parameter with the same number of draws",
    )


def demand_shape(demand: ReagentDemand) -> tuple[int, ...]:
    """Return the batch shape of a demand."""
    return np.broadcast_shapes(*(np.shape(value) for value in vars(demand).values()))


def flat(array: Array, n: int, tail: int = 0) -> Array:
    """Return an array of batch shape () or (n,) with ``tail`` further axes as one with (n,)."""
    lead = array if array.ndim > tail else array[None]
    return np.ascontiguousarray(np.broadcast_to(lead, (n, *lead.shape[1:])))


def several(count: int, of: int, what: str) -> str:
    """Return "in 3 of 400 draws: WHAT", or WHAT alone where there is one set."""
    return what if of == 1 else f"in {count} of {of} draws: {what}"


def listed(names: Sequence[str]) -> str:
    """Return "a", "a and b" or "a, b and c"."""
    return " and ".join([", ".join(names[:-1]), names[-1]]) if len(names) > 1 else "".join(names)
