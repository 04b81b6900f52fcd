"""Tables and keys of the campaign file about the job, the tests and the fit, with defaults."""

from __future__ import annotations

from leachkin.campaign.schema import COLDEST_K, HOTTEST_K, Key, TableSchema
from leachkin.kinetics import DRIVES, TERM_OPTIONS

CAMPAIGN = TableSchema(
    "campaign",
    "What the job is.",
    (
        Key("title", "text", "Title of the job", default="untitled campaign"),
        Key(
            "metals",
            "texts",
            "Metals that get a rate law, the first one leading; needed with sheets, a printed law, "
            "a heap or tanks",
        ),
        Key("reagent", "text", "Leach reagent, by formula", default="H2SO4", why="acid leach"),
        Key("prepared_by", "text", "Who prepared it"),
        Key("checked_by", "text", "Who checked it"),
        Key("revision", "text", "Revision of the report"),
        Key("status", "choice", "State", default="draft", choices=("draft", "signed")),
    ),
)

REAGENT_PER_METAL = TableSchema(
    "campaign.reagent_per_metal",
    "Reagent bound per kilogram of metal dissolved, by metal; left out, it comes from molar "
    "masses.",
    free=Key(
        "metal", "quantity", "kg of reagent per kg of metal", "kg/kg", at_least=0.0, ranged=True
    ),
)

TABLES = TableSchema(
    "tables",
    'Where the sheets are: "x.csv" or "book.xlsx#Sheet", forward slashes.',
    (
        Key("tests", "text", "One row a test"),
        Key("readings", "text", "One row a sample"),
        Key("heads", "text", "Head assays, replicates as rows"),
        Key("closeout", "text", "Products weighed and assayed at the end"),
        Key("sieves", "text", "Sieve tables by domain or test"),
        Key("bench", "texts", "Bench sheets as they are; a workbook without # is every one in it"),
        Key("export", "texts", "Exports of a laboratory system: one row a sample and analyte"),
        Key("column_log", "texts", "Daily logs of columns: day, feed, PLS and its assay"),
        Key("extraction", "text", "Extraction against time, where no bench sheet exists"),
        Key("cementation_tests", "text", "Concentration against time over a precipitant"),
    ),
)

_PRECISION_WHY = "usual precision of duplicates; give your own from duplicate assays"

PRECISION = TableSchema(
    "precision",
    'One standard deviation of each measurement: "1.5 %", or a floor plus a part, '
    '"1.5 % + 0.002 g/L".',
    (
        Key("solution", "precision", "Solution assay", "g/L", default="2 %", why=_PRECISION_WHY),
        Key("tail", "precision", "Residue assay", "kg/t", default="3 %", why=_PRECISION_WHY),
        Key(
            "head",
            "precision",
            "Head of one charge about the head assay",
            "kg/t",
            default="3 %",
            why=_PRECISION_WHY,
        ),
        Key("residue", "precision", "Residue mass", "g", default="0.5 %", why=_PRECISION_WHY),
    ),
)

_RESISTANCES = (
    ("film", "the liquid film"),
    ("ash_layer", "the ash layer"),
    ("chemical", "the chemical step"),
)

FIT = TableSchema(
    "fit",
    "How the tests are fitted.",
    (
        Key(
            "laws",
            "laws",
            "Laws to rank; left out, the mechanistic ones, first order and two rates",
        ),
        Key(
            "reference_temperature",
            "quantity",
            "Temperature that the constants refer to",
            "K",
            at_least=COLDEST_K,
            at_most=HOTTEST_K,
        ),
        Key("reference_size", "quantity", "Size that the constants refer to", "mm", above=0.0),
        Key(
            "reference_reagent",
            "quantity",
            "Reagent strength that the constants refer to",
            "g/L",
            above=0.0,
        ),
        Key(
            "ultimate",
            "choice or fraction",
            "Ultimate extraction",
            default="by size",
            why="sizes may lock up different shares",
            choices=("by size", "by temperature", "one"),
            above=0.0,
            at_most=1.0,
        ),
        Key(
            "intervals",
            "choice",
            "How the intervals of the fitted parameters are made; left out, by profile likelihood, "
            "which follows the bend of the law",
            choices=("linearised", "profile", "bootstrap", "posterior"),
        ),
        Key(
            "size_exponents",
            "choice",
            "Size exponents",
            default="theory",
            why="1 for chemical control, 2 for the ash layer",
            choices=("theory", "free"),
        ),
        Key(
            "reagent_order",
            "choice or number",
            "Order in the reagent",
            default=1.0,
            why="first order unless several strengths were tested",
            low=0.5,
            high=1.2,
            choices=("free",),
            at_least=0.0,
            at_most=3.0,
        ),
        *(
            Key(
                f"order_{kind}",
                "choice or number",
                f"Order in the reagent of {name} alone; the others then have their own too",
                choices=("free",),
                at_least=0.0,
                at_most=3.0,
            )
            for kind, name in _RESISTANCES
        ),
        Key(
            "drive",
            "choice",
            "What advances the clock: a power of the reagent, two reagents (A^a B^b), either of "
            "two (A B/(A + q B)), oxidised to reduced, pH, or a power near a solubility",
            choices=DRIVES,
        ),
        Key("second", "text", "Column of the second reagent of the drive; O2 where left out"),
        Key("oxidised", "text", "Column of the oxidised species; Fe3+ where left out"),
        Key("reduced", "text", "Column of the reduced species; Fe2+ where left out"),
        Key(
            "terms",
            "choices",
            "Optional terms in the law: a lag, a share that dissolves at once, a fade of the rate, "
            "a loss from solution",
            choices=("lag", "soluble", "fade", "loss"),
        ),
        Key(
            "try_terms",
            "choices",
            "Further terms whose need is tested; all but the slow fraction where left out",
            choices=tuple(TERM_OPTIONS),
        ),
        Key(
            "reagent_history",
            "choice",
            "Strength where nobody titrated: held at the start, or by its balance with metal and "
            "gangue",
            choices=("held", "balance"),
        ),
        Key("slow_law", "law", "Law of a second, slower fraction of the leachable metal"),
        Key(
            "spread",
            "choice or number",
            "Spread of sizes within a test that has only its P80: standard deviation over mean",
            choices=("free",),
            above=0.0,
            at_most=3.0,
        ),
    ),
)

EXCLUDE = TableSchema(
    "exclude",
    "A reading kept out of the fit; it stays in the tables and is listed in the report.",
    (
        Key("test", "text", "Test", required=True),
        Key(
            "time",
            "choice or quantity",
            'Time of the reading, or "all"',
            "h",
            required=True,
            choices=("all",),
            at_least=0.0,
        ),
        Key("reason", "text", "Why", required=True),
        Key("by", "text", "Who decided", required=True),
    ),
    repeated=True,
)

ASSUMED = TableSchema(
    "assumed",
    "A value that was not measured.",
    (
        Key("parameter", "text", "Name of the parameter", required=True),
        Key("value", "number or quantity", "Value, with its unit", required=True),
        Key("low", "number or quantity", "Low end of the range", required=True),
        Key("high", "number or quantity", "High end of the range", required=True),
        Key("source", "text", "Where it comes from", required=True),
        Key("by", "text", "Who assumed it", required=True),
    ),
    repeated=True,
)

GANGUE = TableSchema(
    "gangue",
    "Reagent taken by everything that is not the metal: a fast and a slow part. Left out, it is "
    "fitted from the readings.",
    (
        Key(
            "fast",
            "quantity",
            "Fast part",
            "kg/t",
            required=True,
            ranged=True,
            judged=True,
            at_least=0.0,
        ),
        Key(
            "fast_time",
            "quantity",
            "Time constant of the fast part",
            "h",
            default="1 h",
            why="carbonate reacts within the first hours",
            low="0.3 h",
            high="3 h",
            above=0.0,
            ranged=True,
            judged=True,
        ),
        Key(
            "slow",
            "quantity",
            "Slow part",
            "kg/t",
            default="0 kg/t",
            why="no slow part stated",
            ranged=True,
            judged=True,
            at_least=0.0,
        ),
        Key(
            "slow_rate",
            "quantity",
            "Rate constant of the slow part",
            "1/h",
            ranged=True,
            judged=True,
            at_least=0.0,
        ),
        Key(
            "activation_energy",
            "quantity",
            "Activation energy of the slow rate",
            "kJ/mol",
            default="40 kJ/mol",
            why="not stated; silicate attack is thermally activated",
            low="20 kJ/mol",
            high="60 kJ/mol",
            ranged=True,
            judged=True,
            at_least=0.0,
        ),
        Key(
            "reference_temperature",
            "quantity",
            "Temperature of the slow rate",
            "K",
            default="25 degC",
            why="usual temperature of a bottle roll",
            at_least=COLDEST_K,
            at_most=HOTTEST_K,
        ),
    ),
)
