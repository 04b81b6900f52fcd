"""Whatever states an ore's rate (particle law, rate law or ore curve) as a plant needs it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.kinetics import OreCurve, ParticleLaw, RateLaw
from leachkin.problems import argument_error
from leachkin.scaleup.checks import above_zero, finite, flat, share
from leachkin.scaleup.ore_measure import OreMeasure, measure_of_curve, measure_of_particles
from leachkin.testwork import SizeDistribution

Array = NDArray[np.float64]
Law = ParticleLaw | RateLaw | OreCurve


@dataclass(frozen=True)
class OreLaw:
    """An ore as a plant sees it.

    Attributes
    ----------
    measure : OreMeasure
        Increments of extraction against equivalent time; one row, or one a draw.
    batch : tuple of int
        Batch shape of the law, () or (n,).
    reference_g_per_L : float or None
        Reagent strength at which the times hold; None where the law does not say.
    order : ndarray, shape batch, or None
        Order of the drive in the reagent; None where the law has no single one.
    pace : ndarray, shape batch + (stages,) or (stages,)
        Equivalent hours an hour in each stage at the reference strength.
    """

    measure: OreMeasure
    batch: tuple[int, ...]
    reference_g_per_L: float | None
    order: Array | None
    pace: Array

    def strengths(self, feed_g_per_L: Array | None) -> tuple[Array, Array]:
        """Return the feed strength and the reference strength, each B or ().

        A law that names no reference strength holds at that of the feed.
        """
        reference = self.reference_g_per_L
        if feed_g_per_L is None:
            alone = np.asarray(1.0 if reference is None else reference, dtype=np.float64)
            return alone, alone
        own = feed_g_per_L if reference is None else np.asarray(reference, dtype=np.float64)
        return feed_g_per_L, np.where(own > 0.0, own, 1.0)

    def checked_order(self, feed_g_per_L: Array | None) -> Array:
        """Return the order, B or ().

        Raises
        ------
        InputProblems
            If the law has no single order above zero and a feed strength is given.
        """
        if feed_g_per_L is None:
            return np.ones(())
        if self.order is None:
            raise argument_error(
                "law",
                "resistances of different order in the reagent",
                "one order for all of them, so that one equivalent leach time serves",
                "fit again with one order, or leave the feed strength out to stay at the "
                "reference strength of the law",
            )
        return above_zero("order of the law", self.order, "")


def ore_law(
    law: Law,
    sizes: SizeDistribution | None = None,
    temperature_K: ArrayLike | None = None,
    ultimate: ArrayLike | None = None,
    reagent_order: ArrayLike | None = None,
    stages: int = 1,
) -> OreLaw:
    """Return an ore law for a plant of one or more stages.

    Parameters
    ----------
    law : ParticleLaw, RateLaw or OreCurve
    sizes : SizeDistribution
        With a RateLaw only, and needed there.
    temperature_K : array_like, shape () or (stages,), optional
        With a RateLaw only; its reference where left out.
    ultimate : array_like, B, optional
        Leachable fraction, with a ParticleLaw only; 1 where left out.
    reagent_order : array_like, B, optional
        With a ParticleLaw only; 1 where left out.
    stages : int

    Raises
    ------
    InputProblems
        If an argument does not go with the law, or the law has no single clock at several
        temperatures.
    """
    if isinstance(law, RateLaw):
        own = "a RateLaw holds its own"
        _only_with("ultimate", ultimate, "a ParticleLaw", own)
        _only_with("reagent_order", reagent_order, "a ParticleLaw", own)
        return _of_rate_law(law, _needed(sizes), temperature_K, stages)
    hint = "a ParticleLaw or an ore curve holds at one size mix and temperature: use a RateLaw"
    _only_with("sizes", sizes, "a RateLaw", hint)
    _only_with("temperature_K", temperature_K, "a RateLaw", hint)
    if isinstance(law, OreCurve):
        own = "an ore curve holds its own"
        _only_with("ultimate", ultimate, "a ParticleLaw", own)
        _only_with("reagent_order", reagent_order, "a ParticleLaw", own)
        n = law.batch_shape[0] if law.batch_shape else 1
        order = None if law.order is None else np.asarray(law.order, dtype=np.float64)
        return OreLaw(
            measure_of_curve(law, n), law.batch_shape, law.reagent_g_per_L, order, np.ones(stages)
        )
    if isinstance(law, ParticleLaw):
        order = above_zero("reagent_order", 1.0 if reagent_order is None else reagent_order, "")
        return _of_particle(law, 1.0 if ultimate is None else ultimate, order, stages)
    raise argument_error(
        "law", type(law).__name__, "a ParticleLaw, a RateLaw or an OreCurve", "fit.law of a fit"
    )


def _of_particle(law: ParticleLaw, ultimate: ArrayLike, order: Array, stages: int) -> OreLaw:
    leachable = share("ultimate", ultimate)
    batch = np.broadcast_shapes(law.batch_shape, leachable.shape, order.shape)
    if len(batch) > 1:
        raise argument_error("law", f"times of shape {batch}", "one number, or n draws of one size")
    n = batch[0] if batch else 1
    by_draw = _by_draw(law, [flat(part, n)[:, None] for part in law.times])
    measure = measure_of_particles(by_draw, flat(leachable, n)[:, None], np.zeros(n))
    return OreLaw(measure, batch, None, order, np.ones(stages))


def _by_draw(law: ParticleLaw, times: list[Array]) -> ParticleLaw:
    film, ash_layer, chemical = times
    return ParticleLaw(film=film, ash_layer=ash_layer, chemical=chemical, shape=law.shape)


def _of_rate_law(
    law: RateLaw, sizes: SizeDistribution, temperature_K: ArrayLike | None, stages: int
) -> OreLaw:
    base_K, pace = _paces(law, temperature_K, stages)
    batch = np.broadcast_shapes(law.batch_shape, base_K.shape)
    n = batch[0] if batch else 1
    times = law.times(sizes.size_mm, base_K)
    if not law.is_plain:
        measure = measure_of_curve(law.ore_curve(sizes, base_K), n)
    elif isinstance(times, ParticleLaw):
        by_draw = _by_draw(times, [flat(part, n, 1) for part in times.times])
        leachable = flat(law.class_weights(sizes, base_K), n, 1)
        measure = measure_of_particles(by_draw, leachable, flat(np.asarray(law.lag_h), n))
    else:
        measure = measure_of_curve(law.ore_curve(sizes), n)
        pace = pace * np.asarray(law.clock_rate(base_K))[..., None]
    return OreLaw(measure, batch, law.reference.reagent_g_per_L, law.order, pace)


def _paces(law: RateLaw, temperature_K: ArrayLike | None, stages: int) -> tuple[Array, Array]:
    """The temperature the measure holds at, B, and how much faster each stage runs."""
    if temperature_K is None:
        return np.asarray(law.reference.temperature_K), np.ones(stages)
    each = _by_stage(law, above_zero("temperature_K", temperature_K, "K"), stages)
    base = each[..., 0]
    if np.all(each == base[..., None]):
        return base, np.ones(stages)
    if not law.shared_clock(one_temperature=False):
        raise argument_error(
            "temperature_K",
            f"tanks from {each.min():g} to {each.max():g} K with resistances of different "
            "activation energy or order",
            "one temperature, or one activation energy and one order for all resistances: "
            "otherwise no single equivalent leach time serves the train",
            "one temperature for all tanks, or a law of one resistance",
        )
    rates = np.stack([law.clock_rate(each[..., stage]) for stage in range(stages)], axis=-1)
    return base, np.asarray(rates / rates[..., :1])


def _by_stage(law: RateLaw, temperature_K: Array, stages: int) -> Array:
    """Temperatures of shape B+(stages,), of (), (stages,), (n,), (n, 1) or (n, stages)."""
    shape = temperature_K.shape
    as_draws = len(shape) == 1 and shape[0] not in (1, stages) and law.batch_shape in ((), shape)
    by_stage = temperature_K[:, None] if as_draws else np.atleast_1d(temperature_K)
    if by_stage.ndim > 2 or by_stage.shape[-1] not in (1, stages):
        raise argument_error(
            "temperature_K",
            f"shape {shape}",
            f"one, one for each of {stages} tanks, or n draws of either",
            "draws of one temperature as shape (n, 1)",
        )
    return np.broadcast_to(by_stage, (*by_stage.shape[:-1], stages))


def _needed(sizes: SizeDistribution | None) -> SizeDistribution:
    if sizes is None:
        raise argument_error(
            "sizes",
            "none given",
            "the size classes of the feed",
            "SizeDistribution.single(size_mm)",
        )
    return sizes


def _only_with(name: str, value: object, allowed: str, try_this: str) -> None:
    if value is not None:
        raise argument_error(name, "given", f"only with {allowed}", try_this)


def one_strength(name: str, value: ArrayLike | None) -> Array | None:
    """Return a strength, not negative, or None."""
    if value is None:
        return None
    strength = finite(name, value)
    if np.any(strength < 0.0):
        raise argument_error(name, f"{strength.min():g} g/L", "at least 0 g/L", "check the sign")
    return strength
