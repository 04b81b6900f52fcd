"""The page: self-contained, escaped, and what must stand on it."""

import re

import pytest

from leachkin.hazards import GENERAL_CAUTION
from leachkin.report.chosen_figures import report_figures
from leachkin.report.page import report_page


def page_of(result):
    return report_page(result, report_figures(result))


def words_of(page):
    return " ".join(
        re.sub(r"<svg.*?</svg>|<style>.*?</style>|<[^>]+>", " ", page, flags=re.S).split()
    )


@pytest.fixture(scope="module")
def copper_page(copper, copper_figures):
    return report_page(copper, copper_figures)


@pytest.fixture(scope="module")
def zinc_page(zinc):
    return page_of(zinc)


def test_the_page_needs_nothing_else(copper_page):
    assert "<script" not in copper_page
    assert "@import" not in copper_page
    assert re.findall(r'(?:src|href)="(?!#)[^"]*"', copper_page) == []
    assert re.findall(r"url\((?!#)[^)]*\)", copper_page) == []


def test_no_two_ids_are_the_same(copper_page):
    ids = re.findall(r'\sid="([^"]+)"', copper_page)
    assert len(ids) > 100
    assert len(set(ids)) == len(ids)


def test_what_was_typed_is_escaped(zinc_page):
    assert "<script" not in zinc_page
    assert "Brindlemoor &lt;script&gt;alert(1)&lt;/script&gt; &amp; sons" in zinc_page


def test_the_first_page_says_what_it_must(copper, copper_page):
    first = words_of(copper_page[: copper_page.index('<section id="evidence">')])
    heap = copper.heap
    answer = f"{100 * float(heap.extracted.value[-1]):.1f} % ("
    for text in (
        answer,
        "of total Cu extracted at 120 d and 2.33\u00a0m\u00b3/t".replace("\u00a0", " "),
        "Grade of evidence SCOPING",
        "P2.5 (low) to P97.5",
        "H2SO4 supply to day",
        f"Assumed, not measured: {len(copper.assumed)}",
        "Extrapolated",
        "arsine not measured",
        "A column of this ore",
        "bench chemist (invented)",
        "scrap iron",
        "Prices of 2026-11-01",
        GENERAL_CAUTION.replace("'", "&#39;"),
        "draft",
    ):
        assert text in first, text


def test_every_caution_stands_on_the_page_with_its_limits(copper, copper_page):
    text = words_of(copper_page[copper_page.index('<section id="hazards">') :])
    for caution in copper.cautions:
        assert caution.name in text
        assert caution.defer_to.strip(".")[1:20].replace("'", "&#39;") in text


def test_the_word_safe_is_never_printed(copper_page, zinc_page):
    for page in (copper_page, zinc_page):
        assert not re.search(r"\bsafe\b", words_of(page), flags=re.IGNORECASE)


def test_the_footer_says_what_made_the_numbers(copper, copper_page):
    footer = copper_page[copper_page.index("<footer>") :]
    for name, digest in copper.run.inputs.items():
        assert name in footer
        assert digest in footer
    assert f"leachkin {copper.run.version} \u00b7 seed {copper.run.seed}" in footer
    assert "draws 16" in footer
    for source in copper.run.sources:
        assert f"[{source}]" in footer
    assert "In the model:" in footer
    assert "Not in the model:" in footer


def test_plant_figures_are_stamped_and_say_what_their_band_holds(copper_figures):
    plant = [figure for figure in copper_figures if figure.section == "plant"]
    assert {figure.name for figure in plant} == {"heap_extraction", "supply_demand"}
    for figure in plant:
        assert figure.caption.startswith("SCOPING. ")
        assert "P2.5 (low) to P97.5: fit" in figure.caption
        assert ">SCOPING</text>" in figure.svg


def test_the_figures_of_the_whole_chain_and_those_that_stand_folded(copper_figures):
    assert [figure.name for figure in copper_figures if not figure.folded] == [
        "closure_oxide_Cu",
        "extraction_oxide_Cu",
        "residuals_oxide_Cu",
        "parameters_oxide_Cu",
        "temperature_oxide_Cu",
        "heap_extraction",
        "supply_demand",
        "precipitant_sinks",
        "cost",
    ]
    assert [figure.name for figure in copper_figures if figure.folded] == [
        "straightened_oxide_Cu",
        "leverage_oxide_Cu",
        "correlation_oxide_Cu",
        "size_oxide_Cu",
        "arrhenius_oxide_Cu",
    ]


def test_figures_for_checking_a_fit_stand_in_a_part_that_is_opened(copper_page, copper_figures):
    kinetics = copper_page[copper_page.index('<section id="kinetics">') :]
    kinetics = kinetics[: kinetics.index("</section>")]
    before, _, inside = kinetics.partition('<details class="more">')
    assert "More figures: 5 for checking the fit" in inside
    assert "<details open" not in copper_page and copper_page.count("<details") == 1
    for figure in copper_figures:
        if figure.section == "kinetics":
            assert (figure.title in inside) == figure.folded
            assert (figure.title in before) != figure.folded
    first = copper_page[: copper_page.index('<nav class="contents">')]
    assert "<figure" not in first and "<details" not in first


def test_bottles_alone_give_a_page_without_plant_and_money(bottles):
    page = page_of(bottles)
    assert "TESTS ONLY" in page
    for absent in ('<section id="plant">', '<section id="money">', "What rules", "SCOPING"):
        assert absent not in page
    assert "Final extraction: oxide/Cu" in page
    assert page.index("Metal balance") < page.index('<section id="evidence">')


def test_printed_constants_without_draws_say_so(zinc_page):
    text = words_of(zinc_page)
    assert "87.8 % of total Zn extracted in 4 tanks" in text
    assert "Grade of evidence FROM PRINT" in text
    assert "Band: no band" in text
    assert "FROM PRINT" in zinc_page[zinc_page.index("<figure>") :]
