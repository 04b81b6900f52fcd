"""How often the 95 % intervals of nine copper bottles cover the truth.

    python tests/studies/copper_coverage.py [SEEDS]

Simulates the campaign of three sizes and three temperatures with 1.5 % noise on solutions, 3 % on
tails, 2 % on heads, fits chemical step and ash layer with an ultimate extraction for each size,
and counts. Writes tests/studies/results/copper_coverage.csv.
"""

import csv
import sys
from pathlib import Path

import numpy as np

from leachkin.kinetics import (
    Bottle,
    RateLaw,
    Reference,
    Resistance,
    fit_tests,
    simulate_observed,
)
from leachkin.testwork import SizeDistribution

RESULTS = Path(__file__).parent / "results" / "copper_coverage.csv"
SEEDS, FIRST_SEED = 200, 1
DRAWS, LEVEL = 400, 0.95
HOURS = (2, 6, 12, 24, 48, 72, 120, 168, 240)
SIZES_MM = {"A": 1.416, "B": 5.641, "C": 10.90}
REFERENCE = Reference(temperature_K=298.15, reagent_g_per_L=20.0, size_mm=1.416)
TRUTH = RateLaw(
    "ash_layer+chemical",
    (Resistance("ash_layer", np.log(7.0), 19.0), Resistance("chemical", np.log(3.0), 46.0)),
    REFERENCE,
    list(SIZES_MM.values()),
    [0.88, 0.84, 0.79],
)
TRUE_VALUES = {
    "tau_ash_layer": 7.0,
    "tau_chemical": 3.0,
    "activation_energy_ash_layer": 19.0,
    "activation_energy_chemical": 46.0,
    "ultimate_1.416_mm": 0.88,
    "ultimate_5.641_mm": 0.84,
    "ultimate_10.9_mm": 0.79,
}
#: Two predictions of a whole ore: extraction at 17 degC after 2 and 20 days.
ORE = SizeDistribution.gates_gaudin_schuhmann(19.0, 0.65)
ORE_HOURS, ORE_KELVIN = np.array([48.0, 480.0]), 290.15


def bottles():
    return [
        Bottle(
            f"{name}{celsius}",
            SizeDistribution.single(size),
            273.15 + celsius,
            np.array(((0.5, 1) if name == "A" else ()) + HOURS, dtype=float),
            REFERENCE.reagent_g_per_L,
        )
        for name, size in SIZES_MM.items()
        for celsius in (25, 40, 55)
    ]


def one(seed):
    """Return (error, standard error or half-width, covered) by quantity, for one campaign."""
    tests = simulate_observed(TRUTH, bottles(), head_kg_per_t=6.80, seed=seed)
    fit = fit_tests(tests, TRUTH.name, reference=REFERENCE, level=LEVEL)
    found = {}
    for name, value in TRUE_VALUES.items():
        p = fit.parameter(name)
        inside = p.low is not None and p.high is not None and p.low <= value <= p.high
        found[name] = (p.value - value, p.standard_error or np.nan, inside)
    draws = fit.draw(DRAWS, seed).extraction(ORE_HOURS, ORE, ORE_KELVIN)
    low, high = np.quantile(draws, [0.5 - LEVEL / 2, 0.5 + LEVEL / 2], axis=0)
    truth = TRUTH.extraction(ORE_HOURS, ORE, ORE_KELVIN)
    best = fit.predict(ORE_HOURS, ORE, ORE_KELVIN)
    for i, hours in enumerate(ORE_HOURS):
        inside = bool(low[i] <= truth[i] <= high[i])
        found[f"ore_17_degC_{hours:g}_h"] = (best[i] - truth[i], draws[:, i].std(), inside)
    return found


def run(n, first_seed=FIRST_SEED):
    """Return one record a quantity: campaigns, share covered, mean error, scatter, error bar."""
    found = [one(seed) for seed in range(first_seed, first_seed + n)]
    records = []
    for name in found[0]:
        errors = np.array([campaign[name][0] for campaign in found])
        records.append(
            {
                "quantity": name,
                "campaigns": n,
                "covered": np.mean([campaign[name][2] for campaign in found]),
                "mean_error": errors.mean(),
                "scatter": errors.std(ddof=1),
                "mean_standard_error": np.nanmean([campaign[name][1] for campaign in found]),
            }
        )
    return records


def main(n):
    records = run(n)
    RESULTS.parent.mkdir(exist_ok=True)
    with RESULTS.open("w", newline="", encoding="utf-8") as handle:
        writer = csv.writer(handle, lineterminator="\n")
        writer.writerow(records[0])
        for record in records:
            cells = [f"{v:.4g}" if isinstance(v, float) else v for v in record.values()]
            writer.writerow(cells)
            print(*cells)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else SEEDS)
