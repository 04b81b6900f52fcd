"""What people call things in headings: elements by word, free acid, cyanide, lime, ferrous."""

from __future__ import annotations

import re
from dataclasses import dataclass

from leachkin.testwork.answers import CYANIDE_BASES, LIME_BASES
from leachkin.testwork.settings import TestworkSettings

#: Superscripts and subscripts as plain signs; several ways to write a charge end the same.
_PLAIN = str.maketrans(
    {
        **{chr(0x2080 + n): str(n) for n in range(10)},
        **{chr(0x2070 + n): str(n) for n in (0, 4, 5, 6, 7, 8, 9)},
        "\u00b9": "1", "\u00b2": "2", "\u00b3": "3",
        "\u207a": "+", "\u207b": "-", "\u2212": "-", "\u00a0": " ",
    }
)  # fmt: skip
ELEMENT_WORDS = {
    "gold": "Au", "silver": "Ag", "copper": "Cu", "zinc": "Zn", "iron": "Fe", "nickel": "Ni",
    "cobalt": "Co", "uranium": "U", "arsenic": "As", "lead": "Pb", "cadmium": "Cd",
    "manganese": "Mn", "magnesium": "Mg", "calcium": "Ca", "aluminium": "Al", "aluminum": "Al",
    "silicon": "Si", "mercury": "Hg", "antimony": "Sb", "sulphur": "S", "sulfur": "S",
    "lithium": "Li", "vanadium": "V", "molybdenum": "Mo",
}  # fmt: skip
_IONS = {"ferrous": "Fe2+", "ferric": "Fe3+", "ferrous iron": "Fe2+", "ferric iron": "Fe3+"}
_ROMAN = {"I": "+", "II": "2+", "III": "3+", "IV": "4+", "VI": "6+"}
_WHOLE = re.compile(r"\b(?:total|tot\.?|soln\.?|solution|dissolved|assay|grade|conc\.?)\b", re.I)
_ADDED = re.compile(
    r"(?:(?P<a>.+?) (?:added|add\.?|additions?|dosed|dose|dosage)|(?:added|add) (?P<b>.+))", re.I
)
_START = re.compile(r"(?:start|starting|initial|feed) (?P<of>.+)", re.I)
_FREE = re.compile(r"(?:free|residual|titrated) (?P<of>.+)|(?P<also>.+) (?:free|titration)", re.I)
ACIDS = ("H2SO4", "HCl", "HNO3")
REAGENTS = (*ACIDS, "NaCN", "KCN", "CN", "NaOH", "NH3", "CaO", "Ca(OH)2", "Na2CO3")


@dataclass(frozen=True)
class Question:
    """A word in a heading that needs an answer: what it may be, and the line that says it."""

    word: str
    choices: tuple[str, ...]
    paste: str


def plain_text(text: str) -> str:
    """Return a heading with superscripts and subscripts as plain signs, spaces single.

    Examples
    --------
    >>> plain_text("Fe\\u00b3\\u207a"), plain_text("H\\u2082SO\\u2084  added")
    ('Fe3+', 'H2SO4 added')
    """
    return " ".join(text.translate(_PLAIN).split())


def as_trade_name(
    name: str, settings: TestworkSettings, family: str = ""
) -> tuple[str, Question | None]:
    """Return a heading's name as the tables of columns write it, and what must be asked first.

    Parameters
    ----------
    name : str
        Without its unit.
    settings : TestworkSettings
        For the campaign's reagent and the answers given.
    family : str
        "readings" where a bare reagent stands for a titration.

    Returns
    -------
    name : str
        The same where it needs no change.
    question : Question or None

    Examples
    --------
    >>> settings = TestworkSettings(("Cu",), "H2SO4", dict.fromkeys(
    ...     ("solution", "tail", "head", "residue"), (0.0, 0.02)))
    >>> as_trade_name("Free acid", settings)[0], as_trade_name("Fe(III)", settings)[0]
    ('free H2SO4', 'Fe3+')
    """
    text = re.sub(r" (?:strength|concentration|conc\.?)$", "", plain_text(name), flags=re.I)
    if match := _ADDED.fullmatch(text):
        what, question = _substance((match["a"] or match["b"]).strip(), settings)
        return f"{what} added", question
    if match := _START.fullmatch(text):
        what, question = _substance(match["of"].strip(), settings)
        return f"start {what}", question
    if match := _FREE.fullmatch(text):
        what, question = _substance((match["of"] or match["also"]).strip(), settings)
        return f"free {what}", question
    what, question = _substance(text, settings)
    if family == "readings" and what in REAGENTS:
        return f"free {what}", question
    return what, question


def _substance(text: str, settings: TestworkSettings) -> tuple[str, Question | None]:
    folded = text.casefold()
    if folded in ("acid", "sulphuric acid", "sulfuric acid"):
        reagent = settings.reagent or ""
        return (reagent if folded == "acid" and reagent in ACIDS else "H2SO4"), None
    if folded in ("cyanide", "free cyanide"):
        return _asked("cyanide", CYANIDE_BASES, settings.answers.cyanide)
    if folded == "lime":
        return _asked("lime", LIME_BASES, settings.answers.lime)
    if folded in ("quicklime", "burnt lime"):
        return "CaO", None
    if folded in ("hydrated lime", "slaked lime"):
        return "Ca(OH)2", None
    if folded in _IONS:
        return _IONS[folded], None
    return _species(text), None


def _asked(word: str, choices: tuple[str, ...], answer: str | None) -> tuple[str, Question | None]:
    if answer is not None:
        return answer, None
    return choices[0], Question(word, choices, f'sheets | {word} = "{choices[0]}"')


def _species(text: str) -> str:
    """An element or ion: ``Fe(III)``, ``Fe+3``, ``copper``, ``Fe total``."""
    bare = " ".join(_WHOLE.sub(" ", text).split()) or text
    if bare.casefold() in ELEMENT_WORDS:
        return ELEMENT_WORDS[bare.casefold()]
    if match := re.fullmatch(r"([A-Z][a-z]?) ?\((I{1,3}|IV|VI)\)", bare):
        return match[1] + _ROMAN[match[2]]
    if match := re.fullmatch(r"([A-Z][a-z]?) ?([+-])([1-9]?)", bare):
        return f"{match[1]}{match[3]}{match[2]}"
    return bare if re.fullmatch(r"[A-Z][a-z]?(?:[1-9]?[+-])?", bare) else text
