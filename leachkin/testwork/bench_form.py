"""The wide bench sheet: what stands in its blocks becomes the tables that tests are read from."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from leachkin.files import Grid, Sheet, SheetRow
from leachkin.problems import Problem
from leachkin.testwork import readings_sheet, tests_sheet
from leachkin.testwork.bench_blocks import Block, Pair, find_blocks
from leachkin.testwork.columns import ELEMENTS, Field, fold_heading, heading_candidates, unit_fits
from leachkin.testwork.names import is_test_heading
from leachkin.testwork.trade_names import ELEMENT_WORDS, plain_text
from leachkin.units import is_spelling

FORM = "bench sheet"
_PRODUCTS = {
    "residue": "residue", "tail": "residue", "tails": "residue", "tailing": "residue",
    "tailings": "residue", "filtrate": "filtrate", "final solution": "filtrate", "pls": "filtrate",
    "wash": "wash", "wash solution": "wash", "loaded carbon": "loaded carbon",
    "carbon": "loaded carbon", "resin": "resin",
}  # fmt: skip
_PRODUCT = re.compile(
    rf"(?P<product>{'|'.join(sorted(_PRODUCTS, key=len, reverse=True))})\b[\s,:-]*(?P<rest>.*)",
    re.I,
)
_HEAD = re.compile(
    r"(?:(?:assay(?:ed)? )?head(?: assays?| grade)?[\s,:-]+(?P<of>.+)"
    r"|(?P<what>[A-Za-z][A-Za-z0-9()]*)(?: in)? (?:assay(?:ed)? )?head(?: assay| grade)?"
    r"(?P<unit>.*))",
    re.I,
)
_AMOUNT = {"mass", "weight", "dry", "dry mass", "dry weight", "wt", "volume", "vol", "amount", ""}
_VALUE = re.compile(
    r"(?P<number>[<>~]?\s*[-+\u2212]?[0-9][0-9.,]*(?:[eE][-+]?[0-9]+)?)\s*(?P<unit>.*)"
)
_NOT_NAMES = ("note", "remark", "comment", "client", "date", "by", "operator", "job")
#: Headings of the tests table that a bench sheet may repeat on every row of readings.
_ON_EVERY_ROW = ("test", "domain", "solids", "wet", "moisture", "solution", "solids share", "size",
                 "P80", "kind", "aliquots")  # fmt: skip


@dataclass
class _Table:
    """Records of one table, each a mapping of heading to cell, with its row number."""

    records: list[tuple[int, dict[str, str]]] = field(default_factory=list)

    def sheet(self, grid: Grid, header_row: int) -> Sheet:
        header = tuple(dict.fromkeys(h for _, record in self.records for h in record))
        rows = tuple(
            SheetRow(number, tuple(record.get(h, "") for h in header))
            for number, record in self.records
        )
        return Sheet(grid.file, header, header_row, rows, grid.decimal, (), grid.content, FORM)


def test_names(sheet: Sheet) -> list[str]:
    """Return the names of the tests in a sheet of tests."""
    position = next((i for i, h in enumerate(sheet.header) if is_test_heading(h)), None)
    return [] if position is None else [r.cells[position] for r in sheet.rows if r.cells[position]]


test_names.__test__ = False  # type: ignore[attr-defined]  # not a test case for pytest


def is_bench_sheet(grid: Grid) -> bool:
    """Return True where a sheet holds a table of readings that is read as a bench sheet."""
    return bool(find_blocks(grid))


def tables_of_bench_sheet(
    grid: Grid, problems: list[Problem], taken: Iterable[str] = ()
) -> dict[str, Sheet]:
    """Return the tests, readings, heads and close-out that a bench sheet holds.

    Parameters
    ----------
    grid : Grid
    problems : list of Problem
        Added to: rows of averages, rows and labels that are not used.
    taken : iterable of str
        Names of tests that stand in other sheets.

    Returns
    -------
    dict of table name to Sheet
        Rows keep their numbers in the file.
    """
    blocks = find_blocks(grid)
    tables = {name: _Table() for name in ("tests", "readings", "heads", "closeout")}
    names = set(taken)
    unused: list[tuple[int, str]] = []
    shared: list[Pair] = []
    for number, block in enumerate(blocks):
        pairs = [*shared, *block.pairs] if number else block.pairs
        record, rest = _tests_record(pairs)
        name = _name(record, grid, block, names, number, len(blocks), problems)
        if name is not None:
            names.add(name)
            tables["tests"].records.append((_row_of_name(pairs, block), record | {"test": name}))
        unused += _others(rest, name or "", tables)
        _readings(block, name, tables)
    for block in blocks:
        _tell_rows(grid, block, problems)
    _tell_labels(grid, unused, problems)
    tables["closeout"].records.sort(key=_amounts_first)
    row = blocks[0].heading_row if blocks else 1
    return {name: table.sheet(grid, row) for name, table in tables.items() if table.records}


def _amounts_first(item: tuple[int, dict[str, str]]) -> bool:
    """Masses and volumes before assays, so that assays are replicates of what was weighed."""
    return not any(heading.startswith(("mass", "volume")) for heading in item[1])


def _tests_record(pairs: Sequence[Pair]) -> tuple[dict[str, str], list[Pair]]:
    """What the pairs say about the test itself, and the pairs that say something else."""
    record: dict[str, str] = {}
    rest: list[Pair] = []
    known = _field_names(tests_sheet.FIELDS)
    for pair in pairs:
        field_of = _field_of(pair.label, known)
        if field_of is None and not _is_start(pair.label):
            rest.append(pair)
            continue
        heading, value = _with_unit_of_value(pair.label, pair.values[0])
        record[heading if field_of is None else _spelled(field_of, heading)] = value
    return record, rest


def _field_names(fields: Sequence[Field]) -> dict[str, list[Field]]:
    found: dict[str, list[Field]] = {}
    for f in fields:
        for name in (f.heading.partition(" (")[0], *f.names):
            found.setdefault(fold_heading(name), []).append(f)
    return found


def _field_of(label: str, known: Mapping[str, Sequence[Field]]) -> Field | None:
    for name, spelling in heading_candidates(label):
        fields = known.get(fold_heading(name))
        if fields:
            return next((f for f in fields if unit_fits(spelling, f.units)), fields[0])
    return None


def _is_start(label: str) -> bool:
    plain = plain_text(label).casefold()
    return plain.startswith(("start ", "initial ")) or plain.endswith("in start solution")


def _spelled(field_of: Field, heading: str) -> str:
    """The heading of a field with the unit that was written."""
    units = [s for _, s in heading_candidates(heading) if s and is_spelling(s.partition(" ")[0])]
    name = field_of.heading.partition(" (")[0]
    return f"{name} ({units[0]})" if units and (field_of.units or field_of.in_words) else name


def _with_unit_of_value(label: str, value: str) -> tuple[str, str]:
    """A label with the unit that stands behind its value, and the value without it."""
    label = re.sub(r"^initial ", "start ", label, flags=re.I)
    match = _VALUE.fullmatch(value.strip())
    if match is None or not match["unit"]:
        return label, value
    written = [s for _, s in heading_candidates(label) if s and is_spelling(s.partition(" ")[0])]
    if written or not is_spelling(match["unit"].strip("()")):
        return label, value
    return f"{label} ({match['unit'].strip('()')})", match["number"].strip()


def _name(
    record: Mapping[str, str],
    grid: Grid,
    block: Block,
    names: set[str],
    number: int,
    count: int,
    problems: list[Problem],
) -> str | None:
    """Name of the test of a block; None where each row names its own."""
    if record.get("test"):
        return record["test"]
    if any(is_test_heading(heading) for _, heading in block.headings):
        return None
    name = grid.tab or re.sub(r".*/|\.[^.]*$", "", grid.file)
    if count > 1 or name in names:
        name = f"{name} {number + 1}"
    found = f"no test is named above this table; it is called {name!r}"
    problems.append(
        Problem(
            grid.file,
            block.heading_row,
            "",
            "note",
            found,
            "",
            'write "Test no" and the name above',
        )
    )
    return name


def _row_of_name(pairs: Sequence[Pair], block: Block) -> int:
    return next((p.row for p in pairs if is_test_heading(p.label)), block.heading_row)


def _others(
    pairs: Sequence[Pair], test: str, tables: Mapping[str, _Table]
) -> list[tuple[int, str]]:
    """Put heads and products where they belong; what is not known comes back."""
    unused = []
    for pair in pairs:
        record = _head_record(pair) or _product_record(pair)
        if record is None:
            if not plain_text(pair.label).casefold().startswith(_NOT_NAMES):
                unused.append((pair.row, pair.label))
            continue
        table, cells = record
        for position, value in enumerate(pair.values):
            heading, bare = _with_unit_of_value(cells["heading"], value)
            made = {"test": test, **{k: v for k, v in cells.items() if k != "heading"}}
            if len(pair.values) > 1 or table == "heads":
                made["replicate"] = str(position + 1)
            tables[table].records.append((pair.row, made | {heading: bare}))
    return unused


def _head_record(pair: Pair) -> tuple[str, dict[str, str]] | None:
    match = _HEAD.fullmatch(plain_text(pair.label))
    if match is None:
        return None
    text = (match["of"] or f"{match['what']} {match['unit'].strip()}").strip()
    heading = _assay_heading(text)
    return None if heading is None else ("heads", {"heading": heading})


def _product_record(pair: Pair) -> tuple[str, dict[str, str]] | None:
    match = _PRODUCT.fullmatch(plain_text(pair.label))
    if match is None:
        return None
    product = _PRODUCTS[match["product"].casefold()]
    rest = match["rest"].strip()
    heading = _assay_heading(rest)
    if heading is None:
        names = [(n, s) for n, s in heading_candidates(rest or "mass") if n.casefold() in _AMOUNT]
        unit = next((s for _, s in names if s), rest if is_spelling(rest) else "")
        if not names and not unit:
            return None
        solution = product in ("filtrate", "wash")
        heading = ("volume" if solution else "mass") + (f" ({unit})" if unit else "")
    return "closeout", {"product": product, "heading": heading}


def _assay_heading(text: str) -> str | None:
    """``Cu %`` as ``Cu (%)``; None where it is no assay."""
    for name, spelling in heading_candidates(text):
        bare = re.sub(r"\b(?:assay|grade|conc\.?)\b", "", name).strip()
        element = ELEMENT_WORDS.get(bare.casefold(), bare)
        parts = set(re.findall(r"[A-Z][a-z]?", element))
        if re.fullmatch(r"[A-Z][A-Za-z0-9()]*", element) and parts and parts <= ELEMENTS:
            return f"{element} ({spelling})" if spelling else element
    return None


def _readings(block: Block, name: str | None, tables: Mapping[str, _Table]) -> None:
    """The rows of a block as readings; what is said of the test on every row goes to the tests."""
    known = _field_names(tests_sheet.FIELDS)
    own = _field_names(readings_sheet.FIELDS)
    about: dict[int, str] = {}
    for position, heading in block.headings:
        of_test, of_reading = _field_of(heading, known), _field_of(heading, own)
        if of_reading is not None and of_reading.key == "sample id":
            of_reading = None  # on a bench sheet "sample" names the ore
        if of_test is not None and of_reading is None and of_test.key in _ON_EVERY_ROW:
            about[position] = _spelled(of_test, heading)
    seen: set[str] = set()
    last = name or ""
    test_at = next((i for i, h in block.headings if is_test_heading(h)), None)
    for row in block.rows:
        cells = {i: row.cells[i] if i < len(row.cells) else "" for i, _ in block.headings}
        if test_at is not None and name is None:
            last = cells[test_at] or last  # a merged cell names the test once
            if last not in seen:
                seen.add(last)
                told = {h: cells[i] for i, h in about.items() if cells[i]}
                tables["tests"].records.append((row.number, {"test": last} | told))
        record = {"test": last}
        for position, heading in block.headings:
            if position not in about and position != test_at:
                record[heading] = cells[position]
        tables["readings"].records.append((row.number, record))


def _tell_rows(grid: Grid, block: Block, problems: list[Problem]) -> None:
    for listed, words in (
        (block.skipped, "are skipped, as averages and sums"),
        (block.unread, "are not read: no time and no numbers"),
    ):
        if listed:
            rows = ", ".join(f"{row} ({text!r})" for row, text in listed[:8])
            found = f"rows {rows} {words}"
            problems.append(Problem(grid.file, listed[0][0], "", "note", found))


def _tell_labels(grid: Grid, unused: Sequence[tuple[int, str]], problems: list[Problem]) -> None:
    if unused:
        listed = ", ".join(f"{label!r} in row {row}" for row, label in unused[:10])
        more = f" and {len(unused) - 10} more" if len(unused) > 10 else ""
        found = f"labels that are not used: {listed}{more}"
        problems.append(Problem(grid.file, unused[0][0], "", "note", found))
