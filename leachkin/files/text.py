"""Bytes into text: the encoding is found and said, a mixture of two is refused."""

from __future__ import annotations

import re

from leachkin.errors import InputProblems
from leachkin.problems import Problem

_SIGNATURES = {
    b"PK\x03\x04": ("a workbook or a zip archive", 'name a sheet of it, as "book.xlsx#Sheet"'),
    b"\xd0\xcf\x11\xe0": (
        "an old .xls workbook or one with a password",
        "open it, remove the password, and save it as .xlsx",
    ),
    b"%PDF": ("a PDF", "ask the laboratory for the numbers as CSV or XLSX"),
}
_UTF16 = {b"\xff\xfe": "utf-16-le", b"\xfe\xff": "utf-16-be"}
#: Codecs and what they are called; the first one wins where nothing tells them apart.
_CODE_PAGES = {
    "cp1252": "Windows-1252",
    "cp850": "code page 850 of DOS",
    "mac_roman": "Mac Roman",
}
#: A micro or degree sign where a unit has one: what tells one code page from another.
_SIGN_OF_A_UNIT = re.compile("\u00b5(?=[mgLlS])|\u00b0(?=\\s?[CF]\\b)|\u00b2|\u00b3|m\u00b7")
_MULTIBYTE = re.compile(rb"[\xc2-\xdf][\x80-\xbf]|[\xe0-\xef][\x80-\xbf]{2}")
_FOREIGN = re.compile(r"[\x00-\x08\x0b\x0e-\x1f]")
_UNSEEN = re.compile("[\u200b\u200e\u200f\u2060\ufeff]")
_MOST_SHOWN = 6


def decode_text(content: bytes, shown: str) -> tuple[str, list[Problem]]:
    """Return the text of a file, and what there is to say about its encoding.

    Parameters
    ----------
    content : bytes
    shown : str
        Name to show in messages.

    Returns
    -------
    text : str
        Invisible marks left out.
    problems : list of Problem
        A note where the text is not UTF-8.

    Raises
    ------
    InputProblems
        If it is another kind of file, or no one encoding fits.

    Examples
    --------
    >>> text, problems = decode_text("Cu (\u00b5g/L)".encode("cp1252"), "a.csv")
    >>> text == "Cu (\u00b5g/L)", problems[0].level
    (True, 'note')
    """
    for signature, (what, try_this) in _SIGNATURES.items():
        if content.startswith(signature):
            raise _not_text(shown, None, f"this is {what}, not a CSV file", try_this)
    text, problems = _decoded(content, shown)
    if (match := _FOREIGN.search(text)) is not None:
        row = text[: match.start()].count("\n") + 1
        found = f"character U+{ord(match.group()):04X} does not belong in text"
        raise _not_text(shown, row, found, "name a CSV file; this looks like another kind")
    return _UNSEEN.sub("", text), problems


def _decoded(content: bytes, shown: str) -> tuple[str, list[Problem]]:
    codec = _UTF16.get(content[:2]) or _utf16_without_mark(content)
    if codec is not None:
        try:
            text = content.decode(codec)
        except UnicodeDecodeError:
            found = "this begins as UTF-16 text and does not go on as such"
            raise _not_text(shown, None, found, "save it again as CSV UTF-8") from None
        return text, [_read_as(shown, "UTF-16", "")]
    try:
        return content.decode("utf-8-sig"), []
    except UnicodeDecodeError as error:
        return _in_a_code_page(content, error.start, shown)


def _utf16_without_mark(content: bytes) -> str | None:
    """UTF-16 of Western text has a zero in every second byte."""
    head = content[:400]
    if len(head) < 8:
        return None
    for codec, zeros, letters in (
        ("utf-16-le", head[1::2], head[0::2]),
        ("utf-16-be", head[0::2], head[1::2]),
    ):
        if zeros.count(0) > 0.9 * len(zeros) and letters.count(0) == 0:
            return codec
    return None


def _in_a_code_page(content: bytes, start: int, shown: str) -> tuple[str, list[Problem]]:
    row = content[:start].count(b"\n") + 1
    byte = f"byte {start + 1} (0x{content[start]:02X})"
    if (other := _MULTIBYTE.search(content)) is not None:
        letter = other.group().decode("utf-8", "replace")
        where = content[: other.start()].count(b"\n") + 1
        found = f"{byte} is not UTF-8 text, but {letter!r} in row {where} is: two encodings"
        raise _not_text(shown, row, found, "retype the letters in one of the two rows")
    best, best_text, best_score = "", "", -1
    for codec, name in _CODE_PAGES.items():
        try:
            text = content.decode(codec)
        except UnicodeDecodeError:
            continue
        score = len(_SIGN_OF_A_UNIT.findall(text))
        if score > best_score:
            best, best_text, best_score = name, text, score
    if not best:
        found = f"{byte} is not UTF-8 text nor in a Western code page"
        raise _not_text(shown, row, found, "save it again as CSV UTF-8")
    return best_text, [_read_as(shown, best, _letters(best_text))]


def _letters(text: str) -> str:
    """The letters beyond plain ASCII, each with the row where it first stands."""
    rows: dict[str, int] = {}
    for match in re.finditer(r"[^\x00-\x7f]", text):
        if match.group() not in rows:
            rows[match.group()] = text[: match.start()].count("\n") + 1
    listed = [f"{letter!r} in row {row}" for letter, row in rows.items()]
    more = f" and {len(listed) - _MOST_SHOWN} more" if len(listed) > _MOST_SHOWN else ""
    return ", ".join(listed[:_MOST_SHOWN]) + more


def _read_as(shown: str, encoding: str, letters: str) -> Problem:
    found = f"read as {encoding} text, not UTF-8"
    found += f"; the letters beyond plain ones are {letters}" if letters else ""
    try_this = "if a letter is wrong, save the file again as CSV UTF-8"
    return Problem(shown, None, "", "note", found, "", try_this)


def _not_text(shown: str, row: int | None, found: str, try_this: str) -> InputProblems:
    allowed = "text with separators, best as CSV UTF-8"
    return InputProblems([Problem(shown, row, "", "stop", found, allowed, try_this)])
