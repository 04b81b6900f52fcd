"""How often reconciled extractions cover the truth, and which gross errors are found and named.

    python tests/studies/reconciliation.py [BOTTLES]

Bottles of 500 g in 1000 mL, four samples of 20 mL replaced, 1.5 % on solutions, 3 % on tails, 2 %
on heads and on a charge about its sample, 0.3 % on the residue mass. Every bottle has three heads
and two tails unless the case says otherwise; a gross error is a factor on one assay. Writes
tests/studies/results/reconciliation.csv.
"""

import csv
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from leachkin.testwork import Assays, Head, History, Product, Test, reconcile_balance

RESULTS = Path(__file__).parent / "results" / "reconciliation.csv"
BOTTLES, SEED = 2000, 20260301
SOLUTION, TAIL, HEAD, MASS = 0.015, 0.03, 0.02, 0.003
SOLIDS_g, SOLUTION_mL, ALIQUOT_mL, LEFT = 500.0, 1000.0, 20.0, 0.97
HEAD_kg_per_t, HOURS, COURSE = 6.8, (2.0, 6.0, 24.0, 48.0), (0.4, 0.7, 0.9, 1.0)


@dataclass(frozen=True)
class Case:
    """One kind of bottle, and the gross error in it."""

    name: str
    extraction: float = 0.84
    heads: int = 3
    tails: int = 2
    filtrates: int = 0
    wrong: str = ""
    factor: float = 1.0


CASES = (
    Case("sound, 50 % extracted", 0.50),
    Case("sound, 84 % extracted"),
    Case("sound, 95 % extracted", 0.95),
    Case("sound, with a final solution pair", filtrates=2),
    Case("sound, one head and one tail", heads=1, tails=1),
    Case("one of two tails 15 % high", wrong="tail", factor=1.15),
    Case("one of two tails 15 % low", wrong="tail", factor=0.85),
    Case("one of three heads 15 % high", wrong="head", factor=1.15),
    Case("one of a final pair 15 % high", filtrates=2, wrong="filtrate", factor=1.15),
    Case("one of a final pair 15 % low", filtrates=2, wrong="filtrate", factor=0.85),
    Case("last reading 15 % high, one filtrate", filtrates=1, wrong="solution", factor=1.15),
    Case("the only tail 15 % high", tails=1, wrong="tail", factor=1.15),
    Case("the only tail 100 % high", tails=1, wrong="tail", factor=2.0),
    Case("the only last solution 15 % high", wrong="solution", factor=1.15),
)
#: What a measurement of each kind is called in the result.
LABELS = {
    "tail": "residue assay",
    "head": "head assay",
    "filtrate": "filtrate assay",
    "solution": "solution at 48 h",
}


def true_course(extraction, charge_kg_per_t):
    """Concentrations before each sample and at the end, metal followed through the bottle."""
    grades, metal, before = [], 0.0, 0.0
    for share in COURSE:
        metal += SOLIDS_g * charge_kg_per_t * extraction * (share - before)
        before = share
        grades.append(metal / SOLUTION_mL)
        metal -= ALIQUOT_mL * grades[-1]
    return np.array(grades), metal / SOLUTION_mL


def bottle(case, generator):
    """A bottle with noise, and the gross error of its case."""

    def noisy(value, part, count=None):
        return value * (1.0 + part * generator.standard_normal(count))

    charge = noisy(HEAD_kg_per_t, HEAD)
    grades, final = true_course(case.extraction, charge)
    measured = {
        "solution": noisy(grades, SOLUTION, grades.size),
        "head": noisy(HEAD_kg_per_t, HEAD, case.heads),
        "tail": noisy(charge * (1.0 - case.extraction) / LEFT, TAIL, case.tails),
        "filtrate": noisy(final, SOLUTION, case.filtrates),
    }
    if case.wrong:
        measured[case.wrong][-1] *= case.factor
    residue = noisy(SOLIDS_g * LEFT, MASS)
    products = [_product("residue", False, residue, measured["tail"], TAIL)]
    if case.filtrates:
        products.append(_product("filtrate", True, SOLUTION_mL, measured["filtrate"], SOLUTION))
    heads, solution = measured["head"], measured["solution"]
    spread = heads.std(ddof=1) if heads.size > 1 else HEAD * heads.mean()
    head = Head(
        float(heads.mean()), float(spread / np.sqrt(heads.size)), heads.size,
        HEAD * float(heads.mean()), tuple(heads), tuple(HEAD * heads),
    )  # fmt: skip
    count = grades.size
    return Test(
        name="B", domain="ore", kind="bottle roll", solids_g=SOLIDS_g, solution_mL=SOLUTION_mL,
        sizes=None, temperature_K=298.15, reagent_g_per_L=None, stirring_rpm=None,
        history=History(np.zeros(1), np.full(1, 298.15)), aliquots="replaced by water",
        time_h=np.array(HOURS), aliquot_mL=np.full(count, ALIQUOT_mL),
        makeup_mL=np.full(count, np.nan), products=tuple(products), heads={"Cu": head},
        solution={"Cu": Assays(solution, SOLUTION * solution, np.zeros(count, dtype=np.int64))},
        residue_mass_sd_relative=MASS,
    )  # fmt: skip


def _product(name, is_solution, amount, values, part):
    mean, count = float(values.mean()), values.size
    grade = {"Cu": (mean, part * mean / np.sqrt(count), count)}
    return Product(name, is_solution, float(amount), grade, {}, {"Cu": tuple(values)})


def run(case, bottles, seed):
    """Return one record: shares covered, found, and named where found."""
    generator = np.random.default_rng([seed, CASES.index(case)])
    covered, found, right, alone = np.zeros((4, bottles), dtype=bool)
    errors, spreads = np.zeros((2, bottles))
    for i in range(bottles):
        result = reconcile_balance(bottle(case, generator), "Cu")
        covered[i] = result.low <= case.extraction <= result.high
        found[i] = bool(result.found)
        errors[i], spreads[i] = result.extraction - case.extraction, result.sd
        if case.wrong and found[i]:
            label = LABELS[case.wrong]
            labels = [a.label for a in result.suspects]
            right[i] = any(one.startswith(label) for one in labels)
            alone[i] = right[i] and all(one.startswith(label) for one in labels)
    told = bool(case.wrong)
    return {
        "case": case.name,
        "bottles": bottles,
        "covered": covered.mean(),
        "found": found.mean(),
        "group_among_suspects": right.mean() if told else "",
        "group_named_alone": alone.mean() if told else "",
        "mean_error": errors.mean(),
        "scatter": errors.std(ddof=1),
        "mean_sd": spreads.mean(),
    }


def main(bottles):
    records = [run(case, bottles, SEED) for case in CASES]
    with RESULTS.open("w", newline="", encoding="utf-8") as handle:
        writer = csv.writer(handle, lineterminator="\n")
        writer.writerow(records[0])
        for record in records:
            cells = [f"{v:.4g}" if isinstance(v, float) else v for v in record.values()]
            writer.writerow(cells)
            print(*cells)


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else BOTTLES)
