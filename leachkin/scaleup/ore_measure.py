"""An ore's extraction as many small increments, each at its own equivalent time.

An expectation over residence times needs only ``integral of E'(s) S(s) ds``. Written with the
depth of the reaction front as the variable of integration it needs no inverse of the law and has
no singular slope: the increments of extraction are known, the times at which they come follow
from the law itself.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics import OreCurve, ParticleLaw

Array = NDArray[np.float64]

_EXPONENT_OF_SHAPE = {"sphere": 3, "shrinking_sphere": 3, "cylinder": 2, "slab": 1}
#: Panels that halve towards the start, and Gauss-Legendre points on each of them.
HALVINGS, POINTS = 26, 10
#: Points on each interval of a tabulated curve.
CURVE_POINTS = 6


@dataclass(frozen=True)
class OreMeasure:
    """Increments of extraction and when they come.

    Attributes
    ----------
    equivalent_h : ndarray, shape (n, q)
        Equivalent leach time of each increment [h].
    increment : ndarray, shape (n, q)
        Extraction gained there, fraction of all the metal.
    start : ndarray, shape (n,)
        Extraction at time zero.
    """

    equivalent_h: Array
    increment: Array
    start: Array

    @property
    def ultimate(self) -> Array:
        """Extraction after endless time, shape (n,)."""
        total: Array = self.start + self.increment.sum(axis=-1)
        return total


def graded_points() -> tuple[Array, Array]:
    """Return points and weights on 0 to 1 that are dense towards 0.

    Returns
    -------
    tuple of ndarray, shape (q,)
        The weights sum to one.
    """
    edges = np.append(0.0, np.ldexp(1.0, np.arange(-HALVINGS, 1)))
    return gauss_on(edges, POINTS)


def gauss_on(edges: Array, points: int) -> tuple[Array, Array]:
    """Return Gauss-Legendre points and weights on consecutive intervals.

    Parameters
    ----------
    edges : ndarray, shape B+(m+1,)
    points : int
        Points on each interval.

    Returns
    -------
    tuple of ndarray, shape B+(m*points,)
    """
    position, weight = np.polynomial.legendre.leggauss(points)
    low, width = edges[..., :-1, None], np.diff(edges)[..., None]
    place = low + width * (1.0 + position) / 2.0
    flat = (*edges.shape[:-1], -1)
    return place.reshape(flat), (width * weight / 2.0).reshape(flat)


def measure_of_particles(law: ParticleLaw, share: Array, lag_h: Array) -> OreMeasure:
    """Return the measure of particles whose shares of all the metal are given.

    Parameters
    ----------
    law : ParticleLaw
        Batch shape (n, c): n sets, c size classes.
    share : ndarray, shape (n, c)
        Leachable metal of the class as a fraction of all the metal.
    lag_h : ndarray, shape (n,)
        Equivalent time before anything dissolves [h].

    Returns
    -------
    OreMeasure
        ``n`` rows, ``c`` times the points of one particle in each.
    """
    depth, weight = graded_points()
    exponent = _EXPONENT_OF_SHAPE[law.shape]
    conversion = -np.expm1(exponent * np.log1p(-depth))
    gained = exponent * (1.0 - depth) ** (exponent - 1) * weight
    time_h = np.asarray(law.time(conversion), dtype=np.float64)
    n, classes = share.shape
    time_h = np.broadcast_to(time_h, (n, classes, len(depth))) + lag_h[:, None, None]
    increment = share[..., None] * gained
    return OreMeasure(time_h.reshape(n, -1), increment.reshape(n, -1), np.zeros(n))


def measure_of_curve(curve: OreCurve, batch: int) -> OreMeasure:
    """Return the measure of a tabulated ore curve.

    Parameters
    ----------
    curve : OreCurve
        Batch shape () or (n,).
    batch : int
        n, the number of rows wanted.

    Returns
    -------
    OreMeasure
    """
    root = np.sqrt(np.asarray(curve.equivalent_h, dtype=np.float64))
    start, start_weight = graded_points()
    place, weight = gauss_on(root[1:], CURVE_POINTS)
    place = np.concatenate([root[1] * start, place])
    weight = np.concatenate([root[1] * start_weight, weight])
    equivalent_h = place**2
    increment = np.asarray(curve.derivative(equivalent_h)) * 2.0 * place * weight
    at_zero = np.asarray(curve(np.zeros(1)), dtype=np.float64)[..., 0]
    points = place.size
    return OreMeasure(
        np.broadcast_to(equivalent_h, (batch, points)),
        np.broadcast_to(increment, (batch, points)),
        np.broadcast_to(at_zero, (batch,)),
    )
