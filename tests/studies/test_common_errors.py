"""The page agrees with the program, and the program with values worked out apart from it."""

import pytest

from tests.studies.common_errors import (
    CELSIUS,
    PAGE,
    RUN_DOWNS,
    SPREADS,
    aliquot_cases,
    of_forced_ultimate,
    of_run_down,
    of_spread,
    of_temperatures,
    page,
)

#: Worked out by other code: spread, R2 chemical, R2 ash layer, t95/t50.
BY_SPREAD = (
    (1.0000, 0.9848, 3.06),
    (0.9964, 0.9950, 3.48),
    (0.9843, 0.9958, 4.17),
    (0.9687, 0.9876, 5.06),
    (0.9490, 0.9706, 6.63),
)
#: R2 chemical, R2 ash layer, apparent over true k.
BY_RUN_DOWN = (
    (1.0000, 0.9848, 1.00),
    (0.9986, 0.9939, 0.84),
    (0.9911, 0.9990, 0.64),
    (0.9561, 0.9763, 0.39),
)
#: Half-widths of 95 % intervals of the energy, kJ/mol, for a scatter of 5 %.
HALF_WIDTHS = (24.0, 35.0, 4.1, 5.5)


def test_the_page_is_what_the_program_gives():
    assert PAGE.read_text(encoding="utf-8") == page(), "run python tests/studies/common_errors.py"


@pytest.mark.parametrize(("spread", "printed"), list(zip(SPREADS, BY_SPREAD, strict=True)))
def test_one_size_for_many(spread, printed):
    found = of_spread(spread)
    assert found[:2] == pytest.approx(printed[:2], abs=0.51e-4)
    assert found[2] == pytest.approx(printed[2], abs=0.51e-2)


@pytest.mark.parametrize(("share", "printed"), list(zip(RUN_DOWNS, BY_RUN_DOWN, strict=True)))
def test_reagent_that_runs_down(share, printed):
    found = of_run_down(share)
    assert found[:2] == pytest.approx(printed[:2], abs=0.51e-4)
    assert found[2] == pytest.approx(printed[2], abs=0.55e-2)


def test_ultimate_forced_to_one():
    fits, k, ultimate = of_forced_ultimate()
    assert [fits[law] for law in ("film", "chemical", "ash_layer")] == pytest.approx(
        [0.846, 0.911, 0.948], abs=0.51e-3
    )
    assert k == pytest.approx(0.54, abs=0.51e-2)
    assert ultimate == pytest.approx(0.8, abs=1e-6)


@pytest.mark.parametrize(("celsius", "half"), list(zip(CELSIUS, HALF_WIDTHS, strict=True)))
def test_energy_from_few_points(celsius, half):
    error, found = of_temperatures(celsius, 0.05)
    assert float(f"{found:.2g}") == half
    assert of_temperatures(celsius, 0.10)[1] == pytest.approx(2 * found, rel=1e-9)
    if celsius == (25, 40, 55):
        assert round(error, 1) == 1.9


def test_aliquots_left_out():
    percent = [(round(100 * true, 1), round(100 * told, 1)) for _, true, told in aliquot_cases()]
    assert percent == [(80.0, 90.7), (80.0, 71.6), (79.6, 62.5)]
