import math

import pytest

from leachkin.report.numbers import format_column, format_number, is_numeric
from leachkin.result_table import Column


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (26.4151, 4, "26.42"),
        (1638.96, 3, "1640"),
        (0.999996, 4, "1.000"),
        (0.0123456, 3, "0.0123"),
        (-2.1866, 3, "-2.19"),
        (2.345e-5, 2, "2.3e-05"),
        (1.5e37, 2, "1.5e+37"),
        (0.0, 4, "0"),
        (math.inf, 4, "inf"),
    ],
)
def test_significant_digits(value, digits, text):
    assert format_number(value, digits) == text


def test_a_column_has_one_number_of_decimals_where_the_range_allows():
    column = Column("x", "x", "kg/t", digits=4)
    assert format_column(column, [7.310, 19.1051, 26.4151]) == ["7.31", "19.11", "26.42"]
    assert format_column(column, [0.0004, 512.25]) == ["0.0004000", "512.2"]


def test_rounding_never_prints_a_negative_zero():
    assert format_column(Column("x", "x", digits=2), [-0.004, 1.0]) == ["0.0", "1.0"]


def test_empty_cells_words_and_whole_numbers():
    column = Column("x", "x")
    assert format_column(column, [None, "text", True, False, 12345678]) == [
        "-",
        "text",
        "yes",
        "no",
        "12345678",
    ]


def test_numeric_columns_are_recognised():
    assert is_numeric([1.0, None, 2])
    assert not is_numeric([1.0, "no tail"])
    assert not is_numeric([None])
    assert not is_numeric([True, False])
