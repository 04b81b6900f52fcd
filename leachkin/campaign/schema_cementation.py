"""Tables and keys of cementation beyond the demand: rate tests, vessel, mixed potential, site."""

from __future__ import annotations

from leachkin.campaign.schema import Key, TableSchema
from leachkin.cementation import CEMENTATION_LAWS, VESSEL_KINDS

#: Further keys of [cementation].
MORE_KEYS = (
    Key(
        "barren",
        "quantity",
        "What is left of the first metal, in place of recovery",
        "g/L",
        above=0.0,
        ranged=True,
    ),
    Key("iron", "quantity", "All iron in the solution", "g/L", at_least=0.0),
    Key("Hg", "quantity", "Mercury in the solution", "mg/L", at_least=0.0),
    Key(
        "demand",
        "choice",
        "What the demand rests on; left out, the sinks as measured. The mixed potential once it is "
        "fitted to a barren of the site: acid, ferric iron and oxygen taken are then its own",
        choices=("measured sinks", "mixed potential"),
    ),
    Key(
        "plant_factor",
        "number",
        "Precipitant bought per metal recovered at the plant [kg/kg], for the line that reconciles",
        above=0.0,
    ),
    Key("lead_nitrate", "quantity", "Dose of lead nitrate ahead of zinc", "g/m3", at_least=0.0),
    Key(
        "altitude",
        "quantity",
        "Height above the sea, for oxygen under air; left out, sea level",
        "m",
        at_least=-500.0,
        at_most=6000.0,
    ),
    Key(
        "rate_laws",
        "choices",
        "Laws to rank on the cementation tests; left out, all",
        choices=CEMENTATION_LAWS,
    ),
)

VESSEL = TableSchema(
    "cementation.vessel",
    "A vessel for the barren that is asked for.",
    (
        Key("kind", "choice", "Kind of vessel", required=True, choices=VESSEL_KINDS),
        Key(
            "transfer",
            "quantity",
            "Transfer coefficient of the metal; left out, that of the cementation tests with their "
            "areas, or of a correlation for beds and dust",
            "m/s",
            above=0.0,
        ),
        Key(
            "area",
            "quantity",
            "Surface of precipitant over the volume of launder, or over the liquor of tanks",
            "m2/m3",
            above=0.0,
        ),
        Key("width", "quantity", "Width of a launder", "m", above=0.0),
        Key("depth", "quantity", "Depth of the liquor in a launder", "m", above=0.0),
        Key("cross_section", "quantity", "Of a bed", "m2", above=0.0),
        Key(
            "voids",
            "fraction",
            "Share of launder, bed or cake that is liquor; needed for those",
            "1",
            above=0.0,
            at_most=0.99,
        ),
        Key("piece_size", "quantity", "Size of the pieces of a bed", "mm", above=0.0),
        Key("piece_thickness", "quantity", "Of sheet scrap, for the charge", "mm", above=0.0),
        Key(
            "turning_factor",
            "number",
            "What moving the bed makes of the transfer, from a test; left out, nothing",
            above=0.0,
        ),
        Key(
            "tanks",
            "integer",
            "Equal stirred tanks; left out, one",
            at_least=1,
            at_most=50,
        ),
        Key("grain_size", "quantity", "Of dust", "um", above=0.0),
        Key("pipe_contact", "quantity", "From dosing point to filter", "s", above=0.0),
        Key("filter_area", "quantity", "Of the filter", "m2", above=0.0),
        Key(
            "excess",
            "quantity",
            "Dust that the cake holds beside what is used up; left out, none",
            "g/m3",
            at_least=0.0,
        ),
    ),
)

MIXED_POTENTIAL = TableSchema(
    "cementation.mixed_potential",
    "What takes the precipitant along the vessel, by the mixed potential. It explains and ranks "
    "sinks; it sets no budget until [cementation.site] fits it.",
    (
        Key(
            "transfer",
            "quantity",
            "Transfer coefficient of the first metal; the others by their diffusion",
            "m/s",
            default="1e-5 m/s",
            why="usual for moving liquor; shares hardly depend on it, contact does",
            low="3e-6 m/s",
            high="1e-4 m/s",
            above=0.0,
        ),
        Key(
            "deposit_share",
            "fraction",
            "Share of the surface that the deposit covers",
            "1",
            default="50 %",
            why="not measured",
            low="10 %",
            high="95 %",
            at_least=0.0,
            at_most=1.0,
        ),
    ),
)

SITE = TableSchema(
    "cementation.site",
    "What a site measured at the end of its vessels: fits the mixed potential.",
    (
        Key("barren", "quantity", "First metal left", "g/L", required=True, above=0.0),
        Key("ferric", "quantity", "Ferric iron left", "g/L", above=0.0),
        Key("iron_gain", "quantity", "All iron out less all iron in", "g/L", above=0.0),
        Key("acid_taken", "quantity", "Free acid in less out", "g/L", above=0.0),
        Key(
            "precision",
            "fraction",
            "One standard deviation of each",
            "1",
            default="5 %",
            why="usual for medians of some weeks",
            above=0.0,
            at_most=0.5,
        ),
    ),
)

MORE_TABLES = (VESSEL, MIXED_POTENTIAL, SITE)
