"""Shrinking-core law of one grain size: film, ash layer and chemical step in series.

The three times add (Levenspiel 1999, ch. 25): t = tau_film g_film(X) + tau_ash_layer g_ash(X) +
tau_chemical g_chemical(X). Exact while the surface reaction is first order in the reagent;
approximate otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics.grain_shapes import (
    GrainState,
    check_no_ash,
    check_shape,
    conversion_of_time,
    depth_of_conversion,
    depth_of_time,
    grain_state,
)
from leachkin.problems import argument_error

Array = NDArray[np.float64]
Triple = tuple[Array, Array, Array]


@dataclass(frozen=True, eq=False)
class ParticleLaw:
    """The shrinking-core law of a grain, by the time each resistance alone would need.

    Attributes
    ----------
    film, ash_layer, chemical : ndarray, shape B
        Time for complete conversion under each resistance alone, in any one time unit; 0 where
        a resistance is absent. Not all three may be 0.
    shape : str
        "sphere", "cylinder", "slab", or "shrinking_sphere" (no ash, film of a small suspended
        grain).

    Raises
    ------
    InputProblems
        If a time is negative or not finite, or all are zero, or the shape is unknown.

    Notes
    -----
    Poor where grains crack or swell, where reagent runs down (use a history), and in a liquid
    where porosity * b * C / rho exceeds 0.1 (the core moves as fast as the profile forms).

    Examples
    --------
    >>> law = ParticleLaw(ash_layer=7.0, chemical=3.0)
    >>> law.conversion([0.0, 1.0, 10.0]).round(4).tolist()
    [0.0, 0.4169, 1.0]
    """

    film: Array | float = 0.0
    ash_layer: Array | float = 0.0
    chemical: Array | float = 0.0
    shape: str = "sphere"

    def __post_init__(self) -> None:
        check_shape(self.shape)
        parts = [
            _resistance(name, getattr(self, name)) for name in ("film", "ash_layer", "chemical")
        ]
        for name, part in zip(
            ("film", "ash_layer", "chemical"), np.broadcast_arrays(*parts), strict=True
        ):
            object.__setattr__(self, name, part)
        _check_some_time(self.complete_at)
        check_no_ash(self.shape, np.asarray(self.ash_layer))

    @property
    def batch_shape(self) -> tuple[int, ...]:
        """Shape B of the times."""
        return np.shape(self.film)

    @property
    def complete_at(self) -> Array:
        """Time of complete conversion, the sum of the three, shape B."""
        return np.asarray(self.film + self.ash_layer + self.chemical)

    @property
    def times(self) -> Triple:
        """Film, ash-layer and chemical times, each of shape B."""
        return np.asarray(self.film), np.asarray(self.ash_layer), np.asarray(self.chemical)

    def conversion(self, time: ArrayLike) -> Array:
        """Return the conversion after a time.

        Parameters
        ----------
        time : array_like, shape (t,) or B + (t,), or one number
            From the start, not negative, in the unit of the law.

        Returns
        -------
        ndarray, shape B + (t,), or B for one number
        """
        parts, at = self._against(_times(time))
        return conversion_of_time(self.shape, *parts, at)

    def depth(self, time: ArrayLike) -> Array:
        """Return the core depth z (0 fresh, 1 no core left) after a time; shapes as conversion."""
        parts, at = self._against(_times(time))
        return depth_of_time(self.shape, *parts, at)[0]

    def time(self, conversion: ArrayLike) -> Array:
        """Return the time to a conversion, shape (x,) or B + (x,) giving B + (x,).

        Raises
        ------
        InputProblems
            If a conversion lies outside 0 to 1.
        """
        parts, at = self._against(_fractions("conversion", conversion))
        return _time_to(parts, self._state_at(at))

    def rate(self, conversion: ArrayLike) -> Array:
        """Return dX/dt at a conversion (just before the end, at 1); shapes as :meth:`time`.

        Infinite at conversion 0 where only the ash layer resists.
        """
        parts, at = self._against(_fractions("conversion", conversion))
        return self._rate_of_state(parts, self._state_at(at))

    def _rate_of_state(self, parts: Triple, state: GrainState) -> Array:
        fall = _per_depth(parts, state)
        at_an_end = np.where(state.conversion > 0.0, self._rate_at_the_end(parts), np.inf)
        return np.where(
            fall > 0.0, state.conversion_slope / np.where(fall > 0.0, fall, 1.0), at_an_end
        )

    def rate_of_time(self, time: ArrayLike) -> Array:
        """Return dX/dt after a time, 0 from complete conversion on; shapes as conversion."""
        parts, at = self._against(_times(time))
        rate = self._rate_of_state(
            parts, grain_state(self.shape, *depth_of_time(self.shape, *parts, at))
        )
        return np.where(at < sum(parts), rate, 0.0)

    def sensitivities(self, time: ArrayLike) -> Triple:
        """Return dX/d ln tau of film, ash layer and chemical at a time; shapes as conversion."""
        parts, at = self._against(_times(time))
        return conversion_and_log_sensitivities(*parts, at, shape=self.shape)[1:]

    def advanced(self, depth: ArrayLike, duration: ArrayLike) -> Array:
        """Return the depth after some more time under this law.

        Parameters
        ----------
        depth, duration : array_like
            Broadcast with the times of the law, element by element; depth from 0 to 1.
        """
        z = _fractions("depth", depth)
        more = _times(duration, "duration")
        return depth_of_time(self.shape, *self.times, self.time_of_depth(z) + more)[0]

    def time_of_depth(self, depth: ArrayLike) -> Array:
        """Return the time to a depth, element by element (broadcast with the times)."""
        z = np.asarray(depth, dtype=float)
        return _time_to(self.times, grain_state(self.shape, z, 1.0 - z))

    def conversion_of_depth(self, depth: ArrayLike) -> Array:
        """Return the conversion at a depth."""
        z = np.asarray(depth, dtype=float)
        return grain_state(self.shape, z, 1.0 - z).conversion

    def _rate_at_the_end(self, parts: Triple) -> Array:
        """Rate as X reaches 1 where the depth slope vanishes: only a film alone still runs."""
        film, ash_layer, chemical = parts
        alone = (ash_layer + chemical == 0.0) & (self.shape != "shrinking_sphere")
        return np.where(alone, 1.0 / np.where(alone, film, 1.0), 0.0)

    def _state_at(self, conversion: Array) -> GrainState:
        return grain_state(self.shape, *depth_of_conversion(self.shape, conversion))

    def _against(self, at: Array) -> tuple[Triple, Array]:
        """Give the times a last axis where the argument has one."""
        film, ash_layer, chemical = self.times
        if at.ndim == 0:
            return (film, ash_layer, chemical), at
        return (film[..., None], ash_layer[..., None], chemical[..., None]), at


def conversion_and_log_sensitivities(
    film: ArrayLike,
    ash_layer: ArrayLike,
    chemical: ArrayLike,
    time: ArrayLike,
    *,
    shape: str = "sphere",
) -> tuple[Array, Array, Array, Array]:
    """Return the conversion and its derivatives by the logarithms of the three times.

    Parameters
    ----------
    film, ash_layer, chemical, time : array_like
        Broadcast together, as (tests, 1) against (tests, times); one time unit. Finite, not
        negative, and not all three resistances zero.
    shape : str

    Returns
    -------
    tuple of ndarray
        X, dX/dln film, dX/dln ash_layer, dX/dln chemical, each of the broadcast shape.

    Raises
    ------
    InputProblems
        If a time is negative or not finite, or no resistance is left.

    Notes
    -----
    From t = sum tau_i g_i(X): dX/dln tau_i = -tau_i g_i / sum tau_j g_j'.

    Examples
    --------
    >>> x, _, _, by_chemical = conversion_and_log_sensitivities(0.0, 0.0, 2.0, [1.0])
    >>> x.tolist(), by_chemical.tolist()
    ([0.875], [-0.375])
    """
    parts = tuple(
        _resistance(name, part)
        for name, part in (("film", film), ("ash_layer", ash_layer), ("chemical", chemical))
    )
    f, a, c = parts
    at = _times(time)
    _check_some_time(f + a + c)
    z, y = depth_of_time(shape, f, a, c, at)
    state = grain_state(shape, z, y)
    fall = _per_depth((f, a, c), state)
    running = (fall > 0.0) & (at < f + a + c)
    speed = np.where(running, state.conversion_slope, 0.0) / np.where(running, fall, 1.0)
    film_share, ash_share, chemical_share = state.time_shares
    return (
        state.conversion,
        -f * film_share * speed,
        -a * ash_share * speed,
        -c * chemical_share * speed,
    )


def particle_conversion(
    film: ArrayLike,
    ash_layer: ArrayLike,
    chemical: ArrayLike,
    time: ArrayLike,
    *,
    shape: str = "sphere",
) -> Array:
    """Return the conversion for times that broadcast element by element.

    Arguments and errors as :func:`conversion_and_log_sensitivities`.
    """
    f, a, c = (
        _resistance("film", film),
        _resistance("ash_layer", ash_layer),
        _resistance("chemical", chemical),
    )
    _check_some_time(f + a + c)
    return conversion_of_time(shape, f, a, c, _times(time))


def _per_depth(parts: Triple, state: GrainState) -> Array:
    film, ash_layer, chemical = parts
    by_film, by_ash, by_chemical = state.time_slopes
    return film * by_film + ash_layer * by_ash + chemical * by_chemical


def _time_to(parts: Triple, state: GrainState) -> Array:
    film, ash_layer, chemical = parts
    film_share, ash_share, chemical_share = state.time_shares
    return film * film_share + ash_layer * ash_share + chemical * chemical_share


def _resistance(name: str, value: ArrayLike) -> Array:
    array = np.asarray(value, dtype=float)
    if not np.all(np.isfinite(array)) or np.any(array < 0.0):
        raise argument_error(name, _first_bad(array), "finite times, none below 0")
    return array


def _times(value: ArrayLike, name: str = "time") -> Array:
    array = np.asarray(value, dtype=float)
    if not np.all(np.isfinite(array)) or np.any(array < 0.0):
        raise argument_error(name, _first_bad(array), "finite times, none below 0")
    return array


def _fractions(name: str, value: ArrayLike) -> Array:
    array = np.asarray(value, dtype=float)
    if not np.all((array >= 0.0) & (array <= 1.0)):
        raise argument_error(name, _first_bad(array, 1.0), "fractions from 0 to 1")
    return array


def _check_some_time(total: Array) -> None:
    if not np.all(total > 0.0):
        raise argument_error(
            "film, ash_layer, chemical",
            "all three times are 0",
            "at least one above 0",
            "give the time for complete conversion under the resistance that controls",
        )
    if not np.all(np.isfinite(total)):
        raise argument_error("film, ash_layer, chemical", "times too large", "a finite sum")


def _first_bad(array: Array, top: float = np.inf) -> str:
    bad = array[~(np.isfinite(array) & (array >= 0.0) & (array <= top))]
    return f"{bad.flat[0]:g}" if bad.size else "no value"
