"""Make the cementation tests of this example: copper onto sheet iron, transport in control.

    python make_tests.py [DIR]

The truth: first order, k 1.2e-5 m/s at 25 degC and 300 rpm, activation energy 15.05 kJ/mol, power
0.6 of the stirring speed; 2 % noise on each assay and a limit of 0.02 g/L.
"""

import csv
import sys
from pathlib import Path

import numpy as np

K_M_PER_S, ENERGY_J_PER_MOL, POWER = 1.2e-5, 15_050.0, 0.6
START_G_PER_L, NOISE, LIMIT_G_PER_L, SEED = 2.0, 0.02, 0.02, 20261201
#   test, degC, rpm, m2/m3
TESTS = [
    ("L1", 15, 300, 40),
    ("L2", 25, 300, 40),
    ("L3", 45, 300, 40),
    ("L4", 25, 150, 40),
    ("L5", 25, 600, 60),
]
MINUTES = (0, 2, 5, 10, 15, 20, 30, 45, 60)
HEADINGS = ("test", "time (min)", "Cu (g/L)", "temperature (degC)", "stirring (rpm)",
            "area (m2/m3)")  # fmt: skip


def rows():
    generator = np.random.default_rng(SEED)
    for name, celsius, rpm, area in TESTS:
        inverse = 1.0 / (celsius + 273.15) - 1.0 / 298.15
        k = K_M_PER_S * np.exp(-ENERGY_J_PER_MOL / 8.314462618 * inverse) * (rpm / 300) ** POWER
        for minutes in MINUTES:
            left = START_G_PER_L * np.exp(-60.0 * k * area * minutes)
            left *= 1.0 + NOISE * generator.standard_normal()
            text = f"{left:.4f}" if left >= LIMIT_G_PER_L else f"<{LIMIT_G_PER_L:g}"
            yield name, minutes, text, celsius, rpm, area


def main(folder):
    with (Path(folder) / "cementation_tests.csv").open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(HEADINGS)
        writer.writerows(rows())


if __name__ == "__main__":
    main(sys.argv[1] if len(sys.argv) > 1 else Path(__file__).parent)
