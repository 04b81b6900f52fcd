"""Tables and keys of the campaign file about how the sheets are written: answers, asked once."""

from __future__ import annotations

from leachkin.campaign.schema import Key, TableSchema
from leachkin.tables import read_table
from leachkin.testwork.answers import (
    CYANIDE_BASES,
    DATE_ORDERS,
    DILUTIONS,
    LIME_BASES,
    MESH_SERIES,
    TONS,
    WITHIN_A_DAY,
)

_ELECTRODES = tuple(row.text("electrode") for row in read_table("reference_electrodes").rows)

SHEETS = TableSchema(
    "sheets",
    "How the sheets are written, where they do not say it themselves. `check` asks for what is "
    "needed and prints the line to paste.",
    (
        Key("decimal_mark", "choice", "Decimal mark of all sheets", choices=(".", ",")),
        Key(
            "negative_assays",
            "choice",
            "What a negative assay means: -5 is below a limit of 5, or missing",
            choices=("below limit", "missing"),
        ),
        Key("ton", "choice", "Ton of oz/t, lb/t and ton", choices=TONS),
        Key("mesh", "choice", "Sieve series of mesh numbers", choices=MESH_SERIES),
        Key("electrode", "choice", "What Eh was read against", choices=_ELECTRODES),
        Key(
            "solution_density",
            "quantity",
            "Density of the solutions, for % and ppm by mass",
            "g/mL",
            above=0.5,
            at_most=3.0,
        ),
        Key("cyanide", "choice", 'What a column "cyanide" is given as', choices=CYANIDE_BASES),
        Key("lime", "choice", 'What a column "lime" is given as', choices=LIME_BASES),
        Key("dates", "choice", "Order of dates such as 03/04/2026", choices=DATE_ORDERS),
        Key(
            "clock_times",
            "choice",
            "Each clock time without a date is the next one after the row above",
            choices=(WITHIN_A_DAY,),
        ),
        Key(
            "dilution",
            "choice",
            "Whether the values of an export are multiplied by their dilution already",
            choices=DILUTIONS,
        ),
        Key(
            "size_slope",
            "number",
            "Slope of the size distribution where only P80 is given",
            above=0.0,
            at_most=5.0,
        ),
    ),
)

SHEETS_CODES = TableSchema(
    "sheets.codes",
    'What a code in a cell means, as `"-99" = "missing"`.',
    free=Key("code", "choice", "what it means", choices=("missing", "below limit")),
)

SHEETS_LIMITS = TableSchema(
    "sheets.limits",
    'Limits of assays, for cells that say "below limit" and no number, as `Cu = "0.5 mg/L"`.',
    free=Key("analyte", "text", "the limit with its unit"),
)

SHEETS_STOCK = TableSchema(
    "sheets.stock_solutions",
    'Strength of reagents that were added by volume, as `H2SO4 = "1804 g/L"`.',
    free=Key("formula", "quantity", "100 % reagent in what was added", "g/L", above=0.0),
)

#: Tables whose headings may be another's.
MAPPED = ("tests", "readings", "heads", "closeout", "sieves", "bench")

MAPPINGS = tuple(
    TableSchema(
        f"mapping.{name}",
        f"Your headings of {name} and the columns of this program they stand for, as "
        '`"Cu_ICP_ppm" = "Cu (mg/L)"`; "ignore" leaves one out.',
        free=Key("heading", "text", "a heading of this program, with its unit"),
    )
    for name in MAPPED
)
MAPPING = TableSchema(
    "mapping",
    "Headings of your own, by table; a file of them is reused by any campaign.",
    (Key("file", "text", "A TOML file with the tables tests, readings, ... of headings"),),
)

ALL = (SHEETS, SHEETS_CODES, SHEETS_LIMITS, SHEETS_STOCK, MAPPING, *MAPPINGS)
