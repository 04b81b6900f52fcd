"""Write docs/methods/common_errors.md from the program:  python tests/studies/common_errors.py

What usual shortcuts do to data whose truth is known and free of noise. Nothing here is random.
"""

from pathlib import Path

import numpy as np
from scipy.optimize import brentq

from leachkin.kinetics import (
    Bottle,
    ParticleLaw,
    RateLaw,
    Reference,
    Resistance,
    fit_arrhenius,
    fit_curve,
    solution_operator,
    straightened_time,
)
from leachkin.testwork import SizeDistribution

PAGE = Path(__file__).parents[2] / "docs" / "methods" / "common_errors.md"
LAWS = ("film", "chemical", "ash_layer")
POINTS, LAST = 10, 0.95
SPREADS, CLASSES = (0.0, 0.3, 0.5, 0.7, 1.0), 401
RUN_DOWNS = (0.0, 0.3, 0.6, 0.9)
ULTIMATE = 0.8
SCATTER = 0.05
CELSIUS = (
    (25, 40, 55),
    (25, 35, 45),
    (20, 30, 40, 50, 60),
    (25, 32.5, 40, 47.5, 55),
)
TRUTH = RateLaw("chemical", (Resistance("chemical", 0.0),), Reference(), [1.0], [1.0])


def straight_r2(time, extraction, law):
    """Return R2 of the line, with intercept, through g(X) against time."""
    g = np.asarray(ParticleLaw(**{law: 1.0}).time(extraction))
    return float(np.corrcoef(time, g)[0, 1] ** 2)


def time_of(curve, extraction):
    return brentq(lambda time: float(curve(np.array([time]))[0]) - extraction, 1e-9, 100.0)


def even_times(end):
    return end * np.arange(1, POINTS + 1) / POINTS


def of_spread(spread):
    """Return (R2 chemical, R2 ash layer, t95/t50) of a chemical step and log-normal sizes."""
    sizes = (
        SizeDistribution.log_normal(1.0, spread, CLASSES)
        if spread
        else SizeDistribution.single(1.0)
    )

    def curve(time):
        return np.asarray(TRUTH.extraction(time, sizes))

    end = time_of(curve, LAST)
    time = even_times(end)
    fits = [straight_r2(time, curve(time), law) for law in ("chemical", "ash_layer")]
    return (*fits, end / time_of(curve, 0.5))


def of_run_down(share):
    """Return (R2 chemical, R2 ash layer, apparent over true k) where C = C0 (1 - share X)."""
    steady = np.linspace(0.0, 1.0, 20001)[:-1]
    X = np.asarray(ParticleLaw(chemical=1.0).conversion(steady))
    slowness = 1.0 / (1.0 - share * X)
    clock = np.concatenate([[0.0], np.cumsum(0.5 * (slowness[1:] + slowness[:-1]))]) * steady[1]
    time = even_times(np.interp(LAST, X, clock))
    found = np.asarray(ParticleLaw(chemical=1.0).conversion(np.interp(time, clock, steady)))
    fits = [straight_r2(time, found, law) for law in ("chemical", "ash_layer")]
    return (*fits, 1.0 / straightened_time(time, found, "chemical"))


def of_forced_ultimate():
    """Return (R2 by law, apparent over true k, ultimate that a fit of the curve finds)."""
    time = np.linspace(0.1, LAST, POINTS)
    E = ULTIMATE * np.asarray(ParticleLaw(chemical=1.0).conversion(time))
    fits = {law: straight_r2(time, E, law) for law in LAWS}
    ultimate = fit_curve(time, E, "chemical").parameter("ultimate").value
    return fits, 1.0 / straightened_time(time, E, "chemical"), ultimate


def of_temperatures(celsius, scatter):
    """Return (standard error, half-width of the 95 % interval) of an energy of 50 kJ/mol."""
    kelvin = 273.15 + np.array(celsius)
    lines = np.column_stack([np.ones(kelvin.size), 1000.0 / kelvin])
    off = np.linalg.svd(lines.T)[2][-1]  # off every straight line
    off *= scatter * np.sqrt((kelvin.size - 2) / (off @ off))
    k = np.exp(-50.0 / 8.314462618e-3 * (1 / kelvin - 1 / kelvin.mean()) + off)
    fit = fit_arrhenius(kelvin, k)
    return fit.standard_error_kJ_per_mol, 0.5 * (fit.high - fit.low)


def of_aliquots(aliquots, volume_mL, aliquot_mL, extraction):
    """Return the last extraction by concentration times starting volume."""
    hours = np.arange(1.0, extraction.size + 1)
    sizes = SizeDistribution.single(1.0)
    bottle = Bottle(
        "one", sizes, 298.15, hours, 10.0, 100.0, volume_mL, aliquot_mL, aliquots=aliquots
    )
    solution_g_per_L = solution_operator(bottle) @ extraction
    return float(solution_g_per_L[-1] * volume_mL / bottle.solids_g)


def aliquot_cases():
    """Return (words, true, reported) last extractions."""
    linear = 0.8 * np.arange(1, 11) / 10
    bent = 0.8 * (1 - np.exp(-np.arange(1, 9) / 1.5))
    replaced = "replaced by reagent solution"
    return (
        ("1 L, ten of 25 mL, not replaced", 0.8, of_aliquots("not replaced", 1000.0, 25.0, linear)),
        ("1 L, ten of 25 mL, replaced", 0.8, of_aliquots(replaced, 1000.0, 25.0, linear)),
        ("250 mL, eight of 10 mL, replaced", bent[-1], of_aliquots(replaced, 250.0, 10.0, bent)),
    )


def table(heads, rows):
    lines = [heads, ["---"] * len(heads), *rows]
    return "".join(f"| {' | '.join(line)} |\n" for line in lines)


def marked(fits):
    """Return R2 values as text, the highest of them bold."""
    best = max(fits)
    return [f"**{fit:.4f}**" if fit == best else f"{fit:.4f}" for fit in fits]


def sizes_part():
    rows = [
        [f"{spread:g}", *marked(found[:2]), f"{found[2]:.2f}"]
        for spread, found in ((s, of_spread(s)) for s in SPREADS)
    ]
    heads = ["spread of size", "R2 chemical (the truth)", "R2 ash layer", "t95/t50"]
    return f"""## One size for a feed of many

A chemical step on sizes log-normal by mass; spread is the standard deviation over the mean. Bold is
the law that the straight line names.

{table(heads, rows)}
Give a sieve table: the law is then integrated over the classes. Where only the 80 % size is known,
`rank_tests_by_p80` fits the spread with every law.
"""


def run_down_part():
    rows = [
        [f"{share:g}", *marked(found[:2]), f"{found[2]:.2f}"]
        for share, found in ((s, of_run_down(s)) for s in RUN_DOWNS)
    ]
    heads = ["reagent run down", "R2 chemical (the truth)", "R2 ash layer", "apparent k / true k"]
    return f"""## Starting strength for a reagent that runs down

A chemical step of first order in a reagent that falls as C0 (1 - share X); k by the line through
the origin.

{table(heads, rows)}
Log the free reagent: a fit uses the strength of every hour, not the first.
"""


def ultimate_part():
    fits, k, ultimate = of_forced_ultimate()
    best = max(fits.values())
    rows = [
        [law.replace("_", " "), f"**{r2:.3f}**" if r2 == best else f"{r2:.3f}"]
        for law, r2 in fits.items()
    ]
    return f"""## All the metal taken as leachable

A chemical step with an ultimate extraction of {ULTIMATE:g}, analysed as if it were 1 (ten even
times, 0.10 to 0.95 of the time for complete conversion).

{table(["law", "R2"], rows)}
The apparent k of the chemical step is {k:.2f} of the true one. Fitted instead, the ultimate
extraction comes back as {ultimate:.3f}.
"""


def energy_part():
    rows = []
    for celsius in CELSIUS:
        error, half = of_temperatures(celsius, SCATTER)
        double = of_temperatures(celsius, 2 * SCATTER)[1]
        listed = ", ".join(f"{c:g}" for c in celsius)
        rows.append([listed, f"{error:.1f}", f"{half:.2g}", f"{double:.2g}"])
    heads = [
        "temperatures (degC)",
        "standard error (kJ/mol)",
        "95 % either way, 5 % scatter",
        "95 % either way, 10 % scatter",
    ]
    return f"""## An activation energy from three points

The scatter of ln k is estimated from the same points, so three of them leave one degree of freedom
and Student's t is 12.7.

{table(heads, rows)}
Fit all tests together: every reading then counts, not three constants.
"""


def aliquots_part():
    rows = [
        [words, f"{100 * true:.1f} %", f"{100 * told:.1f} %"]
        for words, true, told in aliquot_cases()
    ]
    heads = ["aliquots", "extracted", "concentration times starting volume"]
    return f"""## Aliquots left out of the balance

{table(heads, rows)}
State what happens to aliquots; without it a test waits for the answer.
"""


def page():
    """Return the text of the page."""
    top = """# What usual shortcuts do

Computed by `tests/studies/common_errors.py` from curves that are known and free of noise: ten
points at even times up to 95 % conversion, if nothing else is said. R2 is that of the straight line
with intercept through g(X) against time.

"""
    parts = (sizes_part(), run_down_part(), ultimate_part(), energy_part(), aliquots_part())
    return top + "\n".join(parts)


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8", newline="\n")
