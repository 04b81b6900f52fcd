"""The quantities that candidates would set free, beside those that the present tests fit.

An activation energy that one temperature cannot tell, an ultimate extraction at a new size, the
power of the stirring speed, and whatever is held and asked for.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import LeastSquaresProblem, from_natural, least_squares
from leachkin.kinetics.fit_layout import Layout, Quantity
from leachkin.kinetics.fit_result import FitResult
from leachkin.kinetics.next_tests_candidate import Candidate
from leachkin.kinetics.rate_law import RateLaw
from leachkin.problems import argument_error
from leachkin.testwork import Observed

Array = NDArray[np.float64]
Assumed = Mapping[str, tuple[float, float | None]]

#: Conditions closer than this, relative, are the same.
SAME = 1e-3
STIRRING = "stirring_power"
#: Powers of the stirring speed in the rate that are thought of.
STIRRING_RANGE = (-1.0, 2.0)
#: Margin of the logarithm of a head, as in a fit.
LN_HEAD_MARGIN = 1.0


def freed_by_temperature(
    fit: FitResult, tests: Sequence[Observed], candidates: Sequence[Candidate]
) -> list[str]:
    """Activation energies that one temperature could not tell and another one would."""
    tested = {o.temperature_K for o in tests}
    if max(tested) > min(tested) * (1.0 + SAME):
        return []
    if all(same(c.bottle.temperature_K, max(tested)) for c in candidates):
        return []
    return [
        q.name
        for q in fit.layout.quantities
        if q.role == "activation_energy" and not q.free and q.which not in fit.not_needed
    ]


def held_with_a_range(fit: FitResult, assumed: Mapping[str, object]) -> list[str]:
    """Held quantities of the layout that a range is assumed for."""
    return [
        q.name
        for q in fit.layout.quantities
        if q.name in assumed and not q.free and q.which not in fit.not_needed
    ]


def freed_layout(fit: FitResult, names: set[str], assumed: Assumed) -> tuple[Layout, Array]:
    """Return the layout with quantities set free, and its vector at the present estimate.

    Where an assumed value differs from the one that the fit held, the rest is fitted again.
    """
    full = fit.layout.expand(fit.vector)
    moved = False
    quantities = []
    for i, q in enumerate(fit.layout.quantities):
        if q.name in names and q.name in assumed:
            start = float(from_natural(q.scale, assumed[q.name][0]))
            if not q.low <= start <= q.high:
                raise argument_error(f"assumed {q.name}", f"{assumed[q.name][0]:g}", "in its range")
            moved |= abs(start - full[i]) > 1e-12
            q = replace(q, start=start)
        quantities.append(q)
    held = replace(fit.layout, quantities=tuple(quantities))
    vector = _refitted(fit, held) if moved else fit.vector
    full = held.expand(vector)
    freed = tuple(
        replace(q, free=True, start=float(full[i])) if q.name in names else q
        for i, q in enumerate(held.quantities)
    )
    layout = replace(held, quantities=freed)
    return layout, full[layout.free_index]


def _refitted(fit: FitResult, layout: Layout) -> Array:
    """Return the fitted vector with other values held."""
    if fit.design is None:
        return fit.vector
    free = layout.free
    again = least_squares(
        LeastSquaresProblem(
            names=tuple(q.name for q in free),
            start=fit.vector,
            low=np.array([q.low for q in free]),
            high=np.array([q.high for q in free]),
            residuals_and_jacobian=replace(fit.design, layout=layout).residuals_and_jacobian,
            scales=tuple(q.scale for q in free),
            stated=fit.estimate.stated,
        )
    )
    return again.vector


def knot_of(layout: Layout, candidate: Candidate) -> float:
    """Return the size [mm], or the temperature [K], that the ultimate of a candidate goes by."""
    if layout.knot_temperature_K is not None:
        return float(candidate.bottle.temperature_K)
    return candidate.bottle.sizes.mass_mean_mm


def new_knot_name(layout: Layout, at: float) -> str:
    """Return the name of the ultimate extraction at a size or temperature, as a fit names it."""
    if layout.knot_temperature_K is not None:
        return f"ultimate_{at:.4g}_K"
    return f"ultimate_{at:.4g}_mm"


def new_knots(
    layout: Layout,
    vector: Array,
    tests: Sequence[Observed],
    candidates: Sequence[Candidate],
    assumed: Assumed,
    ultimate: Literal["by size", "one"] = "by size",
) -> list[Quantity]:
    """Return the ultimates that a fit of the candidates too would have more, in rising order."""
    if layout.knot_temperature_K is not None:
        present = [float(t) for t in layout.knot_temperature_K]
        tested = [o.temperature_K for o in tests]
    else:
        present = [float(d) for d in layout.knot_size_mm]
        tested = [o.sizes.mass_mean_mm for o in tests if o.sizes is not None]
    alike = bool(tested) and same(min(tested), max(tested))
    by_condition = len(present) > 1 or (alike and ultimate == "by size")
    if not by_condition or not any(q.role == "ultimate" for q in layout.free):
        return []
    asked = sorted(knot_of(layout, c) for c in candidates)
    new: list[float] = []
    for at in asked:
        if not any(same(at, other) for other in (*present, *tested, *new)):
            new.append(at)
    return [_knot(layout, vector, at, assumed) for at in new]


def _knot(
    layout: Layout,
    vector: Array,
    at: float,
    assumed: Assumed,
) -> Quantity:
    name = new_knot_name(layout, at)
    law = layout.law(vector)
    by_temperature = layout.knot_temperature_K is not None
    where = (law.reference.size_mm, at) if by_temperature else (at, None)
    value = assumed[name][0] if name in assumed else float(law.ultimate_at(*where)[..., 0])
    like = next(q for q in layout.free if q.role == "ultimate")
    start = float(np.clip(from_natural("logit", value), like.low, like.high))
    return Quantity(name, "ultimate", repr(at), "logit", start, like.low, like.high)


def with_knot(law: RateLaw, at: float, value: Array) -> RateLaw:
    """Return a law with one more ultimate extraction among its sizes or temperatures."""
    by_temperature = law.ultimate_temperature_K is not None
    knots = law.ultimate_temperature_K if by_temperature else law.ultimate_size_mm
    knots = np.asarray(knots, dtype=np.float64)
    place = int(np.searchsorted(knots, at))
    more = np.insert(knots, place, at)
    batch = np.broadcast_shapes(law.ultimate.shape[:-1], value.shape)
    own = np.broadcast_to(law.ultimate, (*batch, knots.size))
    ultimate = np.insert(own, place, np.broadcast_to(value, batch), axis=-1)
    if by_temperature:
        return replace(law, ultimate=ultimate, ultimate_temperature_K=more)
    return replace(law, ultimate=ultimate, ultimate_size_mm=more)


def with_head(layout: Layout, observed: Observed) -> Layout:
    """Return the layout with the head of one more test, last among its quantities."""
    ln_head = float(np.log(observed.head_kg_per_t))
    relative = observed.head_sd_kg_per_t / observed.head_kg_per_t
    head = Quantity(
        f"head_{observed.test}",
        "head",
        observed.test,
        "log",
        ln_head,
        ln_head - LN_HEAD_MARGIN,
        ln_head + LN_HEAD_MARGIN,
        "kg/t",
        free=relative > 0.0,
        prior_sd=relative if relative > 0.0 else None,
    )
    return replace(layout, quantities=(*layout.quantities, head))


def stirring_quantity(tests: Sequence[Observed], candidates: Sequence[Candidate]) -> Quantity:
    """Return the power of the stirring speed in the whole rate, about none; which: the middle."""
    speeds = [o.stirring_rpm for o in tests if o.stirring_rpm]
    speeds = speeds or [c.stirring_rpm for c in candidates if c.stirring_rpm]
    if not speeds:
        raise argument_error(
            "of",
            "stirring, and no test or candidate has a stirring speed",
            "tests with a stirring speed",
            "write the speed of each test",
        )
    middle = float(np.exp(np.mean(np.log(speeds))))
    return Quantity(STIRRING, "stirring", repr(middle), "linear", 0.0, *STIRRING_RANGE)


def same(one: float, other: float) -> bool:
    """Return whether two conditions are one."""
    return abs(one - other) <= SAME * abs(other)
