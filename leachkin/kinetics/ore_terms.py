"""Terms beside the law itself: lag, soluble share, fade of the rate, loss from solution.

Each is plain arithmetic on arrays with its derivatives, used by rate laws and by fits alike.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.problems import argument_error

Array = NDArray[np.float64]
#: Products of fade and hours below this take the series: the closed forms cancel.
_SMALL = 1e-4
#: Beyond this exponent the capacity is full.
_FULL = 80.0


@dataclass(frozen=True, eq=False)
class EffectiveHours:
    """Hours that a law sees, with derivatives.

    Attributes
    ----------
    hours, by_hours, by_lag, by_fade : ndarray, of the broadcast shape
    """

    hours: Array
    by_hours: Array
    by_lag: Array
    by_fade: Array


def effective_hours(hours: Array, lag: Array | float, fade: Array | float) -> EffectiveHours:
    """Return the hours that count: none before the lag, then ever slower ones.

    ``(1 - exp(-fade (hours - lag))) / fade``: a surface that passivates at a first-order rate.

    Parameters
    ----------
    hours, lag, fade : ndarray
        Broadcast together; not negative. fade in 1/h, 0 for none.

    Examples
    --------
    >>> float(effective_hours(np.array(5.0), 1.0, 0.0).hours)
    4.0
    """
    after = np.maximum(np.asarray(hours) - lag, 0.0)
    u = np.asarray(fade) * after
    slowed = np.exp(-u)
    small = u < _SMALL
    divisor = np.where(small, 1.0, u)
    share = np.where(small, 1.0 - u * (0.5 - u / 6.0), -np.expm1(-u) / divisor)
    bend = np.where(small, -0.5 + u / 3.0, (slowed - share) / divisor)
    running = np.where(after > 0.0, slowed, 0.0)
    return EffectiveHours(after * share, running, -running, after * after * bend)


def hours_until(effective: Array, lag: Array | float, fade: Array | float, most: float) -> Array:
    """Return the hours after which so many have counted, at most so many; the inverse.

    Where the fade lets the law never get there, the hours after which the rate has fallen to
    ``exp(-most)``.
    """
    fade = np.asarray(fade, dtype=float)
    share = np.minimum(fade * effective, 1.0)
    with np.errstate(invalid="ignore", divide="ignore"):
        slow = np.minimum(-np.log1p(-share), most) / fade
    return np.asarray(lag + np.where(share < 1e-12, effective, slow))


def loss_step(
    lost: Array, dissolved: Array, capacity: Array, turns: Array
) -> tuple[Array, tuple[Array, Array, Array, Array]]:
    """Return the metal lost from solution after a step, and its derivatives.

    ``dL/dt = k (E - L) (1 - L/Q)``: first order in the metal in solution, up to a capacity Q,
    solved exactly for a constant E.

    Parameters
    ----------
    lost, dissolved, capacity : ndarray
        L at the start, E and Q, as shares of the head; broadcast together. Q above 0.
    turns : ndarray
        k times the step.

    Returns
    -------
    ndarray and tuple of ndarray
        L at the end; dL/d(lost), dL/d(dissolved), dL/d(capacity), dL/d(turns).
    """
    room = capacity - lost
    w = turns / capacity
    z = np.minimum(w * (dissolved - capacity), _FULL)
    grown = np.exp(z)
    small = np.abs(z) < _SMALL
    divisor = np.where(small, 1.0, z)
    mean = np.where(small, 1.0 + z * (0.5 + z / 6.0), np.expm1(z) / divisor)
    mean_slope = np.where(small, 0.5 + z / 3.0, (grown - mean) / divisor)
    bottom = grown + room * w * mean
    left = room / bottom

    def by(z_slope: Array, w_slope: Array) -> Array:
        inner = grown * z_slope + room * (mean * w_slope + w * mean_slope * z_slope)
        return np.asarray(-room / bottom**2 * inner)

    by_room = grown / bottom**2
    by_dissolved = -by(w, np.zeros(()))
    by_turns = -by((dissolved - capacity) / capacity, 1.0 / capacity)
    by_capacity = 1.0 - by_room - by(-w * dissolved / capacity, -w / capacity)
    return capacity - left, (by_room, by_dissolved, by_capacity, by_turns)


def check_terms(lag_h: Array, soluble_share: Array, fade_per_h: Array) -> None:
    """Stop at a lag or fade below 0, or a soluble share outside 0 to 1."""
    for name, value in (("lag_h", lag_h), ("fade_per_h", fade_per_h)):
        if not np.all(np.isfinite(value)) or np.any(value < 0.0):
            raise argument_error(name, f"{value}", "finite, not below 0")
    if not np.all((soluble_share >= 0.0) & (soluble_share <= 1.0)):
        raise argument_error("soluble_share", f"{soluble_share}", "a fraction from 0 to 1")
