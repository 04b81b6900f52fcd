"""The one potential at which the dissolving metal gives what all oxidants take, in batches.

The anodic current rises with the potential and every cathodic one falls, so that there is one
root. It lies between the metal's own potential, where nothing dissolves, and the highest
potential of an oxidant, where nothing is reduced; the search never leaves that bracket.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Currents balance to this share of the anodic one.
BALANCE_TOLERANCE = 1e-12
MOST_STEPS = 200
#: Solutions in a block, so that temporaries stay in cache.
BLOCK = 8192
#: The search starts this far inside its bracket [V].
_INSIDE_V = 1e-12
_LN10 = float(np.log(10.0))


@dataclass(frozen=True)
class Reduction:
    """A metal ion or ferric iron: limited by transport, ended at its own potential.

    Attributes
    ----------
    limit_A_per_m2 : ndarray, shape (n,)
    electrons : int
        Of the exponent: per mole of the oxidised species.
    equilibrium_V : ndarray, shape (n,)
    """

    limit_A_per_m2: Array
    electrons: int
    equilibrium_V: Array


@dataclass(frozen=True)
class Electrode:
    """Everything that takes or gives electrons at one surface, arrays of shape (n,).

    Attributes
    ----------
    thermal_V : ndarray
        R T / F.
    anode_V : ndarray
        Potential of the dissolving metal at its ion.
    anode_electrons : int
    anode_A_per_m2, anode_slope_V : ndarray
        Exchange current; slope per e-fold.
    anode_limit_A_per_m2 : ndarray
        Supply of what holds the ion in solution (cyanide, hydroxide); infinite where none is
        needed.
    reductions : sequence of Reduction
    hydrogen_acid_A_per_m2, hydrogen_water_A_per_m2 : ndarray
        Currents of acid and of water at 0 V.
    hydrogen_limit_A_per_m2 : ndarray
        Supply of hydrogen ions.
    hydrogen_slope_V : ndarray
        Per e-fold.
    oxygen_limit_A_per_m2, oxygen_A_per_m2, oxygen_V, oxygen_slope_V : ndarray
    """

    thermal_V: Array
    anode_V: Array
    anode_electrons: int
    anode_A_per_m2: Array
    anode_slope_V: Array
    anode_limit_A_per_m2: Array
    reductions: Sequence[Reduction]
    hydrogen_acid_A_per_m2: Array
    hydrogen_water_A_per_m2: Array
    hydrogen_limit_A_per_m2: Array
    hydrogen_slope_V: Array
    oxygen_limit_A_per_m2: Array
    oxygen_A_per_m2: Array
    oxygen_V: Array
    oxygen_slope_V: Array

    def block(self, part: slice) -> Electrode:
        """Return some of the solutions."""
        cut = {
            name: value[part] if isinstance(value, np.ndarray) else value
            for name, value in vars(self).items()
            if name != "reductions"
        }
        reductions = tuple(
            Reduction(r.limit_A_per_m2[part], r.electrons, r.equilibrium_V[part])
            for r in self.reductions
        )
        return Electrode(**cut, reductions=reductions)  # type: ignore[arg-type]


@dataclass(frozen=True)
class Balance:
    """The root and its currents.

    Attributes
    ----------
    potential_V, anodic_A_per_m2 : ndarray, shape (n,)
    reductions_A_per_m2 : ndarray, shape (r, n)
    hydrogen_A_per_m2, oxygen_A_per_m2 : ndarray, shape (n,)
    imbalance : ndarray, shape (n,)
        Of the currents over the anodic one; 0 where nothing flows.
    steps : int
    """

    potential_V: Array
    anodic_A_per_m2: Array
    reductions_A_per_m2: Array
    hydrogen_A_per_m2: Array
    oxygen_A_per_m2: Array
    imbalance: Array
    steps: int


def balance_currents(electrode: Electrode) -> Balance:
    """Return the mixed potential of every solution and the currents there.

    Parameters
    ----------
    electrode : Electrode

    Returns
    -------
    Balance
        Where no oxidant stands above the metal nothing flows, at the metal's own potential.
    """
    n = electrode.anode_V.size
    found = [_solved(electrode.block(slice(at, at + BLOCK))) for at in range(0, n, BLOCK)]
    if len(found) == 1:
        return found[0]
    return Balance(
        np.concatenate([b.potential_V for b in found]),
        np.concatenate([b.anodic_A_per_m2 for b in found]),
        np.concatenate([b.reductions_A_per_m2 for b in found], axis=1),
        np.concatenate([b.hydrogen_A_per_m2 for b in found]),
        np.concatenate([b.oxygen_A_per_m2 for b in found]),
        np.concatenate([b.imbalance for b in found]),
        max(b.steps for b in found),
    )


class _Curves:
    """Currents and their slopes at a potential, with everything that does not move worked out."""

    def __init__(self, one: Electrode) -> None:
        self.one = one
        self.per_thermal = 1.0 / one.thermal_V
        self.per_anode = 1.0 / one.anode_slope_V
        self.per_hydrogen = 1.0 / one.hydrogen_slope_V
        self.per_oxygen = 1.0 / one.oxygen_slope_V
        self.same_slope = bool(np.all(self.per_hydrogen == self.per_oxygen))
        self.offsets = [
            np.exp((one.anode_V - r.equilibrium_V) * (r.electrons * self.per_thermal))
            for r in one.reductions
        ]
        start = -one.anode_V * self.per_hydrogen
        supplied = one.hydrogen_limit_A_per_m2 > 0.0
        self.acid = np.where(supplied, one.hydrogen_acid_A_per_m2 * np.exp(start), 0.0)
        self.water = one.hydrogen_water_A_per_m2 * np.exp(start)
        self.acid_over_limit = _over(self.acid, one.hydrogen_limit_A_per_m2)
        self.oxygen_over_limit = _over(
            one.oxygen_A_per_m2 * np.exp((one.oxygen_V - one.anode_V) * self.per_oxygen),
            one.oxygen_limit_A_per_m2,
        )
        self.has_oxygen = bool(np.any(one.oxygen_limit_A_per_m2 > 0.0))
        self.has_anode_limit = bool(np.any(np.isfinite(one.anode_limit_A_per_m2)))

    def anodic(self, above: Array) -> tuple[Array, Array]:
        """Anodic current and its slope, exact close to the metal's own potential too."""
        one = self.one
        forward = one.anode_A_per_m2 * np.exp(above * self.per_anode)
        turn = -one.anode_electrons * self.per_thermal
        net = -np.expm1(above * turn)
        current = forward * net
        slope = current * self.per_anode - forward * (1.0 - net) * turn
        if self.has_anode_limit:
            held = 1.0 / (1.0 + current / one.anode_limit_A_per_m2)
            current, slope = current * held, slope * held * held
        return current, slope

    def cathodic(self, above: Array, step: Array) -> tuple[list[Array], Array, Array, Array]:
        """Reductions, hydrogen, oxygen, and minus the slope of their sum."""
        one = self.one
        fall = np.zeros_like(above)
        reductions = []
        for reduction, offset in zip(one.reductions, self.offsets, strict=True):
            back = offset * step**reduction.electrons
            flows = back < 1.0
            part = np.where(flows, back, 1.0)
            reductions.append(reduction.limit_A_per_m2 * (1.0 - part))
            fall += (
                reduction.limit_A_per_m2
                * np.where(flows, part, 0.0)
                * (reduction.electrons * self.per_thermal)
            )
        down = np.exp(-above * self.per_hydrogen)
        held = 1.0 / (1.0 + self.acid_over_limit * down)
        acid, water = self.acid * down * held, self.water * down
        fall += (acid * held + water) * self.per_hydrogen
        oxygen = np.zeros_like(above)
        if self.has_oxygen:
            drive = self.oxygen_over_limit * (
                down if self.same_slope else np.exp(-above * self.per_oxygen)
            )
            share = drive / (1.0 + drive)
            oxygen = one.oxygen_limit_A_per_m2 * share
            fall += oxygen * (1.0 - share) * self.per_oxygen
        return reductions, acid + water, oxygen, fall


def _over(current: Array, limit: Array) -> Array:
    """Current over its limit; without supply the share of it is nothing at any potential."""
    return np.divide(current, limit, out=np.zeros_like(limit), where=limit > 0.0)


def _solved(one: Electrode) -> Balance:
    curves = _Curves(one)
    low = np.full(one.anode_V.shape, _INSIDE_V)
    high = np.maximum(_highest(one) - one.anode_V, 2.0 * _INSIDE_V)
    idle = _idle(curves)
    above = _first_guess(curves, low, high)
    steps = 0
    for steps in range(1, MOST_STEPS + 1):  # noqa: B007 - the count is part of the result
        turn = np.exp(above * curves.per_thermal)
        anodic, rise = curves.anodic(above)
        reductions, hydrogen, oxygen, fall = curves.cathodic(above, turn)
        cathodic = sum(reductions, hydrogen + oxygen)
        with np.errstate(divide="ignore", invalid="ignore"):
            gap = np.log(anodic / cathodic)
            move = -gap / (rise / anodic + fall / cathodic)
        closed = idle | (np.abs(anodic - cathodic) <= BALANCE_TOLERANCE * anodic)
        if closed.all():
            break
        low, high = np.where(gap < 0.0, above, low), np.where(gap > 0.0, above, high)
        trial = above + move
        inside = (trial > low) & (trial < high)
        trial = np.where(closed, above, np.where(inside, trial, 0.5 * (low + high)))
        if np.all(np.abs(trial - above) <= 2e-16 * np.abs(one.anode_V)):
            break
        above = trial
    return _balance(one, curves, np.where(idle, 0.0, above), steps)


def _idle(curves: _Curves) -> NDArray[np.bool_]:
    """Where nothing stands above the metal: nothing is reduced even at its own potential."""
    still = np.zeros(curves.one.anode_V.shape)
    reductions, hydrogen, oxygen, _ = curves.cathodic(still, np.ones_like(still))
    return np.asarray(sum(reductions, hydrogen + oxygen) <= 0.0)


def _highest(one: Electrode) -> Array:
    """A potential at which the metal surely gives more than is taken.

    Reductions with an end are over at their own potential. Hydrogen and oxygen follow Tafel lines
    without end: above this each is below a quarter of what the metal gives a decade above its own.
    """
    highest = one.anode_V + one.anode_slope_V * _LN10
    for reduction in one.reductions:
        flows = reduction.limit_A_per_m2 > 0.0
        highest = np.where(flows, np.maximum(highest, reduction.equilibrium_V), highest)
    least = 1.0 / (1.0 / (8.0 * one.anode_A_per_m2) + 1.0 / one.anode_limit_A_per_m2)
    made = np.maximum(one.hydrogen_acid_A_per_m2 + one.hydrogen_water_A_per_m2, 1e-300)
    highest = np.maximum(highest, one.hydrogen_slope_V * np.log(4.0 * made / least))
    ends = one.oxygen_V + one.oxygen_slope_V * np.log(4.0 * one.oxygen_A_per_m2 / least)
    return np.where(one.oxygen_limit_A_per_m2 > 0.0, np.maximum(highest, ends), highest)


def _first_guess(curves: _Curves, low: Array, high: Array) -> Array:
    """Where the metal alone would give all limiting currents."""
    one = curves.one
    limits = one.oxygen_limit_A_per_m2 + curves.water
    for reduction in one.reductions:
        limits = limits + np.where(
            reduction.equilibrium_V > one.anode_V, reduction.limit_A_per_m2, 0.0
        )
    guess = one.anode_slope_V * np.log1p(limits / one.anode_A_per_m2)
    return np.asarray(np.clip(guess, low, 0.5 * (low + high)))


def _balance(one: Electrode, curves: _Curves, above: Array, steps: int) -> Balance:
    turn = np.exp(above * curves.per_thermal)
    anodic, _ = curves.anodic(above)
    reductions, hydrogen, oxygen, _ = curves.cathodic(above, turn)
    stacked = np.stack(reductions) if reductions else np.zeros((0, above.size))
    cathodic = stacked.sum(axis=0) + hydrogen + oxygen
    through = np.maximum(anodic, cathodic)
    gap = np.abs(anodic - cathodic)
    imbalance = np.divide(gap, through, out=np.zeros_like(gap), where=through > 0.0)
    return Balance(one.anode_V + above, anodic, stacked, hydrogen, oxygen, imbalance, steps)
