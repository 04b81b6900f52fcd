"""Laws of a concentration that falls onto a precipitant: share left against ``theta = k t``.

======================  ============================================  ==========================
name                    share left                                    where
======================  ============================================  ==========================
first_order             exp(-theta)                                   transport to an even area
two_stage               exp(-theta), past the break ``ratio`` times   the deposit roughens or
                        as fast                                       seals
growing_area            exp(-theta^power)                             the area grows with it
back_dissolution        dc/dtheta = -c + back (1 - c): a floor        the deposit dissolves again
back_dissolution+fade   the same, k fading as exp(-fade theta):       the precipitant runs down:
                        falls, then rises                             longer contact can hurt
======================  ============================================  ==========================
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.errors import InputProblems
from leachkin.inference import Scale
from leachkin.problems import unknown_name

Array = NDArray[np.float64]
Shapes = Mapping[str, Array]

#: Panels and nodes of the quadrature of the fading law.
_PANELS, _NODES = 24, 12
_COMPLEX_STEP = 1e-30
_LARGEST = 700.0


@dataclass(frozen=True)
class Shape:
    """A dimensionless quantity of a law beside its clock.

    Attributes
    ----------
    name : str
    scale : "log" or "linear"
        On which it is fitted.
    starts : tuple of float
        Values to start a fit from.
    low, high : float
        Range looked through.
    """

    name: str
    scale: Scale
    starts: tuple[float, ...]
    low: float
    high: float


@dataclass(frozen=True)
class RateForm:
    """One law.

    Attributes
    ----------
    name : str
    words : str
    shapes : tuple of Shape
    left : callable (theta, shapes) -> share left, its slope in theta, its slope in each shape
    """

    name: str
    words: str
    shapes: tuple[Shape, ...]
    left: Callable[[Array, Shapes], tuple[Array, Array, dict[str, Array]]]


def _first_order(theta: Array, shapes: Shapes) -> tuple[Array, Array, dict[str, Array]]:
    del shapes
    left = np.exp(-np.minimum(theta, _LARGEST))
    return left, -left, {}


def _two_stage(theta: Array, shapes: Shapes) -> tuple[Array, Array, dict[str, Array]]:
    ratio, turn = shapes["ratio"], shapes["break"]
    late = theta > turn
    beyond = np.where(late, theta - turn, 0.0)
    depth = np.where(late, turn + ratio * beyond, theta)
    left = np.exp(-np.minimum(depth, _LARGEST))
    slopes = {
        "ratio": -left * beyond,
        "break": -left * np.where(late, 1.0 - ratio, 0.0),
    }
    return left, -left * np.where(late, ratio, 1.0), slopes


def _growing_area(theta: Array, shapes: Shapes) -> tuple[Array, Array, dict[str, Array]]:
    power = shapes["power"]
    ln_theta = np.log(np.maximum(theta, 1e-300))
    depth = np.where(theta > 0.0, np.exp(np.minimum(power * ln_theta, 690.0)), 0.0)
    left = np.exp(-np.minimum(depth, _LARGEST))
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = np.where(theta > 0.0, -left * power * depth / theta, 0.0)
    return left, slope, {"power": np.where(theta > 0.0, -left * depth * ln_theta, 0.0)}


def _back_dissolution(theta: Array, shapes: Shapes) -> tuple[Array, Array, dict[str, Array]]:
    back = shapes["back"]
    floor, speed = back / (1.0 + back), 1.0 + back
    gone = np.exp(-np.minimum(speed * theta, _LARGEST))
    left = floor + (1.0 - floor) * gone
    slope = -(1.0 - floor) * speed * gone
    by_back = (1.0 - gone) / speed**2 - (1.0 - floor) * theta * gone
    return left, slope, {"back": by_back}


def _fading(theta: Array, shapes: Shapes) -> tuple[Array, Array, dict[str, Array]]:
    back, fade = np.broadcast_arrays(shapes["back"], shapes["fade"])
    shape = np.broadcast_shapes(theta.shape, back.shape)
    at = np.broadcast_to(theta, shape)
    back, fade = np.broadcast_to(back, shape), np.broadcast_to(fade, shape)
    left = _fading_left(at, back, fade)
    slope = -left * np.exp(-np.minimum(fade * at, _LARGEST)) + back * (1.0 - left)
    step = 1j * _COMPLEX_STEP
    slopes = {
        "back": _fading_left(at, back + step, fade).imag / _COMPLEX_STEP,
        "fade": _fading_left(at, back, fade + step).imag / _COMPLEX_STEP,
    }
    return np.asarray(left.real), np.asarray(slope.real), slopes


def _fading_left(theta: Array, back: Any, fade: Any) -> Any:
    """Share left where ``dc/dtheta = -c exp(-fade theta) + back (1 - c)``, by its integral.

    Works in complex numbers too, which gives its slopes to rounding.
    """
    at, weight = _quadrature()
    inner = theta[..., None] * at
    wide = [np.asarray(value)[..., None] for value in (theta, back, fade)]
    memory = (np.exp(-_decay(inner, *wide)) * weight).sum(axis=-1)
    none = np.zeros(theta.shape)
    return np.exp(-_decay(none, theta, back, fade)) + back * theta * memory


@cache
def _quadrature() -> tuple[Array, Array]:
    """Nodes and weights on 0 to 1, closer to the end, where the memory of what dissolved is."""
    nodes, weights = np.polynomial.legendre.leggauss(_NODES)
    edges = 1.0 - np.linspace(1.0, 0.0, _PANELS + 1) ** 3
    widths = np.diff(edges)
    at = edges[:-1, None] + widths[:, None] * 0.5 * (nodes + 1.0)
    return at.ravel(), (widths[:, None] * 0.5 * weights).ravel()


def _decay(at: Any, theta: Any, back: Any, fade: Any) -> Any:
    """Loss of memory between two clock readings: deposition and back-dissolution together."""
    far = fade * (theta - at)
    small = np.abs(far) < 1e-8
    held = np.where(small, 1.0, far)
    share = np.where(small, 1.0 - 0.5 * far, -np.expm1(-held) / held)
    return (theta - at) * (np.exp(-fade * at) * share + back)


#: A ratio of stages below 1 seals, above 1 speeds.
_RATIO = Shape("ratio", "log", (3.0, 0.4), 0.02, 50.0)
_BREAK = Shape("break", "log", (0.3, 0.8, 1.8), 0.02, 20.0)
_POWER = Shape("power", "log", (1.0, 1.6), 0.2, 5.0)
_BACK = Shape("back", "log", (0.02, 0.2), 1e-6, 10.0)
_FADE = Shape("fade", "log", (0.05, 0.4), 1e-6, 10.0)

FORMS: dict[str, RateForm] = {
    form.name: form
    for form in (
        RateForm("first_order", "first order", (), _first_order),
        RateForm("two_stage", "two stages with a break", (_BREAK, _RATIO), _two_stage),
        RateForm("growing_area", "an area that grows", (_POWER,), _growing_area),
        RateForm("back_dissolution", "back-dissolution", (_BACK,), _back_dissolution),
        RateForm(
            "back_dissolution+fade",
            "back-dissolution while the precipitant fades",
            (_BACK, _FADE),
            _fading,
        ),
    )
}
CEMENTATION_LAWS = tuple(FORMS)
#: What each larger law becomes for some value of its extra quantities.
CONTAINED = {
    ("first_order", "two_stage"),
    ("first_order", "growing_area"),
    ("first_order", "back_dissolution"),
    ("first_order", "back_dissolution+fade"),
    ("back_dissolution", "back_dissolution+fade"),
}


def rate_form(law: str) -> RateForm:
    """Return a law by name.

    Raises
    ------
    InputProblems
        If it is unknown; the nearest are named.
    """
    name = law.strip().lower().replace(" ", "_").replace("-", "_")
    if name not in FORMS:
        raise InputProblems([unknown_name("cementation law", law, FORMS, column="law")])
    return FORMS[name]


def share_left(law: str, theta: ArrayLike, shapes: Mapping[str, ArrayLike] | None = None) -> Array:
    """Return the share of a metal left in solution.

    Parameters
    ----------
    law : str
        One of :data:`CEMENTATION_LAWS`.
    theta : array_like
        k t, not negative.
    shapes : mapping of str to array_like
        "break" and "ratio"; "power"; "back"; "fade"; broadcast with theta.

    Returns
    -------
    ndarray, of the broadcast shape

    Raises
    ------
    InputProblems
        If the law is unknown.

    Examples
    --------
    >>> share_left("two_stage", [1.0, 2.0], {"break": 1.0, "ratio": 3.0}).round(4).tolist()
    [0.3679, 0.0183]
    """
    given = {name: np.asarray(v, dtype=np.float64) for name, v in (shapes or {}).items()}
    return rate_form(law).left(np.asarray(theta, dtype=np.float64), given)[0]
