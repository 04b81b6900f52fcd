from importlib import resources

import pytest

from leachkin.errors import TableError
from leachkin.tables import STATUSES, read_table, source_citation, sources
from leachkin.tables import reader as reader_module

NAMES = sorted(
    path.name.removesuffix(".csv")
    for path in resources.files("leachkin.tables").joinpath("data").iterdir()
    if path.name.endswith(".csv")
)


@pytest.mark.parametrize("name", NAMES)
def test_every_row_has_a_known_source_and_status(name):
    table = read_table(name)
    assert table.rows
    if name != "sources":
        assert {"source", "status"} <= set(table.columns), f"{name} has no source column"
        for row in table.rows:
            assert row.text("status") in STATUSES
            assert source_citation(row.text("source"))


def test_no_source_is_listed_twice():
    keys = [row.text("key") for row in read_table("sources").rows]
    assert len(keys) == len(set(keys)) == len(sources())


def test_memory_is_marked_as_memory():
    for name in NAMES:
        table = read_table(name)
        if "source" in table.columns:
            for row in table.rows:
                if row.text("source") == "from_memory":
                    assert row.text("status") == "from memory", f"{name}, line {row.line}"


def test_messages():
    with pytest.raises(TableError, match="the package has no table 'no_such'"):
        read_table("no_such")
    with pytest.raises(TableError, match="unknown source key 'definitoin'; nearest: definition"):
        source_citation("definitoin")
    table = read_table("unit_spellings")
    with pytest.raises(TableError, match="no column 'meanin'; there are: meaning"):
        table.rows[0].text("meanin")
    with pytest.raises(TableError, match="'definition' is not a number"):
        table.rows[0].number("source")
    with pytest.raises(TableError, match="has no spelling 'g/LL'; nearest: g/L"):
        table.first("spelling", "g/LL")


def test_an_unknown_source_stops(monkeypatch):
    row = reader_module.Row("t", 2, {"source": "nobody", "status": "printed"})
    with pytest.raises(TableError, match="t, line 2: unknown source 'nobody'"):
        reader_module._check_provenance(row, sources())
    row = reader_module.Row("t", 2, {"source": "definition", "status": "heard"})
    with pytest.raises(TableError, match="unknown status 'heard'"):
        reader_module._check_provenance(row, sources())
