"""Quantities of a fit beside times and sizes: drives, optional terms, a slow fraction."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from leachkin.errors import InputProblems
from leachkin.inference import Scale, from_natural
from leachkin.kinetics.drive import PARAMETERS, READS, DriveForm
from leachkin.kinetics.fit_elements import species_of
from leachkin.kinetics.fit_layout import SLOW, Layout, Quantity, Role
from leachkin.kinetics.fit_options import ORDER_BOUNDS, FitOptions, Spread
from leachkin.kinetics.other_laws import SHAPE_PARAMETERS
from leachkin.problems import argument_error, unknown_name
from leachkin.testwork import Observed

Array = NDArray[np.float64]

#: Optional terms by name.
TERMS = ("lag", "soluble", "fade", "loss", "renewal")
SHARE_BOUNDS = (0.005, 0.995)
SHAPE_BOUNDS = {
    "fast_share": (0.002, 0.998),
    "ratio": (1.0001, 1e6),
    "n": (0.05, 8.0),
    "slope": (0.005, 20.0),
}
#: Start, low and high of the parameters of drives, as multiples of the reference solution.
_DRIVE_STARTS: dict[str, tuple[Scale, float, float, float]] = {
    "second_order": ("linear", 0.5, *ORDER_BOUNDS),
    "preference": ("log", 1.0, 1e-4, 1e4),
    "saturation": ("log", 1.0, 1e-4, 1e4),
}
#: Distributions about P80: name of the fitted quantity, start, low and high.
SIZE_FAMILIES: dict[str, tuple[str, float, float, float]] = {
    "log_normal": ("spread", 0.6, 0.02, 3.0),
    "gates_gaudin_schuhmann": ("size_slope", 0.8, 0.2, 20.0),
    "rosin_rammler": ("size_slope", 1.1, 0.25, 20.0),
}
STIRRING_START, STIRRING_BOUNDS = 0.5, (-1.0, 3.0)


def quantity(
    name: str,
    role: Role,
    which: str,
    scale: Scale,
    value: float,
    bounds: tuple[float, float],
    *,
    unit: str = "",
    free: bool = True,
) -> Quantity:
    """Return a quantity from its value and bounds on the natural scale."""
    start, low, high = (float(from_natural(scale, v)) for v in (value, *bounds))
    return Quantity(name, role, which, scale, start, low, high, unit, free)


def named(stem: str, which: str) -> str:
    """Return the name of a quantity of a resistance.

    Examples
    --------
    >>> named("tau", "slow chemical"), named("activation_energy", "clock")
    ('slow_tau_chemical', 'activation_energy')
    """
    slow = f"{SLOW}_" if which.startswith(f"{SLOW} ") else ""
    kind = which.removeprefix(f"{SLOW} ")
    return slow + (stem if kind == "clock" else f"{stem}_{kind}")


def shape_quantities(law: str, part: str = "") -> list[Quantity]:
    """Return the shape parameters of an empirical law."""
    found = []
    for name in SHAPE_PARAMETERS.get(law, ()):
        scale: Scale = "logit" if name == "fast_share" else "log"
        start = 0.5 if name == "fast_share" else 1.2
        own = f"{SLOW}_{name}" if part else name
        found.append(quantity(own, "shape", part + name, scale, start, SHAPE_BOUNDS[name]))
    return found


def order_quantities(
    options: FitOptions, kinds: tuple[str, ...], spread: Spread, remarks: list[str]
) -> list[Quantity]:
    """Return the order in the reagent: one for all resistances, or one each."""
    asked = options.reagent_order
    if "reagent_order" not in PARAMETERS[options.drive.kind]:
        return []
    several = len(spread.strengths_g_per_L) > 1 or options.drive.kind == "acidity"
    if isinstance(asked, Mapping):
        return _orders_by_kind(options, asked, kinds)
    if not several and spread.strengths_g_per_L and not options.one_curve:
        order = "1" if asked == "free" else f"{asked:g}"
        remarks.append(f"one reagent strength was tested: order {order} in reagent is assumed")
    if asked != "free" and not ORDER_BOUNDS[0] <= asked <= ORDER_BOUNDS[1]:
        raise argument_error("reagent_order", f"{asked:g}", "-1 to 4, or 'free'")
    value = 1.0 if asked == "free" else float(asked)
    free = asked == "free" and several
    return [quantity("reagent_order", "order", "reagent", "linear", value, ORDER_BOUNDS, free=free)]


def _orders_by_kind(
    options: FitOptions, asked: Mapping[str, float | str], kinds: tuple[str, ...]
) -> list[Quantity]:
    if options.drive.kind != "power" or options.slow_law is not None:
        raise argument_error(
            "reagent_order", "one for each resistance", "only with drive 'power' and one fraction"
        )
    unknown = [kind for kind in asked if kind not in ("film", "ash_layer", "chemical", "clock")]
    if unknown:
        known = ["film", "ash_layer", "chemical"]
        raise InputProblems([unknown_name("resistance", unknown[0], known, column="reagent_order")])
    found = []
    for kind in kinds:
        own = asked.get(kind, 1.0)
        free = own == "free"
        value = 1.0 if isinstance(own, str) else float(own)
        which = "reagent" if len(kinds) == 1 else kind  # one resistance has one clock
        name = named("order", kind)
        found.append(quantity(name, "order", which, "linear", value, ORDER_BOUNDS, free=free))
    return found


def stirring_quantities(kinds: tuple[str, ...], spread: Spread, part: str = "") -> list[Quantity]:
    """Return the power of the stirring speed in the rate of a film, fitted where it was varied."""
    several = len(spread.stirring_rpm) > 1
    return [
        quantity(
            named("stirring_exponent", part + kind),
            "stirring",
            part + kind,
            "linear",
            STIRRING_START if several and kind == "film" else 0.0,
            STIRRING_BOUNDS,
            free=several and kind == "film",
        )
        for kind in kinds
        if kind in ("film", "clock")
    ]


def drive_quantities(form: DriveForm, tests: Sequence[Observed], layout: Layout) -> list[Quantity]:
    """Return the parameters of a drive beyond the reagent order."""
    found = []
    for name in PARAMETERS[form.kind]:
        if name == "reagent_order":
            continue
        if name == "solubility_g_per_L":
            top = max(float(species_of(o, layout, "metal").max()) for o in tests)
            bounds = (1.001 * top, 1e4 * top)
            found.append(quantity(name, "drive", name, "log", 2.0 * top, bounds, unit="g/L"))
            continue
        scale, start, low, high = _DRIVE_STARTS[name]
        found.append(quantity(name, "drive", name, scale, start, (low, high)))
    return found


def drive_reference_of(
    form: DriveForm, tests: Sequence[Observed], layout: Layout
) -> dict[str, float]:
    """Return the reference solution: the middle of what the tests had; the metal at 0."""
    found = {}
    for role in READS[form.kind]:
        if role == "reagent":
            found[role] = layout.reference.reagent_g_per_L
        elif role == "metal":
            found[role] = 0.0
        else:
            means = np.array([float(np.mean(species_of(o, layout, role))) for o in tests])
            if role == "pH":
                found[role] = float(means.mean())
                continue
            if not (means > 0.0).all():
                raise argument_error(role, f"{means.min():g} g/L on average", "above 0 g/L")
            found[role] = float(np.exp(np.log(means).mean()))
    return found


def term_quantities(terms: Collection[str], tests: Sequence[Observed], unit: str) -> list[Quantity]:
    """Return the quantities of the optional terms asked for."""
    unknown = [term for term in terms if term not in TERMS]
    if unknown:
        raise InputProblems([unknown_name("term", unknown[0], TERMS, column="terms")])
    times = np.concatenate([o.time_h for o in tests])
    first, last = float(times[times > 0].min()), float(times.max())
    per = f"1/{unit}" if unit else ""
    found = []
    if "lag" in terms:
        found.append(quantity("lag", "lag", "lag", "linear", 0.3 * first, (0.0, last), unit=unit))
    if "soluble" in terms:
        found.append(quantity("soluble_share", "soluble", "share", "linear", 0.05, (0.0, 0.98)))
    if "fade" in terms:
        fastest = 10.0 / first
        found.append(
            quantity("fade", "fade", "fade", "linear", 0.3 / last, (0.0, fastest), unit=per)
        )
    if "loss" in terms:
        rates = (0.01 / last, 30.0 / first)
        found += [
            quantity("loss_capacity", "loss", "capacity", "linear", 0.05, (1e-6, 1.0)),
            quantity("loss_rate", "loss", "rate", "log", 3.0 / last, rates, unit=per),
        ]
    if "renewal" in terms:
        rate = 0.3 / last
        found.append(
            quantity("renewal", "renewal", "reagent", "linear", rate, (0.0, 10.0 / first), unit=per)
        )
    return found


def spread_quantity(asked: float | str, family: str) -> Quantity:
    """Return the spread of sizes within a test: standard deviation over mean, or the slope."""
    if family not in SIZE_FAMILIES:
        problem = unknown_name("family", family, SIZE_FAMILIES, column="size_family")
        raise InputProblems([problem])
    name, start, low, high = SIZE_FAMILIES[family]
    free = asked == "free"
    value = start if isinstance(asked, str) else float(asked)
    if not (free or low <= value <= high):
        raise argument_error("spread", f"{asked}", f"{low:g} to {high:g}")
    return quantity(name, "spread", "sizes", "log", value, (low, high), free=free)


def share_quantity() -> Quantity:
    """Return the share of the leachable metal in the slow fraction."""
    return quantity("slow_share", SLOW, "share", "logit", 0.3, SHARE_BOUNDS)
