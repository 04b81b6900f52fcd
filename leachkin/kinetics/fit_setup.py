"""From what is asked of a fit to the layout of its quantities."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.inference import from_natural, natural_slope
from leachkin.kinetics.fit_layout import SLOW, Layout, Quantity
from leachkin.kinetics.fit_options import (
    EXPONENT_BOUNDS,
    LN_HEAD_MARGIN,
    LN_TIME_MARGIN,
    ULTIMATE_BOUNDS,
    ENERGY_BOUNDS_kJ_per_mol,
    FitOptions,
    Spread,
    box_of,
    reference_of,
)
from leachkin.kinetics.fit_start import rough_ultimates
from leachkin.kinetics.fit_terms import (
    drive_quantities,
    drive_reference_of,
    named,
    order_quantities,
    quantity,
    shape_quantities,
    share_quantity,
    spread_quantity,
    stirring_quantities,
    term_quantities,
)
from leachkin.kinetics.other_laws import (
    NO_ULTIMATE,
    THEORY_SIZE_EXPONENT,
    canonical_law,
    law_terms,
)
from leachkin.kinetics.rate_law_checks import knot_weights, linear_weights
from leachkin.kinetics.resistance import THEORY_SIZE_EXPONENTS
from leachkin.problems import argument_error, unknown_name
from leachkin.testwork import Observed

Array = NDArray[np.float64]


def layout_of(options: FitOptions, tests: Sequence[Observed]) -> tuple[Layout, tuple[str, ...]]:
    """Return the layout of a fit, and what was assumed in words.

    Raises
    ------
    InputProblems
        For an unknown law, term or drive, an unknown name in free or fixed, a value out of range,
        or a species that the drive needs and the readings lack.
    """
    spread = Spread.of(tests)
    options = replace(options, law=canonical_law(options.law))
    _check_terms(options)
    kinds = law_terms(options.law)
    remarks: list[str] = []
    reference = options.reference or reference_of(spread)
    knots, kelvin = _knots(options, spread)
    by_test = options.ultimate == "by test" and options.law not in NO_ULTIMATE
    bare = Layout(
        law_name=options.law,
        kinds=kinds,
        quantities=(),
        reference=reference,
        knot_size_mm=knots,
        box=box_of(tests, spread, reference),
        drive_form=options.drive,
        knot_temperature_K=kelvin,
        knot_tests=tuple(o.test for o in tests) if by_test else (),
        size_family=options.size_family,
    )
    bare = replace(bare, drive_reference=drive_reference_of(options.drive, tests, bare))
    quantities = [
        *_fraction(options, options.law, kinds, spread, tests, remarks),
        *order_quantities(options, kinds, spread, remarks),
        *drive_quantities(options.drive, tests, bare),
        *term_quantities(options.terms, tests, options.time_unit),
        *_ultimates(options, tests, bare),
        *_heads(tests),
    ]
    if options.spread is not None:
        quantities.append(spread_quantity(options.spread, options.size_family))
    if options.slow_law is not None:
        slow = canonical_law(options.slow_law)
        terms = law_terms(slow)
        quantities += _fraction(options, slow, terms, spread, tests, remarks, f"{SLOW} ")
        quantities.append(share_quantity())
        bare = replace(bare, slow_law_name=slow, slow_kinds=terms)
    return replace(bare, quantities=_asked(tuple(quantities), options)), tuple(remarks)


def _check_terms(options: FitOptions) -> None:
    if "renewal" in options.terms and not options.balances:
        raise argument_error(
            "terms", "renewal without a reagent balance", "balances= for the tests", ""
        )
    if options.balances and {"lag", "fade"} & set(options.terms):
        raise argument_error("terms", "a lag or a fade with a reagent by balance", "one of the two")
    if options.balances and options.drive.kind != "power":
        found = f"{options.drive.kind!r} with a reagent by balance"
        raise argument_error("drive", found, "'power'")


def _fraction(
    options: FitOptions,
    law: str,
    kinds: tuple[str, ...],
    spread: Spread,
    tests: Sequence[Observed],
    remarks: list[str],
    part: str = "",
) -> list[Quantity]:
    """Return the quantities of one ore fraction."""
    return [
        *_times(options, law, kinds, tests, part),
        *shape_quantities(law, part),
        *_energies(options, kinds, spread, remarks, part),
        *_exponents(options, law, kinds, spread, remarks, part),
        *stirring_quantities(kinds, spread, part),
    ]


def _times(
    options: FitOptions,
    law: str,
    kinds: tuple[str, ...],
    tests: Sequence[Observed],
    part: str,
) -> list[Quantity]:
    times = np.concatenate([o.time_h for o in tests])
    times = times[times > 0]
    middle = float(np.exp(np.mean(np.log(times))))
    low = math.exp(math.log(times.min()) - LN_TIME_MARGIN)
    high = math.exp(math.log(times.max()) + LN_TIME_MARGIN)
    if kinds == ("clock",):
        name = named("k_slow" if law == "two_rate" else "k", f"{part}clock")
        unit = f"1/{options.time_unit}" if options.time_unit else ""
        rates = (1.0 / high, 1.0 / low)
        return [quantity(name, "time", f"{part}clock", "log", 1.0 / middle, rates, unit=unit)]
    unit = options.time_unit
    return [
        quantity(named("tau", part + k), "time", part + k, "log", middle, (low, high), unit=unit)
        for k in kinds
    ]


def _energies(
    options: FitOptions,
    kinds: tuple[str, ...],
    spread: Spread,
    remarks: list[str],
    part: str,
) -> list[Quantity]:
    several = len(spread.temperatures_K) > 1
    names = [named("activation_energy", part + kind) for kind in kinds]
    known = {*options.fixed, *options.priors}
    missing = [name for name in names if name not in known]
    if not several and missing and not options.one_curve:
        said = (
            "one temperature was tested: activation energies are not known and held at 0, so the "
            "law holds at that temperature only (give them by fixed= to carry it elsewhere)"
        )
        if said not in remarks:
            remarks.append(said)
    return [
        quantity(
            name,
            "activation_energy",
            part + kind,
            "linear",
            40.0 if several else 0.0,
            ENERGY_BOUNDS_kJ_per_mol,
            unit="kJ/mol",
            free=several,
        )
        for name, kind in zip(names, kinds, strict=True)
    ]


def _exponents(
    options: FitOptions,
    law: str,
    kinds: tuple[str, ...],
    spread: Spread,
    remarks: list[str],
    part: str,
) -> list[Quantity]:
    several = len(spread.sizes_mm) > 1
    theory = {**THEORY_SIZE_EXPONENTS, "clock": THEORY_SIZE_EXPONENT.get(law, 0.0)}
    empirical = kinds == ("clock",) and law not in THEORY_SIZE_EXPONENT
    free = several and (empirical or options.size_exponents == "free")
    if several and empirical:
        remarks.append(
            f"{law} has no theory of size: its size exponent is fitted and holds between "
            "the sizes tested only"
        )
    if options.size_exponents == "free" and not several and not options.one_curve and not part:
        remarks.append("one size was tested: size exponents are held by theory")
    return [
        quantity(
            named("size_exponent", part + kind),
            "size_exponent",
            part + kind,
            "linear",
            1.0 if empirical and several else theory[kind],
            EXPONENT_BOUNDS,
            free=free,
        )
        for kind in kinds
    ]


def _knots(options: FitOptions, spread: Spread) -> tuple[Array, Array | None]:
    """Return the sizes at which the ultimate is given, or one size and the temperatures."""
    by_temperature = options.ultimate == "by temperature" and options.law not in NO_ULTIMATE
    if by_temperature and len(spread.temperatures_K) > 1:
        return np.ones(1), np.array(spread.temperatures_K)
    by_size = options.ultimate == "by size" and options.law not in NO_ULTIMATE
    if by_size and spread.sizes_mm:
        return np.array(spread.sizes_mm), None
    sizes = spread.sizes_mm or (1.0,)
    return np.array([float(np.exp(np.mean(np.log(sizes))))]), None


def _ultimates(options: FitOptions, tests: Sequence[Observed], layout: Layout) -> list[Quantity]:
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
    if asked not in ("by size", "by temperature", "by test", "one"):
        allowed = "'by size', 'by temperature', 'by test', 'one', or a number up to 1"
        raise argument_error("ultimate", repr(asked), allowed)
    starts = rough_ultimates(tests, [_test_weights(o, layout) for o in tests])
    return [
        quantity(name, "ultimate", str(i), "logit", float(starts[i]), ULTIMATE_BOUNDS)
        for i, name in enumerate(_ultimate_names(layout))
    ]


def _ultimate_names(layout: Layout) -> list[str]:
    if layout.knot_tests:
        return [f"ultimate_{test}" for test in layout.knot_tests]
    if layout.knot_temperature_K is not None:
        return [f"ultimate_{kelvin:.4g}_K" for kelvin in layout.knot_temperature_K.tolist()]
    sizes = layout.knot_size_mm.tolist()
    return ["ultimate"] if len(sizes) == 1 else [f"ultimate_{size:.4g}_mm" for size in sizes]


def _test_weights(observed: Observed, layout: Layout) -> Array:
    knots = layout.knot_size_mm
    if layout.knot_tests:
        return np.asarray(np.eye(len(layout.knot_tests))[layout.knot_tests.index(observed.test)])
    if layout.knot_temperature_K is not None:
        return linear_weights(np.asarray(observed.temperature_K), layout.knot_temperature_K)
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
