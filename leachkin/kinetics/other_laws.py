"""Laws by name, and those with one clock: conversion against a dimensionless time theta = k t.

Each form stands under its published name with its own convention for k. These laws carry no
theory for grain size or reagent strength, except where :data:`THEORY_SIZE_EXPONENT` says so.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike

from leachkin.kinetics.grain_shapes import Array
from leachkin.problems import argument_error, stop_if_any, unknown_name

Shapes = Mapping[str, Array]

#: Particle laws by name and the resistances each holds.
PARTICLE_TERMS: dict[str, tuple[str, ...]] = {
    "film": ("film",),
    "ash_layer": ("ash_layer",),
    "chemical": ("chemical",),
    "film+ash_layer": ("film", "ash_layer"),
    "film+chemical": ("film", "chemical"),
    "ash_layer+chemical": ("ash_layer", "chemical"),
    "series": ("film", "ash_layer", "chemical"),
}
#: Conversion at which an endless law counts as complete is 1 - this.
END_GAP = 1e-12
#: No ore curve is tabulated beyond this many time constants.
LONGEST_THETA = 1e4
_TINY = 1e-300


@dataclass(frozen=True)
class ClockForm:
    """One law of one clock.

    Attributes
    ----------
    conversion : callable (theta, shapes) -> X
    log_slope : callable (theta, shapes) -> dX/d ln theta
    shape_slopes : callable (theta, shapes) -> {name: dX/d shape}
    inverse : callable (X, shapes) -> theta
    ends_at : theta of complete conversion, infinite where it is only approached
    shape_names : tuple of str
    """

    conversion: Callable[[Array, Shapes], Array]
    log_slope: Callable[[Array, Shapes], Array]
    inverse: Callable[[Array, Shapes], Array]
    ends_at: Callable[[Shapes], Array]
    shape_slopes: Callable[[Array, Shapes], dict[str, Array]] = lambda _theta, _shapes: {}
    shape_names: tuple[str, ...] = ()


def conversion_of_clock(name: str, theta: ArrayLike, shape_parameters: Shapes) -> Array:
    """Return the conversion of a one-clock law.

    Parameters
    ----------
    name : str
        One of :data:`CLOCK_LAWS`.
    theta : array_like
        k t, not negative.
    shape_parameters : mapping of str to ndarray
        Broadcast with theta; the names of :data:`SHAPE_PARAMETERS`.

    Returns
    -------
    ndarray, of the broadcast shape

    Notes
    -----
    ====================  ======================================================  ==============
    name                  law                                                     source
    ====================  ======================================================  ==============
    shrinking_film        X = 1 - (1 - theta)^(3/2), small grains without ash     Levenspiel 1999
    first_order           X = 1 - exp(-theta)                                     Levenspiel 1999
    second_order          X = theta / (1 + theta)                                 Ho & McKay 1999
    two_rate              X = s (1 - exp(-r theta)) + (1 - s)(1 - exp(-theta))    parallel sum
    avrami                X = 1 - exp(-theta^n), theta = k t                      Avrami 1939
    elovich               X = slope ln(1 + theta), at most 1                      Elovich
    jander                (1 - (1-X)^(1/3))^2 = theta                             Jander 1927
    zlt                   ((1-X)^(-1/3) - 1)^2 = theta                            Zhuravlev 1948
    interface_diffusion   ln(1-X)/3 + (1-X)^(-1/3) - 1 = theta                    Dickinson 1999
    ====================  ======================================================  ==============

    Raises
    ------
    InputProblems
        For an unknown law, a missing shape parameter or one outside its range.

    Examples
    --------
    >>> float(conversion_of_clock("second_order", 1.0, {}))
    0.5
    """
    form, at, shapes = _checked(name, theta, shape_parameters)
    return form.conversion(at, shapes)


def clock_conversion_and_sensitivities(
    name: str, theta: ArrayLike, shape_parameters: Shapes
) -> tuple[Array, Array, dict[str, Array]]:
    """Return X, dX/dtheta and {shape parameter: dX/d parameter} of a one-clock law.

    Arguments and errors as :func:`conversion_of_clock`. Where the slope is infinite at theta 0
    it is given at theta 1e-300: large and finite, so that theta * slope is the right 0.
    """
    form, at, shapes = _checked(name, theta, shape_parameters)
    floor = np.maximum(at, _TINY)
    slope = form.log_slope(floor, shapes) / floor
    return form.conversion(at, shapes), slope, form.shape_slopes(at, shapes)


def clock_of_conversion(name: str, conversion: ArrayLike, shape_parameters: Shapes) -> Array:
    """Return theta at a conversion.

    Raises
    ------
    InputProblems
        As :func:`conversion_of_clock`, or if a conversion lies outside 0 to 1, or is 1 in a law
        that only approaches it.
    """
    form, x, shapes = _checked(name, conversion, shape_parameters, "conversion")
    endless = ~np.isfinite(form.ends_at(shapes))
    if np.any(x > 1.0) or np.any((x >= 1.0) & endless):
        raise argument_error(
            "conversion", f"{np.max(x):g}", f"from 0 to 1; law {name} may only approach 1"
        )
    return form.inverse(x, shapes)


def end_of_clock(name: str, shape_parameters: Shapes) -> Array:
    """Return theta at complete conversion (to 1e-12), or :data:`LONGEST_THETA` if that is less."""
    form, _, shapes = _checked(name, 0.0, shape_parameters)
    exact = form.ends_at(shapes)
    near = form.inverse(np.asarray(1.0 - END_GAP), shapes)
    return np.minimum(np.where(np.isfinite(exact), exact, near), LONGEST_THETA)


def law_terms(name: str) -> tuple[str, ...]:
    """Return the resistances of a law, ``("clock",)`` for one with one clock.

    Examples
    --------
    >>> law_terms("chemical + ash_layer")
    ('ash_layer', 'chemical')
    >>> law_terms("avrami")
    ('clock',)
    """
    return PARTICLE_TERMS.get(canonical_law(name), ("clock",))


def canonical_law(name: str) -> str:
    """Return the law name as the program writes it; sums may come in any order.

    Raises
    ------
    InputProblems
        For an unknown name, with the nearest known ones.
    """
    words = [word.strip() for word in name.split("+")]
    for known, terms in PARTICLE_TERMS.items():
        if sorted(words) == sorted(terms):
            return known
    if name.strip() not in LAW_NAMES:
        stop_if_any([unknown_name("law", name, LAW_NAMES, column="law")])
    return name.strip()


@dataclass(frozen=True, eq=False)
class ClockLaw:
    """A one-clock law with its time constants; the counterpart of ParticleLaw.

    The state of a grain, its depth, is here the reading of its clock, theta.

    Attributes
    ----------
    name : str
    tau : ndarray, shape B
        1/k, above 0.
    shape_parameters : mapping of str to ndarray, shape B or ()
    """

    name: str
    tau: Array
    shape_parameters: Shapes = field(default_factory=dict)

    @property
    def batch_shape(self) -> tuple[int, ...]:
        """Shape B of the time constants."""
        return np.shape(self.tau)

    @property
    def complete_at(self) -> Array:
        """Time at which the law counts as complete, shape B."""
        return np.asarray(end_of_clock(self.name, self.shape_parameters) * self.tau)

    def conversion(self, time: ArrayLike) -> Array:
        """Return the conversion after a time; shapes as in ParticleLaw."""
        theta, shapes = self._theta(time)
        return conversion_of_clock(self.name, theta, shapes)

    def rate_of_time(self, time: ArrayLike) -> Array:
        """Return dX/dt after a time; shapes as conversion."""
        theta, shapes = self._theta(time)
        tau = self.tau[..., None] if np.ndim(time) else self.tau
        return clock_conversion_and_sensitivities(self.name, theta, shapes)[1] / tau

    def advanced(self, depth: ArrayLike, duration: ArrayLike) -> Array:
        """Return the clock reading after some more time, element by element."""
        return np.asarray(depth, dtype=float) + np.asarray(duration, dtype=float) / self.tau

    def conversion_of_depth(self, depth: ArrayLike) -> Array:
        """Return the conversion at a clock reading."""
        return conversion_of_clock(self.name, depth, self.shape_parameters)

    def _theta(self, time: ArrayLike) -> tuple[Array, Shapes]:
        at = np.asarray(time, dtype=float)
        if at.ndim == 0:
            return at / self.tau, self.shape_parameters
        shapes = {
            name: value[..., None] if np.ndim(value) else np.asarray(value)
            for name, value in self.shape_parameters.items()
        }
        return at / self.tau[..., None], shapes


def _checked(
    name: str, values: ArrayLike, shape_parameters: Shapes, what: str = "theta"
) -> tuple[ClockForm, Array, Shapes]:
    if name not in CLOCK_LAWS:
        stop_if_any([unknown_name("law", name, CLOCK_LAWS, column="law")])
    form = CLOCK_LAWS[name]
    array = np.asarray(values, dtype=float)
    if not np.all(np.isfinite(array)) or np.any(array < 0.0):
        raise argument_error(what, "a value below 0 or not finite", "finite numbers from 0 up")
    if set(shape_parameters) != set(form.shape_names):
        raise argument_error(
            "shape_parameters",
            f"{', '.join(shape_parameters) or 'none'} for law {name}",
            ", ".join(form.shape_names) or "none",
        )
    shapes = {key: np.asarray(value, dtype=float) for key, value in shape_parameters.items()}
    for key, value in shapes.items():
        low, high = _SHAPE_RANGE[key]
        if not np.all(np.isfinite(value)) or np.any(value < low) or np.any(value > high):
            raise argument_error(key, f"{np.ravel(value)[0]:g}", f"from {low:g} to {high:g}")
    return form, array, shapes


def _never(_shapes: Shapes) -> Array:
    return np.asarray(np.inf)


def _at_one(_shapes: Shapes) -> Array:
    return np.asarray(1.0)


def _shrinking_film(theta: Array, _s: Shapes) -> Array:
    inside = np.minimum(theta, 0.5)
    early = -np.expm1(1.5 * np.log1p(-inside))
    return np.where(theta < 0.5, early, 1.0 - np.maximum(1.0 - theta, 0.0) ** 1.5)


def _shrinking_film_slope(theta: Array, _s: Shapes) -> Array:
    return 1.5 * theta * np.sqrt(np.maximum(1.0 - theta, 0.0))


def _one_minus_root(conversion: Array, power: float) -> Array:
    """1 - (1 - X)^power, accurate at both ends."""
    inside = np.minimum(conversion, 0.5)
    early = -np.expm1(power * np.log1p(-inside))
    return np.where(conversion < 0.5, early, 1.0 - np.maximum(1.0 - conversion, 0.0) ** power)


def _two_rate(theta: Array, s: Shapes) -> Array:
    share, ratio = s["fast_share"], s["ratio"]
    return -share * np.expm1(-ratio * theta) - (1.0 - share) * np.expm1(-theta)


def _two_rate_slope(theta: Array, s: Shapes) -> Array:
    share, ratio = s["fast_share"], s["ratio"]
    fast = share * ratio * np.exp(-ratio * theta)
    return theta * (fast + (1.0 - share) * np.exp(-theta))


def _two_rate_shapes(theta: Array, s: Shapes) -> dict[str, Array]:
    share, ratio = s["fast_share"], s["ratio"]
    by_share = np.expm1(-theta) - np.expm1(-ratio * theta)
    return {"fast_share": by_share, "ratio": share * theta * np.exp(-ratio * theta)}


def _two_rate_inverse(conversion: Array, s: Shapes) -> Array:
    """Halve a bracket in ln theta between the two single rates, then Newton."""
    single = -np.log1p(-np.minimum(conversion, 1.0 - 1e-16))
    ratio = np.maximum(s["ratio"], 1.0)
    low, high, x = np.broadcast_arrays(single / ratio, single, conversion)
    for _ in range(60):
        middle = 0.5 * (low + high)
        above = _two_rate(middle, s) > x
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    return np.where(x > 0.0, 0.5 * (low + high), 0.0)


def _avrami(theta: Array, s: Shapes) -> Array:
    return -np.expm1(-(theta ** s["n"]))


def _avrami_slope(theta: Array, s: Shapes) -> Array:
    power = theta ** s["n"]
    return s["n"] * power * np.exp(-power)


def _avrami_shapes(theta: Array, s: Shapes) -> dict[str, Array]:
    power = theta ** s["n"]
    return {"n": power * np.exp(-power) * np.log(np.where(theta > 0.0, theta, 1.0))}


def _elovich(theta: Array, s: Shapes) -> Array:
    return np.minimum(s["slope"] * np.log1p(theta), 1.0)


def _elovich_slope(theta: Array, s: Shapes) -> Array:
    running = s["slope"] * np.log1p(theta) < 1.0
    return np.where(running, s["slope"] * theta / (1.0 + theta), 0.0)


def _elovich_shapes(theta: Array, s: Shapes) -> dict[str, Array]:
    grown = np.log1p(theta)
    return {"slope": np.where(s["slope"] * grown < 1.0, grown, 0.0)}


def _jander(theta: Array, _s: Shapes) -> Array:
    z = np.minimum(np.sqrt(theta), 1.0)
    return np.where(z < 0.5, z * (3.0 + z * (z - 3.0)), 1.0 - (1.0 - z) ** 3)


def _jander_slope(theta: Array, _s: Shapes) -> Array:
    z = np.minimum(np.sqrt(theta), 1.0)
    return 1.5 * z * (1.0 - z) ** 2


def _zlt(theta: Array, _s: Shapes) -> Array:
    return -np.expm1(-3.0 * np.log1p(np.sqrt(theta)))


def _zlt_slope(theta: Array, _s: Shapes) -> Array:
    root = np.sqrt(theta)
    return 1.5 * root * (1.0 + root) ** -4


def _growth(theta: Array) -> Array:
    """The v of v - ln(1 + v) = theta: Newton from theta + sqrt(2 theta), which lies above it."""
    v = theta + np.sqrt(2.0 * theta)
    for _ in range(8):
        miss = v - np.log1p(v) - theta
        v = np.where(v > 1e-4, v - miss * (1.0 + v) / np.maximum(v, 1e-4), v)
    # below 1e-4 the difference cancels: v = r + r^2/3 + r^3/36 with r = sqrt(2 theta)
    root = np.sqrt(2.0 * theta)
    return np.where(root > 1e-3, v, root * (1.0 + root * (1.0 / 3.0 + root / 36.0)))


def _interface(theta: Array, _s: Shapes) -> Array:
    return -np.expm1(-3.0 * np.log1p(_growth(theta)))


def _interface_slope(theta: Array, _s: Shapes) -> Array:
    """dX/d ln theta with dv/dtheta = (1 + v)/v."""
    v = np.maximum(_growth(theta), _TINY)
    return 3.0 * theta / v * (1.0 + v) ** -3


def _interface_inverse(conversion: Array, _s: Shapes) -> Array:
    v = np.expm1(-np.log1p(-conversion) / 3.0)
    small = v * v * (0.5 - v * (1.0 / 3.0 - v * (0.25 - v * (0.2 - v / 6.0))))
    return np.where(v < 1e-3, small, v - np.log1p(v))


#: Laws of one clock by name.
CLOCK_LAWS: dict[str, ClockForm] = {
    "shrinking_film": ClockForm(
        _shrinking_film,
        _shrinking_film_slope,
        lambda x, _s: _one_minus_root(x, 2.0 / 3.0),
        _at_one,
    ),
    "first_order": ClockForm(
        lambda t, _s: -np.expm1(-t),
        lambda t, _s: t * np.exp(-t),
        lambda x, _s: -np.log1p(-x),
        _never,
    ),
    "second_order": ClockForm(
        lambda t, _s: t / (1.0 + t),
        lambda t, _s: t / (1.0 + t) ** 2,
        lambda x, _s: x / (1.0 - x),
        _never,
    ),
    "two_rate": ClockForm(
        _two_rate,
        _two_rate_slope,
        _two_rate_inverse,
        _never,
        _two_rate_shapes,
        ("fast_share", "ratio"),
    ),
    "avrami": ClockForm(
        _avrami,
        _avrami_slope,
        lambda x, s: (-np.log1p(-x)) ** (1.0 / s["n"]),
        _never,
        _avrami_shapes,
        ("n",),
    ),
    "elovich": ClockForm(
        _elovich,
        _elovich_slope,
        lambda x, s: np.expm1(x / s["slope"]),
        lambda s: np.expm1(1.0 / s["slope"]),
        _elovich_shapes,
        ("slope",),
    ),
    "jander": ClockForm(
        _jander, _jander_slope, lambda x, _s: _one_minus_root(x, 1.0 / 3.0) ** 2, _at_one
    ),
    "zlt": ClockForm(_zlt, _zlt_slope, lambda x, _s: np.expm1(-np.log1p(-x) / 3.0) ** 2, _never),
    "interface_diffusion": ClockForm(_interface, _interface_slope, _interface_inverse, _never),
}
#: Shape parameters of each law of one clock: shares, powers, ratios; no time in them.
SHAPE_PARAMETERS: dict[str, tuple[str, ...]] = {
    name: form.shape_names for name, form in CLOCK_LAWS.items()
}
#: ratio is k_fast / k_slow and the clock is the slow one.
_SHAPE_RANGE: dict[str, tuple[float, float]] = {
    "fast_share": (0.0, 1.0),
    "ratio": (1.0, 1e9),
    "n": (1e-3, 1e3),
    "slope": (1e-3, 1e3),
}
LAW_NAMES: tuple[str, ...] = (*PARTICLE_TERMS, *CLOCK_LAWS)
#: Laws that stand for a mechanism; only these may be named in a verdict.
MECHANISTIC: tuple[str, ...] = (*PARTICLE_TERMS, "shrinking_film")
#: Laws whose level and ultimate extraction cannot be told apart: fit with the ultimate held at 1.
NO_ULTIMATE: tuple[str, ...] = ("elovich",)
#: Power of the size in tau that theory gives to a clock; a clock not listed has none.
THEORY_SIZE_EXPONENT: dict[str, float] = {"shrinking_film": 2.0, "jander": 2.0, "zlt": 2.0}
