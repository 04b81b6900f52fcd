"""Grain shapes: what each resistance costs in time down to a core depth.

The depth z runs from 0 (fresh) to 1 (no core left): 1 - (1 - X)^(1/3) of a sphere,
1 - (1 - X)^(1/2) of a cylinder, X of a slab. ``y`` is 1 - z, handed over because it is more
accurate than a difference where it is small.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.sphere import solve_conversion, solve_depth
from leachkin.problems import argument_error, stop_if_any, unknown_name

Array = NDArray[np.float64]
Triple = tuple[Array, Array, Array]

#: shrinking_sphere has no ash: the film thins as the grain shrinks (small grains in suspension).
SHAPES = ("sphere", "cylinder", "slab", "shrinking_sphere")
_SERIES_BELOW = 0.0625
_SERIES_TERMS = 16
_MOST_STEPS = 200


@dataclass(frozen=True, eq=False)
class GrainState:
    """A grain at core depth z: conversion, time shares and their slopes by depth.

    Attributes
    ----------
    conversion : ndarray
    time_shares : tuple of ndarray
        g of film, ash layer and chemical step: time to this depth over the full time.
    time_slopes : tuple of ndarray
        dg/dz of the three.
    conversion_slope : ndarray
        dX/dz.
    """

    conversion: Array
    time_shares: Triple
    time_slopes: Triple
    conversion_slope: Array


def grain_state(shape: str, z: Array, y: Array) -> GrainState:
    """Return conversion and time shares at a depth.

    Notes
    -----
    ===================  =================  ============================  =================
    shape                film               ash layer                     chemical
    ===================  =================  ============================  =================
    sphere               X                  1 - 3(1-X)^(2/3) + 2(1-X)     1 - (1-X)^(1/3)
    cylinder             X                  X + (1-X) ln(1-X)             1 - (1-X)^(1/2)
    slab                 X                  X^2                           X
    shrinking_sphere     1 - (1-X)^(2/3)    none                          1 - (1-X)^(1/3)
    ===================  =================  ============================  =================

    [levenspiel1999, ch. 25, table 25.1]
    """
    one = np.ones_like(z)
    if shape == "slab":
        return GrainState(z, (z, z * z, z), (one, 2.0 * z, one), one)
    if shape == "cylinder":
        conversion = np.where(z < 0.5, z * (2.0 - z), 1.0 - y * y)
        ash = _cylinder_ash(conversion, y)
        ash_slope = -4.0 * y * np.log(np.where(y > 0.0, y, 1.0))
        return GrainState(conversion, (conversion, ash, z), (2.0 * y, ash_slope, one), 2.0 * y)
    conversion = np.where(z < 0.5, z * (3.0 + z * (z - 3.0)), 1.0 - y * y * y)
    slope = 3.0 * y * y
    if shape == "shrinking_sphere":
        film = np.where(z < 0.5, z * (2.0 - z), 1.0 - y * y)
        none = np.zeros_like(z)
        return GrainState(conversion, (film, none, z), (2.0 * y, none, one), slope)
    ash = z * z * (3.0 - 2.0 * z)
    return GrainState(conversion, (conversion, ash, z), (slope, 6.0 * z * y, one), slope)


def depth_of_conversion(shape: str, conversion: Array) -> tuple[Array, Array]:
    """Return z and y at a conversion from 0 to 1."""
    if shape == "slab":
        return conversion, 1.0 - conversion
    power = 0.5 if shape == "cylinder" else 1.0 / 3.0
    left = 1.0 - conversion
    y = np.sqrt(left) if shape == "cylinder" else np.cbrt(left)
    early = np.where(conversion < 0.5, conversion, 0.0)
    return np.where(conversion < 0.5, -np.expm1(power * np.log1p(-early)), 1.0 - y), y


def depth_of_time(
    shape: str, film: Array, ash_layer: Array, chemical: Array, time: Array
) -> tuple[Array, Array]:
    """Return z and y after a time; arguments broadcast, times not negative, sum above zero."""
    if shape == "sphere":
        return solve_depth(film, ash_layer, chemical, time)
    total = film + ash_layer + chemical
    spent = np.minimum(time, total)
    theta, left = spent / total, (total - spent) / total
    f, d, c = film / total, ash_layer / total, chemical / total
    if shape == "slab":
        z = _positive_root(d, f + c, theta)
        return z, np.maximum(1.0 - z, 0.0)
    if shape == "shrinking_sphere":
        y = _positive_root(f, c, left)
        z = 2.0 * theta / (2.0 * f + c + np.sqrt(c * c + 4.0 * f * left))
        return np.minimum(z, 1.0), y
    return _guarded_newton(shape, f, d, c, theta)


def conversion_of_time(
    shape: str, film: Array, ash_layer: Array, chemical: Array, time: Array
) -> Array:
    """Return the conversion after a time; arguments as :func:`depth_of_time`."""
    if shape == "sphere":
        return solve_conversion(film, ash_layer, chemical, time)
    return grain_state(shape, *depth_of_time(shape, film, ash_layer, chemical, time)).conversion


def check_shape(shape: str) -> None:
    """Raise :class:`InputProblems` for an unknown shape."""
    if shape not in SHAPES:
        stop_if_any([unknown_name("shape", shape, SHAPES, column="shape")])


def check_no_ash(shape: str, ash_layer: Array) -> None:
    """Raise :class:`InputProblems` where a shrinking grain is given an ash layer."""
    if shape == "shrinking_sphere" and np.any(ash_layer > 0.0):
        raise argument_error(
            "ash_layer",
            "an ash layer on a grain that shrinks",
            "0 with shape shrinking_sphere",
            'shape="sphere"',
        )


def _positive_root(square: Array, linear: Array, target: Array) -> Array:
    """Root of ``square u^2 + linear u = target`` without cancellation; 0 at target 0."""
    root = linear + np.sqrt(linear * linear + 4.0 * square * target)
    return np.minimum(2.0 * target / np.where(root > 0.0, root, 1.0), 1.0)


def _cylinder_ash(conversion: Array, y: Array) -> Array:
    """X + (1-X) ln(1-X); by its power series sum X^k / (k (k-1)) near 0, where terms cancel."""
    series = np.zeros_like(conversion)
    for k in range(_SERIES_TERMS, 1, -1):
        series = series * conversion + 1.0 / (k * (k - 1.0))
    plain = conversion + 2.0 * y * y * np.log(np.where(y > 0.0, y, 1.0))
    return np.where(conversion < _SERIES_BELOW, series * conversion * conversion, plain)


def _guarded_newton(shape: str, f: Array, d: Array, c: Array, theta: Array) -> tuple[Array, Array]:
    """Newton steps in the depth, halved where a step leaves the bracket."""
    f, d, c, theta = np.broadcast_arrays(f, d, c, theta)
    low, high = np.zeros_like(theta), np.ones_like(theta)
    z = np.clip(theta, 1e-3, 0.999)
    for _ in range(_MOST_STEPS):
        state = grain_state(shape, z, 1.0 - z)
        film, ash, chemical = state.time_shares
        miss = f * film + d * ash + c * chemical - theta
        low, high = np.where(miss <= 0.0, z, low), np.where(miss >= 0.0, z, high)
        by_film, by_ash, by_chemical = state.time_slopes
        slope = f * by_film + d * by_ash + c * by_chemical
        step = z - miss / np.where(slope > 0.0, slope, 1.0)
        inside = (step > low) & (step < high) & (slope > 0.0)
        following = np.where(inside, step, 0.5 * (low + high))
        if np.all(np.abs(following - z) <= np.finfo(np.float64).eps * z):
            break
        z = following
    z = np.where(theta >= 1.0, 1.0, np.where(theta > 0.0, z, 0.0))
    return z, 1.0 - z
