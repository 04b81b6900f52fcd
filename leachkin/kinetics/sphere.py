"""The sphere's series law: one monotone cubic in the core depth, solved from both ends.

With z = 1 - (1 - X)^(1/3) the conversion is z (3 - 3z + z^2), the chemical step's time is z and
the ash layer's z^2 (3 - 2z), so that ``film X + ash_layer z^2 (3 - 2z) + chemical z = t`` is a
cubic in z, and another in y = 1 - z, which is used where the core is nearly gone.
[levenspiel1999, ch. 25]
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Elements solved at once: the temporaries stay in the processor's cache.
BLOCK = 16384
_STEPS = 4  #: cubic convergence: three reach 4e-16, the fourth is for the worst mixtures
_SMALLEST = np.finfo(np.float64).tiny


def solve_depth(film: Array, ash_layer: Array, chemical: Array, time: Array) -> tuple[Array, Array]:
    """Return the depth z and the remaining radius y = 1 - z, each accurate where it is small.

    Parameters
    ----------
    film, ash_layer, chemical : ndarray
        Times for complete conversion, not negative, sum above zero; broadcast with time.
    time : ndarray
        Not negative, the same unit.

    Returns
    -------
    tuple of ndarray
        z and y, of the broadcast shape, from 0 to 1; z is 1 from complete conversion on.
    """
    shape = np.broadcast_shapes(film.shape, ash_layer.shape, chemical.shape, time.shape)
    z, y = np.empty(int(np.prod(shape))), np.empty(int(np.prod(shape)))
    parts = [_flat(part, shape) for part in (film, ash_layer, chemical, time)]
    for start in range(0, z.size, BLOCK):
        here = slice(start, start + BLOCK)
        small, near_end = _solve_block(*(part if part.size == 1 else part[here] for part in parts))
        other = 1.0 - small
        z[here] = np.where(near_end, other, small)
        y[here] = np.where(near_end, small, other)
    return z.reshape(shape), y.reshape(shape)


def solve_conversion(film: Array, ash_layer: Array, chemical: Array, time: Array) -> Array:
    """Return the conversion; arguments as :func:`solve_depth`."""
    shape = np.broadcast_shapes(film.shape, ash_layer.shape, chemical.shape, time.shape)
    conversion = np.empty(int(np.prod(shape)))
    parts = [_flat(part, shape) for part in (film, ash_layer, chemical, time)]
    for start in range(0, conversion.size, BLOCK):
        here = slice(start, start + BLOCK)
        small, near_end = _solve_block(*(part if part.size == 1 else part[here] for part in parts))
        conversion[here] = np.where(
            near_end, 1.0 - small * small * small, small * (3.0 + small * (small - 3.0))
        )
    return conversion.reshape(shape)


def _flat(part: Array, shape: tuple[int, ...]) -> Array:
    return part.reshape(1) if part.size == 1 else np.broadcast_to(part, shape).reshape(-1)


def _solve_block(
    film: Array, ash_layer: Array, chemical: Array, time: Array
) -> tuple[Array, NDArray[np.bool_]]:
    """Return the smaller of z and y, and where it is y."""
    total = film + ash_layer + chemical
    f, d, c = film / total, ash_layer / total, chemical / total
    spent = np.minimum(time, total)
    theta, left = spent / total, (total - spent) / total
    if not np.any(film) and not np.any(chemical):
        return _ash_alone(theta, left)
    near_end = theta > 0.875 * f + 0.5 * (d + c)
    first = np.where(near_end, c, 3.0 * f + c)
    second = 3.0 * np.where(near_end, d, d - f)
    third = f - 2.0 * d
    target = np.where(near_end, left, theta)
    # the start: the quadratic through both ends of the half, and the film's cube root near the end
    middle = 2.0 * d - np.where(near_end, 0.0, 2.5 * f)
    root = np.sqrt(np.maximum(first * first + 4.0 * middle * target, 0.0))
    inverse = (first + root) / (2.0 * np.maximum(target, _SMALLEST))
    if np.any(film):
        cube = np.cbrt(f / np.maximum(left, _SMALLEST))
        inverse = np.where(near_end, np.hypot(inverse, cube), inverse)
    small = np.where(target > 0.0, 1.0 / inverse, 0.0)
    return _halley(first, second, third, target, small), near_end


def _halley(first: Array, second: Array, third: Array, target: Array, u: Array) -> Array:
    """Polish a root of ``first u + second u^2 + third u^3 = target`` on 0 to 1/2."""
    for _ in range(_STEPS):
        curve = second + third * u
        miss = u * (first + u * curve) - target
        slope = first + u * (2.0 * curve + third * u)
        bend = curve + 2.0 * third * u  # half the second derivative
        step = miss * slope / np.maximum(slope * slope - miss * bend, _SMALLEST)
        u = u - step
    return np.maximum(u, 0.0)  # a step may pass 0 where the target is below the normal numbers


def _ash_alone(theta: Array, left: Array) -> tuple[Array, NDArray[np.bool_]]:
    """The symmetric cubic z^2 (3 - 2z) by its sine form, exact at both ends."""
    near_end = theta > 0.5
    third = np.arcsin(np.sqrt(np.where(near_end, left, theta))) / 3.0
    return 2.0 * np.sin(third) * np.sin(third + np.pi / 3.0), near_end
