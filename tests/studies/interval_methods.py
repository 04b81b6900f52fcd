"""How often 95 % intervals by each method cover the truth, where they are easy and where not.

    python tests/studies/interval_methods.py

Three designs, law known: a curve under chemical control that ends at 30 % of the time for complete
conversion (66 % of its ultimate extraction), one that ends at 80 %, and eight bottles in repeat.
An end that is absent counts as reached; an interval without ends is counted apart. Writes
tests/studies/results/interval_methods.csv.
"""

import csv
from pathlib import Path

import numpy as np

from leachkin.kinetics import (
    Bottle,
    ParticleLaw,
    RateLaw,
    Reference,
    Resistance,
    fit_curve,
    fit_tests,
    fit_with_intervals,
    simulate_observed,
)
from leachkin.testwork import SizeDistribution

RESULTS = Path(__file__).parent / "results" / "interval_methods.csv"
FIRST_SEED, LEVEL = 1, 0.95
#: Campaigns by method: the slow ones fewer.
CAMPAIGNS = {"linearised": 400, "profile": 400, "bootstrap": 100, "posterior": 100}
RESAMPLES, MOST_STEPS = 400, 4000
REFERENCE = Reference(298.15, 20.0, 2.0)
CURVE_TRUTH = {"tau_chemical": 100.0, "ultimate": 0.8}
BOTTLE_TRUTH = {
    "tau_chemical": 30.0,
    "activation_energy_chemical": 50.0,
    "ultimate_2_mm": 0.9,
    "ultimate_6_mm": 0.8,
}


def curve(seed, last):
    """Six readings with a standard deviation of 0.01 until a share of the time for completion."""
    hours = np.array([0.04, 0.1, 0.2, 0.4, 0.7, 1.0]) * last * 100.0
    noise = 0.01 * np.random.default_rng([seed, 7]).standard_normal(hours.size)
    E = 0.8 * ParticleLaw(chemical=100.0).conversion(hours) + noise
    return fit_curve(hours, E, "chemical", errors=0.01, level=LEVEL)


def bottles(seed):
    """Two sizes by two temperatures in repeat, the usual noise."""
    law = RateLaw(
        "chemical", (Resistance("chemical", np.log(30.0), 50.0),), REFERENCE, [2.0, 6.0], [0.9, 0.8]
    )
    hours = np.array([2, 6, 12, 24, 48, 96, 168, 240.0])
    tests = [
        Bottle(f"{mm}mm{c}C{k}", SizeDistribution.single(mm), 273.15 + c, hours, 20.0)
        for mm in (2.0, 6.0)
        for c in (25, 45)
        for k in (1, 2)
    ]
    observed = simulate_observed(law, tests, head_kg_per_t=7.0, seed=seed)
    return fit_tests(observed, "chemical", reference=REFERENCE, level=LEVEL)


DESIGNS = {
    "curve to 30 %": (lambda seed: curve(seed, 0.3), CURVE_TRUTH),
    "curve to 80 %": (lambda seed: curve(seed, 0.8), CURVE_TRUTH),
    "eight bottles": (bottles, BOTTLE_TRUTH),
}


def covers(parameter, value):
    """Return whether an interval holds a value; None without one."""
    if parameter.low is None and parameter.high is None:
        return None
    above = parameter.low is None or parameter.low <= value
    return above and (parameter.high is None or value <= parameter.high)


def counted(design, method, n, first):
    """Return a record for each quantity of a design by one method."""
    make, truth = DESIGNS[design]
    found = {name: [] for name in truth}
    for seed in range(first, first + n):
        fit = make(seed)
        with_ends = fit_with_intervals(
            fit, method, seed=seed, resamples=RESAMPLES, most_steps=MOST_STEPS
        )
        for name, value in truth.items():
            found[name].append(covers(with_ends.parameter(name), value))
    records = []
    for name, told in found.items():
        given = [one for one in told if one is not None]
        covered = float(np.mean(given)) if given else float("nan")
        records.append(
            {
                "design": design,
                "method": method,
                "quantity": name,
                "campaigns": n,
                "intervals": len(given),
                "covered": round(covered, 4),
            }
        )
    return records


def run(share=1.0, first=FIRST_SEED, methods=tuple(CAMPAIGNS)):
    """Return the records of every design and method that has a meaning for it."""
    records = []
    for design in DESIGNS:
        for method in methods:
            if method == "bootstrap" and design != "eight bottles":
                continue  # one curve has no bottles to draw
            n = max(1, int(share * CAMPAIGNS[method]))
            records += counted(design, method, n, first)
    return records


if __name__ == "__main__":
    rows = run()
    with RESULTS.open("w", encoding="utf-8", newline="") as handle:
        writer = csv.DictWriter(handle, rows[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
    for row in rows:
        print(*row.values())
