"""Extraction of a fit grain by grain, where no one clock serves several resistances.

Orders by resistance in a changing solution, or energies by resistance at a changing temperature.
All tests and size classes step together, ``z -> depth(time(z) + dt)`` with the conditions of the
middle of each step; the derivatives step along. With ``G(z) = sum tau_i g_i(z)``:

    G'(z1) dz1 = G'(z0) dz0 + sum dtau_i (g_i(z0) - g_i(z1)) + d(dt)
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from leachkin.kinetics.drive import READS, ln_drive
from leachkin.kinetics.fit_elements import Elements, drifts, species_of, thermal_covariate
from leachkin.kinetics.fit_layout import Key, Layout
from leachkin.kinetics.grain_shapes import GrainState, depth_of_time, grain_state
from leachkin.testwork import Observed

Array = NDArray[np.float64]
PARTICLE_KINDS = ("film", "ash_layer", "chemical")
SHAPE = "sphere"
#: A step is cut where more than this changes on it: K, and ln of what the drive reads.
STEP_K, STEP_LN = 2.0, 0.08
MOST_CUTS = 24


@dataclass(frozen=True)
class HistorySteps:
    """The steps of one test: hours, what holds in the middle, the readings at the ends."""

    hours: Array
    temperature_K: Array
    values: Mapping[str, Array]
    ends_reading: tuple[tuple[int, ...], ...]


def history_steps(observed: Observed, layout: Layout, cuts: int | None = None) -> HistorySteps:
    """Cut the time from 0 to the last reading so that little changes on a step.

    Parameters
    ----------
    observed : Observed
    layout : Layout
    cuts : int, optional
        Steps between readings; chosen by what changes where left out.
    """
    history = observed.history
    edges = np.union1d([0.0], observed.time_h)
    times = np.zeros(1) if history is None else history.time_h
    kelvin = np.full(times.size, observed.temperature_K)
    if history is not None and drifts(observed):
        kelvin = history.temperature_K
    read = {role: species_of(observed, layout, role) for role in READS[layout.drive_form.kind]}
    if history is not None:
        edges = np.union1d(edges, times[times < edges[-1]])
    changed = np.abs(np.diff(np.interp(edges, times, kelvin))) / STEP_K
    for role, values in read.items():
        ln_value = values if role == "pH" else np.log(np.maximum(values, 1e-9 * values.max()))
        changed = np.maximum(changed, np.abs(np.diff(np.interp(edges, times, ln_value))) / STEP_LN)
    each = np.clip(np.ceil(changed), 1, MOST_CUTS).astype(int)
    if cuts is not None:
        each = np.full(each.size, cuts)
    pieces = [np.linspace(edges[i], edges[i + 1], n + 1)[:-1] for i, n in enumerate(each)]
    fine = np.concatenate([*pieces, edges[-1:]])
    middle = 0.5 * (fine[:-1] + fine[1:])
    ends = tuple(
        tuple(np.flatnonzero(np.isclose(observed.time_h, end, rtol=1e-12, atol=0.0)).tolist())
        for end in fine[1:]
    )
    at_middle = {role: np.interp(middle, times, values) for role, values in read.items()}
    return HistorySteps(np.diff(fine), np.interp(middle, times, kelvin), at_middle, ends)


@dataclass(frozen=True)
class GrainSteps:
    """The steps of all tests side by side, S steps of P grains (test, size class).

    Attributes
    ----------
    grain_of : ndarray of int, shape (L,)
        Grain of each element (test, reading, class).
    first : ndarray of int, shape (P,)
        An element of each grain, for its size and stirring.
    hours, thermal : ndarray, shape (S, P)
        0 hours where a test has fewer steps.
    values : mapping of str to ndarray, shape (S, P)
    ends : tuple of ndarray of int
        Elements reached at the end of each step.
    """

    first: NDArray[np.intp]
    grain_of: NDArray[np.intp]
    hours: Array
    thermal: Array
    values: Mapping[str, Array]
    ends: tuple[NDArray[np.intp], ...]

    @classmethod
    def of(cls, layout: Layout, tests: Sequence[Observed], elements: Elements) -> GrainSteps:
        """Set the steps of all tests side by side."""
        own = [history_steps(o, layout) for o in tests]
        classes = [1 if o.sizes is None else o.sizes.size_mm.size for o in tests]
        count = max(steps.hours.size for steps in own)
        roles = READS[layout.drive_form.kind]
        thermal = [thermal_covariate(s.temperature_K, layout.reference.temperature_K) for s in own]
        ends: list[list[NDArray[np.intp]]] = [[] for _ in range(count)]
        first, grain_of = [], np.zeros(elements.time.size, dtype=np.intp)
        reading = grain = 0
        for observed, steps, c in zip(tests, own, classes, strict=True):
            starts = elements.starts[reading : reading + observed.time_h.size]
            for start in starts:
                grain_of[start : start + c] = grain + np.arange(c)
            for i, reached in enumerate(steps.ends_reading):
                ends[i] += [starts[r] + np.arange(c) for r in reached]
            first.append(starts[0] + np.arange(c))
            reading += observed.time_h.size
            grain += c
        none = np.zeros(0, dtype=np.intp)
        return cls(
            np.concatenate(first),
            grain_of,
            _side_by_side([s.hours for s in own], classes, count, 0.0),
            _side_by_side(thermal, classes, count, None),
            {r: _side_by_side([s.values[r] for s in own], classes, count, None) for r in roles},
            tuple(np.concatenate([none, *parts]) for parts in ends),
        )

    def conversions(
        self, layout: Layout, elements: Elements, full: Array, part: str, wanted: frozenset[Key]
    ) -> tuple[Array, dict[Key, Array]]:
        """Return X and dX/d(quantity) of one fraction at every element, each B + (L,).

        Derivatives of times are by their logarithms.
        """
        kinds = layout.slow_kinds if part else layout.kinds
        keys = _keys(layout, kinds, part, wanted)
        batch = full.shape[:-1]
        X = np.zeros((*batch, elements.time.size))
        found = {key: np.zeros_like(X) for key in keys}
        z, y = np.zeros((*batch, self.first.size)), np.ones((*batch, self.first.size))
        moved = {key: np.zeros_like(z) for key in keys}
        state = grain_state(SHAPE, z, y)
        for s, reached in enumerate(self.ends):
            step = self._step(layout, elements, full, part, kinds, s)
            z, y, state, moved = step.taken(state, moved, keys)
            if reached.size:
                grains = self.grain_of[reached]
                X[..., reached] = state.conversion[..., grains]
                for key in keys:
                    by = state.conversion_slope * moved[key]
                    found[key][..., reached] = by[..., grains]
        return X, found

    def _step(
        self,
        layout: Layout,
        elements: Elements,
        full: Array,
        part: str,
        kinds: Sequence[str],
        s: int,
    ) -> _Step:
        values = {role: v[s] for role, v in self.values.items()}
        ln_rate, by_drive = _drive(layout, full, values)
        first = self.first
        tau, covariates = {}, {}
        strength = np.log(
            np.maximum(values["reagent"] / layout.reference.reagent_g_per_L, 1e-9)
            if "reagent" in values
            else np.ones(first.size)
        )
        for kind in kinds:
            which = part + kind
            own = {
                "time": np.ones(()),
                "activation_energy": self.thermal[s],
                "size_exponent": elements.ln_size[first],
                "stirring": -elements.ln_stirring[first],
                "order": -strength,
            }
            ln_tau = layout.ln_time(full, which)[..., None]
            for role, covariate in own.items():
                if role != "time" and layout.has(role, which):
                    ln_tau = ln_tau + full[..., layout.position(role, which), None] * covariate
                covariates[(role, which)] = (kind, covariate)
            tau[kind] = np.exp(ln_tau)
        hours = self.hours[s] * np.exp(ln_rate)
        return _Step(hours, tau, covariates, {key: hours * by for key, by in by_drive.items()})


@dataclass(frozen=True)
class _Step:
    """One step: hours at the reference solution, times, and what moves either."""

    hours: Array
    tau: Mapping[str, Array]
    covariates: Mapping[Key, tuple[str, Array]]
    by_drive: Mapping[Key, Array]

    def taken(
        self, state: GrainState, moved: Mapping[Key, Array], keys: Sequence[Key]
    ) -> tuple[Array, Array, GrainState, dict[Key, Array]]:
        """Return depth, what is left, state and derivatives at the end of the step."""
        none = np.zeros(())
        film, ash_layer, chemical = (self.tau.get(kind, none) for kind in PARTICLE_KINDS)
        parts = (film, ash_layer, chemical)
        before = sum(t * g for t, g in zip(parts, state.time_shares, strict=True))
        at = before + self.hours
        z, y = depth_of_time(SHAPE, film, ash_layer, chemical, at)
        after = grain_state(SHAPE, z, y)
        fall = sum(t * g for t, g in zip(parts, state.time_slopes, strict=True))
        fall_after = sum(t * g for t, g in zip(parts, after.time_slopes, strict=True))
        running = (fall_after > 0.0) & (at < sum(parts))
        divisor = np.where(running, fall_after, 1.0)
        shares = {
            kind: g0 - g1
            for kind, g0, g1 in zip(
                PARTICLE_KINDS, state.time_shares, after.time_shares, strict=True
            )
        }
        found = {}
        for key in keys:
            change = fall * moved[key]
            if key in self.covariates:
                kind, covariate = self.covariates[key]
                change = change + self.tau[kind] * covariate * shares[kind]
            if key in self.by_drive:
                change = change + self.by_drive[key]
            found[key] = np.where(running, change / divisor, 0.0)
        return z, y, after, found


def _keys(
    layout: Layout, kinds: Sequence[str], part: str, wanted: frozenset[Key]
) -> tuple[Key, ...]:
    """Return the quantities asked for that move the grains of a fraction."""
    own = {part + kind for kind in kinds}
    shared = {("order", "reagent"), *((q.role, q.which) for q in layout.free if q.role == "drive")}
    roles = ("time", "activation_energy", "size_exponent", "stirring", "order")
    return tuple(k for k in wanted if k in shared or (k[0] in roles and k[1] in own))


def _drive(
    layout: Layout, full: Array, values: Mapping[str, Array]
) -> tuple[Array, dict[Key, Array]]:
    """Return ln of the drive that all resistances share, and its derivatives."""
    if layout.drive_form.kind == "power" and not layout.has("order", "reagent"):
        return np.zeros(()), {}
    parameters = {name: v[..., None] for name, v in layout.drive_parameters(full).items()}
    value, slopes = ln_drive(layout.drive_form.kind, values, layout.drive_reference, parameters)
    return value, {layout.drive_key(name): slope for name, slope in slopes.items()}


def _side_by_side(
    parts: Sequence[Array], classes: Sequence[int], count: int, fill: float | None
) -> Array:
    """Return (count, P): each test's steps once for every class, filled up behind."""
    columns = []
    for values, c in zip(parts, classes, strict=True):
        tail = float(values[-1]) if fill is None else fill
        padded = np.concatenate([values, np.full(count - values.size, tail)])
        columns.append(np.repeat(padded[:, None], c, axis=1))
    return np.concatenate(columns, axis=1)
