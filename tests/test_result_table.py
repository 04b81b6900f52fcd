import numpy as np
import pytest

from leachkin.result_table import Column, ResultTable

COLUMNS = (Column("test", "Test"), Column("x", "Extraction", "% of total Cu"))


def test_records_round_trip_and_missing_cells_are_none():
    table = ResultTable.from_records(
        "t", COLUMNS, [{"test": "A", "x": np.float64(1.5)}, {"test": "B"}]
    )
    assert table.rows == (("A", 1.5), ("B", None))
    assert table.to_records() == [{"test": "A", "x": 1.5}, {"test": "B", "x": None}]
    assert table.column("test") == ["A", "B"]
    assert COLUMNS[1].title == "Extraction (% of total Cu)"


def test_a_frame_has_the_keys_as_columns():
    frame = ResultTable("t", COLUMNS, (("A", 1.5),)).to_frame()
    assert list(frame.columns) == ["test", "x"]
    assert frame.loc[0, "x"] == 1.5


def test_only_plain_cells():
    with pytest.raises(TypeError, match="must be a number or text, not list"):
        ResultTable.from_records("t", COLUMNS, [{"test": [1]}])
    with pytest.raises(KeyError, match="no column 'y'; there are: test, x"):
        ResultTable("t", COLUMNS, ()).column("y")
