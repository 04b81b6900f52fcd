"""How long ore has leached at the outlet of a train of stirred tanks.

A grain's equivalent leach time at outlet j is a sum of independent exponential times, one a tank.
What a train extracts is the expectation of the ore curve over that distribution:

    E_j = E(0) + integral of E'(s) S_j(s) ds,    S_j(s) = p_1(s) + ... + p_j(s)

p_i(s) is the share of grains that are still in tank i when their clock shows s. The p_i are a
row of the exponential of a bidiagonal matrix. It is built by repeated doubling of s from
non-negative numbers only, so that equal, nearly equal and very unequal tanks keep full precision
(partial fractions lose it as soon as two means come close).

The p_i are smooth, the ore curve is not. So the curve enters through moments, panel by panel,
worked out once; a trial of another mean time then costs no evaluation of the curve.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.scaleup.ore_measure import OreMeasure

Array = NDArray[np.float64]

#: Doublings from the first panel to the last: the shortest mean that can be told from zero is
#: about 1e-13 of the longest time on the curve.
DOUBLINGS = 46
#: Gauss-Legendre points a panel: e**-x over an octave of x to 1e-13.
POINTS = 16
#: Terms of the matrix series beyond the number of tanks, on a first step of a tenth of a mean.
SERIES_TERMS = 10
#: Smallest mean time, in first panels.
SMALLEST_MEAN = 10.0

_POSITION, _WEIGHT = np.polynomial.legendre.leggauss(POINTS)
_OFFSET = np.append((1.0 + _POSITION) / 2.0, 1.0)


@dataclass(frozen=True)
class PanelWeights:
    """Weights of smooth functions of equivalent time against the slope of an ore curve.

    Attributes
    ----------
    first_h : ndarray, shape (n,)
        Width of the first panel [h].
    weights : ndarray, shape (panels, POINTS, n)
        ``sum(weights * p)`` over panels and points is the integral of E'(s) p(s) ds.
    """

    first_h: Array
    weights: Array

    @property
    def smallest_mean_h(self) -> Array:
        """Shortest mean time that is told from zero, shape (n,) [h]."""
        return SMALLEST_MEAN * self.first_h


def panel_weights(measure: OreMeasure, longest_h: Array) -> PanelWeights:
    """Return the weights of an ore's increments on panels that double in width.

    Parameters
    ----------
    measure : OreMeasure
        Increments of extraction and the times at which they come, shape (n, q).
    longest_h : ndarray, shape (n,)
        Time beyond which no grain is left in the train [h].

    Returns
    -------
    PanelWeights
    """
    end_h = np.minimum(measure.equivalent_h.max(axis=-1), longest_h)
    first_h = np.maximum(end_h, np.finfo(float).tiny * 1e30) * 2.0**-DOUBLINGS
    scaled = measure.equivalent_h / first_h[:, None]
    panel = np.clip(np.frexp(np.maximum(scaled, 0.5))[1], 0, DOUBLINGS)
    start = np.where(panel == 0, 0.0, np.ldexp(1.0, panel - 1))
    width = np.where(panel == 0, 1.0, np.maximum(start, 1.0))
    inside = np.where(scaled <= np.ldexp(1.0, DOUBLINGS) * (1 + 1e-12), measure.increment, 0.0)
    place = np.clip(2.0 * (scaled - start) / width - 1.0, -1.0, 1.0)
    return PanelWeights(first_h, _weights_from_moments(panel, place, inside))


def _weights_from_moments(panel: NDArray[np.int32], place: Array, increment: Array) -> Array:
    """Legendre moments of each panel, turned into weights at the panel's Gauss points."""
    n = len(panel)
    bins = (DOUBLINGS + 1) * n
    key = (panel.astype(np.int64) * n + np.arange(n)[:, None]).ravel()
    weights = np.zeros((DOUBLINGS + 1, POINTS, n))
    here, before = np.ones_like(place), np.zeros_like(place)
    at_points, at_points_before = np.ones(POINTS), np.zeros(POINTS)
    for degree in range(POINTS):
        moment = np.bincount(key, (here * increment).ravel(), minlength=bins).reshape(-1, n)
        share = (degree + 0.5) * _WEIGHT * at_points
        weights += moment[:, None, :] * share[None, :, None]
        a, b = (2 * degree + 1) / (degree + 1), degree / (degree + 1)
        here, before = a * place * here - b * before, here
        at_points, at_points_before = (
            a * _POSITION * at_points - b * at_points_before,
            at_points,
        )
    return weights


def stage_gains(means_h: Array, panels: PanelWeights) -> Array:
    """Return what each tank adds to the extraction.

    Parameters
    ----------
    means_h : ndarray, shape (tanks, n)
        Mean equivalent time in each tank, upstream first [h]; any may be equal.
    panels : PanelWeights

    Returns
    -------
    ndarray, shape (tanks, n)
        ``E_j - E_(j-1)``, E_0 being the extraction at time zero.

    Notes
    -----
    With a last tank repeated, the gain of the repetition is the derivative of the tank's own gain
    with respect to the logarithm of its mean.
    """
    rates = 1.0 / np.maximum(means_h, panels.smallest_mean_h)
    width = panels.first_h
    step = _first_matrix(rates, _OFFSET[:, None] * width)
    start = np.zeros_like(rates)
    start[0] = 1.0
    gains = np.zeros_like(rates)
    for panel, weights in enumerate(panels.weights):
        gains += np.einsum("jmb,mb->jb", _row_times(start, step[:, :, :POINTS]), weights)
        start = _row_times(start, step[:, :, POINTS:])[:, 0]
        if panel:
            width = 2.0 * width
            step = _doubled(step, rates, _OFFSET[:, None] * width)
    return gains


def _first_matrix(rates: Array, step_h: Array) -> Array:
    """Exponential of the bidiagonal matrix for short steps, shape (tanks, tanks, steps, n)."""
    tanks = len(rates)
    fastest = rates.max(axis=0)
    lag = (fastest - rates)[:, None] * step_h
    pass_on = rates[:, None] * step_h
    term = np.zeros((tanks, tanks, *step_h.shape))
    term[range(tanks), range(tanks)] = 1.0
    total = term.copy()
    for order in range(1, tanks + SERIES_TERMS):
        moved = term * lag[None]
        moved[:, 1:] += term[:, :-1] * pass_on[None, :-1]
        term = moved / order
        total += term
    return np.asarray(total * np.exp(-fastest * step_h))


def _doubled(step: Array, rates: Array, step_h: Array) -> Array:
    """The matrix of twice the step; its diagonal anew, so that rounding does not double too."""
    doubled = np.zeros_like(step)
    for middle in range(len(rates)):
        doubled[: middle + 1, middle:] += (
            step[: middle + 1, middle, None] * step[None, middle, middle:]
        )
    for tank, rate in enumerate(rates):
        doubled[tank, tank] = np.exp(-rate * step_h)
    return doubled


def _row_times(row: Array, matrix: Array) -> Array:
    """Row vector (tanks, n) times upper triangular matrices (tanks, tanks, m, n)."""
    product: Array = np.zeros_like(matrix[0])
    for tank in range(len(row)):
        product[tank:] += row[tank] * matrix[tank, tank:]
    return product
