"""A figure with its band, and what the band holds."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def plain_number(value: Any) -> float | None:
    """Return a float for JSON, or None where the number is missing or not finite."""
    if value is None:
        return None
    number = float(value)
    return number if math.isfinite(number) else None


@dataclass(frozen=True)
class Quantity:
    """A figure with its unit and, where draws exist, its band.

    Attributes
    ----------
    value : float or None
    unit : str
    low, high : float or None
        Ends of the central band at ``level``; None without a band.
    level : float or None
    """

    value: float | None
    unit: str
    low: float | None = None
    high: float | None = None
    level: float | None = None

    def to_dict(self) -> dict[str, Any]:
        """Return the quantity for JSON; what is not finite becomes null."""
        return {
            "value": plain_number(self.value),
            "unit": self.unit,
            "low": plain_number(self.low),
            "high": plain_number(self.high),
            "level": self.level,
        }


@dataclass(frozen=True)
class Band:
    """A curve with its band.

    Attributes
    ----------
    value : ndarray, shape (t,)
    unit : str
    low, high : ndarray, shape (t,), or None
        Ends of the central band at ``level``; None without draws.
    level : float or None
    """

    value: Array
    unit: str
    low: Array | None = None
    high: Array | None = None
    level: float | None = None

    def at(self, index: int) -> Quantity:
        """Return one point of the curve."""
        low, high = (None if end is None else float(end[index]) for end in (self.low, self.high))
        return Quantity(float(self.value[index]), self.unit, low, high, self.level)


def band_of(value: Any, draws: Any | None, unit: str, level: float) -> Band:
    """Return a curve with its central band from draws.

    Parameters
    ----------
    value : array_like, shape (t,)
    draws : array_like, shape (n, t), or None
    unit : str
    level : float
        Share of the draws inside, as 0.95.
    """
    curve = np.atleast_1d(np.asarray(value, dtype=float))
    if draws is None or np.ndim(draws) < 2:
        return Band(curve, unit)
    low, high = np.quantile(np.asarray(draws, dtype=float), _ends(level), axis=0)
    return Band(curve, unit, low, high, level)


def quantity_of(value: Any, draws: Any | None, unit: str, level: float) -> Quantity:
    """Return one figure with its central band from draws of shape (n,)."""
    if value is None:
        return Quantity(None, unit)
    if draws is None or np.ndim(draws) == 0:
        return Quantity(float(value), unit)
    low, high = np.quantile(np.asarray(draws, dtype=float), _ends(level))
    return Quantity(float(value), unit, float(low), float(high), level)


def _ends(level: float) -> tuple[float, float]:
    return 0.5 * (1.0 - level), 0.5 * (1.0 + level)


def in_words(quantity: Quantity, scale: float = 1.0, digits: int = 3) -> str:
    """Return a figure as people read it: ``69.7 (62.1 to 75.0)``.

    Examples
    --------
    >>> in_words(Quantity(0.697, "1", 0.62, 0.75, 0.95), scale=100)
    '69.7 (62 to 75)'
    """
    if quantity.value is None:
        return "not known"
    text = f"{quantity.value * scale:.{digits}g}"
    if quantity.low is None or quantity.high is None:
        return text
    return f"{text} ({quantity.low * scale:.{digits}g} to {quantity.high * scale:.{digits}g})"


def listed(words: Sequence[str]) -> str:
    """Return words as a list in a sentence.

    Examples
    --------
    >>> listed(["fit", "scale-up ranges"])
    'fit and scale-up ranges'
    """
    if len(words) < 2:
        return "".join(words)
    return f"{', '.join(words[:-1])} and {words[-1]}"
