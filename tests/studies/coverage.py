"""How often the 95 % intervals of a fit, and of a plant figure made from it, cover the truth.

    python tests/studies/coverage.py [CAMPAIGNS]

Two designs, their law known: nine copper bottles (three sizes, three temperatures; ash layer and
chemical step; a heap by plug flow), and eight gold bottles (log-normal grains; three temperatures
and three cyanide strengths; chemical step with its order fitted; five tanks). Noise on solutions,
tails and the head of every charge. Plant figures come from draws of the fit through the functions
that a campaign uses; the plant itself is held, so that its band is that of the fit.

Writes tests/studies/results/coverage.csv.
"""

import csv
import multiprocessing
import sys
from pathlib import Path

import numpy as np

from leachkin.kinetics import (
    Bottle,
    GangueLaw,
    Noise,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
    simulate_observed,
)
from leachkin.scaleup import heap, tank_train
from leachkin.testwork import SizeDistribution

RESULTS = Path(__file__).parent / "results" / "coverage.csv"
CAMPAIGNS, FIRST_SEED, WORKERS = 1000, 50_001, 2
DRAWS, LEVEL = 300, 0.95
COPPER_HOURS = np.array([0.5, 1, 2, 6, 12, 24, 48, 72, 120, 168, 240])
GOLD_HOURS = np.array([1, 2, 4, 8, 12, 24, 36, 48.0])
COPPER_SIZES_MM = (1.416, 5.641, 10.90)
HEAP_ORE = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65)
HEAP_DAYS, HEAP_KELVIN = np.array([20.0, 60.0, 120.0]), 290.15
GRAINS = SizeDistribution.log_normal(0.06, 0.9, 25)
TANKS_h = (6.0,) * 5


def copper_truth():
    parts = (Resistance("ash_layer", np.log(7.0), 19.0), Resistance("chemical", np.log(3.0), 46.0))
    reference = Reference(298.15, 20.0, 1.416)
    return RateLaw("ash_layer+chemical", parts, reference, COPPER_SIZES_MM, [0.88, 0.84, 0.79])


def copper_bottles():
    return [
        Bottle(
            f"{size:g} mm, {celsius} degC",
            SizeDistribution.single(size),
            273.15 + celsius,
            COPPER_HOURS if size == COPPER_SIZES_MM[0] else COPPER_HOURS[2:],
            20.0,
        )
        for size in COPPER_SIZES_MM
        for celsius in (25, 40, 55)
    ]


def heap_of(law):
    """Return the extraction of a cured heap, limited by ore and acid, shape B + (days,)."""
    gangue = GangueLaw(9.0, 0.8, 14.0, 1.0 / 0.006, 35.0)
    found = heap(
        law.ore_curve(HEAP_ORE, HEAP_KELVIN),
        HEAP_DAYS,
        lift_m=6.0,
        irrigation_L_per_h_m2=8.0,
        bulk_density_t_per_m3=1.65,
        feed_g_per_L=20.0,
        demand=gangue.demand(HEAP_KELVIN, 1.543, 6.8),
        cure_kg_per_t=12.0,
        contacted_fraction=0.85,
        delivery_factor=3.0,
        moisture_m3_per_t=0.09,
        head_kg_per_t=6.8,
    )
    return np.asarray(found.extracted)


def gold_truth():
    parts = (Resistance("chemical", np.log(9.0), 30.0, order=0.8),)
    return RateLaw("chemical", parts, Reference(298.15, 1.0, 0.0807), [0.0807], [0.92])


def gold_bottles():
    conditions = [(15, 1.0), (25, 1.0), (35, 1.0), (25, 0.5), (25, 2.0), (35, 0.5), (25, 1.0)]
    return [
        Bottle(f"G{i}", GRAINS, 273.15 + celsius, GOLD_HOURS, strength)
        for i, (celsius, strength) in enumerate(conditions)
    ]


def train_of(law):
    """Return the extraction of five tanks at 30 degC, shape B + (tanks,)."""
    return np.asarray(tank_train(law, TANKS_h, sizes=GRAINS, temperature_K=303.15).extraction)


DESIGNS = {
    "copper": {
        "truth": copper_truth,
        "bottles": copper_bottles,
        "options": {},
        "noise": Noise(),
        "head": 6.8,
        "plant": heap_of,
        "figures": [f"heap at {day:g} d" for day in HEAP_DAYS],
        "values": {
            "tau_ash_layer": 7.0,
            "tau_chemical": 3.0,
            "activation_energy_ash_layer": 19.0,
            "activation_energy_chemical": 46.0,
            "ultimate_1.416_mm": 0.88,
            "ultimate_5.641_mm": 0.84,
            "ultimate_10.9_mm": 0.79,
        },
    },
    "gold": {
        "truth": gold_truth,
        "bottles": gold_bottles,
        "options": {"reagent_order": "free"},
        "noise": Noise(solution=0.02, tail=0.05, head=0.05),
        "head": 0.00185,
        "plant": train_of,
        "figures": [f"tank {j + 1}" for j in range(len(TANKS_h))],
        "values": {
            "tau_chemical": 9.0,
            "activation_energy_chemical": 30.0,
            "reagent_order": 0.8,
            "ultimate": 0.92,
        },
    },
}


def one(design, seed):
    """Return (error, standard error, covered) by quantity for one campaign."""
    asked = DESIGNS[design]
    truth = asked["truth"]()
    tests = simulate_observed(
        truth, asked["bottles"](), head_kg_per_t=asked["head"], seed=seed, noise=asked["noise"]
    )
    fit = fit_tests(tests, truth.name, reference=truth.reference, level=LEVEL, **asked["options"])
    found = {}
    for name, value in asked["values"].items():
        p = fit.parameter(name)
        inside = p.low is not None and p.high is not None and p.low <= value <= p.high
        found[name] = (p.value - value, p.standard_error or np.nan, inside)
    drawn, best, true = (asked["plant"](law) for law in (fit.draw(DRAWS, seed), fit.law, truth))
    low, high = np.quantile(drawn, [0.5 - LEVEL / 2, 0.5 + LEVEL / 2], axis=0)
    for i, name in enumerate(asked["figures"]):
        inside = bool(low[i] <= true[i] <= high[i])
        found[name] = (best[i] - true[i], drawn[:, i].std(), inside)
    return found


def run(n, first_seed=FIRST_SEED, workers=1):
    """Return one record a design and quantity: campaigns, share covered, errors and error bars."""
    asked = [(design, first_seed + i) for design in DESIGNS for i in range(n)]
    if workers > 1:
        with multiprocessing.Pool(workers) as pool:
            found = pool.starmap(one, asked, chunksize=4)
    else:
        found = [one(*each) for each in asked]
    return [
        record(
            design, name, [f[name] for (d, _), f in zip(asked, found, strict=True) if d == design]
        )
        for design, settings in DESIGNS.items()
        for name in (*settings["values"], *settings["figures"])
    ]


def record(design, name, each):
    errors = np.array([error for error, _, _ in each])
    return {
        "design": design,
        "quantity": name,
        "campaigns": len(each),
        "covered": float(np.mean([inside for _, _, inside in each])),
        "mean_error": float(errors.mean()),
        "scatter": float(errors.std(ddof=1)),
        "mean_standard_error": float(np.nanmean([error_bar for _, error_bar, _ in each])),
    }


def main(n):
    records = run(n, workers=WORKERS)
    RESULTS.parent.mkdir(exist_ok=True)
    with RESULTS.open("w", newline="", encoding="utf-8") as handle:
        writer = csv.writer(handle, lineterminator="\n")
        writer.writerow(records[0])
        for each in records:
            cells = [f"{v:.4g}" if isinstance(v, float) else v for v in each.values()]
            writer.writerow(cells)
            print(*cells)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else CAMPAIGNS)
