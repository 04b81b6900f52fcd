"""From what is asked of a fit to the layout of its quantities."""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.inference import from_natural, natural_slope
from leachkin.kinetics.box import DataBox
from leachkin.kinetics.fit_layout import Layout, Quantity, Role
from leachkin.kinetics.fit_start import rough_ultimates
from leachkin.kinetics.other_laws import (
    NO_ULTIMATE,
    SHAPE_PARAMETERS,
    THEORY_SIZE_EXPONENT,
    canonical_law,
    law_terms,
)
from leachkin.kinetics.rate_law import knot_weights
from leachkin.kinetics.resistance import THEORY_SIZE_EXPONENTS, Reference
from leachkin.problems import argument_error, unknown_name
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Two test sizes, temperatures or strengths closer than this, relative, are the same.
SAME = 1e-3

#: Bounds on the natural scale.
ENERGY_BOUNDS_kJ_per_mol = (-100.0, 400.0)
EXPONENT_BOUNDS = (-2.0, 6.0)
ORDER_BOUNDS = (-1.0, 4.0)
ULTIMATE_BOUNDS = (0.005, 0.99995)
SHAPE_BOUNDS = {
    "fast_share": (0.002, 0.998),
    "ratio": (1.0001, 1e6),
    "n": (0.05, 8.0),
    "slope": (0.005, 20.0),
}
LN_TIME_MARGIN = 14.0
LN_HEAD_MARGIN = 1.0


@dataclass(frozen=True)
class FitOptions:
    """What is asked of a fit of several tests; see ``fit_tests`` for the meaning."""

    law: str
    free: Collection[str] = ()
    fixed: Mapping[str, float] = field(default_factory=dict)
    priors: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    ultimate: float | Literal["by size", "one"] = "by size"
    reference: Reference | None = None
    size_exponents: Literal["theory", "free"] = "theory"
    reagent_order: float | Literal["free"] = 1.0
    level: float = 0.95
    time_unit: str = "h"
    one_curve: bool = False


@dataclass(frozen=True)
class Spread:
    """Which conditions the tests differ in."""

    sizes_mm: tuple[float, ...]
    temperatures_K: tuple[float, ...]
    strengths_g_per_L: tuple[float, ...]

    @classmethod
    def of(cls, tests: Sequence[Observed]) -> Spread:
        """Collect the distinct sizes, temperatures and strengths."""
        return cls(
            _distinct([o.sizes.mass_mean_mm for o in tests if o.sizes is not None]),
            _distinct([o.temperature_K for o in tests]),
            _distinct([o.reagent_g_per_L for o in tests if o.reagent_g_per_L is not None]),
        )


def _distinct(values: Sequence[float]) -> tuple[float, ...]:
    found: list[float] = []
    for value in sorted(values):
        if not found or value > found[-1] * (1.0 + SAME):
            found.append(float(value))
    return tuple(found)


def reference_of(spread: Spread) -> Reference:
    """Return the middle of the tests: the reference where none is asked for."""
    sizes = spread.sizes_mm or (1.0,)
    strengths = spread.strengths_g_per_L or (1.0,)
    return Reference(
        temperature_K=float(np.mean(spread.temperatures_K)),
        reagent_g_per_L=float(np.exp(np.mean(np.log(strengths)))),
        size_mm=float(np.exp(np.mean(np.log(sizes)))),
    )


def box_of(tests: Sequence[Observed], spread: Spread, reference: Reference) -> DataBox:
    """Return the box of the data: what a prediction may use without leaving it."""
    sizes = [size for o in tests if o.sizes is not None for size in o.sizes.size_mm]
    sizes = sizes or [reference.size_mm]
    times = np.concatenate([o.time_h for o in tests])
    strengths = spread.strengths_g_per_L
    return DataBox(
        temperature_K=(spread.temperatures_K[0], spread.temperatures_K[-1]),
        size_mm=(float(min(sizes)), float(max(sizes))),
        reagent_g_per_L=(strengths[0], strengths[-1]) if strengths else None,
        time_h=(float(times[times > 0].min()), float(times.max())),
    )


def layout_of(options: FitOptions, tests: Sequence[Observed]) -> tuple[Layout, tuple[str, ...]]:
    """Return the layout of a fit, and what was assumed in words.

    Raises
    ------
    InputProblems
        For an unknown law, an unknown name in free or fixed, or a value out of range.
    """
    spread = Spread.of(tests)
    options = replace(options, law=canonical_law(options.law))
    kinds = law_terms(options.law)
    remarks: list[str] = []
    knots = _knots(options, spread)
    quantities = [
        *_times(options, kinds, tests),
        *_shapes(options, kinds),
        *_energies(options, kinds, spread, remarks),
        *_exponents(options, kinds, spread, remarks),
        _order(options, spread, remarks),
        *_ultimates(options, tests, knots),
        *_heads(tests),
    ]
    reference = options.reference or reference_of(spread)
    layout = Layout(
        law_name=options.law,
        kinds=kinds,
        quantities=_asked(tuple(quantities), options),
        reference=reference,
        knot_size_mm=knots,
        box=box_of(tests, spread, reference),
    )
    return layout, tuple(remarks)


def _quantity(
    name: str,
    role: Role,
    which: str,
    scale: Literal["linear", "log", "logit"],
    value: float,
    bounds: tuple[float, float],
    **more: object,
) -> Quantity:
    fitted = [float(from_natural(scale, v)) for v in (value, *bounds)]
    return Quantity(name, role, which, scale, *fitted, **more)  # type: ignore[arg-type]


def _times(
    options: FitOptions, kinds: tuple[str, ...], tests: Sequence[Observed]
) -> list[Quantity]:
    times = np.concatenate([o.time_h for o in tests])
    times = times[times > 0]
    middle = float(np.exp(np.mean(np.log(times))))
    low = math.exp(math.log(times.min()) - LN_TIME_MARGIN)
    high = math.exp(math.log(times.max()) + LN_TIME_MARGIN)
    if kinds == ("clock",):
        name = "k_slow" if options.law == "two_rate" else "k"
        unit = f"1/{options.time_unit}" if options.time_unit else ""
        rates = (1.0 / high, 1.0 / low)
        return [_quantity(name, "time", "clock", "log", 1.0 / middle, rates, unit=unit)]
    return [
        _quantity(f"tau_{kind}", "time", kind, "log", middle, (low, high), unit=options.time_unit)
        for kind in kinds
    ]


def _shapes(options: FitOptions, kinds: tuple[str, ...]) -> list[Quantity]:
    if kinds != ("clock",):
        return []
    found = []
    for name in SHAPE_PARAMETERS[options.law]:
        low, high = SHAPE_BOUNDS[name]
        scale: Literal["log", "logit"] = "logit" if name == "fast_share" else "log"
        start = 0.5 if name == "fast_share" else 1.2
        found.append(_quantity(name, "shape", name, scale, start, (low, high)))
    return found


def _named(stem: str, kind: str) -> str:
    return stem if kind == "clock" else f"{stem}_{kind}"


def _energies(
    options: FitOptions, kinds: tuple[str, ...], spread: Spread, remarks: list[str]
) -> list[Quantity]:
    several = len(spread.temperatures_K) > 1
    names = [_named("activation_energy", kind) for kind in kinds]
    known = {*options.fixed, *options.priors}
    missing = [name for name in names if name not in known]
    if not several and missing and not options.one_curve:
        remarks.append(
            "one temperature was tested: activation energies are not known and held at 0, so the "
            "law holds at that temperature only (give them by fixed= to carry it elsewhere)"
        )
    return [
        _quantity(
            name,
            "activation_energy",
            kind,
            "linear",
            40.0 if several else 0.0,
            ENERGY_BOUNDS_kJ_per_mol,
            unit="kJ/mol",
            free=several,
        )
        for name, kind in zip(names, kinds, strict=True)
    ]


def _exponents(
    options: FitOptions, kinds: tuple[str, ...], spread: Spread, remarks: list[str]
) -> list[Quantity]:
    several = len(spread.sizes_mm) > 1
    theory = {**THEORY_SIZE_EXPONENTS, "clock": THEORY_SIZE_EXPONENT.get(options.law, 0.0)}
    empirical = kinds == ("clock",) and options.law not in THEORY_SIZE_EXPONENT
    free = several and (empirical or options.size_exponents == "free")
    if several and empirical:
        remarks.append(
            f"{options.law} has no theory of size: its size exponent is fitted and holds between "
            "the sizes tested only"
        )
    if options.size_exponents == "free" and not several and not options.one_curve:
        remarks.append("one size was tested: size exponents are held by theory")
    return [
        _quantity(
            _named("size_exponent", kind),
            "size_exponent",
            kind,
            "linear",
            1.0 if empirical and several else theory[kind],
            EXPONENT_BOUNDS,
            free=free,
        )
        for kind in kinds
    ]


def _order(options: FitOptions, spread: Spread, remarks: list[str]) -> Quantity:
    asked = options.reagent_order
    several = len(spread.strengths_g_per_L) > 1
    if not several and spread.strengths_g_per_L and not options.one_curve:
        order = "1" if asked == "free" else f"{asked:g}"
        remarks.append(f"one reagent strength was tested: order {order} in reagent is assumed")
    if asked != "free" and not ORDER_BOUNDS[0] <= asked <= ORDER_BOUNDS[1]:
        raise argument_error("reagent_order", f"{asked:g}", "-1 to 4, or 'free'")
    value = 1.0 if asked == "free" else float(asked)
    free = asked == "free" and several
    return _quantity("reagent_order", "order", "reagent", "linear", value, ORDER_BOUNDS, free=free)


def _knots(options: FitOptions, spread: Spread) -> Array:
    by_size = options.ultimate == "by size" and options.law not in NO_ULTIMATE
    if by_size and spread.sizes_mm:
        return np.array(spread.sizes_mm)
    sizes = spread.sizes_mm or (1.0,)
    return np.array([float(np.exp(np.mean(np.log(sizes))))])


def _ultimates(options: FitOptions, tests: Sequence[Observed], knots: Array) -> list[Quantity]:
    asked = options.ultimate
    if isinstance(asked, str) and options.law in NO_ULTIMATE:
        asked = 1.0
    if not isinstance(asked, str):
        if not 0.0 < asked <= 1.0:
            raise argument_error(
                "ultimate",
                f"{asked:g}",
                "above 0 and at most 1, 'free', 'one' or 'by size'",
                f"ultimate={asked / 100:g}" if 1.0 < asked <= 100.0 else "",
            )
        held = Quantity("ultimate", "ultimate", "0", "linear", float(asked), 0.0, 1.0, free=False)
        return [held]
    if asked not in ("by size", "one"):
        raise argument_error("ultimate", repr(asked), "'by size', 'one', or a number up to 1")
    starts = rough_ultimates(tests, [_test_weights(o, knots) for o in tests])
    names = (
        ["ultimate"] if knots.size == 1 else [f"ultimate_{size:.4g}_mm" for size in knots.tolist()]
    )
    return [
        _quantity(name, "ultimate", str(i), "logit", float(starts[i]), ULTIMATE_BOUNDS)
        for i, name in enumerate(names)
    ]


def _test_weights(observed: Observed, knots: Array) -> Array:
    if observed.sizes is None:
        return np.full(knots.size, 1.0 / knots.size)
    weights = knot_weights(observed.sizes.size_mm, knots)
    return np.asarray(observed.sizes.metal_share @ weights)


def _heads(tests: Sequence[Observed]) -> list[Quantity]:
    found = []
    for observed in tests:
        ln_head = math.log(observed.head_kg_per_t)
        free = observed.head_sd_kg_per_t > 0
        sd = observed.head_sd_kg_per_t / observed.head_kg_per_t if free else None
        found.append(
            Quantity(
                f"head_{observed.test}",
                "head",
                observed.test,
                "log",
                ln_head,
                ln_head - LN_HEAD_MARGIN,
                ln_head + LN_HEAD_MARGIN,
                "kg/t",
                free,
                sd,
            )
        )
    return found


def _asked(quantities: tuple[Quantity, ...], options: FitOptions) -> tuple[Quantity, ...]:
    """Apply free and fixed by name."""
    names = [q.name for q in quantities]
    asked = (*options.free, *options.fixed, *options.priors)
    unknown = [name for name in asked if name not in names]
    if unknown:
        raise InputProblems([unknown_name("parameter", n, names, column="free") for n in unknown])
    both = sorted(set(options.fixed) & set(options.priors))
    if both:
        raise argument_error(both[0], "both fixed and with a prior", "one of the two")
    return tuple(_one_asked(q, options) for q in quantities)


def _one_asked(quantity: Quantity, options: FitOptions) -> Quantity:
    if quantity.name in options.fixed:
        value = float(options.fixed[quantity.name])
        if quantity.role == "ultimate":  # 1 has no finite log-odds
            quantity = replace(quantity, scale="linear", low=0.0, high=1.0)
        with np.errstate(all="ignore"):
            fitted = float(from_natural(quantity.scale, value))
        if not math.isfinite(fitted) or not quantity.low <= fitted <= quantity.high:
            raise argument_error(quantity.name, f"{value:g}", "a finite value in its range")
        return replace(quantity, start=fitted, free=False, prior_sd=None)
    if quantity.name in options.priors:
        return _with_prior(quantity, *options.priors[quantity.name])
    if quantity.name in options.free:
        return replace(quantity, free=True)
    return quantity


def _with_prior(quantity: Quantity, centre: float, sd: float) -> Quantity:
    """Return a quantity fitted about a value known beforehand, both on its natural scale."""
    if not (math.isfinite(sd) and sd > 0.0):
        raise argument_error(quantity.name, f"a prior of standard deviation {sd:g}", "above 0")
    with np.errstate(all="ignore"):
        fitted = float(from_natural(quantity.scale, centre))
    if not math.isfinite(fitted) or not quantity.low <= fitted <= quantity.high:
        raise argument_error(quantity.name, f"a prior about {centre:g}", "a value in its range")
    slope = float(natural_slope(quantity.scale, np.asarray(fitted)))
    return replace(quantity, start=fitted, free=True, prior_sd=sd / slope)
