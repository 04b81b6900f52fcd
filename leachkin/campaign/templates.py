"""Workbooks to fill in, one for each kind of job that this program runs."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from leachkin.campaign.schema import Key
from leachkin.campaign.schema_tables import SCHEMA
from leachkin.campaign.settings_sheet import SETTINGS_TAB
from leachkin.errors import InputProblems
from leachkin.files import TemplateSheet, check_path_text, write_template
from leachkin.problems import Problem, unknown_name
from leachkin.testwork import EXAMPLE
from leachkin.testwork.names import KINDS as TEST_KINDS
from leachkin.testwork.names import POLICIES

_HEADINGS = ("key", "value", "unit", "low", "high", "source", "by", "what", "example")
_UNIT_OF = {"K": "degC", "1": ""}
#: Settings of every kind: key and an example.
_COMMON = (
    ("campaign.title", "Ostrakon Flats bottle rolls"),
    ("campaign.metals", None),
    ("campaign.reagent", None),
    ("campaign.prepared_by", "A. B."),
    ("campaign.checked_by", "C. D."),
    ("precision.solution", "1.5 %"),
    ("precision.tail", "3 %"),
    ("precision.head", "2 %"),
    ("precision.residue", "0.3 %"),
)
_FIT = (
    ("fit.laws", "ash_layer, chemical, first_order"),
    ("fit.reference_temperature", 25),
    ("fit.reference_size", 1.4),
    ("fit.reference_reagent", 20),
)
_HEAP = (
    ("heap.ore_rate", 250000), ("heap.lift_height", 6), ("heap.bulk_density", 1.65),
    ("heap.irrigation", 8), ("heap.cycle", 120), ("heap.temperature", 17),
    ("heap.feed_reagent", 20), ("heap.cure", 12), ("heap.moisture", 0.09),
    ("heap.contacted_fraction", 0.85), ("heap.delivery_factor", 3),
    ("heap.sizes.gates_gaudin_schuhmann.top", 19),
    ("heap.sizes.gates_gaudin_schuhmann.slope", 0.65),
)  # fmt: skip
_IRON = (
    ("cementation.precipitant", "scrap iron"), ("cementation.ferric", 0.9),
    ("cementation.acid_taken", 0.7), ("cementation.dissolved_oxygen", 6),
    ("cementation.purity", "96 %"), ("cementation.fines", "5 %"),
)  # fmt: skip
_ZINC = (
    ("cementation.precipitant", "zinc dust"), ("cementation.recovery", "98 %"),
    ("cementation.dissolved_oxygen", 0.5), ("cementation.free_cyanide", 0.3),
    ("cementation.pH", 10.8), ("cementation.purity", "97 %"),
)  # fmt: skip
_PRICES = (
    "budget.currency", "budget.prices.{}.price", "budget.prices.{}.per", "budget.prices.{}.purity",
    "budget.prices.{}.date", "budget.prices.{}.delivered",
)  # fmt: skip


@dataclass(frozen=True)
class TemplateKind:
    """A kind of job: what it is, its metals and reagent, and the settings it asks for."""

    what: str
    metals: str
    reagent: str
    settings: tuple[tuple[str, Any], ...]
    test_kind: str
    grade: str = "%"
    solution: str = "g/L"


def _prices(*named: tuple[str, float]) -> tuple[tuple[str, Any], ...]:
    rows: list[tuple[str, Any]] = [("budget.currency", "USD")]
    for name, price in named:
        values = (price, "t", "98 %", "2026-11-01", "yes")
        quoted = name if name.isalnum() else f'"{name}"'
        rows += [
            (key.format(quoted), value) for key, value in zip(_PRICES[1:], values, strict=True)
        ]
    return tuple(rows)


def _tanks(temperature: float, solids: float, feed: float, times: str) -> tuple[Any, ...]:
    return (
        ("tank.residence_times", times), ("tank.solids", solids),
        ("tank.temperature", temperature), ("tank.feed_reagent", feed),
        ("tank.ore_rate", 36000), ("tank.sizes.single", 0.1),
    )  # fmt: skip


#: Every kind that can be filled in and run.
TEMPLATE_KINDS = {
    "bottle-rolls": TemplateKind(
        "bottle rolls to extraction and a rate law", "Cu", "H2SO4", (*_COMMON, *_FIT), "bottle roll"
    ),
    "copper-heap": TemplateKind(
        "copper bottle rolls to a heap, scrap iron and a budget",
        "Cu",
        "H2SO4",
        (*_COMMON, *_FIT, *_HEAP, *_IRON, *_prices(("H2SO4", 120.0), ("scrap iron", 260.0))),
        "bottle roll",
    ),
    "gold-tanks": TemplateKind(
        "gold and silver bottle rolls to a train of tanks, zinc dust and a budget",
        "Au, Ag",
        "NaCN",
        (
            *_COMMON,
            ("fit.laws", "chemical, ash_layer+chemical, first_order"),
            *_tanks(25, 667, 1.0, "6; 6; 6; 6; 6"),
            *_ZINC,
            *_prices(("NaCN", 2400.0), ("zinc dust", 3900.0)),
        ),
        "bottle roll",
        "g/t",
        "mg/L",
    ),
    "acid-tanks": TemplateKind(
        "stirred acid leaches to a train of tanks and a budget",
        "Zn",
        "H2SO4",
        (
            *_COMMON,
            ("fit.laws", "chemical, film, ash_layer"),
            *_tanks(50, 60, 55, "0.25; 0.25; 0.25; 0.25"),
            *_prices(("H2SO4", 120.0)),
        ),
        "stirred tank",
    ),
}


def template_sheets(kind: str) -> list[TemplateSheet]:
    """Return the sheets of the workbook of a kind.

    Parameters
    ----------
    kind : str
        A key of ``TEMPLATE_KINDS``.

    Returns
    -------
    list of TemplateSheet
        Notes, settings, tests, readings, heads and closeout.

    Raises
    ------
    InputProblems
        If there is no such kind.
    """
    if kind not in TEMPLATE_KINDS:
        raise InputProblems([unknown_name("kind", kind, TEMPLATE_KINDS, column="--kind")])
    one = TEMPLATE_KINDS[kind]
    return [_notes(kind, one), _settings(one), *_tables(one)]


def write_template_workbook(directory: str | Path, kind: str) -> Path:
    """Write the workbook of a kind into a folder, which is made if need be.

    Parameters
    ----------
    directory : str or Path
    kind : str

    Returns
    -------
    Path
        The workbook.

    Raises
    ------
    InputProblems
        If there is no such kind, or the workbook is there already.
    """
    sheets = template_sheets(kind)
    folder = Path(check_path_text(str(directory)))
    path = folder / f"{kind}.xlsx"
    if path.exists() or (folder.exists() and not folder.is_dir()):
        found = "there is such a file already"
        place = (path if path.exists() else folder).as_posix()
        raise InputProblems(
            [Problem(place, None, "", "stop", found, "a new file", "name another folder")]
        )
    folder.mkdir(parents=True, exist_ok=True)
    part = folder / f"{kind}.xlsx.part"
    write_template(sheets, part)
    part.replace(path)
    return path


def _notes(kind: str, one: TemplateKind) -> TemplateSheet:
    lines = (
        f"A workbook for {one.what}.",
        "Fill in the sheets and run: leachkin check " + f"{kind}.xlsx",
        "then: leachkin extraction, leachkin fit, leachkin run with the same file.",
        f'Rows that begin with "{EXAMPLE}" show how to fill a row in; they are left out.',
        "Headings keep their unit in brackets; another unit will do if the heading says so.",
        "A column that you do not need may stay empty. More elements: add columns, as Fe (g/L).",
        "In the sheet settings, a key without a value is left out. The column example shows what "
        "a value may look like; nothing is read from it.",
        "low, high, source and by are for values that were judged, not measured.",
        "A table such as heap runs when its keys are filled in.",
        "This sheet is not read.",
    )
    return TemplateSheet("notes", ("How to use this workbook",), tuple((line,) for line in lines))


def _settings(one: TemplateKind) -> TemplateSheet:
    given = {"campaign.metals": one.metals, "campaign.reagent": one.reagent}
    rows: list[tuple[Any, ...]] = []
    lists: dict[tuple[int, int], tuple[str, ...]] = {}
    for dotted, example in one.settings:
        key = key_of(dotted)
        if key.choices and key.kind == "choice":
            lists[len(rows), 1] = key.choices
        shown = given.get(dotted, example)
        unit = _UNIT_OF.get(key.unit, key.unit) if key.kind in ("quantity", "quantities") else ""
        rows.append((dotted, given.get(dotted), unit or None, *(None,) * 4, key.meaning, shown))
    return TemplateSheet(
        SETTINGS_TAB, _HEADINGS, tuple(rows), notes=_SETTING_NOTES, cell_choices=lists
    )


_SETTING_NOTES = {
    "value": "Leave it blank to leave the key out.",
    "unit": "Another unit that converts will do.",
    "low": "Low and high end of what you think possible, for values that were judged.",
}


def key_of(dotted: str) -> Key:
    """Return the key of the campaign file at a dotted path."""
    parts = [part.strip('"') for part in _split(dotted)]
    table = SCHEMA.table(".".join(parts[:-1])) or SCHEMA.table(".".join(parts[:-2]))
    found = table.key(parts[-1]) if table is not None else None
    if found is None:
        raise InputProblems([unknown_name("key", dotted, [k for k, _ in SCHEMA.dotted_keys()])])
    return found


def _split(dotted: str) -> Iterator[str]:
    from leachkin.campaign.read_settings import split_dotted

    yield from split_dotted(dotted)


def _tables(one: TemplateKind) -> list[TemplateSheet]:
    metals = [metal.strip() for metal in one.metals.split(",")]
    assays = tuple(f"{metal} ({one.solution})" for metal in metals)
    grades = tuple(f"{metal} ({one.grade})" for metal in metals)
    free, added = f"free {one.reagent} (g/L)", f"{one.reagent} added (g)"
    size = "P80 (um)" if one.grade == "g/t" else "size (mm)"
    tests = TemplateSheet(
        "tests",
        ("test", "domain", "kind", "dry solids (g)", "solution (mL)", size, "temperature (degC)",
         f"start {one.reagent} (g/L)", "aliquots", "remark"),
        ((EXAMPLE, "oxide", one.test_kind, 500, 1000, 75 if "P80" in size else "-6.7+4.75", 25, 20,
          POLICIES[0], "overwrite or delete this row"),),
        1,
        notes={
            "dry solids (g)": 'Dry, not as received. With a wet mass, write the headings '
            '"wet solids (g)" and "moisture (%)".',
            "aliquots": "What happened after a sample was taken out.",
            size: "A pair of sieves as -6.7+4.75, or one size; or give a sheet sieves.",
        },
        choices={"kind": TEST_KINDS[:2], "aliquots": tuple(POLICIES)},
    )  # fmt: skip
    readings = TemplateSheet(
        "readings",
        ("test", "time (h)", "aliquot (mL)", "make-up (mL)", *assays, free, added, "pH",
         "temperature (degC)", "remark"),
        ((EXAMPLE, 2, 20, 20, *(0.5 for _ in assays), 19, 1.5, None, None,
          "overwrite or delete this row"),),
        1,
        notes={
            "time (h)": "Hours since the start; or use the headings date and clock time.",
            assays[0]: "Below a limit: <0.01. Not assayed: leave blank.",
            added: "Grams of 100 % reagent since the row above.",
        },
    )  # fmt: skip
    heads = TemplateSheet(
        "heads",
        ("domain", "test", "replicate", *grades, "remark"),
        ((EXAMPLE, None, 1, *(0.7 for _ in grades), "one row a replicate assay"),),
        1,
    )
    closeout = TemplateSheet(
        "closeout",
        ("test", "product", "mass (g)", "volume (mL)", *grades, *assays, "replicate", "remark"),
        ((EXAMPLE, "residue", 485, None, *(0.1 for _ in grades), *(None for _ in assays), 1,
          "solids in g and %, solutions in mL and their own column"),),
        1,
        choices={"product": ("residue", "filtrate", "wash", "loaded carbon")},
        strict=False,
    )  # fmt: skip
    return [tests, readings, heads, closeout]


def kinds_in_words() -> Sequence[str]:
    """Return one line for each kind."""
    return [f"{name}: {kind.what}" for name, kind in TEMPLATE_KINDS.items()]
