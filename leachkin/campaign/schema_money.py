"""Tables and keys of cementation and budget, with defaults and why they are so."""

from __future__ import annotations

from leachkin.campaign.schema import COLDEST_K, HOTTEST_K, Key, TableSchema
from leachkin.campaign.schema_cementation import MORE_KEYS

CEMENTATION = TableSchema(
    "cementation",
    "Recovery of the metal from solution onto scrap iron or zinc dust.",
    (
        Key(
            "precipitant",
            "choice",
            "Precipitant",
            required=True,
            choices=("scrap iron", "zinc dust"),
        ),
        Key(
            "flow",
            "quantity",
            "Solution flow; left out, that of the heap or tanks",
            "m3/h",
            above=0.0,
        ),
        Key(
            "recovery",
            "fraction",
            "Share of the metal recovered in a pass",
            "1",
            default="95 %",
            why="usual for launders and cones with enough contact",
            low="90 %",
            high="98 %",
            above=0.0,
            at_most=1.0,
            ranged=True,
        ),
        Key("ferric", "quantity", "Fe3+ in the solution", "g/L", at_least=0.0, ranged=True),
        Key(
            "acid_taken",
            "quantity",
            "Acid that the precipitant takes up",
            "g/L",
            at_least=0.0,
            ranged=True,
        ),
        Key("free_acid", "quantity", "Free acid in the solution", "g/L", at_least=0.0),
        Key("dissolved_oxygen", "quantity", "Dissolved oxygen", "mg/L", at_least=0.0, ranged=True),
        Key(
            "purity",
            "fraction",
            "Metal in the precipitant",
            "1",
            above=0.0,
            at_most=1.0,
            ranged=True,
        ),
        Key(
            "fines",
            "fraction",
            "Share of the precipitant lost as fines, rust or oxide",
            "1",
            default=0.0,
            why="not stated",
            low=0.0,
            high=0.1,
            at_least=0.0,
            at_most=0.9,
            ranged=True,
        ),
        Key(
            "stoichiometry",
            "choice",
            "Zinc per gold and silver",
            default="both",
            choices=("2:1", "1:1", "both"),
        ),
        Key("pH", "number", "pH of the solution", at_least=0.0, at_most=14.0),
        Key("free_cyanide", "quantity", "Free cyanide as NaCN", "g/L", at_least=0.0),
        Key(
            "temperature",
            "quantity",
            "Temperature of the solution",
            "K",
            at_least=COLDEST_K,
            at_most=HOTTEST_K,
        ),
        Key("As", "quantity", "Arsenic in the solution", "mg/L", at_least=0.0),
        Key("Sb", "quantity", "Antimony in the solution", "mg/L", at_least=0.0),
        *MORE_KEYS,
    ),
)

CEMENTATION_METALS = TableSchema(
    "cementation.metals",
    "Metals in the solution; left out, what heap or tanks deliver.",
    free=Key("metal", "quantity", "Concentration", "g/L", above=0.0, ranged=True),
)

_PRICE_KEYS = (
    Key("price", "number", "Price", at_least=0.0),
    Key(
        "per",
        "choice",
        "What the price is for, as received",
        choices=("t", "kg"),
        default="t",
        why="usual basis of a quotation",
    ),
    Key("purity", "fraction", "Purity as received", "1", above=0.0, at_most=1.0),
    Key("date", "date", "Date of the price"),
    Key("delivered", "boolean", "True where the price is delivered to site"),
)

BUDGET = TableSchema(
    "budget",
    "Reagents in kg/t, t/month and money.",
    (
        Key("currency", "text", "Currency of all prices", required=True),
        Key(
            "allowance",
            "fraction",
            "Allowance on quantities, shown as its own line",
            "1",
            default=0.0,
            why="none stated",
            at_least=0.0,
            at_most=1.0,
        ),
        Key(
            "ore_rate",
            "quantity",
            "Dry ore; left out, that of the heap or tanks",
            "t/month",
            above=0.0,
        ),
        Key(
            "recovered",
            "quantity",
            "Metal recovered; left out, from cementation",
            "kg/t",
            above=0.0,
        ),
        Key(
            "solution",
            "quantity",
            "Solution per tonne of ore; left out, from the heap",
            "m3/t",
            above=0.0,
        ),
    ),
)

BUDGET_PRICES = TableSchema(
    "budget.prices", "A price for each reagent, by the reagent's name.", _PRICE_KEYS, named=True
)

BUDGET_CONSUMPTION = TableSchema(
    "budget.consumption",
    "Net consumption by reagent, where no stage works it out.",
    free=Key(
        "reagent", "quantity", "100 % reagent per dry tonne", "kg/t", at_least=0.0, ranged=True
    ),
)

BUDGET_LINES = TableSchema(
    "budget.lines",
    "Your own lines: flocculant, antiscalant, binder, ...",
    (
        Key("name", "text", "Name of the line", required=True),
        Key("amount", "number", "How much, in unit per driver", required=True, at_least=0.0),
        Key(
            "unit",
            "choice",
            "Unit of the amount",
            choices=("g", "kg", "t"),
            default="kg",
            why="not stated",
        ),
        Key(
            "driver",
            "choice",
            "What it goes with",
            required=True,
            choices=("t ore", "m3 solution", "kg metal", "month"),
        ),
        *_PRICE_KEYS,
    ),
    repeated=True,
)
