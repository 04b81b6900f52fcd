"""Tables and keys of heap and tanks, with defaults and why they are so."""

from __future__ import annotations

from leachkin.campaign.schema import COLDEST_K, HOTTEST_K, Key, TableSchema
from leachkin.campaign.schema_print import KNOTS

HEAP = TableSchema(
    "heap",
    "A heap, from the ore curve.",
    (
        Key("ore_rate", "quantity", "Dry ore stacked", "t/month", required=True, above=0.0),
        Key("lift_height", "quantity", "Height of the lift", "m", required=True, above=0.0),
        Key(
            "bulk_density",
            "quantity",
            "Dry bulk density of the stacked ore",
            "t/m3",
            required=True,
            above=0.0,
            at_most=5.0,
            ranged=True,
        ),
        Key(
            "irrigation",
            "quantity",
            "Irrigation rate",
            "L/h/m2",
            required=True,
            above=0.0,
            ranged=True,
        ),
        Key("cycle", "quantity", "Days under irrigation", "d", required=True, above=0.0),
        Key(
            "temperature",
            "quantity",
            "Temperature inside the heap",
            "K",
            required=True,
            ranged=True,
            at_least=COLDEST_K,
            at_most=HOTTEST_K,
        ),
        Key(
            "feed_reagent",
            "quantity",
            "Reagent in the irrigation solution",
            "g/L",
            required=True,
            above=0.0,
            ranged=True,
        ),
        Key(
            "cure",
            "quantity",
            "Reagent added at agglomeration",
            "kg/t",
            default="0 kg/t",
            why="no cure stated",
            at_least=0.0,
            ranged=True,
        ),
        Key(
            "moisture",
            "quantity",
            "Solution held while irrigated",
            "m3/t",
            default="0 m3/t",
            why="not stated: the first solution then leaves at once, which no heap does",
            low="0 m3/t",
            high="0.15 m3/t",
            at_least=0.0,
            ranged=True,
        ),
        Key(
            "contacted_fraction",
            "fraction",
            "Share of the ore that solution reaches",
            "1",
            default=1.0,
            why="not stated: every grain wetted, which no heap does",
            low=0.7,
            high=1.0,
            above=0.0,
            at_most=1.0,
            ranged=True,
            judged=True,
        ),
        Key(
            "delivery_factor",
            "number",
            "How many times slower equivalent time accrues than in a bottle",
            default=1.0,
            why="not stated: as fast as in a bottle",
            low=1.0,
            high=5.0,
            at_least=1.0,
            ranged=True,
            judged=True,
        ),
        Key(
            "length_factor",
            "number",
            "Diffusion length over particle size",
            default=1.0,
            why="not stated: the particle is the diffusion length",
            low=1.0,
            high=3.0,
            above=0.0,
            ranged=True,
            judged=True,
        ),
        Key(
            "head",
            "quantity",
            "Head grade of the ore fed; left out, the mean head assay of the domain",
            "kg/t",
            above=0.0,
            at_most=1000.0,
            ranged=True,
        ),
        Key("domain", "text", "Domain; left out, the first one tested"),
        Key("metal", "text", "Metal; left out, the first of campaign.metals"),
    ),
)

_SPECIES = (
    ("reagent", "Strength of the reagent, where it is held"),
    ("second", "Second reagent, as oxygen"),
    ("oxidised", "Oxidised species, as Fe3+"),
    ("reduced", "Reduced species, as Fe2+"),
    ("metal", "Metal in solution, for a drive near its solubility"),
)

TANK = TableSchema(
    "tank",
    "Stirred tanks in series, each ideally mixed.",
    (
        Key("residence_times", "quantities", "Mean residence time of each tank", "h", above=0.0),
        Key("volumes", "quantities", "Working volume of each tank; needs flow", "m3", above=0.0),
        Key("flow", "quantity", "Slurry flow", "m3/h", above=0.0, ranged=True),
        Key(
            "solids",
            "quantity",
            "Dry solids per volume of solution",
            "kg/m3",
            above=0.0,
            ranged=True,
        ),
        Key("ore_rate", "quantity", "Dry ore fed", "t/month", above=0.0),
        Key(
            "temperature",
            "quantity",
            "Temperature",
            "K",
            required=True,
            ranged=True,
            at_least=COLDEST_K,
            at_most=HOTTEST_K,
        ),
        Key(
            "feed_reagent",
            "quantity",
            "Reagent in the feed; left out, the strength is held at the reference",
            "g/L",
            above=0.0,
            ranged=True,
        ),
        Key(
            "demand",
            "quantity",
            "Reagent bound per kilogram of metal; left out, as campaign.reagent_per_metal",
            "kg/kg",
            at_least=0.0,
            ranged=True,
        ),
        Key(
            "head",
            "quantity",
            "Head grade of the ore fed; left out, the mean head assay of the domain",
            "kg/t",
            above=0.0,
            at_most=1000.0,
            ranged=True,
        ),
        Key("domain", "text", "Domain; left out, the first one tested"),
        Key("metal", "text", "Metal; left out, the first of campaign.metals"),
    ),
)


def solution_table(stage: str) -> TableSchema:
    """Return the table of the solution that a plant holds, for laws with a drive of their own."""
    where = "the reference of the law where left out"
    return TableSchema(
        f"{stage}.solution",
        "The solution of the plant as the drive of the law reads it, where that is more than one "
        "reagent to a power.",
        (
            *(
                Key(name, "quantity", f"{meaning}; {where}", "g/L", at_least=0.0, ranged=True)
                for name, meaning in _SPECIES
            ),
            Key("pH", "number", f"pH; {where}", ranged=True),
        ),
    )


def size_tables(stage: str) -> tuple[TableSchema, ...]:
    """Return the tables of the size distribution of "heap" or "tank"."""
    edges = Key(
        "class_edges_mm",
        "numbers",
        "Class edges [mm], coarse to fine; the last class holds what is finer",
        above=0.0,
    )
    return (
        TableSchema(
            f"{stage}.sizes",
            "Size distribution of the ore in the plant.",
            (
                Key("single", "quantity", "One size for all the ore", "mm", above=0.0),
                edges,
                Key(
                    "mass_shares",
                    "fractions",
                    "Mass share of each class",
                    "1",
                    at_least=0.0,
                    at_most=1.0,
                ),
                Key(
                    "metal_shares",
                    "fractions",
                    "Metal share of each class; left out, as mass",
                    "1",
                    at_least=0.0,
                    at_most=1.0,
                ),
            ),
        ),
        TableSchema(
            f"{stage}.sizes.gates_gaudin_schuhmann",
            "Passing = (size / top) ^ slope.",
            (
                Key("top", "quantity", "Top size", "mm", required=True, above=0.0),
                Key(
                    "slope",
                    "number",
                    "Slope",
                    default=0.65,
                    why="usual for crushed rock",
                    low=0.5,
                    high=0.9,
                    above=0.0,
                ),
                edges,
            ),
        ),
        TableSchema(
            f"{stage}.sizes.rosin_rammler",
            "Retained = exp(-(size / d63) ^ slope).",
            (
                Key("d63", "quantity", "Size that 63.2 % passes", "mm", required=True, above=0.0),
                Key(
                    "slope",
                    "number",
                    "Slope",
                    default=1.0,
                    why="usual for ground ore",
                    low=0.7,
                    high=1.3,
                    above=0.0,
                ),
                edges,
            ),
        ),
        TableSchema(
            f"{stage}.sizes.ultimate",
            "Ultimate extraction at sizes that were not tested: added to the fitted sizes, or in "
            "their place at the same size.",
            KNOTS,
        ),
    )
