"""Reading a TOML settings file with the line of each key, so that a message can point at it."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from leachkin.errors import InputProblems
from leachkin.files.paths import file_bytes
from leachkin.problems import Problem

_TABLE = re.compile(r"^\s*(\[\[?)\s*([^\[\]]+?)\s*\]\]?\s*(?:#.*)?$")
_KEY = re.compile(
    r"""^\s*((?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[A-Za-z0-9_-]+|"[^"]*"|'[^']*'))*)\s*=(.*)$"""
)
_PART = re.compile(r"""[A-Za-z0-9_-]+|"[^"]*"|'[^']*'""")
_AT_LINE = re.compile(r"\s*\(at line (\d+), column \d+\)|\s*\(at end of document\)")


@dataclass(frozen=True)
class TomlDocument:
    """A settings file.

    Attributes
    ----------
    file : str
        Name to show.
    data : dict
        Its content.
    lines : mapping of str to int
        Line of each dotted key; the members of an array of tables are numbered from 0, as
        ``exclude.0.test``.
    content : bytes
        The file as it was, for its SHA-256.
    """

    file: str
    data: dict[str, Any]
    lines: Mapping[str, int] = field(repr=False)
    content: bytes = field(default=b"", repr=False)

    def line_of(self, dotted_key: str) -> int:
        """Return the line of a key, or of the nearest table above it; 1 where there is none.

        Examples
        --------
        >>> document = TomlDocument("a.toml", {}, {"heap": 4, "heap.cycle": 6})
        >>> document.line_of("heap.cycle"), document.line_of("heap.cure")
        (6, 4)
        """
        parts = re.sub(r"\[(\d+)\]", r".\1", dotted_key).split(".")
        while parts:
            if (line := self.lines.get(".".join(parts))) is not None:
                return line
            parts.pop()
        return 1


def read_toml(path: str | Path, name: str = "") -> TomlDocument:
    """Read a TOML file.

    Parameters
    ----------
    path : str or Path
    name : str
        Name to show in messages; the file name by default.

    Returns
    -------
    TomlDocument

    Raises
    ------
    InputProblems
        If it is not there, empty, not UTF-8 text or not TOML; the message has the line.
    """
    path = Path(path)
    shown = name or path.name
    content = file_bytes(path, shown)
    text = _decoded(content, shown)
    if not text.strip():
        raise InputProblems([Problem(shown, None, "", "stop", "the file is empty", "settings")])
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputProblems([_syntax_problem(shown, str(error), text)]) from None
    except RecursionError:
        raise InputProblems([Problem(shown, None, "", "stop", "nested too deeply")]) from None
    return TomlDocument(shown, data, _line_numbers(text), content)


def _decoded(content: bytes, shown: str) -> str:
    try:
        return content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        row = content[: error.start].count(b"\n") + 1
        found = f"byte {error.start + 1} (0x{content[error.start]:02X}) is not UTF-8 text"
        problem = Problem(shown, row, "", "stop", found, "UTF-8 text", "save it as UTF-8")
        raise InputProblems([problem]) from None


def _syntax_problem(shown: str, message: str, text: str) -> Problem:
    match = _AT_LINE.search(message)
    row = int(match.group(1)) if match and match.group(1) else len(text.splitlines())
    plain = _AT_LINE.sub("", message)
    line = text.splitlines()[row - 1] if row <= len(text.splitlines()) else ""
    try_this = "text goes in double quotes, a list in square brackets"
    if "\\" in line:
        try_this = 'write paths with forward slashes, as "sheets/tests.csv"'
    found = f"this is not TOML: {plain[:1].lower()}{plain[1:]}"
    return Problem(shown, row, "", "stop", found, 'lines such as key = "value"', try_this)


def _line_numbers(text: str) -> dict[str, int]:
    """Line of each table and key. The text is known to be good TOML."""
    lines: dict[str, int] = {}
    counts: dict[str, int] = {}
    prefix: list[str] = []
    open_mark, depth = "", 0
    for number, line in enumerate(text.split("\n"), start=1):
        if not open_mark and depth == 0:
            if table := _TABLE.match(line):
                prefix = _table_prefix(table.group(1) == "[[", table.group(2), counts)
                _note(lines, prefix, number)
                continue
            if key := _KEY.match(line):
                _note(lines, [*prefix, *_parts(key.group(1))], number)
                line = key.group(2)
        open_mark, depth = _still_open(line, open_mark, depth)
    return lines


def _table_prefix(is_array: bool, name: str, counts: dict[str, int]) -> list[str]:
    """The dotted key of a table, the members of arrays of tables numbered from 0."""
    prefix: list[str] = []
    parts = _parts(name)
    for position, part in enumerate(parts):
        prefix.append(part)
        dotted = ".".join(prefix)
        if is_array and position == len(parts) - 1:
            counts[dotted] = counts.get(dotted, -1) + 1
        if dotted in counts:
            prefix.append(str(counts[dotted]))
    return prefix


def _parts(name: str) -> list[str]:
    return [part.strip("\"'") for part in _PART.findall(name)]


def _note(lines: dict[str, int], parts: list[str], number: int) -> None:
    """Keep the first line of a key and of each table above it."""
    for length in range(1, len(parts) + 1):
        lines.setdefault(".".join(parts[:length]), number)


def _still_open(line: str, mark: str, depth: int) -> tuple[str, int]:
    """Whether a multi-line string (its mark) or a bracket (its depth) is open after a line."""
    position = 0
    while position < len(line):
        if mark:
            if mark[0] == '"' and line[position] == "\\":
                position += 2
                continue
            if line.startswith(mark, position):
                position += len(mark)
                mark = ""
                continue
        elif line[position] == "#":
            break
        elif line[position] in "\"'":
            triple = line[position] * 3
            mark = triple if line.startswith(triple, position) else line[position]
            position += len(mark)
            continue
        else:
            depth += {"[": 1, "{": 1, "]": -1, "}": -1}.get(line[position], 0)
        position += 1
    return (mark if len(mark) == 3 else ""), depth
