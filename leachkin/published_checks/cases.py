"""Read the cases from print: one CSV a source, every row with its source and status."""

from __future__ import annotations

import csv
from dataclasses import dataclass
from importlib import resources

from leachkin.errors import TableError
from leachkin.tables import STATUSES, source_citation

_COLUMNS = (
    "case",
    "quantity",
    "inputs",
    "printed",
    "tolerance",
    "unit",
    "source",
    "status",
    "note",
)
#: What a check may rest on; a value from memory is never an expected value.
_ALLOWED = tuple(status for status in STATUSES if status != "from memory")


@dataclass(frozen=True)
class Case:
    """One value from print and what to compute beside it.

    Attributes
    ----------
    case, quantity : str
        Name for people; name of the function that computes it.
    inputs : dict of str to str
    printed : str
        The value as it is printed.
    tolerance : float
        Half a unit of the last printed digit, unless the note says otherwise.
    unit, source, status, note : str
    """

    case: str
    quantity: str
    inputs: dict[str, str]
    printed: str
    tolerance: float
    unit: str
    source: str
    status: str
    note: str

    def text(self, key: str) -> str:
        """Return an input as text.

        Raises
        ------
        TableError
            If the case has no such input.
        """
        try:
            return self.inputs[key]
        except KeyError:
            raise TableError(f"case {self.case!r} has no input {key!r}") from None

    def numbers(self, key: str) -> list[float]:
        """Return an input that is a list of numbers."""
        try:
            return [float(word) for word in self.text(key).split()]
        except ValueError:
            raise TableError(f"case {self.case!r}: input {key!r} is not numbers") from None

    def number(self, key: str) -> float:
        """Return an input that is one number."""
        return self.numbers(key)[0]


def read_cases() -> tuple[Case, ...]:
    """Return every case of the package, sorted by file and then as written.

    Raises
    ------
    TableError
        If a file has other columns, an unknown source or status, or a value that is no number.
    """
    folder = resources.files("leachkin.published_checks").joinpath("cases")
    names = sorted(entry.name for entry in folder.iterdir() if entry.name.endswith(".csv"))
    cases: list[Case] = []
    for name in names:
        cases += _cases_of(name, folder.joinpath(name).read_text(encoding="utf-8"))
    return tuple(cases)


def read_data(name: str) -> tuple[tuple[str, ...], list[list[float]]]:
    """Return a small data set that sits beside the cases: headings and columns of numbers.

    Raises
    ------
    TableError
        If there is no such set.
    """
    path = resources.files("leachkin.published_checks").joinpath("data", f"{name}.csv")
    try:
        lines = list(csv.reader(path.read_text(encoding="utf-8").splitlines()))
    except FileNotFoundError:
        raise TableError(f"there is no published data set {name!r}") from None
    rows = [[float(cell) for cell in line] for line in lines[1:]]
    return tuple(lines[0]), [list(column) for column in zip(*rows, strict=True)]


def _cases_of(name: str, text: str) -> list[Case]:
    lines = list(csv.reader(text.splitlines()))
    if not lines or tuple(lines[0]) != _COLUMNS:
        raise TableError(f"{name}: the columns must be {', '.join(_COLUMNS)}")
    return [_case(name, number, cells) for number, cells in enumerate(lines[1:], start=2)]


def _case(name: str, line: int, cells: list[str]) -> Case:
    where = f"{name}, line {line}"
    if len(cells) != len(_COLUMNS):
        raise TableError(f"{where}: {len(cells)} cells, not {len(_COLUMNS)}")
    row = dict(zip(_COLUMNS, cells, strict=True))
    source_citation(row["source"])
    if row["status"] not in _ALLOWED:
        raise TableError(f"{where}: status {row['status']!r} may not carry a check")
    try:
        tolerance = float(row["tolerance"])
        float(row["printed"])
    except ValueError:
        raise TableError(f"{where}: printed value and tolerance must be numbers") from None
    return Case(
        case=row["case"],
        quantity=row["quantity"],
        inputs=_inputs(where, row["inputs"]),
        printed=row["printed"],
        tolerance=tolerance,
        unit=row["unit"],
        source=row["source"],
        status=row["status"],
        note=row["note"],
    )


def _inputs(where: str, text: str) -> dict[str, str]:
    inputs = {}
    for part in text.split(";"):
        key, sign, value = part.partition("=")
        if not sign:
            raise TableError(f"{where}: write inputs as key=value; key=value, not {part!r}")
        inputs[key.strip()] = value.strip()
    return inputs
