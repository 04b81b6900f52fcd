"""How often the verdict on the mechanism is wrong, undecided or right.

    python tests/studies/verdict.py [CAMPAIGNS]

Each campaign has 12 bottles (three sizes, four temperatures) of nine solution assays: 2 % noise
on an assay, 2 % on the head of a charge, ultimate extraction 0.8, reagent run down by 60 % (its
history known), sizes within a bottle log-normal with a standard deviation of 0.5 or 1.0 of the
mean. Truths: chemical step, ash layer, film, chemical step and ash layer in series.

Ways to a verdict on the same numbers:

- ``sizes known``: ranking with the sieve table of every bottle;
- ``p80 known``: the 80 % size only, family and spread of the sizes fitted with every law;
- ``p80, power law``: the same, where the true sizes are Gates-Gaudin-Schuhmann with as much spread
  (slopes 1.24 and 0.41);
- ``p80 and slope``: the 80 % size only, Gates-Gaudin-Schuhmann sizes with the slope held at 0.65;
- ``no head of its own``: as the first, every bottle held to the assay head;
- ``no head, best AICc``: the same, and simply the law with the best AICc named;
- ``straight line``: g(X) against time with X the extraction, the highest R2 of each bottle.

The first ranks the default laws, the others the mechanistic ones only, to save time. The ways by
P80 are tried in one campaign of so many, for the same reason.

Writes tests/studies/results/verdict.csv.
"""

import csv
import multiprocessing
import sys
from collections import Counter
from dataclasses import replace
from pathlib import Path

import numpy as np

from leachkin.kinetics import (
    MECHANISTIC,
    ParticleLaw,
    RateLaw,
    Reference,
    Resistance,
    contains,
    rank_tests,
    rank_tests_by_p80,
)
from leachkin.testwork import History, Observed, SizeDistribution

RESULTS = Path(__file__).parent / "results" / "verdict.csv"
#: No rule of the program was made, and no number looked at, on these seeds.
CAMPAIGNS, FIRST_SEED, WORKERS = 20, 90_001, 2
#: Some ways are tried in one campaign of so many: fitting the sizes takes three fits for each law.
TRIED_IN = {"p80 known": 2, "p80, power law": 2, "p80 and slope": 4}
HOURS = np.array([2, 6, 12, 24, 48, 72, 120, 168, 240.0])
SIZES_MM, CELSIUS, SPREADS = (1.0, 2.0, 4.0), (25, 35, 45, 55), (0.5, 1.0)
#: Slope of a power law of sizes with the same standard deviation over mean: 1/sqrt(m (m + 2)).
SLOPES = {spread: float(np.sqrt(1.0 + spread**-2) - 1.0) for spread in SPREADS}
ASSAY_NOISE, HEAD_NOISE, ULTIMATE, RUN_DOWN = 0.02, 0.02, 0.8, 0.6
START_g_per_L, HISTORY_POINTS, ASSUMED_SLOPE = 20.0, 81, 0.65
REFERENCE = Reference(temperature_K=313.15, reagent_g_per_L=START_g_per_L, size_mm=2.0)
#: Time for complete conversion at the reference [h] and activation energy [kJ/mol] of each part.
PARTS = {"film": (60.0, 15.0), "ash_layer": (60.0, 22.0), "chemical": (60.0, 50.0)}
TRUTHS = {
    "chemical": {"chemical": 1.0},
    "ash_layer": {"ash_layer": 1.0},
    "film": {"film": 1.0},
    "ash_layer+chemical": {"ash_layer": 0.5, "chemical": 0.5},
}
#: Fine enough that the corner of the film law is no artefact of the classes.
CLASSES = 41
WAYS = (
    "sizes known",
    "p80 known",
    "p80, power law",
    "p80 and slope",
    "no head of its own",
    "no head, best AICc",
    "straight line",
)
OUTCOMES = ("right", "undecided", "wrong")


def true_law(truth):
    parts = [
        Resistance(kind, np.log(share * PARTS[kind][0]), PARTS[kind][1])
        for kind, share in TRUTHS[truth].items()
    ]
    return RateLaw(truth, tuple(parts), REFERENCE, [REFERENCE.size_mm], [ULTIMATE])


def run_down_curve(law, sizes, kelvin):
    """Return (time, extraction, strength) with C = C0 (1 - 0.6 E / 0.8), exact for first order."""
    steady_h = np.concatenate([[0.0], np.geomspace(1e-3, 2.0 * HOURS[-1], 4000)])
    E = np.asarray(law.extraction(steady_h, sizes, kelvin, START_g_per_L))
    left = 1.0 - RUN_DOWN * E / ULTIMATE
    slowness = 0.5 * (1.0 / left[1:] + 1.0 / left[:-1]) * np.diff(steady_h)
    return np.concatenate([[0.0], np.cumsum(slowness)]), E, START_g_per_L * left


def true_sizes(size_mm, spread, family):
    if family == "power law":
        top = size_mm * (1.0 + 1.0 / SLOPES[spread])  # its mean is size_mm
        edges = top * np.linspace(1.0, 0.0, CLASSES + 1) ** 2
        edges[-1] = 1e-4 * top
        return SizeDistribution.gates_gaudin_schuhmann(top, SLOPES[spread], edges)
    median = size_mm / np.sqrt(1.0 + spread**2)
    return SizeDistribution.log_normal(median, spread, CLASSES)


def one_bottle(law, size_mm, celsius, spread, rng, family):
    kelvin = 273.15 + celsius
    sizes = true_sizes(size_mm, spread, family)
    hours, E, strength = run_down_curve(law, sizes, kelvin)
    head = 1.0 + HEAD_NOISE * rng.standard_normal()
    value = head * np.interp(HOURS, hours, E) * (1.0 + ASSAY_NOISE * rng.standard_normal(9))
    logged_h = np.union1d(np.linspace(0.0, HOURS[-1] ** 0.5, HISTORY_POINTS) ** 2, HOURS)
    m = HOURS.size
    return Observed(
        test=f"{size_mm:g}mm{celsius}",
        key="ore/metal",
        time_h=HOURS,
        operator=np.eye(m),
        offset=np.zeros(m),
        brought=np.zeros(m),
        value=value,
        sd=ASSAY_NOISE * value,
        bound=np.zeros(m, dtype=np.int64),
        row_kind=("solution",) * m,
        row_time_h=HOURS,
        head_kg_per_t=1.0,
        head_sd_kg_per_t=HEAD_NOISE,
        sizes=sizes,
        temperature_K=kelvin,
        reagent_g_per_L=START_g_per_L,
        history=History(
            logged_h, np.full(logged_h.size, kelvin), np.interp(logged_h, hours, strength)
        ),
    )


def campaign(truth, spread, seed, family="log-normal"):
    law, rng = true_law(truth), np.random.default_rng([seed, int(10 * spread), len(truth)])
    return [one_bottle(law, d, c, spread, rng, family) for d in SIZES_MM for c in CELSIUS]


def p80_mm(sizes):
    """Return the size that 80 % of the mass passes, between class sizes."""
    order = np.argsort(sizes.size_mm)
    share = sizes.mass_share[order]
    passing = np.cumsum(share) - 0.5 * share
    return float(np.exp(np.interp(0.8, passing, np.log(sizes.size_mm[order]))))


def with_slope(observed):
    top = p80_mm(observed.sizes) / 0.8 ** (1.0 / ASSUMED_SLOPE)
    edges = top * 0.72 ** np.arange(13)
    sizes = SizeDistribution.gates_gaudin_schuhmann(top, ASSUMED_SLOPE, edges)
    return replace(observed, sizes=sizes)


def judged(ranking, truth, named=None):
    """Return right, wrong or undecided; a larger law whose further part is not needed is right."""
    named = ranking.mechanisms if named is None else named
    if len(named) != 1:
        return "undecided"
    law = named[0]
    if law == truth:
        return "right"
    spare = ranking.fit_of(law).not_needed
    return "right" if spare and contains(law, truth) else "wrong"


def straight_line_law(time, extraction):
    """Return the law whose g(X) has the highest R2 against time."""
    found = {}
    for law in PARTS:
        g = np.asarray(ParticleLaw(**{law: 1.0}).time(np.clip(extraction, 0.0, 1.0)))
        found[law] = np.corrcoef(time, g)[0, 1] ** 2
    return max(found, key=found.get)


def by_p80(observed):
    return rank_tests_by_p80(observed, [p80_mm(o.sizes) for o in observed], MECHANISTIC)


def held_to_the_assay(observed):
    return rank_tests([replace(o, head_sd_kg_per_t=0.0) for o in observed], MECHANISTIC)


RANKED = {
    "sizes known": rank_tests,
    "p80 known": by_p80,
    "p80, power law": by_p80,
    "p80 and slope": lambda tests: rank_tests([with_slope(o) for o in tests], MECHANISTIC),
    "no head of its own": held_to_the_assay,
}


def verdicts(truth, spread, seed, ways=WAYS):
    """Return (way, outcome) of every verdict on one campaign; straight lines give one a bottle."""
    found = []
    for way in ways:
        if seed % TRIED_IN.get(way, 1) or way not in RANKED:
            continue
        family = "power law" if way == "p80, power law" else "log-normal"
        ranking = RANKED[way](campaign(truth, spread, seed, family))
        found.append((way, judged(ranking, truth)))
        if way == "no head of its own":
            best = [ranking.rows[0].law]
            found.append(("no head, best AICc", judged(ranking, truth, best)))
    lines = [straight_line_law(o.time_h, o.value) for o in campaign(truth, spread, seed)]
    return found + [("straight line", "right" if law == truth else "wrong") for law in lines]


def run(n, first_seed=FIRST_SEED, workers=1, ways=WAYS):
    """Return one record for each way, spread and truth: verdicts and the shares of the outcomes."""
    cells = [(truth, spread) for spread in SPREADS for truth in TRUTHS]
    seeds = range(first_seed, first_seed + n)
    asked = [(*cell, seed, ways) for seed in seeds for cell in cells]
    if workers > 1:
        with multiprocessing.Pool(workers) as pool:
            found = pool.starmap(verdicts, asked, chunksize=1)
    else:
        found = [verdicts(*one) for one in asked]
    counts = Counter()
    for (truth, spread, *_), results in zip(asked, found, strict=True):
        counts.update((way, spread, truth, outcome) for way, outcome in results)
    return [
        record
        for way in WAYS
        for truth, spread in cells
        if (record := _record(counts, way, spread, truth, n))["verdicts"]
    ]


def _record(counts, way, spread, truth, n):
    numbers = {outcome: counts[way, spread, truth, outcome] for outcome in OUTCOMES}
    record = {"way": way, "spread": spread, "truth": truth, "campaigns": n}
    return record | {"verdicts": sum(numbers.values())} | numbers


def shares(records, way):
    """Return (verdicts, share wrong, share undecided) of one way over all truths and spreads."""
    rows = [record for record in records if record["way"] == way]
    total = sum(int(row["verdicts"]) for row in rows)
    wrong, undecided = (sum(int(row[k]) for row in rows) for k in ("wrong", "undecided"))
    return total, wrong / total, undecided / total


def main(n):
    records = run(n, workers=WORKERS)
    RESULTS.parent.mkdir(exist_ok=True)
    with RESULTS.open("w", newline="", encoding="utf-8") as handle:
        writer = csv.writer(handle, lineterminator="\n")
        writer.writerow(records[0])
        writer.writerows(record.values() for record in records)
    for way in WAYS:
        total, wrong, undecided = shares(records, way)
        print(f"{way}: {total} verdicts, wrong {wrong:.1%}, undecided {undecided:.1%}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else CAMPAIGNS)
