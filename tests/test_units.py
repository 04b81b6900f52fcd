"""Quantities as people write them; factors from the definitions of the units."""

import itertools

import pytest
from numpy.testing import assert_allclose

from leachkin.errors import UnitError
from leachkin.tables import read_table
from leachkin.units import convert, known_spellings, parse_quantity, split_heading

#: text, target, value: definitions (pound 0.45359237 kg, troy ounce 31.1034768 g, US gallon
#: 3.785411784 L, inch 25.4 mm, long ton 2240 lb).
DEFINED = [
    ("8 L/h/m2", "L/h/m2", 8.0),
    ("0.005 gpm/ft2", "L/h/m2", 0.005 * 3.785411784 * 60 / 0.09290304),
    ("1 ozt/st", "g/t", 31.1034768 / 0.90718474),
    ("1 ozt/t", "g/t", 31.1034768),
    ("1 ozt/lt", "g/t", 31.1034768 / 1.0160469088),
    ("1 lb/st", "kg/t", 0.5),
    ("17 degC", "K", 290.15),
    ("62.6 degF", "K", 290.15),
    ("17 \u00b0C", "K", 290.15),
    ("17 \u00baC", "K", 290.15),
    ("95 %", "1", 0.95),
    ("0.95", "1", 0.95),
    ("0.68 %", "kg/t", 6.8),
    ("45 mg/kg", "kg/t", 0.045),
    ("12 mg/L", "g/L", 0.012),
    ("0.6 mg L\u207b\u00b9", "g/L", 0.0006),
    ("75 \u00b5m", "mm", 0.075),
    ("75 \u03bcm", "mm", 0.075),
    ("0.5 inch", "mm", 12.7),
    ("1 month", "d", 30.4),
    ("2 d", "h", 48.0),
    ("1.65 t/m\u00b3", "t/m3", 1.65),
    ("1 kcal/mol", "kJ/mol", 4.184),
    ("1e-3 1/min", "1/h", 0.06),
    ("-5 degC", "K", 268.15),
]


@pytest.mark.parametrize(("text", "target", "value"), DEFINED)
def test_quantities_by_definition(text, target, value):
    assert_allclose(parse_quantity(text, target), value, rtol=1e-10)


WRONG = [
    ("8", "L/h/m2", r"'8' has no unit.*Try: write \"8 L/h/m2\""),
    ("fast", "h", r"'fast' is not a number with a unit"),
    ("8 L/h/m3", "L/h/m2", r"unknown unit 'L/h/m3'.*did you mean"),
    ("8 g/L", "h", r"'g/L' does not measure what is needed here"),
    ("0.6 ppm", "g/L", r"in a solution write mg/L"),
    ("1,5 %", "1", r"'1,5 %' has a decimal comma or a thousands mark"),
    ("1e999 h", "h", r"too large"),
    ("nan h", "h", r"is not a number with a unit"),
    ("5 Bq", "h", r"unknown unit 'Bq'"),
]


@pytest.mark.parametrize(("text", "target", "message"), WRONG)
def test_wrong_quantities(text, target, message):
    with pytest.raises(UnitError, match=message) as caught:
        parse_quantity(text, target)
    assert not caught.value.ambiguous


@pytest.mark.parametrize(
    ("text", "target", "message"),
    [
        ("0.1 oz/t", "g/t", r"'oz/t' has more than one meaning.*34.286.*31.103"),
        ("10 mesh", "mm", r"2.00 mm in the US series"),
        ("1 N", "mol/L", r"49.04 g/L"),
        ("3 ton", "t", r"t \(metric\), st"),
        ("5 gal", "L", r"US gal"),
    ],
)
def test_ambiguous_spellings_are_asked_back(text, target, message):
    with pytest.raises(UnitError, match=message) as caught:
        parse_quantity(text, target)
    assert caught.value.ambiguous


def test_coulomb_and_avoirdupois_never_come_out():
    assert_allclose(convert(17.0, "C", "K"), 290.15, rtol=1e-12)
    with pytest.raises(UnitError, match="unknown unit 'oz'"):
        convert(1.0, "oz", "g")


@pytest.mark.parametrize(
    ("heading", "parts"),
    [
        ("free H2SO4 (g/L)", ("free H2SO4", "g/L")),
        ("Cu [mg/L]", ("Cu", "mg/L")),
        ("irrigation (L/(h m2))", ("irrigation", "L/(h m2)")),
        ("remark", ("remark", None)),
        ("pH", ("pH", None)),
        ("", ("", None)),
        ("size)", ("size)", None)),
    ],
)
def test_headings(heading, parts):
    assert split_heading(heading) == parts


def test_every_spelling_of_a_kind_converts_there_and_back():
    rows = [r for r in read_table("unit_spellings").rows if r.text("ambiguous") == "no"]
    for kind, group in itertools.groupby(
        sorted(rows, key=lambda r: r.text("kind")), key=lambda r: r.text("kind")
    ):
        spellings = [row.text("spelling") for row in group]
        for spelling in spellings:
            there = convert(3.7, spelling, spellings[0])
            back = convert(there, spellings[0], spelling)
            assert_allclose(back, 3.7, rtol=1e-9, err_msg=f"{kind}: {spelling}")


def test_ambiguous_spellings_say_what_to_write():
    for row in read_table("unit_spellings").where("ambiguous", "yes"):
        assert row.text("instead"), row.text("spelling")


def test_known_spellings_fit_the_target():
    assert known_spellings("h")[:3] == ["h", "hr", "hrs"]
    assert "oz/t" not in known_spellings("g/t")
