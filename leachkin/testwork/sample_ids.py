"""What the name of a sample says: which test, which time, head, residue, filtrate."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

_TIME = re.compile(
    r"(?:t\s*=?\s*)?(?P<n>[0-9]+(?:[.,][0-9]+)?)\s*(?P<u>h|hr|hrs|hours?|d|days?|min|mins)", re.I
)
_HEAD = re.compile(r"(?:head|hd|feed)(?: assay| grade)?[\s_-]*(?:r?[0-9]+)?", re.I)
_HEAD_FIRST = re.compile(r"(?:head|hd|feed)(?: assay| grade)?[\s_-]+", re.I)
_TOKEN = re.compile(r"[^\W\d_]+|[0-9]+|[^\w\s-]+")
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


class SampleNames:
    """Finds where samples belong by their names; looks each name up once.

    Parameters
    ----------
    tests, domains : sequence of str
        The names that a sample may begin with.
    """

    def __init__(self, tests: Sequence[str], domains: Sequence[str]) -> None:
        self._tests = {_parts(name): name for name in tests if _parts(name)}
        self._domains = {_parts(name): name for name in domains if _parts(name)}
        self._longest = max(map(len, (*self._tests, *self._domains)), default=0)
        self._known: dict[str, Place | None] = {}

    def place(self, sample: str) -> Place | None:
        """Return where a sample belongs by its name, None where the name does not say."""
        if sample not in self._known:
            self._known[sample] = self._find(sample)
        return self._known[sample]

    def _find(self, sample: str) -> Place | None:
        text = " ".join(sample.split())
        bare = _DUPLICATE.sub("", text)
        duplicate = bare != text
        for test, rest in self._beginnings(bare, self._tests):
            if place := _place_in_test(test, rest, duplicate):
                return place
        for domain, rest in self._beginnings(bare, self._domains):
            if _HEAD.fullmatch(rest):
                return Place("heads", (("domain", domain),), duplicate)
        head = _HEAD_FIRST.match(bare)
        named = self._domains.get(_parts(bare[head.end() :])) if head else None
        return Place("heads", (("domain", named),), duplicate) if named else None

    def _beginnings(
        self, text: str, names: Mapping[tuple[str, ...], str]
    ) -> Iterator[tuple[str, str]]:
        """The names that a text begins with, the longest first, and what follows each."""
        tokens = list(_TOKEN.finditer(text))
        for count in range(min(self._longest, len(tokens)), 0, -1):
            name = names.get(tuple(t.group().casefold() for t in tokens[:count]))
            rest = text[tokens[count - 1].end() :]
            if name is not None and rest[:1] and rest[0] in _SEPARATORS:
                yield name, rest.strip(_SEPARATORS)


def place_of_sample(sample: str, tests: Sequence[str], domains: Sequence[str]) -> Place | None:
    """Return where a sample belongs by its name, None where the name does not say.

    Examples
    --------
    >>> place_of_sample("B40-24h", ["B4", "B40"], []).record
    (('test', 'B40'), ('time (h)', '24'))
    >>> place_of_sample("oxide head 2", [], ["oxide"]).table
    'heads'
    """
    return SampleNames(tests, domains).place(sample)


def _parts(name: str) -> tuple[str, ...]:
    return tuple(part.casefold() for part in _TOKEN.findall(name))


def _place_in_test(test: str, rest: str, duplicate: bool) -> Place | None:
    """Where a sample of a test belongs by the rest of its name."""
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
    return None
