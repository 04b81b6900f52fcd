"""The heads sheet: replicate assays by domain, by size fraction or by test, and their means."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from leachkin.files import Sheet
from leachkin.problems import Problem, unknown_name
from leachkin.testwork.cells import CellReader
from leachkin.testwork.columns import FORMULA, Family, Field, of_family, resolve_columns
from leachkin.testwork.names import TEST_NAMES, fold_name
from leachkin.testwork.records import Array, Head
from leachkin.testwork.screen_assay import read_screens
from leachkin.testwork.settings import TestworkSettings

FIELDS = (
    Field("test", "test", names=TEST_NAMES),
    Field("domain", "domain", names=("ore", "ore type")),
    Field("lower", "size lower (mm)", ("mm",), ("lower size",)),
    Field("upper", "size upper (mm)", ("mm",), ("upper size", "top size")),
    Field("replicate", "replicate"),
    Field("screen", "screen fraction", names=("fraction", "metallics fraction", "screen")),
    Field("screened", "fraction mass (g)", ("g",), ("mass of fraction", "screened mass")),
)
_PART_OF = (
    r"(?:(?:acid|cyanide|CN|water|weak-acid|strong-acid)-soluble|total|residual|sulphide|sulfide"
    r"|sulphate|sulfate|organic|elemental)"
)
FAMILIES = (
    Family(
        "assay",
        "{} (%)",
        rf"(?P<whole>(?:{_PART_OF} )?{FORMULA})",
        ("kg/t",),
        ("Cu", "Fe", "Zn", "Au", "Ag", "As", "CaCO3", "acid-soluble Cu"),
    ),
)
_SAME_SIZE = 1e-6  #: relative; sizes of a fraction written twice


@dataclass(frozen=True)
class HeadRows:
    """The heads of one domain, fraction or test.

    ``domain`` and ``test`` are "" and ``size_mm`` None where the rows are not limited to one.
    """

    domain: str
    test: str
    size_mm: tuple[float, float] | None
    heads: Mapping[str, Head]


@dataclass(frozen=True)
class Heads:
    """All assay heads of a campaign.

    Attributes
    ----------
    groups : tuple of HeadRows
    """

    groups: tuple[HeadRows, ...] = field(default_factory=tuple)

    def of(
        self, domain: str, size_mm: tuple[float, float] | None = None, test: str = ""
    ) -> dict[str, Head]:
        """Return the heads that apply to a charge, by analyte: the narrowest that there are.

        A head of the test itself comes before one of its size fraction, and that before one of
        its domain.
        """
        found: dict[str, Head] = {}
        for group in sorted(self.groups, key=_narrowness):
            if group.test and fold_name(group.test) != fold_name(test):
                continue
            if group.domain and fold_name(group.domain) != fold_name(domain):
                continue
            if group.size_mm is not None and not _same_size(group.size_mm, size_mm):
                continue
            found.update(group.heads)
        return found


def _narrowness(group: HeadRows) -> tuple[bool, bool, bool]:
    return bool(group.test), group.size_mm is not None, bool(group.domain)


def _same_size(one: tuple[float, float], other: tuple[float, float] | None) -> bool:
    return other is not None and np.allclose(one, other, rtol=_SAME_SIZE, atol=0.0)


def read_heads_sheet(
    sheet: Sheet, settings: TestworkSettings, domains: Sequence[str], problems: list[Problem]
) -> Heads:
    """Read the heads sheet.

    Parameters
    ----------
    sheet : Sheet
    settings : TestworkSettings
        For the precision of a single assay, and the scatter of a charge.
    domains : sequence of str
        The domains of the tests sheet; another one is told. Empty for no check.
    problems : list of Problem
        Added to.

    Returns
    -------
    Heads
        Replicates averaged. The standard deviation of a mean comes from its replicates where
        there are two or more that differ, and from the precision otherwise. Rows with a screen
        fraction are one screen assay: the coarse part whole, the fine part by its replicates, each
        with its mass.
    """
    uses = resolve_columns(sheet, FIELDS, FAMILIES, problems, settings, "heads")
    reader = CellReader(sheet, uses, problems, settings.answers)
    analytes = of_family(uses, "assay")
    values = {name: found for name in analytes if (found := reader.assays(f"assay:{name}"))}
    groups = _grouped_rows(reader)
    screens = read_screens(reader)
    reader.finish()
    _unknown_domains(reader, domains)
    made = []
    for (domain, test, size), rows in groups.items():
        heads = {}
        for name, (assays, bounds) in values.items():
            numbers = tuple(sheet.rows[i].number for i in rows)
            if screens.has_any(rows):
                head = screens.head(rows, numbers, (name, assays, bounds), settings, problems)
            else:
                head = _head(name, assays[rows], bounds[rows], numbers, settings)
            if head is not None:
                heads[name] = head
        made.append(HeadRows(domain, test, size, heads))
    return Heads(tuple(made))


def _grouped_rows(
    reader: CellReader,
) -> dict[tuple[str, str, tuple[float, float] | None], list[int]]:
    lower, upper = reader.numbers("lower"), reader.numbers("upper")
    groups: dict[tuple[str, str, tuple[float, float] | None], list[int]] = {}
    texts = zip(reader.texts("domain"), reader.texts("test"), strict=True)
    for i, (domain, test) in enumerate(texts):
        size = None
        if lower is not None and upper is not None and not np.isnan(lower[i] + upper[i]):
            size = (float(lower[i]), float(upper[i]))
        groups.setdefault((domain, test, size), []).append(i)
    return groups


def _head(
    name: str,
    assays: Array,
    bounds: NDArray[np.int64],
    rows: tuple[int, ...],
    settings: TestworkSettings,
) -> Head | None:
    """Mean of the replicates with the standard deviation of the mean, None without a value."""
    kept = np.flatnonzero((bounds == 0) & ~np.isnan(assays))
    values = assays[kept]
    if not values.size or values.mean() <= 0.0:
        return None
    mean = float(values.mean())
    sd = float(settings.sd("head", mean, name)) / np.sqrt(values.size)
    if values.size > 1 and values.std(ddof=1) > 0.0:
        sd = float(values.std(ddof=1)) / np.sqrt(values.size)
    scatter = settings.precision_of("head", name)[1] * mean
    stated = settings.sd("head", values, name)
    return Head(
        mean,
        float(sd),
        int(values.size),
        scatter,
        tuple(values.tolist()),
        tuple(stated.tolist()),
        tuple(rows[i] for i in kept),
    )


def _unknown_domains(reader: CellReader, domains: Sequence[str]) -> None:
    if not domains:
        return
    known = {fold_name(domain) for domain in domains}
    told: set[str] = set()
    for i, domain in enumerate(reader.texts("domain")):
        if domain and fold_name(domain) not in known and domain not in told:
            told.add(domain)
            problem = unknown_name(
                "domain",
                domain,
                sorted(set(domains)),
                file=reader.sheet.file,
                row=reader.sheet.rows[i].number,
                column="domain",
            )
            reader.problems.append(
                Problem(
                    problem.file,
                    problem.row,
                    problem.column,
                    "note",
                    f"no test is of domain {domain!r}",
                    problem.allowed,
                    problem.try_this,
                )
            )
