"""Make the bench sheets of this example from a known law, seeded.

    python example_runs/copper_heap/make_sheets.py [FOLDER]

The ore, its law and its numbers are invented. The law stands in README.md beside the answers.
"""

import csv
import sys
from pathlib import Path

import numpy as np

from leachkin.kinetics import RateLaw, Reference, Resistance
from leachkin.kinetics.gangue import GangueLaw
from leachkin.kinetics.simulate import Bottle, Noise, simulate_tests
from leachkin.testwork import SizeDistribution

SEED = 20261
HEAD_KG_PER_T = 6.80
ACID_PER_COPPER = 1.543  # H2SO4 to Cu by molar masses, kg/kg
SIZES_MM = {"A": (1.18, 1.70), "B": (4.75, 6.70), "C": (9.5, 12.5)}
ULTIMATE = (0.88, 0.84, 0.79)
TIMES_h = (2, 6, 12, 24, 48, 72, 120, 168, 240)
NOISE = Noise(solution=0.015, tail=0.03, head=0.02, residue=0.003, mass_loss=0.03)
BALANCE_NOISE = 0.01  # of an acid addition and of a titration

GANGUE = GangueLaw(9.0, 0.8, 14.0, 1.0 / 0.006, 35.0)


def mean_size(name):
    low, high = SIZES_MM[name]
    return float(np.sqrt(low * high))


def true_law():
    """Chemical step and ash layer in series; times at 25 degC, 1.416 mm and 20 g/L."""
    return RateLaw(
        "ash_layer+chemical",
        (
            Resistance("ash_layer", np.log(7.0), activation_energy_kJ_per_mol=19.0),
            Resistance("chemical", np.log(3.0), activation_energy_kJ_per_mol=46.0),
        ),
        Reference(temperature_K=298.15, reagent_g_per_L=20.0, size_mm=mean_size("A")),
        np.array([mean_size(name) for name in SIZES_MM]),
        np.array(ULTIMATE),
    )


def bottles():
    for size in SIZES_MM:
        times = np.array(((0.5, 1) if size == "A" else ()) + TIMES_h, dtype=float)
        for celsius in (25, 40, 55):
            yield Bottle(
                f"{size}{celsius}",
                SizeDistribution.single(mean_size(size)),
                celsius + 273.15,
                times,
                20.0,
                domain="oxide",
            )


def write(folder, name, header, rows):
    with (folder / name).open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


def test_row(test):
    low, high = SIZES_MM[test.bottle.name[0]]
    celsius = round(test.bottle.temperature_K - 273.15)
    return [test.bottle.name, "oxide", "bottle roll", 500, 1000, low, high, celsius, 20,
            "replaced by reagent solution", ""]  # fmt: skip


def reading_rows(test, generator):
    """Acid is held at its set-point between samples; each row has what was added since the last."""
    before = 0.0
    for time, grade, taken in zip(
        test.bottle.time_h, test.solution_g_per_L, test.reagent_taken_kg_per_t, strict=True
    ):
        added = (taken - before) * test.bottle.solids_g / 1000.0
        before = taken
        noise = 1.0 + BALANCE_NOISE * generator.standard_normal(2)
        yield [test.bottle.name, f"{time:g}", 20, 20, f"{grade:.4g}", f"{20.0 * noise[0]:.1f}",
               f"{added * noise[1]:.3g}"]  # fmt: skip


def closeout_rows(test):
    copper = f"{test.tail_kg_per_t / 10:.4f}"
    return [[test.bottle.name, "residue", f"{test.residue_g:.1f}", copper]]


def head_rows(generator):
    """Three replicates of the domain's head, 2 % apart."""
    for replicate in (1, 2, 3):
        copper = HEAD_KG_PER_T / 10 * (1.0 + 0.02 * generator.standard_normal())
        yield ["oxide", replicate, f"{copper:.3f}", 0.60, 0.9, 2.9, 45]


def main(folder):
    generator = np.random.default_rng(SEED)
    tests = simulate_tests(
        true_law(),
        list(bottles()),
        head_kg_per_t=HEAD_KG_PER_T,
        seed=SEED,
        noise=NOISE,
        per_metal_kg_per_kg=ACID_PER_COPPER,
        gangue=GANGUE,
    )
    write(folder, "tests.csv",
          ["test", "domain", "kind", "dry solids (g)", "solution (mL)", "size lower (mm)",
           "size upper (mm)", "temperature (degC)", "start H2SO4 (g/L)", "aliquots", "remark"],
          [test_row(test) for test in tests])  # fmt: skip
    write(folder, "readings.csv",
          ["test", "time (h)", "aliquot (mL)", "make-up (mL)", "Cu (g/L)", "free H2SO4 (g/L)",
           "H2SO4 added (g)"],
          [row for test in tests for row in reading_rows(test, generator)])  # fmt: skip
    write(folder, "closeout.csv", ["test", "product", "mass (g)", "Cu (%)"],
          [row for test in tests for row in closeout_rows(test)])  # fmt: skip
    write(folder, "heads.csv",
          ["domain", "replicate", "Cu (%)", "acid-soluble Cu (%)", "CaCO3 (%)", "Fe (%)",
           "As (mg/kg)"], head_rows(generator))  # fmt: skip


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
