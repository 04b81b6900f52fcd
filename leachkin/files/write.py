"""Writing results whole or not at all: a folder appears under its name only when it is complete."""

from __future__ import annotations

import csv
import io
import json
import math
import shutil
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from leachkin.errors import InputProblems
from leachkin.problems import Problem
from leachkin.result_table import ResultTable


@contextmanager
def whole_directory(
    out: str | Path,
    overwrite: bool = False,
    *,
    inputs: Iterable[str | Path] = (),
    marker: str = "",
) -> Iterator[Path]:
    """Give a folder to write in that becomes ``out`` in one step when the block ends well.

    Parameters
    ----------
    out : str or Path
        The folder to make: new, or empty.
    overwrite : bool
        Replace a folder that is not empty.
    inputs : iterable of paths
        Files that were read; a folder that holds one of them is never replaced.
    marker : str
        Name of a file that must be in a folder before it may be replaced, "" for no such check:
        so that only a folder of earlier results is ever removed.

    Yields
    ------
    Path
        ``OUT.part``. It is removed if the block raises, and nothing else has changed then.

    Raises
    ------
    InputProblems
        If ``out`` may not be used, or another run is writing there.
    """
    target = Path(out).absolute()
    _check_target(target, Path(out), overwrite, inputs, marker)
    part = target.with_name(f"{target.name}.part")
    _made(part)
    try:
        yield part
        _check_target(target, Path(out), overwrite, inputs, marker)
        _put_in_place(part, target)
    finally:
        shutil.rmtree(part, ignore_errors=True)


def _check_target(
    target: Path, shown: Path, overwrite: bool, inputs: Iterable[str | Path], marker: str
) -> None:
    fault = _target_fault(target, overwrite, inputs, marker)
    if fault is not None:
        found, allowed, try_this = fault
        name = shown.as_posix()
        raise InputProblems([Problem(name, None, "", "stop", found, allowed, try_this)])


def _target_fault(
    target: Path, overwrite: bool, inputs: Iterable[str | Path], marker: str
) -> tuple[str, str, str] | None:
    allowed = "a folder that is new or empty"
    if not target.name:
        return "this is the root of a drive", allowed, "name a folder in it"
    if target.is_symlink() or (target.exists() and not target.is_dir()):
        return "this is a file or a link, not a folder", allowed, "give another name"
    if not target.is_dir() or not any(target.iterdir()):
        return None
    if not overwrite:
        return "the folder is not empty", allowed, "give another name, or add --overwrite"
    if target == Path.cwd() or target in Path.cwd().parents:
        return "this is the working folder", allowed, "name a folder inside it"
    for path in inputs:
        if target in Path(path).absolute().parents:
            return f"the folder holds {Path(path).name}, which was read", allowed, "another name"
    if marker and not (target / marker).is_file():
        return (
            f"the folder has no {marker} in it, so it is not a folder of results",
            "a folder that is new, empty, or of earlier results",
            "give another name",
        )
    return None


def _made(part: Path) -> None:
    try:
        part.parent.mkdir(parents=True, exist_ok=True)
        part.mkdir()
    except FileExistsError:
        problem = Problem(
            part.name,
            None,
            "",
            "stop",
            "this folder is there already: another run is writing it, or one broke off",
            "one run at a time",
            f"wait for it, or remove {part.name}",
        )
        raise InputProblems([problem]) from None
    except OSError as error:
        found = f"the folder cannot be made ({error.strerror})"
        problem = Problem(part.as_posix(), None, "", "stop", found, "a folder you may write in")
        raise InputProblems([problem]) from None


def _put_in_place(part: Path, target: Path) -> None:
    """Rename the finished folder; an old one steps aside and comes back if that fails."""
    if not target.exists():
        part.rename(target)
        return
    aside = target.with_name(f"{target.name}.old.part")
    shutil.rmtree(aside, ignore_errors=True)
    target.rename(aside)
    try:
        part.rename(target)
    except OSError:
        aside.rename(target)
        raise
    shutil.rmtree(aside, ignore_errors=True)


def write_text(text: str, path: str | Path) -> None:
    """Write text as UTF-8 with line feeds, and one at the end."""
    ended = text if text.endswith("\n") else text + "\n"
    Path(path).write_bytes(ended.replace("\r\n", "\n").encode("utf-8"))


def write_csv(table: ResultTable, path: str | Path) -> None:
    """Write a table as CSV: commas, decimal points, all digits, headings with units.

    Raises
    ------
    ValueError
        If a cell is NaN or infinite; an absent value is None and an empty cell.
    """
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow([column.title for column in table.columns])
    for row in table.rows:
        check_finite(table, row)
        writer.writerow([_csv_cell(cell) for cell in row])
    write_text(buffer.getvalue(), path)


def _csv_cell(cell: Any) -> str:
    if cell is None:
        return ""
    if isinstance(cell, bool):
        return "yes" if cell else "no"
    return repr(float(cell)) if isinstance(cell, float) else str(cell)


def check_finite(table: ResultTable, row: tuple[Any, ...]) -> None:
    """Raise ValueError if a cell of a row is NaN or infinite."""
    for column, cell in zip(table.columns, row, strict=True):
        if isinstance(cell, float) and not math.isfinite(cell):
            raise ValueError(f"table {table.name!r}, column {column.key!r}: {cell} is no number")


def write_json(data: Mapping[str, Any], path: str | Path) -> None:
    """Write plain data as JSON, in the order given, two spaces deep.

    Raises
    ------
    ValueError
        If a number is NaN or infinite; the message names its key.
    """
    plain = _plain(data, "")
    write_text(json.dumps(plain, indent=2, ensure_ascii=False, allow_nan=False), path)


def _plain(value: Any, key: str) -> Any:
    """The value in the types of JSON."""
    if hasattr(value, "tolist"):  # numpy arrays and scalars
        value = value.tolist()
    if isinstance(value, Mapping):
        return {str(k): _plain(v, f"{key}.{k}".lstrip(".")) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item, f"{key}[{i}]") for i, item in enumerate(value)]
    if isinstance(value, float) and not math.isfinite(value):
        raise ValueError(f"{key}: {value} cannot be written; an absent value is None")
    if value is None or isinstance(value, str | bool | int | float):
        return value
    raise TypeError(f"{key}: {type(value).__name__} cannot be written as JSON")
