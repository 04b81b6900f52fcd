"""What was measured of one balance, and how it hangs together: the input of a reconciliation.

Every assay of head, solutions, products and residue is an item with its own precision. Replicates
are tied to the first of their group; the groups are tied by the metal balance of the charge, in kg
per tonne of charge:

    head + (this charge less the sample) = gravity + dissolved + undissolved

A filtrate that nothing diluted is tied to the last reading: it is the same solution.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from leachkin.inference import Constraints
from leachkin.testwork.balance import leached_metal
from leachkin.testwork.records import Array, Assays, Product, Test
from leachkin.testwork.recursion import (
    assays_for_balance,
    brought_of_whole_charge_mg,
    solution_ledger,
    weights_at_close_out_mL,
    weights_mL,
)

#: A filtrate larger than this share of the vessel was diluted by a wash.
_UNDILUTED = 1.02
#: Above this many readings, what earlier aliquots took out is one item.
MOST_ITEMS = 40


@dataclass(frozen=True)
class Item:
    """One measurement of a balance.

    Attributes
    ----------
    group : str
        head, this charge, solution, aliquots, filtrate, wash, carbon, gravity concentrate,
        residue, residue mass: what is told apart by replicates.
    label : str
        As a person calls it.
    value, sd : float
    unit : str
    file : str
    row : int or None
    bounded : bool
        True for "<x": a stand-in anywhere below x.
    assumed : bool
        True where nothing was measured and a range stands for it.
    """

    group: str
    label: str
    value: float
    sd: float
    unit: str
    file: str = ""
    row: int | None = None
    bounded: bool = False
    assumed: bool = False

    @property
    def place(self) -> str:
        """File and row in words, "" where not known."""
        return f"{self.file}, row {self.row}" if self.file and self.row else ""


@dataclass
class BalanceItems:
    """The items of a balance while they are gathered, and their parts in it.

    ``head``, ``dissolved`` and ``undissolved`` have the coefficient of each item, kg/t per unit of
    it; what stayed is a grade times a mass. ``readings`` has the place of each reading, ``tie`` the
    two places and the numbers of ``a x_i + b = x_j``.
    """

    items: list[Item] = field(default_factory=list)
    replicates: list[tuple[int, ...]] = field(default_factory=list)
    head: dict[int, float] = field(default_factory=dict)
    dissolved: dict[int, float] = field(default_factory=dict)
    undissolved: dict[tuple[int, int], float] = field(default_factory=dict)
    brought_kg_per_t: float = 0.0
    has_dissolved: bool = False
    readings: dict[int, int] = field(default_factory=dict)
    tie: tuple[int, int, float, float] | None = None

    @property
    def has_head(self) -> bool:
        """True where a head was assayed."""
        return any(item.group == "head" for item in self.items)

    @property
    def closes(self) -> bool:
        """True where head, dissolved and undissolved metal are all there to be compared."""
        return self.has_head and self.has_dissolved and bool(self.undissolved)

    def add(self, items: Sequence[Item]) -> int | None:
        """Add replicates of one thing; return the place of the first, None without any."""
        if not items:
            return None
        first = len(self.items)
        self.items.extend(items)
        self.replicates.append(tuple(range(first, first + len(items))))
        return first

    def head_of(self, x: Array) -> float:
        """Return the head of what was leached [kg/t]."""
        return float(sum(c * x[i] for i, c in self.head.items()))

    def dissolved_of(self, x: Array) -> float:
        """Return the metal dissolved [kg/t]."""
        return float(sum(c * x[i] for i, c in self.dissolved.items())) - self.brought_kg_per_t

    def undissolved_of(self, x: Array) -> float:
        """Return the metal that stayed [kg/t]."""
        return float(sum(c * x[i] * x[j] for (i, j), c in self.undissolved.items()))

    def slopes(self, x: Array) -> tuple[Array, Array, Array]:
        """Return the derivatives of head, dissolved and undissolved by every item, (n,) each."""
        head, dissolved, undissolved = np.zeros((3, len(self.items)))
        for i, c in self.head.items():
            head[i] = c
        for i, c in self.dissolved.items():
            dissolved[i] = c
        for (i, j), c in self.undissolved.items():
            undissolved[i] += c * x[j]
            undissolved[j] += c * x[i]
        return head, dissolved, undissolved

    def gap_of(self, x: Array) -> tuple[float, Array]:
        """Return head less dissolved less undissolved [kg/t], and its slopes, (n,)."""
        head, dissolved, undissolved = self.slopes(x)
        gap = self.head_of(x) - self.dissolved_of(x) - self.undissolved_of(x)
        return gap, head - dissolved - undissolved

    def group_means(self) -> tuple[Array, Array]:
        """Return the weighted mean of each group at the places of its items, and its variance.

        Shape (n,) each; the variance stands at the first item of a group, 0 at the others.
        """
        mean, variance = np.zeros((2, len(self.items)))
        for group in self.replicates:
            weights = np.array([self.items[i].sd ** -2 for i in group])
            values = np.array([self.items[i].value for i in group])
            mean[list(group)] = float(weights @ values / weights.sum())
            variance[group[0]] = 1.0 / weights.sum()
        return mean, variance

    def tie_of(self, x: Array) -> tuple[float, Array]:
        """Return filtrate less last reading [g/L], and its slopes, (n,)."""
        slopes = np.zeros(len(self.items))
        if self.tie is None:
            return 0.0, slopes
        i, j, factor, added = self.tie
        slopes[j], slopes[i] = 1.0, -factor
        return float(x[j] - factor * x[i] - added), slopes

    def constraints(self) -> Constraints:
        """Return what the true values obey: equal replicates, the tie, the balance if it closes."""
        pairs = [(group[0], other) for group in self.replicates for other in group[1:]]
        equal = np.zeros((len(pairs), len(self.items)))
        for k, (i, j) in enumerate(pairs):
            equal[k, i], equal[k, j] = 1.0, -1.0

        def at(x: Array) -> tuple[Array, Array]:
            residual, rows = [*(equal @ x)], [*equal]
            for there, of in ((self.tie is not None, self.tie_of), (self.closes, self.gap_of)):
                if there:
                    value, slopes = of(x)
                    residual.append(value)
                    rows.append(slopes)
            return np.array(residual), np.array(rows).reshape(len(residual), x.size)

        return at


def measured_items(test: Test, analyte: str, most_mass_loss: float) -> BalanceItems:
    """Return everything that was measured of one balance.

    Parameters
    ----------
    test : Test
    analyte : str
    most_mass_loss : float
        A residue that was not weighed may lie anywhere from the charge less this share of it to the
        charge.

    Returns
    -------
    BalanceItems
    """
    found = BalanceItems()
    _add_head(found, test, analyte)
    _add_gravity(found, test, analyte)
    _add_dissolved(found, test, analyte)
    _add_undissolved(found, test, analyte, most_mass_loss)
    return found


def _add_head(found: BalanceItems, test: Test, analyte: str) -> None:
    head = test.heads.get(analyte)
    if head is None:
        return
    file = test.files.get("heads", "")
    values = head.values_kg_per_t or (head.value_kg_per_t,)
    stated = float(np.sqrt(np.mean(np.square(head.sds_kg_per_t)))) if head.sds_kg_per_t else 0.0
    sd = stated if head.values_kg_per_t and stated > 0.0 else head.sd_kg_per_t
    rows = head.rows or (None,) * len(values)
    many = len(values) > 1
    items = [
        Item(
            "head",
            f"head assay {n + 1}" if many else "head assay",
            value,
            max(sd, _tiny(value)),
            "kg/t",
            file,
            row,
        )
        for n, (value, row) in enumerate(zip(values, rows, strict=False))
    ]
    first = found.add(items)
    if first is None:
        return
    found.head[first] = 1.0
    if head.scatter_kg_per_t > 0.0:
        own = Item("this charge", "this charge less the sample", 0.0, head.scatter_kg_per_t, "kg/t")
        found.head[found.add([own]) or 0] = 1.0


def _add_gravity(found: BalanceItems, test: Test, analyte: str) -> None:
    for product in test.products:
        if product.is_before_leach and analyte in product.grade and product.amount:
            first = found.add(_assays_of(product, analyte, test, product.name))
            if first is not None and found.has_head:
                found.head[first] = -product.amount / test.solids_g


def _add_dissolved(found: BalanceItems, test: Test, analyte: str) -> None:
    leached = leached_metal(test, analyte)
    if leached.final is None:
        return
    ledger = solution_ledger(test)
    at_close_out, factor = weights_at_close_out_mL(ledger)
    brought = brought_of_whole_charge_mg(test, analyte, ledger)
    found.brought_kg_per_t = float(brought[-1]) / test.solids_g
    if analyte in test.solution and test.time_h.size:
        known = np.flatnonzero(~np.isnan(test.solution[analyte].value))
        last = int(known[-1]) if known.size else test.time_h.size - 1
        if not leached.by_filtrate:
            found.brought_kg_per_t = float(brought[last]) / test.solids_g
        weights = at_close_out if leached.by_filtrate else weights_mL(ledger, last)
        _add_readings(found, test, analyte, weights, last, leached.by_filtrate)
    for product in test.products:
        counts = product.is_carbon or (product.is_solution and leached.by_filtrate)
        if counts and analyte in product.grade and product.amount:
            first = found.add(_assays_of(product, analyte, test, product.name))
            if first is not None:
                found.dissolved[first] = factor * product.amount / test.solids_g
                _tie(found, test, analyte, product, first)
    found.has_dissolved = True


def _add_readings(
    found: BalanceItems,
    test: Test,
    analyte: str,
    weights: Array,
    last: int,
    by_filtrate: bool,
) -> None:
    """Every reading that counts; of a long log, what the aliquots took out as one item."""
    used = assays_for_balance(test, analyte)
    earlier = [int(i) for i in np.flatnonzero(weights) if i != last]
    if len(earlier) > MOST_ITEMS:
        some = weights[earlier] / 1000.0
        value, sd = (
            float(some @ used.value[earlier]),
            float(np.linalg.norm(some * used.sd[earlier])),
        )
        label = f"metal in {len(earlier)} aliquots"
        taken = Item("aliquots", label, value, max(sd, _tiny(value)), "g")
        found.dissolved[found.add([taken]) or 0] = 1000.0 / test.solids_g
        earlier = []
    for i in [*earlier, last]:
        group = "solution" if i == last and not by_filtrate else "aliquots"
        place = found.add([_reading(test, analyte, used, i, group)])
        if place is not None:
            found.readings[i] = place
            found.dissolved[place] = float(weights[i]) / test.solids_g


def _reading(test: Test, analyte: str, used: Assays, i: int, group: str) -> Item:
    value, sd = float(used.value[i]), float(used.sd[i])
    return Item(
        group,
        f"solution at {test.time_h[i]:g} h",
        value,
        max(sd, _tiny(value)),
        "g/L",
        test.files.get("readings", ""),
        used.rows[i] if used.rows else None,
        bool(test.solution[analyte].bound[i]),
    )


def _tie(found: BalanceItems, test: Test, analyte: str, product: Product, place: int) -> None:
    """A filtrate that is no larger than what was in the vessel is the solution last read."""
    ledger = solution_ledger(test)
    last = test.time_h.size - 1
    if "filtrate" not in product.name.casefold() or last not in found.readings:
        return
    if not product.amount or product.amount > _UNDILUTED * ledger.end_mL or ledger.end_mL <= 0.0:
        return
    if found.items[found.readings[last]].bounded or found.items[place].bounded:
        return
    if np.isnan(test.solution[analyte].value[last]):
        return
    kept = (ledger.volume_mL[last] - ledger.removed_mL[last]) / ledger.end_mL
    strength = test.makeup_metal_g_per_L.get(analyte)
    added = 0.0 if strength is None else float(np.nan_to_num(strength[last]))
    added *= ledger.makeup_mL[last] / ledger.end_mL
    if kept > 0.0:
        found.tie = (found.readings[last], place, float(kept), float(added))


def _add_undissolved(found: BalanceItems, test: Test, analyte: str, most_mass_loss: float) -> None:
    solids = [p for p in test.products if p.is_undissolved_metal and analyte in p.grade]
    share = float(solution_ledger(test).share[-1])
    weighed = sum(p.amount for p in solids if p.amount is not None)
    missing = [p for p in solids if p.amount is None]
    file = test.files.get("closeout", "")
    for product in solids:
        grade = found.add(_assays_of(product, analyte, test, product.name))
        if grade is None:
            continue
        amount, label = product.amount, f"mass of {product.name}"
        if amount is None:
            charge = max(test.solids_g * share - weighed, 0.0) / len(missing)
            lost = most_mass_loss * test.solids_g * share / len(missing)
            amount, sd = charge - 0.5 * lost, float(lost / np.sqrt(12.0))
            label = f"{label}, not weighed"
        else:
            sd = test.residue_mass_sd_relative * amount
        sd = max(sd, _tiny(amount))
        missed = product.amount is None
        place = found.add([Item("residue mass", label, amount, sd, "g", file, None, False, missed)])
        if place is not None:
            found.undissolved[grade, place] = 1.0 / (test.solids_g * share)


def residue_of_closure_g(items: BalanceItems, test: Test) -> tuple[float, float] | None:
    """Return the mass of one residue that closes the balance, and its sd [g]; None without one."""
    if not items.closes or len(items.undissolved) != 1:
        return None
    grade = next(iter(items.undissolved))[0]
    x, variance = items.group_means()
    head, dissolved, _ = items.slopes(x)
    share = float(solution_ledger(test).share[-1])
    left = items.head_of(x) - items.dissolved_of(x)
    per_grade = test.solids_g * share / x[grade]
    slope = per_grade * (head - dissolved)
    slope[grade] -= per_grade * left / x[grade]
    return float(left * per_grade), float(np.sqrt(slope**2 @ variance))


def _assays_of(product: Product, analyte: str, test: Test, label: str) -> list[Item]:
    """Every replicate of a product's assay; "<x" is anywhere below x."""
    mean, sd, count = product.grade[analyte]
    unit = "g/L" if product.is_solution else "kg/t"
    file, group = test.files.get("closeout", ""), product.name.casefold()
    bound = product.bound.get(analyte, 0)
    rows = product.rows.get(analyte, ())
    if bound < 0:
        spread = float(mean / np.sqrt(12.0))
        return [Item(group, f"{label} assay", 0.5 * mean, spread, unit, file, None, True)]
    values = product.values.get(analyte, ()) or (mean,)
    many = len(values) > 1
    single = float(sd * np.sqrt(count)) if many else sd
    return [
        Item(
            group,
            f"{label} assay {n + 1}" if many else f"{label} assay",
            value,
            max(single, _tiny(value)),
            unit,
            file,
            rows[n] if n < len(rows) else None,
            bound > 0,
        )
        for n, value in enumerate(values)
    ]


def _tiny(value: float) -> float:
    """A precision for what was given as exact."""
    return max(1e-9 * abs(value), 1e-15)
