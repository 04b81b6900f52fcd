"""What the name of a sample says: which test, which time, head, residue, filtrate."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

_TIME = re.compile(
    r"(?:t\s*=?\s*)?(?P<n>[0-9]+(?:[.,][0-9]+)?)\s*(?P<u>h|hr|hrs|hours?|d|days?|min|mins)", re.I
)
_HEAD = re.compile(r"(?:head|hd|feed)(?: assay| grade)?[\s_-]*(?:r?[0-9]+)?", re.I)
_PRODUCTS = (
    ("residue", re.compile(r"(?:final )?(?:tails?|tailings?|residue|resid|res|tls)", re.I)),
    ("filtrate", re.compile(r"(?:filtrate|filt|final solution|final pls|pls)", re.I)),
    ("wash", re.compile(r"wash(?: solution)?", re.I)),
    ("loaded carbon", re.compile(r"(?:loaded )?carbon", re.I)),
)
_DUPLICATE = re.compile(r"[\s_/.-]+(?:dup(?:licate)?|rpt|repeat|rep)[\s_-]*[0-9]*$", re.I)
_REPLICATE = re.compile(r"[\s_/.-]+(?:r|#|rep)?[0-9]$", re.I)
_SEPARATORS = " _-/.:,#"
_HOURS = {"h": 1.0, "d": 24.0, "m": 1.0 / 60.0}


@dataclass(frozen=True)
class Place:
    """Where a sample belongs: the table, its key in it, and the cells that say so."""

    table: str
    record: tuple[tuple[str, str], ...]
    duplicate: bool = False

    @property
    def key(self) -> tuple[str, ...]:
        """What makes two samples the same."""
        return tuple(value for _, value in self.record)


def place_of_sample(sample: str, tests: Sequence[str], domains: Sequence[str]) -> Place | None:
    """Return where a sample belongs by its name, None where the name does not say.

    Examples
    --------
    >>> place_of_sample("B40-24h", ["B4", "B40"], []).record
    (('test', 'B40'), ('time (h)', '24'))
    >>> place_of_sample("oxide head 2", [], ["oxide"]).table
    'heads'
    """
    text = " ".join(sample.split())
    bare = _DUPLICATE.sub("", text)
    duplicate = bare != text
    for test in sorted(tests, key=len, reverse=True):
        rest = _after(bare, test)
        if rest is None:
            continue
        if match := _TIME.fullmatch(rest):
            hours = float(match["n"].replace(",", ".")) * _HOURS[match["u"][0].casefold()]
            time = f"{hours:.6f}".rstrip("0").rstrip(".")
            return Place("readings", (("test", test), ("time (h)", time)), duplicate)
        if _HEAD.fullmatch(rest):
            return Place("heads", (("test", test),), duplicate)
        plain = _REPLICATE.sub("", f" {rest}").strip()
        for product, pattern in _PRODUCTS:
            if pattern.fullmatch(rest) or pattern.fullmatch(plain):
                return Place("closeout", (("test", test), ("product", product)), duplicate)
    for domain in sorted(domains, key=len, reverse=True):
        rest = _after(bare, domain)
        before = re.fullmatch(rf"{_HEAD.pattern}[\s_-]+{re.escape(domain)}", bare, re.I)
        if before or (rest is not None and _HEAD.fullmatch(rest)):
            return Place("heads", (("domain", domain),), duplicate)
    return None


def _after(text: str, name: str) -> str | None:
    """What follows a name in a sample's name; None where it does not begin so."""
    parts = re.findall(r"[^\W\d_]+|[0-9]+|[^\w\s-]+", name)
    pattern = r"[\s_-]*".join(re.escape(part) for part in parts)
    match = re.match(rf"{pattern}(?=[{re.escape(_SEPARATORS)}])", text, re.I)
    return text[match.end() :].strip(_SEPARATORS) if match else None
