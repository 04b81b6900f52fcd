"""Curves of known laws, with noise, for the tests of fits."""

from __future__ import annotations

import numpy as np

from leachkin.kinetics import RateLaw, Reference, Resistance
from leachkin.testwork import History, Observed, SizeDistribution, observed_from_extraction

TIME_H = np.array([0.5, 1.0, 2.0, 4.0, 8.0, 16.0, 30.0, 48.0])
ORE = SizeDistribution.from_classes([0.5, 1.0, 2.0, 4.0], [0.3, 0.4, 0.3])
NOISE = 0.004


def law(name: str = "chemical", **more) -> RateLaw:
    parts = {
        "chemical": (Resistance("chemical", np.log(12.0), 46.0),),
        "ash_layer+chemical": (
            Resistance("ash_layer", np.log(20.0), 19.0),
            Resistance("chemical", np.log(8.0), 46.0),
        ),
        "first_order": (Resistance("clock", np.log(6.0), 46.0),),
    }[name]
    ultimate = more.pop("ultimate", [0.88])
    reference = more.pop("reference", Reference())
    return RateLaw(name, parts, reference, [1.0], ultimate, **more)


def observed(test: str, E, seed: int = 5, noise: float = NOISE, time_h=TIME_H, **more) -> Observed:
    generator = np.random.default_rng([seed, len(test), *map(ord, test)])
    values = np.asarray(E) + noise * generator.standard_normal(time_h.size)
    sd = max(noise, 1e-6)
    return observed_from_extraction(time_h, values, sd, test=test, sizes=ORE, **more)


def history(time_h, *, temperature_K=298.15, reagent=10.0, **others) -> History:
    time = np.asarray(time_h, dtype=float)
    full = np.ones(time.size)
    return History(
        time,
        full * temperature_K,
        full * reagent,
        {name.replace("_", "+"): full * value for name, value in others.items()},
    )


def near(fit, name: str, truth: float, errors: float = 3.5) -> None:
    found = fit.parameter(name)
    assert found.standard_error is not None, f"{name}: {found.why_no_interval}"
    assert abs(found.value - truth) <= errors * found.standard_error, f"{name}: {found}"


def conditions(kind: str) -> list[Observed]:
    """Three tests that differ in all that a drive may read, with histories."""
    found = []
    for i, (kelvin, strength) in enumerate([(298.15, 10.0), (313.15, 20.0), (298.15, 5.0)]):
        at = np.array([0.0, 6.0, 20.0, 48.0])
        own = History(
            at,
            kelvin + np.zeros(4),
            strength * np.array([1.0, 0.8, 0.7, 0.5]),
            {
                "O2": np.array([8.0, 6.0, 7.0, 8.0]) / 1000.0 * (1 + i),
                "Fe3+": np.array([3.0, 2.0, 1.5, 1.0]) + i,
                "Fe2+": np.array([0.5, 1.0, 1.5, 2.0]),
                "pH": np.array([1.5, 1.6, 1.8, 2.0]) + 0.1 * i,
                "Cu": np.array([0.0, 1.0, 2.0, 3.0]),
            },
        )
        found.append(
            observed(
                f"t{i}",
                0.5 * (1 - np.exp(-TIME_H / 10)),
                temperature_K=kelvin,
                reagent_g_per_L=strength,
                history=own,
                key="ore/Cu",
                stirring_rpm=100.0 * (i + 1),
            )
        )
    return found
