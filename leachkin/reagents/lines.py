"""What goes into a budget: consumption lines with their driver, products as they are delivered."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.errors import InputProblems
from leachkin.problems import argument_error, unknown_name

Array = NDArray[np.float64]

#: What a line is per.
DRIVERS = ("t ore", "m3", "kg metal", "month")
#: Kilograms in the unit that a price is per.
KILOGRAMS_PER = {"kg": 1.0, "t": 1000.0}


@dataclass(frozen=True)
class BudgetLine:
    """One consumption of a reagent.

    Attributes
    ----------
    reagent : str
        Name that the products know, as "H2SO4".
    sink : str
        Where it goes, as "gangue".
    amount : array_like, shape B
        Kilograms for one unit of the driver, 0 or more; as 100 % reagent unless as_received.
    driver : str
        "t ore", "m3" of solution, "kg metal" (recovered), or "month".
    metal : str, optional
        Metal of the driver "kg metal"; by default the first one recovered.
    as_received : bool
        True where the amount is of the product as delivered.
    source : str
        Tests, assumption or person behind the amount.
    missing : tuple of str
        What was not known when it was computed; the total is then INCOMPLETE.
    """

    reagent: str
    sink: str
    amount: ArrayLike
    driver: str = "t ore"
    metal: str | None = None
    as_received: bool = False
    source: str = ""
    missing: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        amount = np.asarray(self.amount, dtype=np.float64)
        if not np.all(np.isfinite(amount) & (amount >= 0.0)):
            raise argument_error(
                f"{self.reagent}, {self.sink}: amount",
                "a figure below 0 or not finite",
                f"0 kg or more per {self.driver}",
                "leave a line out that is not known, or set a credit off before",
            )
        if self.driver not in DRIVERS:
            problem = unknown_name("driver", self.driver, DRIVERS, column="driver")
            raise InputProblems([problem])


@dataclass(frozen=True)
class Product:
    """A reagent as it is delivered; None is "not known", and the total says so.

    Attributes
    ----------
    reagent : str
    purity : float or None
        Share of active reagent, above 0 to 1.
    loss : float
        Share of the active reagent that never works (fines, rust, spillage), 0 to below 1.
    price : float or None
        0 or more, in the currency of the budget unless another is named.
    per : str
        "t" or "kg" of product.
    date : str or None
        Date of the price.
    delivered : bool or None
        Whether the price is at the gate of the plant.
    currency : str or None
        None for that of the budget.
    """

    reagent: str
    purity: float | None = None
    loss: float = 0.0
    price: float | None = None
    per: str = "t"
    date: str | None = None
    delivered: bool | None = None
    currency: str | None = None

    def __post_init__(self) -> None:
        name = self.reagent
        if self.purity is not None and not 0.0 < self.purity <= 1.0:
            raise argument_error(
                f"{name}: purity", f"{self.purity}", "above 0, up to 1", "write 98.5 % as 0.985"
            )
        if not 0.0 <= self.loss < 1.0:
            raise argument_error(
                f"{name}: loss", f"{self.loss}", "0 to below 1", "write 5 % as 0.05"
            )
        if self.price is not None and not (np.isfinite(self.price) and self.price >= 0.0):
            raise argument_error(f"{name}: price", f"{self.price}", "0 or more", "")
        if self.per not in KILOGRAMS_PER:
            raise InputProblems(
                [unknown_name("unit of a price", self.per, KILOGRAMS_PER, column=f"{name}: per")]
            )

    @property
    def useful_share(self) -> float | None:
        """Share of the product that does work, None where the purity is not known."""
        return None if self.purity is None else self.purity * (1.0 - self.loss)
