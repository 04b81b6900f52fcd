"""A rate law from printed constants, and what the plant changes in any law before it uses it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.settings import Settings
from leachkin.constants import GAS_CONSTANT_J_per_mol_K
from leachkin.errors import InputProblems
from leachkin.kinetics import (
    LAW_NAMES,
    DataBox,
    RateLaw,
    Reference,
    Resistance,
    law_terms,
)
from leachkin.problems import Problem, argument_error, unknown_name
from leachkin.scaleup import lengthen

Array = NDArray[np.float64]
_TAU_OF = {"film": "tau_film", "ash_layer": "tau_ash_layer", "chemical": "tau_chemical"}


def law_from_print(settings: Settings, count: int = 0, seed: int = 0) -> RateLaw:
    """Return the law of ``[rate_law]``.

    Parameters
    ----------
    settings : Settings
    count : int
        0 for the stated values; otherwise the number of draws over the stated ranges.
    seed : int

    Returns
    -------
    RateLaw
        Batch shape () or, where draws are asked for and a range is stated, (count,).

    Raises
    ------
    InputProblems
        If the law is unknown or a constant that it needs is missing.
    """
    name = str(settings.get("rate_law.law"))
    if name not in LAW_NAMES and "+" not in name:
        raise InputProblems([unknown_name("law", name, LAW_NAMES, column="rate_law.law")])
    terms = law_terms(name)
    order = settings.number("rate_law.reagent_order")
    resistances = tuple(_resistance(settings, term, order, count, seed) for term in terms)
    sizes, ultimate = _ultimate(settings, count, seed)
    return RateLaw(
        name=name,
        resistances=resistances,
        reference=Reference(
            temperature_K=settings.number("rate_law.reference_temperature"),
            reagent_g_per_L=settings.number("rate_law.reference_reagent"),
            size_mm=settings.number("rate_law.reference_size"),
        ),
        ultimate_size_mm=sizes,
        ultimate=ultimate,
        shape_parameters=_shape_parameters(settings, count, seed),
        box=_box(settings),
    )


def _resistance(settings: Settings, term: str, order: float, count: int, seed: int) -> Resistance:
    is_clock = term not in _TAU_OF
    key = "k" if is_clock else _TAU_OF[term]
    value = _drawn(settings, f"rate_law.{key}", count, seed)
    if value is None:
        unit = "1/h" if is_clock else "h"
        raise argument_error(
            f"rate_law.{key}",
            "nothing",
            f"a value in {unit}",
            f'add {key} = "1 {unit}" under [rate_law]',
        )
    energy_key = "activation_energy" if is_clock else f"activation_energy_{term}"
    energy = _drawn(settings, f"rate_law.{energy_key}", count, seed)
    return Resistance(
        kind="clock" if is_clock else term,  # type: ignore[arg-type]
        ln_tau=-np.log(value) if is_clock else np.log(value),
        activation_energy_kJ_per_mol=0.0 if energy is None else energy,
        order=order,
    )


def _drawn(settings: Settings, key: str, count: int, seed: int) -> Array | float | None:
    if count:
        return settings.draw(key, count, seed)
    value = settings.get(key)
    return None if value is None else float(value)


def missing_energies(settings: Settings) -> tuple[str, ...]:
    """Return the activation energies that a printed law would need at another temperature."""
    terms = law_terms(str(settings.get("rate_law.law")))
    keys = [f"activation_energy_{t}" if t in _TAU_OF else "activation_energy" for t in terms]
    return tuple(key for key in keys if settings.get(f"rate_law.{key}") is None)


def _ultimate(settings: Settings, count: int, seed: int) -> tuple[Array, Array]:
    knots = settings.group("rate_law.ultimate")
    if knots:
        return _knots(settings, "rate_law.ultimate", count, seed)
    value = _drawn(settings, "rate_law.ultimate", count, seed)
    if value is None:
        raise argument_error(
            "rate_law.ultimate",
            "nothing",
            "a fraction, or values by size",
            'add ultimate = "85 %" under [rate_law]',
        )
    sizes = np.array([settings.number("rate_law.reference_size")])
    return sizes, np.asarray(value, dtype=float)[..., None]


def _knots(settings: Settings, table: str, count: int, seed: int) -> tuple[Array, Array]:
    """Return knots of ultimate extraction; one draw moves all sizes alike."""
    sizes = np.array(settings.get(f"{table}.sizes_mm"), dtype=float)
    value = np.array(settings.get(f"{table}.values"), dtype=float)
    low, high = (settings.get(f"{table}.{end}") for end in ("low", "high"))
    _check_knots(table, sizes, value, low, high)
    if not count or low is None or high is None:
        return sizes, value
    position = np.random.default_rng([seed, len(table)]).triangular(-1.0, 0.0, 1.0, count)[:, None]
    down, up = value - np.array(low), np.array(high) - value
    return sizes, value + np.where(position < 0.0, position * down, position * up)


def _check_knots(table: str, sizes: Array, value: Array, *ends: tuple[float, ...] | None) -> None:
    lengths = {len(sizes), len(value), *(len(end) for end in ends if end is not None)}
    if len(lengths) > 1 or np.any(np.diff(sizes) <= 0.0):
        raise argument_error(
            table,
            f"sizes {sizes.tolist()} with {len(value)} values",
            "as many values as sizes, the sizes rising",
            "count them again",
        )
    if (ends[0] is None) != (ends[1] is None):
        raise argument_error(table, "one end of the range", "low and high, or neither")


def _shape_parameters(settings: Settings, count: int, seed: int) -> Mapping[str, Array]:
    names = ("n", "fast_share", "ratio")
    found = {name: _drawn(settings, f"rate_law.{name}", count, seed) for name in names}
    return {name: np.asarray(value) for name, value in found.items() if value is not None}


def _box(settings: Settings) -> DataBox | None:
    ranges = {
        name: settings.get(f"rate_law.{name}_range") for name in ("temperature", "size", "time")
    }
    if any(value is None for value in ranges.values()):
        return None
    strength = settings.number("rate_law.reference_reagent")
    return DataBox(
        temperature_K=tuple(ranges["temperature"]),
        size_mm=tuple(ranges["size"]),
        reagent_g_per_L=(strength, strength),
        time_h=tuple(ranges["time"]),
    )


def at_temperature(law: RateLaw, temperature_K: Array | float) -> RateLaw:
    """Return the law with its times at a temperature, which may be drawn, shape (n,)."""
    thermal = (
        1e3
        / GAS_CONSTANT_J_per_mol_K
        * (1.0 / np.asarray(temperature_K) - 1.0 / law.reference.temperature_K)
    )
    changed = tuple(
        replace(one, ln_tau=one.ln_tau + one.activation_energy_kJ_per_mol * thermal)
        for one in law.resistances
    )
    return replace(law, resistances=changed)


def lengthened(law: RateLaw, factor: Array | float) -> RateLaw:
    """Return the law with its diffusion length multiplied by the heap's length factor.

    A law without an ash layer has no such length and stays as it is.
    """
    if not has_ash_layer(law):
        return law
    longer = lengthen(law, factor)
    return longer if isinstance(longer, RateLaw) else law


def has_ash_layer(law: RateLaw) -> bool:
    """Return whether a length of diffusion means anything to a law."""
    return any(one.kind == "ash_layer" for one in law.resistances)


def with_ultimate_knots(
    law: RateLaw, settings: Settings, table: str, count: int, seed: int
) -> RateLaw:
    """Return the law with stated ultimate extractions added to its own, or put in their place."""
    if not settings.group(table):
        return law
    sizes, values = _knots(settings, table, count, seed)
    own_size, own = np.asarray(law.ultimate_size_mm), np.asarray(law.ultimate)
    keep = [i for i, d in enumerate(own_size) if np.all(np.abs(np.log(sizes / d)) > 0.01)]
    batch = np.broadcast_shapes(own.shape[:-1], values.shape[:-1])
    merged = np.concatenate(
        [
            np.broadcast_to(own[..., keep], (*batch, len(keep))),
            np.broadcast_to(values, (*batch, values.shape[-1])),
        ],
        axis=-1,
    )
    merged_size = np.concatenate([own_size[keep], sizes])
    rising = np.argsort(merged_size)
    return replace(law, ultimate_size_mm=merged_size[rising], ultimate=merged[..., rising])


def flat_sizes(law: RateLaw, size_mm: Array) -> tuple[float, ...]:
    """Return the plant sizes outside the known ultimate extractions, where the nearest is held."""
    known = np.asarray(law.ultimate_size_mm)
    if len(known) < 2:
        return ()
    outside = (size_mm < 0.99 * known.min()) | (size_mm > 1.01 * known.max())
    return tuple(float(d) for d in size_mm[outside])


def law_problem(error: InputProblems) -> tuple[Problem, ...]:
    """Return the problems of an error as this layer keeps them."""
    return tuple(p for p in error.problems if isinstance(p, Problem))
