"""The reagent budget: from consumption by sink to kilograms, tonnes a month and money."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name
from leachkin.reagents.law import received_kg_per_t, t_per_month
from leachkin.reagents.lines import KILOGRAMS_PER, Array, BudgetLine, Product


@dataclass(frozen=True)
class Basis:
    """What every figure of the budget is per.

    Attributes
    ----------
    ore_t_per_month : ndarray, shape B
        Dry ore.
    recovered_kg_per_t : mapping of str to ndarray
        Metal by the tonne of ore, the metal of the ratios first; empty where not known.
    metal_basis : str
        "recovered", "extracted" or "payable": what the metal figure is.
    solution_m3_per_t : ndarray, shape B, or None
    currency : str
    """

    ore_t_per_month: Array
    recovered_kg_per_t: Mapping[str, Array]
    metal_basis: str
    solution_m3_per_t: Array | None
    currency: str

    @property
    def metal(self) -> str | None:
        """The metal of the ratios."""
        return next(iter(self.recovered_kg_per_t), None)


@dataclass(frozen=True)
class BudgetRow:
    """One line of the budget; money is None where something is missing.

    Attributes
    ----------
    line : BudgetLine
    product : Product or None
    net_kg_per_t : ndarray, shape B, or None
        As 100 % reagent; None for a line given as received whose purity is not known.
    received_kg_per_t, received_t_per_month : ndarray, shape B, or None
    cost_per_month, cost_per_t : ndarray, shape B, or None
        A price without a date still costs what it says, and the row is incomplete.
    per_metal_kg_per_kg : ndarray, shape B, or None
    incomplete : tuple of str
        What is missing.
    """

    line: BudgetLine
    product: Product | None
    net_kg_per_t: Array | None
    received_kg_per_t: Array | None
    received_t_per_month: Array | None
    cost_per_month: Array | None
    cost_per_t: Array | None
    per_metal_kg_per_kg: Array | None
    incomplete: tuple[str, ...]


@dataclass(frozen=True)
class Budget:
    """A reagent budget.

    Attributes
    ----------
    basis : Basis
    rows : tuple of BudgetRow
    allowance : float
        Share of the total kept apart, never inside it.
    level : float
        Of the low and high figures where there are draws.
    notes : tuple of str
    """

    basis: Basis
    rows: tuple[BudgetRow, ...]
    allowance: float
    level: float
    notes: tuple[str, ...]

    @property
    def incomplete(self) -> tuple[tuple[str, str], ...]:
        """Every incomplete line with the reason."""
        return tuple(
            (f"{row.line.reagent}, {row.line.sink}", "; ".join(row.incomplete))
            for row in self.rows
            if row.incomplete
        )

    @property
    def complete(self) -> bool:
        """Whether nothing is missing."""
        return not self.incomplete

    @property
    def total_per_month(self) -> Array | None:
        """Cost by the month; None (INCOMPLETE) where a line is incomplete."""
        return self.partial_per_month if self.complete else None

    @property
    def partial_per_month(self) -> Array:
        """Cost by the month of the complete lines only."""
        return total(row.cost_per_month for row in self.rows if not row.incomplete)

    @property
    def total_per_t(self) -> Array | None:
        """Cost by the tonne of ore; None where incomplete."""
        whole = self.total_per_month
        return None if whole is None else np.asarray(whole / self.basis.ore_t_per_month)

    def total_per_kg(self, metal: str | None = None) -> Array | None:
        """Return the cost by the kilogram of a metal; None where incomplete or not known.

        Every metal carries the whole cost; nothing is shared out between metals.

        Raises
        ------
        InputProblems
            If the metal is not one of the basis.
        """
        wanted = self.basis.metal if metal is None else metal
        if wanted is None or self.total_per_t is None:
            return None
        return np.asarray(self.total_per_t / metal_kg_per_t(self.basis, wanted))

    @property
    def allowance_per_month(self) -> Array | None:
        """The allowance by the month, kept apart from the total."""
        whole = self.total_per_month
        return None if whole is None else np.asarray(whole * self.allowance)

    @property
    def reagents(self) -> tuple[str, ...]:
        """Reagents in the order of the lines."""
        return tuple(dict.fromkeys(row.line.reagent for row in self.rows))

    def rows_of(self, reagent: str) -> tuple[BudgetRow, ...]:
        """Return the rows of a reagent."""
        return tuple(row for row in self.rows if row.line.reagent == reagent)

    def received_t_per_month(self, reagent: str) -> Array | None:
        """Return the tonnes of product by the month, None where a line of it is not known."""
        amounts = [row.received_t_per_month for row in self.rows_of(reagent)]
        return None if any(amount is None for amount in amounts) else total(amounts)


def reagent_budget(
    lines: Iterable[BudgetLine],
    products: Iterable[Product],
    *,
    ore_t_per_month: ArrayLike,
    currency: str,
    recovered_kg_per_t: Mapping[str, ArrayLike] | None = None,
    metal_basis: str = "recovered",
    solution_m3_per_t: ArrayLike | None = None,
    allowance: float = 0.0,
    level: float = 0.8,
) -> Budget:
    """Return the reagent budget of a plan.

    Parameters
    ----------
    lines : iterable of BudgetLine
        The program's and the user's own; amounts may be draws, shape B.
    products : iterable of Product
        One for every reagent.
    ore_t_per_month : array_like
        Dry ore, above 0.
    currency : str
    recovered_kg_per_t : mapping of str to array_like, optional
        Metal by the tonne of ore, the metal of the ratios first.
    metal_basis : str
        What that metal is: "recovered", "extracted" or "payable".
    solution_m3_per_t : array_like, optional
        Needed by lines per m3.
    allowance : float
        Kept apart from the total, as a share of it.
    level : float
        Of low and high, where there are draws: 0.8 is P10, the low one, to P90.

    Returns
    -------
    Budget
        A line with a missing price, date or purity is kept and named, and the total is
        INCOMPLETE; it is never a silent zero.

    Raises
    ------
    InputProblems
        If a number has no meaning, a reagent has two products, or a line needs solution or metal
        that is not given.

    Examples
    --------
    >>> acid = BudgetLine("H2SO4", "copper", 7.310)
    >>> product = Product("H2SO4", purity=0.985, price=120.0, date="2026-01")
    >>> budget = reagent_budget([acid], [product], ore_t_per_month=250_000, currency="USD")
    >>> round(float(budget.total_per_month), -1)
    222640.0
    """
    basis = _basis(
        ore_t_per_month, recovered_kg_per_t, metal_basis, solution_m3_per_t, currency
    )  # fmt: skip
    _check_share("allowance", allowance)
    _check_share("level", level)
    by_reagent = _products(products)
    rows = tuple(_row(line, by_reagent.get(line.reagent), basis) for line in lines)
    return Budget(basis, rows, allowance, level, _notes(rows, by_reagent))


def metal_kg_per_t(basis: Basis, metal: str) -> Array:
    """Return the metal of the basis by the tonne of ore [kg/t], shape B.

    Parameters
    ----------
    basis : Basis
    metal : str

    Returns
    -------
    ndarray, shape B

    Raises
    ------
    InputProblems
        If the metal is not one of the basis.
    """
    if metal not in basis.recovered_kg_per_t:
        known = basis.recovered_kg_per_t
        raise InputProblems([unknown_name("metal of the budget", metal, known, column="metal")])
    return basis.recovered_kg_per_t[metal]


def total(values: Iterable[Array | None]) -> Array:
    """Return the sum of figures, shape B; 0 where there are none."""
    whole = np.zeros(())
    for value in values:
        if value is not None:
            whole = whole + value
    return np.asarray(whole, dtype=np.float64)


def _row(line: BudgetLine, product: Product | None, basis: Basis) -> BudgetRow:
    amount = _kg_per_t(line, basis)
    useful = None if product is None else product.useful_share
    net, received = (None, amount) if line.as_received else (amount, None)
    if useful is not None:
        net = amount * useful if line.as_received else amount
        received = amount if line.as_received else received_kg_per_t(amount, useful)
    monthly = None if received is None else t_per_month(received, basis.ore_t_per_month)
    cost = _cost(monthly, product, basis)
    metal = basis.metal
    return BudgetRow(
        line=line,
        product=product,
        net_kg_per_t=net,
        received_kg_per_t=received,
        received_t_per_month=monthly,
        cost_per_month=cost,
        cost_per_t=None if cost is None else np.asarray(cost / basis.ore_t_per_month),
        per_metal_kg_per_kg=None
        if net is None or metal is None
        else np.asarray(net / metal_kg_per_t(basis, metal)),
        incomplete=_incomplete(line, product, basis),
    )


def _kg_per_t(line: BudgetLine, basis: Basis) -> Array:
    amount = np.asarray(line.amount, dtype=np.float64)
    if line.driver == "month":
        return np.asarray(amount / basis.ore_t_per_month)
    if line.driver == "m3":
        if basis.solution_m3_per_t is None:
            raise argument_error(
                f"{line.reagent}, {line.sink}",
                "a line per m3 without the solution by the tonne of ore",
                "solution_m3_per_t",
                "give m3/t, or write the line per t ore",
            )
        return np.asarray(amount * basis.solution_m3_per_t)
    if line.driver == "kg metal":
        metal = line.metal or basis.metal
        if metal is None:
            raise argument_error(
                f"{line.reagent}, {line.sink}",
                "a line per kg metal without the metal recovered",
                "recovered_kg_per_t",
                "give kg/t, or write the line per t ore",
            )
        return np.asarray(amount * metal_kg_per_t(basis, metal))
    return amount


def _cost(monthly: Array | None, product: Product | None, basis: Basis) -> Array | None:
    if monthly is None or product is None or product.price is None:
        return None
    if product.currency not in (None, basis.currency):
        return None
    return np.asarray(monthly * 1e3 / KILOGRAMS_PER[product.per] * product.price)


def _incomplete(line: BudgetLine, product: Product | None, basis: Basis) -> tuple[str, ...]:
    reasons = list(line.missing)
    if product is None:
        return (*reasons, "no product: purity, price and date are missing")
    if product.purity is None and not line.as_received:
        reasons.append("purity is missing")
    if product.price is None:
        reasons.append("price is missing")
    elif product.date is None:
        reasons.append("date of the price is missing")
    if product.currency not in (None, basis.currency):
        reasons.append(f"price is in {product.currency}, the budget in {basis.currency}")
    return tuple(reasons)


def _notes(rows: tuple[BudgetRow, ...], products: Mapping[str, Product]) -> tuple[str, ...]:
    notes = []
    used = {row.line.reagent for row in rows}
    for reagent, product in products.items():
        if reagent not in used:
            notes.append(f"{reagent} has a product and no consumption line")
        elif product.price is not None and not product.delivered:
            said = "not delivered" if product.delivered is False else "not said to be delivered"
            notes.append(f"the price of {reagent} is {said}: freight is not in it")
    return tuple(notes)


def _products(products: Iterable[Product]) -> dict[str, Product]:
    by_reagent: dict[str, Product] = {}
    for product in products:
        if product.reagent in by_reagent:
            raise argument_error(
                "products", f"two products for {product.reagent}", "one for each reagent", ""
            )
        by_reagent[product.reagent] = product
    return by_reagent


def _basis(
    ore: ArrayLike,
    recovered: Mapping[str, ArrayLike] | None,
    metal_basis: str,
    solution: ArrayLike | None,
    currency: str,
) -> Basis:
    if metal_basis not in ("recovered", "extracted", "payable"):
        raise argument_error(
            "metal_basis", f"{metal_basis!r}", "recovered, extracted or payable", ""
        )
    if not currency.strip():
        raise argument_error("currency", "none", "a currency", 'currency = "USD"')
    metals = {
        metal: _positive(f"recovered_kg_per_t[{metal!r}]", value, "kg/t")
        for metal, value in (recovered or {}).items()
    }
    return Basis(
        ore_t_per_month=_positive("ore_t_per_month", ore, "t"),
        recovered_kg_per_t=metals,
        metal_basis=metal_basis,
        solution_m3_per_t=None
        if solution is None
        else _positive("solution_m3_per_t", solution, "m3/t"),
        currency=currency,
    )


def _positive(name: str, value: ArrayLike, unit: str) -> Array:
    array = np.asarray(value, dtype=np.float64)
    if not np.all(np.isfinite(array) & (array > 0.0)):
        raise argument_error(name, f"{array.min():g} {unit}", f"above 0 {unit}", "")
    return array


def _check_share(name: str, share: float) -> None:
    if not 0.0 <= share < 1.0:
        raise argument_error(name, f"{share}", "0 to below 1", "write 10 % as 0.10")
