"""The budget: the copper scenario, what is missing, drivers, draws, roll-ups that agree."""

import dataclasses

import numpy as np
import pytest
from numpy.testing import assert_allclose

from leachkin.cementation import Precipitant, Solution, cementation_demand
from leachkin.errors import InputProblems
from leachkin.reagents import (
    BudgetLine,
    Product,
    acid_lines,
    band,
    budget_tables,
    cementation_lines,
    incomplete_table,
    lines_table,
    reagent_budget,
    reagent_table,
    sink_table,
    total_table,
    unit_consumption_table,
)

ACID = Product("H2SO4", purity=0.985, price=120.0, date="2026-01", delivered=True)
SCRAP = Product(
    "scrap iron", purity=0.96, loss=0.05, price=260.0, date="2026-01", delivered=True
)  # fmt: skip
PLAN = {"ore_t_per_month": 250_000.0, "currency": "USD", "solution_m3_per_t": 2.327,
        "recovered_kg_per_t": {"Cu": 4.501}}  # fmt: skip


def copper_lines():
    liquor = Solution({"Cu": 2.036}, ferric_g_per_L=0.9, oxygen_mg_per_L=6.0)
    demand = cementation_demand(
        liquor, Precipitant("iron", 0.96, 0.05), recovery=0.95, acid_taken_g_per_L=0.7
    )
    acid = acid_lines(
        {"Cu": 7.310}, 19.105, names={"Cu": "copper"}, vessels_g_per_L=0.7, solution_m3_per_t=2.327
    )
    return acid + cementation_lines(demand, "scrap iron")


def copper_budget(lines=None, products=(ACID, SCRAP), **changes):
    return reagent_budget(copper_lines() if lines is None else lines, products, **PLAN | changes)


#   sink, net kg/t, as received kg/t, t/month, USD/month
COPPER = [
    ("copper", 7.310, 7.421, 1855, 222_640),
    ("gangue", 19.105, 19.396, 4849, 581_880),
    ("cementation vessels", 1.629, 1.654, 413.5, 49_620),
    ("cementation", 5.979, 6.556, 1639, 426_110),
]


@pytest.mark.parametrize(("sink", "net", "received", "tonnes", "cost"), COPPER)
def test_copper_scenario_line_by_line(sink, net, received, tonnes, cost):
    (row,) = (row for row in copper_budget().rows if row.line.sink == sink)
    assert_allclose(row.net_kg_per_t, net, rtol=1e-3)
    assert_allclose(row.received_kg_per_t, received, rtol=1e-3)
    assert_allclose(row.received_t_per_month, tonnes, rtol=1e-3)
    assert_allclose(row.cost_per_month, cost, rtol=1e-3)


def test_copper_scenario_total():
    budget = copper_budget()
    assert budget.complete
    assert_allclose(budget.total_per_month, 1_280_250, rtol=1e-3)
    assert_allclose(budget.total_per_t, 1_280_250 / 250_000, rtol=1e-3)
    assert_allclose(budget.total_per_kg(), 1_280_250 / 250_000 / 4.501, rtol=1e-3)
    assert_allclose(budget.received_t_per_month("H2SO4"), 1855 + 4849 + 413.5, rtol=1e-3)


def test_roll_ups_by_reagent_and_by_sink_agree_to_the_cent():
    budget = copper_budget()
    whole = float(budget.total_per_month)
    for table in (reagent_table(budget), sink_table(budget)):
        assert_allclose(sum(table.column("cost_per_month")), whole, rtol=0, atol=0.005)
        assert_allclose(sum(table.column("cost_share")), 100.0, rtol=1e-12)
    assert lines_table(budget).rows[-1][0] == "sum"
    assert_allclose(lines_table(budget).column("cost_per_month")[-1], whole, rtol=1e-15)


def test_masses_of_unlike_reagents_are_not_added():
    lines = [BudgetLine("H2SO4", "detox", 1.0), BudgetLine("scrap iron", "detox", 1.0)]
    (record,) = sink_table(copper_budget(lines)).to_records()
    assert record["net_kg_per_t"] is None
    assert record["cost_per_month"] > 0


#   change of the product, reason
MISSING = [
    ({"price": None}, "price is missing"),
    ({"date": None}, "date of the price is missing"),
    ({"purity": None}, "purity is missing"),
    ({"currency": "EUR"}, "price is in EUR, the budget in USD"),
]


@pytest.mark.parametrize(("change", "reason"), MISSING)
def test_what_is_missing_makes_the_total_incomplete_and_is_named(change, reason):
    budget = copper_budget(products=(ACID, dataclasses.replace(SCRAP, **change)))
    assert budget.incomplete == (("scrap iron, cementation", reason),)
    assert budget.total_per_month is None
    assert budget.total_per_t is None
    assert budget.total_per_kg() is None
    assert_allclose(budget.partial_per_month, 1_280_250 - 426_110, rtol=1e-3)
    assert len(budget.rows) == 4
    assert_allclose(budget.rows[-1].net_kg_per_t, 5.979, rtol=1e-3)
    assert "INCOMPLETE: scrap iron, cementation" in lines_table(budget).caption
    assert lines_table(budget).rows[-1][0].startswith("PARTIAL SUM")
    assert reason in incomplete_table(budget).column("reason")
    rows = {row["item"]: row for row in total_table(budget).to_records()}
    assert rows["total"]["value"] is None
    assert "INCOMPLETE" in rows["total"]["note"]
    assert rows["partial sum"]["note"] == "complete lines only"


def test_an_undated_price_is_shown_and_kept_out_of_the_partial_sum():
    budget = copper_budget(products=(ACID, dataclasses.replace(SCRAP, date=None)))
    assert_allclose(budget.rows[-1].cost_per_month, 426_110, rtol=1e-3)
    rows = {row["item"]: row["value"] for row in total_table(budget).to_records()}
    assert_allclose(rows["partial sum, wider"] - rows["partial sum"], 426_110, rtol=1e-3)


def test_a_reagent_without_a_product_is_named():
    budget = copper_budget(products=(ACID,))
    assert budget.incomplete[0][1].startswith("no product")
    assert budget.received_t_per_month("scrap iron") is None


def test_an_unmeasured_sink_makes_the_line_incomplete():
    demand = cementation_demand(
        Solution({"Cu": 2.0}, oxygen_mg_per_L=6.0, ferric_g_per_L=1.0),
        Precipitant("iron", 0.96),
        recovery=0.95,
    )
    budget = copper_budget(cementation_lines(demand, "scrap iron"))
    assert "acid taken in the vessels not known" in budget.incomplete[0][1]
    by_sink = copper_budget(cementation_lines(demand, "scrap iron", by_sink=True))
    assert [line for line, _ in by_sink.incomplete] == ["scrap iron, H2SO4"]


def test_cementation_by_sink_adds_up_to_one_line():
    liquor = Solution({"Cu": 2.036}, ferric_g_per_L=0.9, oxygen_mg_per_L=6.0)
    demand = cementation_demand(
        liquor, Precipitant("iron", 0.96, 0.05), recovery=0.95, acid_taken_g_per_L=0.7
    )
    one = copper_budget(cementation_lines(demand, "scrap iron"))
    many = copper_budget(cementation_lines(demand, "scrap iron", by_sink=True))
    assert [row.line.sink for row in many.rows] == ["Cu", "Fe3+", "H2SO4", "O2"]
    assert_allclose(many.total_per_month, one.total_per_month, rtol=1e-12)


#   driver, amount, kg/t by it
DRIVEN = [("t ore", 0.02, 0.02), ("m3", 0.01, 0.02327), ("kg metal", 0.1, 0.4501),
          ("month", 5000.0, 0.02)]  # fmt: skip


@pytest.mark.parametrize(("driver", "amount", "kg_per_t"), DRIVEN)
def test_own_lines_by_every_driver(driver, amount, kg_per_t):
    line = BudgetLine("flocculant", "thickener", amount, driver, as_received=True)
    product = Product("flocculant", price=3.0, per="kg", date="2026-02", delivered=True)
    budget = copper_budget([line], [product])
    assert_allclose(budget.rows[0].received_kg_per_t, kg_per_t, rtol=1e-12)
    assert_allclose(budget.total_per_month, kg_per_t * 250_000 * 3.0, rtol=1e-12)


def test_an_own_line_as_received_needs_no_purity():
    line = BudgetLine("flocculant", "thickener", 0.02, as_received=True)
    product = Product("flocculant", price=3000.0, date="2026-02", delivered=True)
    budget = copper_budget([line], [product])
    assert budget.complete
    assert budget.rows[0].net_kg_per_t is None
    assert_allclose(budget.rows[0].received_t_per_month, 5.0, rtol=1e-12)


def test_price_per_kilogram_and_per_tonne_cost_the_same():
    by_kg = dataclasses.replace(ACID, price=0.12, per="kg")
    assert_allclose(
        copper_budget(products=(by_kg, SCRAP)).total_per_month,
        copper_budget().total_per_month,
        rtol=1e-12,
    )


def test_allowance_stays_apart_from_the_total():
    plain, with_allowance = copper_budget(), copper_budget(allowance=0.1)
    assert_allclose(with_allowance.total_per_month, plain.total_per_month, rtol=1e-15)
    assert_allclose(with_allowance.allowance_per_month, 0.1 * plain.total_per_month, rtol=1e-15)
    assert "allowance" in total_table(with_allowance).column("item")


def test_draws_go_through_elementwise_and_give_bands():
    generator = np.random.default_rng(3)
    copper, gangue = generator.normal(7.3, 0.3, 200), generator.normal(19.1, 1.5, 200)
    recovered = copper / 1.5434 * 0.95
    lines = [BudgetLine("H2SO4", "copper", copper), BudgetLine("H2SO4", "gangue", gangue)]
    budget = copper_budget(lines, recovered_kg_per_t={"Cu": recovered})
    expected = (copper + gangue) / 0.985 * 250 * 120
    assert_allclose(budget.total_per_month, expected, rtol=1e-12)
    assert_allclose(budget.total_per_kg(), expected / 250_000 / recovered, rtol=1e-12)
    low, middle, high = band(budget.total_per_month, 0.8)
    assert_allclose((low, high), np.quantile(expected, [0.1, 0.9]), rtol=1e-12)
    total = total_table(budget).to_records()[0]
    assert total["value_low"] == low < total["value"] == middle < total["value_high"] == high
    assert "low is P10 of the draws, high is P90" in lines_table(budget).caption


def test_a_single_figure_has_no_band():
    record = unit_consumption_table(copper_budget()).to_records()[0]
    assert record["net_kg_per_t_low"] is None
    assert "P10" not in unit_consumption_table(copper_budget()).caption


def test_two_metals_each_carry_the_whole_cost():
    budget = copper_budget(recovered_kg_per_t={"Au": 0.0017, "Ag": 0.0389})
    gold, silver = budget.total_per_kg("Au"), budget.total_per_kg("Ag")
    assert_allclose(gold * 0.0017, silver * 0.0389, rtol=1e-12)
    assert_allclose(budget.total_per_kg(), gold)


def test_basis_is_said_in_every_heading_of_metal():
    budget = copper_budget(metal_basis="payable")
    titles = [column.title for column in reagent_table(budget).columns]
    assert "Net per kg Cu payable (kg/kg)" in titles
    assert len(budget_tables(budget)) == 7


def test_notes_on_freight_and_on_products_that_nothing_uses():
    lime = Product("CaO", purity=0.9, price=150.0, date="2026-01")
    budget = copper_budget(products=(dataclasses.replace(ACID, delivered=None), SCRAP, lime))
    assert "CaO has a product and no consumption line" in budget.notes
    assert any("H2SO4 is not said to be delivered" in note for note in budget.notes)
    assert budget.complete


def test_budgets_are_frozen():
    with pytest.raises(dataclasses.FrozenInstanceError):
        copper_budget().level = 0.5


def line_of(driver):
    return [BudgetLine("H2SO4", "own", 1.0, driver)]


REFUSED = [
    (lambda: BudgetLine("H2SO4", "gangue", -1.0), "H2SO4, gangue: amount.*0 kg or more"),
    (lambda: BudgetLine("H2SO4", "gangue", np.nan), "H2SO4, gangue: amount"),
    (lambda: BudgetLine("H2SO4", "gangue", 1.0, "t ores"), "unknown driver 't ores'.*t ore"),
    (lambda: Product("H2SO4", purity=98.5), "H2SO4: purity: 98.5.*write 98.5 % as 0.985"),
    (lambda: Product("H2SO4", loss=1.0), "H2SO4: loss: 1.0"),
    (lambda: Product("H2SO4", price=-1.0), "H2SO4: price: -1.0"),
    (lambda: Product("H2SO4", per="ton"), "unknown unit of a price 'ton'"),
    (lambda: copper_budget(products=(ACID, ACID)), "two products for H2SO4"),
    (lambda: copper_budget(ore_t_per_month=0.0), "ore_t_per_month: 0 t"),
    (lambda: copper_budget(recovered_kg_per_t={"Cu": 0.0}), r"recovered_kg_per_t\['Cu'\]: 0 kg/t"),
    (lambda: copper_budget(currency=" "), "currency: none"),
    (lambda: copper_budget(metal_basis="sold"), "metal_basis: 'sold'"),
    (lambda: copper_budget(allowance=1.0), "allowance: 1.0"),
    (lambda: copper_budget(line_of("m3"), solution_m3_per_t=None), "a line per m3 without"),
    (lambda: copper_budget(line_of("kg metal"), recovered_kg_per_t=None), "without the metal"),
    (lambda: copper_budget().total_per_kg("Au"), "unknown metal of the budget 'Au'"),
]


@pytest.mark.parametrize(("call", "message"), REFUSED)
def test_what_has_no_meaning_is_refused(call, message):
    with pytest.raises(InputProblems, match=message):
        call()


def test_the_stated_budget_takes_its_ends_from_draws():
    generator = np.random.default_rng(3)
    copper, gangue = generator.normal(7.3, 0.3, 200), generator.normal(19.1, 1.5, 200)
    drawn = copper_budget(
        [BudgetLine("H2SO4", "copper", copper), BudgetLine("H2SO4", "gangue", gangue)], level=0.95
    )
    stated = copper_budget([BudgetLine("H2SO4", "copper", 7.0), BudgetLine("H2SO4", "gangue", 20)])
    by_name = {table.name: table for table in budget_tables(stated, drawn)}
    row = by_name["budget_by_reagent"].to_records()[0]
    plain = reagent_table(stated).to_records()[0]
    assert row["cost_per_month"] == plain["cost_per_month"]
    cost = (copper + gangue) / 0.985 * 250 * 120
    ends = [row["cost_per_month_low"], row["cost_per_month_high"]]
    assert_allclose(ends, np.quantile(cost, [0.025, 0.975]), rtol=1e-12)
    tonnes = [row["received_t_per_month_low"], row["received_t_per_month_high"]]
    assert_allclose(tonnes, np.quantile(cost / 120, [0.025, 0.975]), rtol=1e-12)
    assert "low is P2.5 of the draws, high is P97.5" in by_name["budget_by_sink"].caption
    assert by_name["budget_basis"] == budget_tables(stated)[0]
