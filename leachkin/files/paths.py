"""Paths as text in a settings file, and the bytes of a file, with every trouble in one message."""

from __future__ import annotations

import unicodedata
from pathlib import Path

from leachkin.errors import InputProblems, nearest_names
from leachkin.problems import Problem

#: Larger files are refused: the readers hold a file in memory.
LARGEST_FILE_BYTES = 1_000_000_000


def check_path_text(text: str, *, file: str = "", row: int | None = None, column: str = "") -> str:
    """Return a path written in a settings file if it may be used.

    Parameters
    ----------
    text : str
        With forward slashes, relative or absolute, ``#Sheet`` at the end or not.
    file, row, column
        Where it was written, for the message.

    Returns
    -------
    str
        The text, spaces around it removed.

    Raises
    ------
    InputProblems
        If it is empty, or has a backslash or a control character in it.
    """
    fault = _path_fault(text)
    if fault is None:
        return text.strip()
    found, try_this = fault
    allowed = "a path with forward slashes"
    raise InputProblems([Problem(file, row, column, "stop", found, allowed, try_this)])


def _path_fault(text: str) -> tuple[str, str] | None:
    if not text.strip():
        return "the path is empty", 'write a file name such as "readings.csv"'
    controls = [c for c in text if unicodedata.category(c) in ("Cc", "Cf", "Zl", "Zp")]
    if controls:
        name = f"U+{ord(controls[0]):04X}"
        return (
            f"the path {text!r} has a control character in it ({name})",
            'in double quotes a backslash makes one ("\\t" is a tab): write "sheets/tests.csv"',
        )
    if "\\" in text:
        return f"the path {text!r} has a backslash in it", f'write "{text.replace(chr(92), "/")}"'
    return None


def file_bytes(path: Path, name: str = "") -> bytes:
    """Return the content of a file.

    Parameters
    ----------
    path : Path
    name : str
        Name to show in messages; the path's own by default.

    Raises
    ------
    InputProblems
        If there is no such file, it is a folder, it cannot be opened, or it is very large.
    """
    shown = name or path.as_posix()
    try:
        size = path.stat().st_size
        if size > LARGEST_FILE_BYTES:
            allowed = f"at most {LARGEST_FILE_BYTES // 1_000_000} MB"
            raise InputProblems(
                [Problem(shown, None, "", "stop", f"the file has {size // 1_000_000} MB", allowed)]
            )
        return path.read_bytes()
    except FileNotFoundError:
        raise InputProblems([_not_there(path, shown)]) from None
    except IsADirectoryError:
        problem = Problem(
            shown, None, "", "stop", "this is a folder", "a file", "name a file in it"
        )
        raise InputProblems([problem]) from None
    except PermissionError:
        raise InputProblems([_not_readable(path, shown)]) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        problem = Problem(shown, None, "", "stop", f"the file cannot be read ({reason})", "a file")
        raise InputProblems([problem]) from None


def _not_there(path: Path, shown: str) -> Problem:
    parent = path.parent
    if not parent.is_dir():
        return Problem(
            shown, None, "", "stop", "there is no such file, nor its folder", "a file that is there"
        )
    names = [entry.name for entry in parent.iterdir()]
    near = nearest_names(path.name, names)
    hint = f"did you mean {' or '.join(near)}?" if near else f"put it in {parent.as_posix()}"
    return Problem(shown, None, "", "stop", "there is no such file", "a file that is there", hint)


def _not_readable(path: Path, shown: str) -> Problem:
    if path.is_dir():
        return Problem(shown, None, "", "stop", "this is a folder", "a file", "name a file in it")
    return Problem(
        shown,
        None,
        "",
        "stop",
        "the file may not be read",
        "a file that is not locked",
        "close it in the other program, or look at its permissions",
    )
