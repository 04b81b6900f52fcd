"""A reagent front through a bed in plug flow, by one quadrature.

In the frame that moves with the solution the equivalent leach time s of the ore falls with depth
as ``ds/dz = -k (D(s) - D(s0))``, D being the reagent that a tonne has taken at s and s0 the
equivalent time before the solution came. With the bed's depth counted from 0 to 1 and ``capacity``
the reagent that raises s by one hour over the whole bed, written per tonne of it,

    G(s_top) - G(s) = depth / capacity,      G(s) = integral of ds / (D(s) - D(s0))

so that one table of G serves every depth and every day. Where D rises as a root of s the reagent
is gone at a finite depth, and s stays at s0 below it; where D rises linearly, s - s0 falls
exponentially and never quite ends. Both follow from how the table is continued below its first
node. [old result of fixed-bed fronts; Levenspiel 1999 for the bed's balance]

All arrays have the sets of parameters first: shape (n, q).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Increase = Callable[[Array], Array]

#: Panels of the table, each a constant factor wide, besides the curve's own nodes.
PANELS = 54
#: First node where nothing was leached before, and where something was, as shares of the last
#: node and of s0.
FIRST_OF_LAST = 2.0**-PANELS
FIRST_OF_START = 1e-4
#: Gauss-Legendre points a panel, in the logarithm of the time since s0.
POINTS = 4
#: Newton steps that polish an inverse started from the cubic through the table.
POLISH = 3

_PLACE, _WEIGHT = np.polynomial.legendre.leggauss(POINTS)
_PLACE, _WEIGHT = (1.0 + _PLACE) / 2.0, _WEIGHT / 2.0


@dataclass(frozen=True)
class Front:
    """The table of a bed: what has been leached against how far the solution has come.

    Attributes
    ----------
    taken, gained : callable
        D(s0+u) - D(s0) [kg/t] and E(s0+u) - E(s0), for u of shape (n, q) [h].
    time_h : ndarray, shape (n, k)
        Nodes u of the table, equivalent time since s0 [h].
    reach : ndarray, shape (n, k)
        G at the nodes, zero at the first [h t/kg].
    passed : ndarray, shape (n, k)
        Integral of gained/taken over u, at the nodes.
    taken_at_node : ndarray, shape (n, k)
    start_order : ndarray, shape (n, 1)
        m of ``D - D(s0) = K u**m`` below the first node where nothing was leached before.
    start_slope, start_curvature : ndarray, shape (n, 1)
        a and b of ``D - D(s0) = a u + b u**2`` below the first node where something was.
    leached_before : ndarray of bool, shape (n, 1)
    """

    taken: Increase
    gained: Increase
    time_h: Array
    reach: Array
    passed: Array
    taken_at_node: Array
    start_order: Array
    start_slope: Array
    start_curvature: Array
    leached_before: NDArray[np.bool_]

    def reach_at(self, time_h: Array) -> Array:
        """Return G at times since s0, shape (n, q); minus infinity at zero where it never ends."""
        panel, low = self._panel(self.time_h, time_h)
        inside = np.clip(time_h, self.time_h[:, :1], self.time_h[:, -1:])
        above = np.take_along_axis(self.reach, panel, 1) + self._piece(low, inside)[0]
        return np.where(time_h >= self.time_h[:, :1], above, self._reach_below(time_h))

    def passed_at(self, time_h: Array) -> Array:
        """Return the integral of gained/taken from 0 to times since s0, shape (n, q)."""
        panel, low = self._panel(self.time_h, time_h)
        first = self.time_h[:, :1]
        inside = np.clip(time_h, first, self.time_h[:, -1:])
        above = np.take_along_axis(self.passed, panel, 1) + self._piece(low, inside)[1]
        return np.where(time_h >= first, above, self.passed[:, :1] * (time_h / first))

    def time_at(self, reach: Array, polish: int = POLISH) -> Array:
        """Return the time since s0 at which G has a value, shape (n, q); zero below its end.

        The cubic through the nodes, then ``polish`` Newton steps.
        """
        inside = np.clip(reach, self.reach[:, :1], self.reach[:, -1:])
        panel, low = self._panel(self.time_h, inside, self.reach)
        log_time = self._cubic(panel, inside)
        base = np.take_along_axis(self.reach, panel, 1)
        for _ in range(polish):
            time_h = np.exp(log_time)
            miss = base + self._piece(low, time_h)[0] - inside
            log_time = log_time - miss * self.taken(time_h) / time_h
        above = np.exp(log_time)
        return np.where(reach >= self.reach[:, :1], above, self._time_below(reach))

    def _panel(
        self, nodes: Array, value: Array, by: Array | None = None
    ) -> tuple[NDArray[np.intp], Array]:
        """Panel of each value and the time at its low end, by halving the list of nodes."""
        keys = nodes if by is None else by
        low = np.zeros(value.shape, dtype=np.intp)
        high = np.full(value.shape, keys.shape[1] - 1, dtype=np.intp)
        for _ in range(int(np.ceil(np.log2(keys.shape[1])))):
            middle = (low + high) // 2
            right = np.take_along_axis(keys, middle, 1) <= value
            low = np.where(right, middle, low)
            high = np.where(right, high, middle)
        low = np.minimum(low, keys.shape[1] - 2)
        return low, np.take_along_axis(nodes, low, 1)

    def _piece(self, low: Array, high: Array) -> tuple[Array, Array]:
        """Both integrals between two times of one panel, shape (n, q)."""
        width = np.log(high / low)
        time_h = low[..., None] * np.exp(width[..., None] * _PLACE)
        n, q = low.shape
        flat = time_h.reshape(n, q * POINTS)
        weight = time_h * _WEIGHT * width[..., None]
        per_taken = weight / self.taken(flat).reshape(n, q, POINTS)
        gained = self.gained(flat).reshape(n, q, POINTS)
        return per_taken.sum(axis=-1), (per_taken * gained).sum(axis=-1)

    def _cubic(self, panel: NDArray[np.intp], reach: Array) -> Array:
        """Logarithm of the time by the cubic with the table's exact slopes at both ends."""

        def at(values: Array, step: int) -> Array:
            return np.take_along_axis(values, panel + step, 1)

        start, end = at(self.reach, 0), at(self.reach, 1)
        width = np.maximum(end - start, np.finfo(float).tiny)
        x = np.clip((reach - start) / width, 0.0, 1.0)
        slope = self.taken_at_node / self.time_h
        value0, value1 = np.log(at(self.time_h, 0)), np.log(at(self.time_h, 1))
        slope0, slope1 = width * at(slope, 0), width * at(slope, 1)
        rise = value1 - value0
        cubic: Array = value0 + x * (
            slope0 + x * (3 * rise - 2 * slope0 - slope1 + x * (slope0 + slope1 - 2 * rise))
        )
        return np.clip(cubic, value0, value1)

    def _reach_below(self, time_h: Array) -> Array:
        first, taken = self.time_h[:, :1], self.taken_at_node[:, :1]
        time_h = np.minimum(time_h, first)
        with np.errstate(divide="ignore"):
            log_ratio = np.log(time_h / first)
        slope, bend = self.start_slope, self.start_curvature
        quadratic = (log_ratio - np.log((slope + bend * time_h) / (slope + bend * first))) / slope
        power = first / taken * _expm1_over(log_ratio, 1.0 - self.start_order)
        return np.where(self.leached_before, quadratic, power)

    def _time_below(self, reach: Array) -> Array:
        first, taken = self.time_h[:, :1], self.taken_at_node[:, :1]
        reach = np.minimum(reach, 0.0)
        slope, bend = self.start_slope, self.start_curvature
        ratio = first / (slope + bend * first) * np.exp(slope * reach)
        quadratic = ratio * slope / (1.0 - bend * ratio)
        power = first * np.exp(_log1p_over(reach * taken / first, 1.0 - self.start_order))
        return np.where(self.leached_before, quadratic, power)


def _expm1_over(x: Array, power: Array) -> Array:
    """(exp(power x) - 1)/power, x where power is zero."""
    tiny = np.abs(power) < 1e-9
    return np.where(tiny, x, np.expm1(np.where(tiny, 0.0, power * x)) / np.where(tiny, 1.0, power))


def _log1p_over(x: Array, power: Array) -> Array:
    """log(1 + power x)/power, x where power is zero, minus infinity where the root has ended."""
    tiny = np.abs(power) < 1e-9
    inside = np.where(tiny, 0.0, power * x)
    with np.errstate(divide="ignore"):
        log = np.log1p(np.maximum(inside, -1.0))
    return np.where(tiny, x, log / np.where(tiny, 1.0, power))


def front(
    taken: Increase,
    gained: Increase,
    start_slope: Array,
    start_h: Array,
    last_h: Array,
    curve_node_h: Array,
) -> Front:
    """Return the table of a bed.

    Parameters
    ----------
    taken, gained : callable
        D(s0+u) - D(s0) [kg/t] and E(s0+u) - E(s0) for u of shape (n, q) [h].
    start_slope : ndarray, shape (n, 1)
        dD/ds at s0 [kg/t/h]; used where s0 is above zero.
    start_h : ndarray, shape (n, 1)
        s0 [h].
    last_h : ndarray, shape (n, 1)
        Longest time since s0 that will be asked for [h], above zero.
    curve_node_h : ndarray, shape (k,)
        Times at which the ore curve changes its formula [h].

    Returns
    -------
    Front
    """
    leached = start_h > 0.0
    first = np.where(
        leached, np.minimum(FIRST_OF_START * start_h, 0.5 * last_h), FIRST_OF_LAST * last_h
    )
    time_h = _nodes(first, start_h, last_h, curve_node_h)
    at_node = taken(time_h)
    near = taken(np.concatenate([first, 2.0 * first], axis=1))
    order = np.log2(near[:, 1:] / near[:, :1])
    slope = np.where(leached, start_slope, near[:, :1] / first)
    bend = np.where(leached, (near[:, :1] / first - slope) / first, 0.0)
    bare = Front(taken, gained, time_h, at_node, at_node, at_node, order, slope, bend, leached)
    reach, passed = bare._piece(time_h[:, :-1], time_h[:, 1:])
    below = first * gained(first) / at_node[:, :1]
    return Front(
        taken,
        gained,
        time_h,
        np.concatenate([np.zeros_like(first), np.cumsum(reach, axis=1)], axis=1),
        np.concatenate([below, below + np.cumsum(passed, axis=1)], axis=1),
        at_node,
        order,
        slope,
        bend,
        leached,
    )


def _nodes(first: Array, start_h: Array, last_h: Array, curve_node_h: Array) -> Array:
    """Geometric nodes from the first to the last, with the curve's own nodes between them."""
    step = np.arange(PANELS + 1) / PANELS
    graded = first * np.exp(step * np.log(last_h / first))
    graded[:, :1], graded[:, -1:] = first, last_h
    own = np.clip(curve_node_h - start_h, first, last_h)
    return np.sort(np.concatenate([graded, own], axis=1), axis=1)
