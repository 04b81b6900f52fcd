"""Extraction of a fit where one clock serves each fraction: exact along any history.

The hours at the reference solution are the sum of the drive up to each reading; one inversion of
the law at those hours gives the conversion, whatever the solution did on the way.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.inference import natural_slope
from leachkin.kinetics.drive import ln_drive
from leachkin.kinetics.fit_elements import Elements, Exposure
from leachkin.kinetics.fit_grains import GrainSteps
from leachkin.kinetics.fit_layout import SLOW, Key, Layout
from leachkin.kinetics.ore_terms import effective_hours
from leachkin.kinetics.other_laws import clock_conversion_and_sensitivities
from leachkin.kinetics.particle_law import conversion_and_log_sensitivities, particle_conversion

Array = NDArray[np.float64]
PARTICLE_KINDS = ("film", "ash_layer", "chemical")


@dataclass(frozen=True)
class _Hours:
    """Hours that count at each reading, B + (M,), and d(hours)/d(natural quantity)."""

    hours: Array
    slopes: Mapping[Key, Array]


@dataclass(frozen=True)
class ClockPath:
    """Extraction and its derivatives by the quantities of a layout.

    ``grains`` stands where no one clock serves the resistances of a fraction.
    """

    elements: Elements
    exposure: Exposure
    grains: GrainSteps | None = None

    def extraction(self, layout: Layout, full: Array) -> Array:
        """Return the extraction at every reading, shape B + (M,)."""
        return self._mixed(layout, full, frozenset())[0]

    def extraction_and_gradient(self, layout: Layout, full: Array) -> tuple[Array, Array]:
        """Return E, B + (M,), and its derivatives by the free quantities, B + (M, p)."""
        wanted = frozenset((q.role, q.which) for q in layout.free)
        E, slopes = self._mixed(layout, full, wanted)
        gradient = np.zeros((*E.shape, len(layout.free)))
        for j, quantity in enumerate(layout.free):
            key = (quantity.role, quantity.which)
            if key in slopes:
                value = full[..., layout.position(*key)]
                scale = np.asarray(natural_slope(quantity.scale, value))[..., None]
                by_logarithm = quantity.role == "time"
                gradient[..., j] = slopes[key] if by_logarithm else slopes[key] * scale
        return E, gradient

    def _mixed(
        self, layout: Layout, full: Array, wanted: frozenset[Key]
    ) -> tuple[Array, dict[Key, Array]]:
        """E and dE/d(natural quantity), fractions and soluble share put together."""
        el = self.elements
        soluble = _column(layout, full, ("soluble", "share"))
        slow = _column(layout, full, (SLOW, "share"))
        X, slopes = self._conversions(layout, full, "", wanted)
        mixed = X
        if layout.slow_kinds:
            X_slow, slow_slopes = self._conversions(layout, full, f"{SLOW} ", wanted)
            mixed = (1.0 - slow) * X + slow * X_slow
            slopes = {key: (1.0 - slow) * slope for key, slope in slopes.items()}
            for key, slope in slow_slopes.items():
                slopes[key] = slopes.get(key, 0.0) + slow * slope
            slopes[(SLOW, "share")] = X_slow - X
        held = el.share * (layout.ultimates(full) @ el.weights.T)
        dissolved = soluble + (1.0 - soluble) * mixed
        found = {key: el.over_classes(held * (1.0 - soluble) * s) for key, s in slopes.items()}
        found[("soluble", "share")] = el.over_classes(held * (1.0 - mixed))
        for role, which in wanted:
            if role == "ultimate":
                by = el.share * el.weights[:, int(which)] * dissolved
                found[(role, which)] = el.over_classes(by)
        return el.over_classes(held * dissolved), found

    def _conversions(
        self, layout: Layout, full: Array, part: str, wanted: frozenset[Key]
    ) -> tuple[Array, dict[Key, Array]]:
        """X and dX/d(quantity) of one fraction, each B + (L,); of times by their logarithms."""
        el = self.elements
        kinds = layout.slow_kinds if part else layout.kinds
        if self.grains is not None and len(kinds) > 1:
            return self.grains.conversions(layout, el, full, part, wanted)
        hours = self._hours(layout, full, part, wanted)
        at = hours.hours[..., el.reading_of]
        times = {kind: np.exp(ln_times(layout, el, full, part + kind)) for kind in kinds}
        X, by_kind, by_shape = _law(layout, full, part, times, at, sloped=bool(wanted))
        slopes: dict[Key, Array] = {}
        if not wanted:
            return X, slopes
        by_hours = -sum(by_kind.values())  # dX/d ln(hours)
        for kind in kinds:
            own = self._by_time(layout, full, part + kind, by_kind[kind], wanted)
            for key, slope in own.items():
                slopes[key] = slopes.get(key, 0.0) + slope
        for name, slope in by_shape.items():
            slopes[("shape", part + name)] = slope
        safe = np.where(hours.hours > 0.0, hours.hours, 1.0)
        for key, slope in hours.slopes.items():
            slopes[key] = slopes.get(key, 0.0) + by_hours * (slope / safe)[..., el.reading_of]
        return X, slopes

    def _by_time(
        self, layout: Layout, full: Array, which: str, by_log: Array, wanted: frozenset[Key]
    ) -> dict[Key, Array]:
        """DX/d(quantity) of everything that is linear in ln(tau) of one resistance."""
        el = self.elements
        covariates: dict[str, Array | float] = {
            "activation_energy": el.thermal,
            "size_exponent": el.ln_size,
            "stirring": -el.ln_stirring,
            "order": -el.ln_strength,
        }
        slopes: dict[Key, Array] = {}
        if ("time", which) in wanted:
            slopes[("time", which)] = -by_log if which.endswith("clock") else by_log
        if layout.has("spread", "sizes"):
            sigma, by_spread = (part[..., None] for part in layout.size_scale(full))
            covariates["size_exponent"] = el.ln_size + sigma * el.deviate
            exponent = full[..., layout.position("size_exponent", which), None]
            slopes[("spread", "sizes")] = by_log * exponent * by_spread * el.deviate
        for role, covariate in covariates.items():
            key: Key = (role, which)
            if key in wanted:
                slopes[key] = by_log * covariate
        return slopes

    def _hours(self, layout: Layout, full: Array, part: str, wanted: frozenset[Key]) -> _Hours:
        exposure = self.exposure
        values, slopes = drive_at_nodes(layout, exposure, full)
        warmed = layout.warmed_kind(part)
        if warmed is not None and exposure.drift.any():
            key: Key = ("activation_energy", warmed)
            energy = full[..., layout.position(*key), None]
            values = values - energy * exposure.drift
            slopes[key] = -exposure.drift
        rate = np.exp(values)
        hours = exposure.summed(rate)
        moved = {
            key: exposure.summed(rate * slope) for key, slope in slopes.items() if key in wanted
        }
        if not layout.has("lag", "lag") and not layout.has("fade", "fade"):
            return _Hours(hours, moved)
        lag, fade = _column(layout, full, ("lag", "lag")), _column(layout, full, ("fade", "fade"))
        found = effective_hours(hours, lag, fade)
        moved = {key: found.by_hours * slope for key, slope in moved.items()}
        moved[("lag", "lag")], moved[("fade", "fade")] = found.by_lag, found.by_fade
        return _Hours(found.hours, moved)


def ln_times(layout: Layout, elements: Elements, full: Array, which: str) -> Array:
    """Return ln(tau) of a resistance at every element, shape B + (L,)."""
    ln_time = layout.ln_time(full, which)[..., None]
    energy = full[..., layout.position("activation_energy", which), None]
    exponent = full[..., layout.position("size_exponent", which), None]
    found = ln_time + energy * elements.thermal + exponent * elements.ln_size
    if layout.has("spread", "sizes"):
        found = found + exponent * layout.size_scale(full)[0][..., None] * elements.deviate
    if layout.has("stirring", which):
        found = found - full[..., layout.position("stirring", which), None] * elements.ln_stirring
    if layout.has("order", which):
        found = found - full[..., layout.position("order", which), None] * elements.ln_strength
    return np.asarray(found)


def drive_at_nodes(
    layout: Layout, exposure: Exposure, full: Array
) -> tuple[Array, dict[Key, Array]]:
    """Return ln of the drive at the nodes, B + (K,), and its derivatives by quantity."""
    if layout.drive_form.kind == "power" and not layout.has("order", "reagent"):
        return np.zeros(exposure.width_h.size), {}  # orders by resistance stand in the times
    parameters = {name: value[..., None] for name, value in layout.drive_parameters(full).items()}
    value, slopes = ln_drive(
        layout.drive_form.kind, exposure.values, layout.drive_reference, parameters
    )
    return value, {layout.drive_key(name): slope for name, slope in slopes.items()}


def _law(
    layout: Layout,
    full: Array,
    part: str,
    times: Mapping[str, Array],
    at: Array,
    sloped: bool,
) -> tuple[Array, dict[str, Array], dict[str, Array]]:
    """X, dX/d ln(time) by kind, dX/d(shape) by name; no derivatives of a particle unless asked."""
    if "clock" in times:
        name = layout.slow_law_name if part else layout.law_name
        shapes = {k: v[..., None] for k, v in layout.shapes(full, part).items()}
        theta = at / times["clock"]
        X, slope, by_shape = clock_conversion_and_sensitivities(name, theta, shapes)
        return X, {"clock": -theta * slope}, dict(by_shape)
    film, ash_layer, chemical = (times.get(kind, np.zeros(())) for kind in PARTICLE_KINDS)
    if not sloped:
        return particle_conversion(film, ash_layer, chemical, at), {}, {}
    X, *slopes = conversion_and_log_sensitivities(film, ash_layer, chemical, at)
    by_kind = dict(zip(PARTICLE_KINDS, slopes, strict=True))
    return X, {kind: by_kind[kind] for kind in times}, {}


def _column(layout: Layout, full: Array, key: Key) -> Array:
    """Return a quantity on its natural scale with an axis for what it meets; 0 without it."""
    if not layout.has(*key):
        return np.zeros(())
    return layout.natural(full, layout.position(*key))[..., None]
