"""What a fit should say in words: each remark is raised by the data and carries its number."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import Estimate
from leachkin.kinetics.fit_design import FitDesign
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: A reading tells about the rate while this share of the leachable metal is not yet dissolved.
PLATEAU = 0.97
FEW_POINTS = 3
#: A test that ends below this share of its ultimate extraction has not reached it.
REACHED = 0.97
#: A head this many standard deviations from its assay, and this far, is worth a look.
HEAD_DEVIATIONS = 2.0
HEAD_SHARE = 0.03
HALF = 0.5
#: A test that ends unfinished with less than this share of its reagent was starved.
STARVED = 0.05
#: A logged temperature further than this from the test's own is worth a word [K].
TEMPERATURE_SLACK_K = 2.0


def shares_dissolved(design: FitDesign, vector: Array) -> list[Array]:
    """Return, for each test, the extraction at its readings over its own ultimate extraction."""
    pairs = zip(design.extractions(vector), design.limits(vector), strict=True)
    return [E / limit for E, limit in pairs]


def remarks(
    tests: Sequence[Observed], design: FitDesign, estimate: Estimate, level: float
) -> list[str]:
    """Return the remarks on a fit, the most useful first."""
    shares = shares_dissolved(design, estimate.vector)
    return [
        *_wide_scatter(estimate),
        *_short_of_points(tests, shares),
        *_not_reached(tests, shares, design),
        *_starved(tests, shares),
        *_drifting(tests),
        *_odd_heads(tests, design, estimate),
        *_wide_intervals(design, estimate, level),
        *_left_open(design, estimate),
    ]


def _wide_scatter(estimate: Estimate) -> list[str]:
    if estimate.widening == 1.0:
        return []
    return [
        f"the scatter is {estimate.widening:.2g} times the stated precision (chance below 1 %): "
        "intervals were widened by that factor; look for an odd test or row, or a law that "
        "does not fit"
    ]


def _short_of_points(tests: Sequence[Observed], shares: list[Array]) -> list[str]:
    found = []
    for observed, share in zip(tests, shares, strict=True):
        rising = int(np.sum((observed.time_h > 0) & (share < PLATEAU)))
        if rising <= FEW_POINTS and observed.time_h.size > rising:
            found.append(f"{observed.test} ({rising})")
    if not found:
        return []
    return [
        f"three or fewer readings before the plateau: {', '.join(found)}; earlier samples would "
        "tell more about the rate"
    ]


def _not_reached(tests: Sequence[Observed], shares: list[Array], design: FitDesign) -> list[str]:
    if not any(q.role == "ultimate" for q in design.layout.free):
        return []
    found = [
        f"{observed.test} ({100 * share[-1]:.0f} % of it)"
        for observed, share in zip(tests, shares, strict=True)
        if share[-1] < REACHED
    ]
    if not found:
        return []
    return [
        f"the ultimate extraction was not reached in {', '.join(found)}: there it is held by the "
        "shape of the law or by other tests, not seen"
    ]


def _starved(tests: Sequence[Observed], shares: list[Array]) -> list[str]:
    found = []
    for observed, share in zip(tests, shares, strict=True):
        history = observed.history
        if history is None or history.reagent_g_per_L is None:
            continue
        strength = history.reagent_g_per_L
        left = strength.min() / strength[0]
        if left < HALF:
            starved = left < STARVED and share[-1] < REACHED
            found.append(f"{observed.test} ({100 * left:.0f} %{': starved' if starved else ''})")
    if not found:
        return []
    return [
        f"reagent fell below half of its start in {', '.join(found)}: a plateau there may be want "
        "of reagent and not the ultimate extraction"
    ]


def _drifting(tests: Sequence[Observed]) -> list[str]:
    found = []
    for observed in tests:
        if observed.history is not None:
            off = np.abs(observed.history.temperature_K - observed.temperature_K).max()
            if off > TEMPERATURE_SLACK_K:
                found.append(f"{observed.test} (by {off:.1f} K)")
    if not found:
        return []
    return [
        f"the logged temperature strays from the test's in {', '.join(found)}: the fit followed "
        "the log"
    ]


def _odd_heads(tests: Sequence[Observed], design: FitDesign, estimate: Estimate) -> list[str]:
    found = []
    heads = design.layout.heads(estimate.vector)
    for observed in tests:
        if observed.head_sd_kg_per_t <= 0:
            continue
        ratio = float(heads[observed.test]) / observed.head_kg_per_t
        deviations = abs(np.log(ratio)) * observed.head_kg_per_t / observed.head_sd_kg_per_t
        if deviations > HEAD_DEVIATIONS and abs(ratio - 1.0) > HEAD_SHARE:
            found.append(f"{observed.test} ({100 * (ratio - 1):+.0f} %)")
    if not found:
        return []
    return [f"the head found by the fit is far from the assay head in {', '.join(found)}"]


def _wide_intervals(design: FitDesign, estimate: Estimate, level: float) -> list[str]:
    if not estimate.converged:
        return []
    widths = []
    for j, quantity in enumerate(design.layout.free):
        if quantity.role == "activation_energy":
            interval = estimate.interval(j, level)
            if interval.low is not None and interval.high is not None:
                widths.append((0.5 * (interval.high - interval.low), quantity.name))
    if not widths:
        return []
    half, name = max(widths)
    text = f"the widest activation energy is {name}, within {half:.2g} kJ/mol either way"
    if len(widths) > 1:
        narrow, other = min(widths)
        text += f" ({other}: {narrow:.2g})"
    return [text]


def _left_open(design: FitDesign, estimate: Estimate) -> list[str]:
    found = [
        f"{q.name}: {estimate.reasons[j]}"
        for j, q in enumerate(design.layout.free)
        if estimate.reasons[j]
    ]
    return [f"not settled by the data: {'; '.join(found)}"] if found else []


def what_to_look_at(tests: Sequence[Observed], design: FitDesign, estimate: Estimate) -> str:
    """Return what to look at in the data after a fit that did not converge, likeliest first."""
    shares = shares_dissolved(design, estimate.vector)
    advice = []
    rising = sum(
        int(np.sum((o.time_h > 0) & (s < PLATEAU))) for o, s in zip(tests, shares, strict=True)
    )
    if rising <= FEW_POINTS:
        advice.append(f"only {rising} readings before the plateau: earlier samples are needed")
    if max(float(s[-1]) for s in shares) < 0.8 and _ultimate_free(design):
        advice.append(
            "the curve has not bent towards an ultimate extraction: run longer, or give ultimate ="
        )
    worst = int(np.argmax(np.abs(estimate.residuals[: design.value.size])))
    for observed, part in zip(tests, design.slices, strict=True):
        if part.rows.start <= worst < part.rows.stop:
            row = worst - part.rows.start
            advice.append(
                f"the row furthest from the fit is {observed.row_kind[row]} of {observed.test} at "
                f"{observed.row_time_h[row]:g}"
            )
    advice.append("the law may have more parts than the data hold: try a smaller one")
    return "; ".join(advice)


def _ultimate_free(design: FitDesign) -> bool:
    return any(q.role == "ultimate" for q in design.layout.free)
