"""The numbers of a tank train: extraction and reagent tank by tank, for a block of draws."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from leachkin.scaleup.ore_measure import OreMeasure
from leachkin.scaleup.residence import PanelWeights, panel_weights, stage_gains

Array = NDArray[np.float64]

#: Draws solved at once: the temporaries stay in the processor's cache.
BLOCK = 128
#: No grain is left after so many times the sum of the mean times.
LONGEST_IN_MEANS = 60.0
#: Newton steps at most, and the relative change of the mean time that ends them.
STEPS, TOLERANCE = 60, 1e-13


@dataclass(frozen=True)
class Gangue:
    """What a demand takes besides the metal; every array of shape (n,)."""

    per_extraction_kg_per_t: Array
    fast_kg_per_t: Array
    fast_h: Array
    slow_kg_per_t: Array
    slow_h: Array


@dataclass(frozen=True)
class TrainTask:
    """A train to be solved; arrays of shape (tanks, n) or (n,).

    Attributes
    ----------
    mean_h : ndarray, shape (tanks, n)
        Mean equivalent time in each tank if it held the reference strength [h].
    feed_ratio : ndarray, shape (n,)
        Strength of the feed over the reference strength.
    order : ndarray, shape (n,)
    solids_t_per_m3 : ndarray, shape (n,), or None
        Dry solids per volume of solution; None without a reagent balance.
    gangue : Gangue or None
    feed_g_per_L : ndarray, shape (n,)
    """

    measure: OreMeasure
    mean_h: Array
    feed_ratio: Array
    order: Array
    feed_g_per_L: Array
    solids_t_per_m3: Array | None = None
    gangue: Gangue | None = None


@dataclass(frozen=True)
class TrainCourse:
    """What a train does, every array of shape (tanks, n), cumulative at each outlet."""

    extraction: Array
    equivalent_h: Array
    reagent_g_per_L: Array
    taken_kg_per_t: Array


def solve_train(task: TrainTask) -> TrainCourse:
    """Return what a train does, solved in blocks of draws."""
    n = task.mean_h.shape[1]
    parts = [
        _solve_block(_rows(task, slice(low, min(low + BLOCK, n)))) for low in range(0, n, BLOCK)
    ]
    return TrainCourse(
        *(
            np.concatenate([getattr(part, field.name) for part in parts], axis=1)
            for field in fields(TrainCourse)
        )
    )


def _rows(task: TrainTask, rows: slice) -> TrainTask:
    measure = OreMeasure(*(getattr(task.measure, field.name)[rows] for field in fields(OreMeasure)))
    gangue = task.gangue and Gangue(
        *(getattr(task.gangue, field.name)[rows] for field in fields(Gangue))
    )
    return TrainTask(
        measure,
        task.mean_h[:, rows],
        task.feed_ratio[rows],
        task.order[rows],
        task.feed_g_per_L[rows],
        None if task.solids_t_per_m3 is None else task.solids_t_per_m3[rows],
        gangue,
    )


def _solve_block(task: TrainTask) -> TrainCourse:
    at_feed_h = task.mean_h * task.feed_ratio**task.order
    longest = LONGEST_IN_MEANS * at_feed_h.sum(axis=0)
    panels = panel_weights(task.measure, longest)
    if task.gangue is None or task.solids_t_per_m3 is None:
        gains = stage_gains(at_feed_h, panels) * (task.feed_ratio > 0.0)
        extraction = task.measure.start + np.cumsum(gains, axis=0)
        held = np.broadcast_to(task.feed_g_per_L, at_feed_h.shape)
        return TrainCourse(extraction, np.cumsum(at_feed_h, axis=0), held, 0.0 * at_feed_h)
    return _with_balance(task, task.gangue, task.solids_t_per_m3, at_feed_h, panels)


def _with_balance(
    task: TrainTask, gangue: Gangue, solids: Array, at_feed_h: Array, panels: PanelWeights
) -> TrainCourse:
    """Tank by tank downstream: one root each, for the mean time that the reagent left allows."""
    fed = task.feed_g_per_L > 0.0
    solids_per_feed = solids / np.where(fed, task.feed_g_per_L, 1.0)
    means, gained, taken, left = (np.zeros_like(at_feed_h) for _ in range(4))
    before = np.ones_like(task.feed_g_per_L)
    for number, at_feed in enumerate(at_feed_h):
        tank = _Tank(
            upstream_h=means[:number],
            at_feed_h=np.maximum(at_feed, panels.smallest_mean_h),
            before=before,
            order=task.order,
            solids_per_feed=solids_per_feed,
            at_once=task.measure.start if number == 0 else 0.0 * before,
            gangue=gangue,
            panels=panels,
        )
        mean, gain, take = tank.solve()
        means[number], gained[number], taken[number] = mean * fed, gain * fed, take * fed
        before = left[number] = (mean / tank.at_feed_h) ** (1.0 / task.order)
    return TrainCourse(
        task.measure.start * fed + np.cumsum(gained, axis=0),
        np.cumsum(means, axis=0),
        task.feed_g_per_L * left,
        np.cumsum(taken, axis=0),
    )


@dataclass(frozen=True)
class _Tank:
    """One tank of a train: its mean equivalent time is the unknown; arrays of shape (n,)."""

    upstream_h: Array
    at_feed_h: Array
    before: Array
    order: Array
    solids_per_feed: Array
    at_once: Array
    gangue: Gangue
    panels: PanelWeights

    def solve(self) -> tuple[Array, Array, Array]:
        """Return the mean time [h], the extraction gained and the reagent taken [kg/t].

        Newton in logarithms, in which both sides of the balance are nearly straight; kept in a
        bracket that is halved where a step leaves it.
        """
        low = np.log(self.panels.smallest_mean_h)
        high = np.log(self.at_feed_h) + self.order * np.log(self.before)
        high = np.maximum(high, low)
        log_mean = high
        for _ in range(STEPS):
            excess, slope, gain, take = self._balance(np.exp(log_mean))
            low = np.where(excess < 0.0, log_mean, low)
            high = np.where(excess >= 0.0, log_mean, high)
            step = log_mean - excess / slope
            inside = (step >= low) & (step <= high)
            new = np.where(inside, step, 0.5 * (low + high))
            if np.all(np.abs(new - log_mean) <= TOLERANCE * np.maximum(np.abs(log_mean), 1.0)):
                break
            log_mean = new
        return np.exp(log_mean), gain, take

    def _balance(self, mean_h: Array) -> tuple[Array, Array, Array, Array]:
        """Logarithm of reagent wanted over reagent there, its slope, the gain and the take."""
        stages = np.concatenate([self.upstream_h, mean_h[None], mean_h[None]])
        gains = stage_gains(stages, self.panels)
        gain, gain_slope = gains[-2], gains[-1]
        fast, fast_slope = self._part(self.gangue.fast_h, mean_h)
        slow, slow_slope = self._part(self.gangue.slow_h, mean_h)
        per, fast_most, slow_most = (
            self.gangue.per_extraction_kg_per_t,
            self.gangue.fast_kg_per_t,
            self.gangue.slow_kg_per_t,
        )
        take = per * (gain + self.at_once) + fast_most * fast + slow_most * slow
        take_slope = per * gain_slope + fast_most * fast_slope + slow_most * slow_slope
        left = (mean_h / self.at_feed_h) ** (1.0 / self.order)
        wanted = left + self.solids_per_feed * take
        slope = (left / self.order + self.solids_per_feed * take_slope) / wanted
        return np.log(wanted / self.before), slope, gain, take

    def _part(self, time_h: Array, mean_h: Array) -> tuple[Array, Array]:
        """Share of a first-order gangue taken in this tank, and its slope by ln(mean)."""
        still = np.prod(1.0 / (1.0 + self.upstream_h / time_h), axis=0)
        ratio = mean_h / time_h
        share = still * ratio / (1.0 + ratio)
        return share, share / (1.0 + ratio)
