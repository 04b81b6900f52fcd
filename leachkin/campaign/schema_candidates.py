"""The table of the campaign file for tests that could be run next."""

from __future__ import annotations

from leachkin.campaign.schema import COLDEST_K, HOTTEST_K, Key, TableSchema

CANDIDATES = TableSchema(
    "candidates",
    "A test that could be run, for `leachkin next-tests`. What is left out is as in the nearest "
    "test; without any, a set made from the tests is judged. No other stage reads this table.",
    (
        Key("name", "text", "Name; made from what is given where left out"),
        Key("like", "text", "Test that it is like in all that is left out"),
        Key(
            "temperature",
            "quantity",
            "Temperature",
            "K",
            at_least=COLDEST_K,
            at_most=HOTTEST_K,
        ),
        Key("size", "quantity", "One size", "mm", above=0.0),
        Key("size_lower", "quantity", "Lower size of a fraction", "mm", above=0.0),
        Key("size_upper", "quantity", "Upper size of a fraction", "mm", above=0.0),
        Key("reagent", "quantity", "Reagent strength", "g/L", above=0.0),
        Key("times", "quantities", 'Times of the readings, as ["1 h", "1 d"]', "h", above=0.0),
        Key("stirring", "quantity", "Stirring speed", "rpm", above=0.0),
        Key("repeats", "integer", "Bottles", default=1, at_least=1),
        Key("cost", "number", "Cost of one bottle, in any one currency", above=0.0),
    ),
    repeated=True,
)
