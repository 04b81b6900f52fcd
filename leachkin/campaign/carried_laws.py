"""Every law that the data do not reject, carried to the plant: which, how often, and as one batch.

A draw of a plant figure first draws a law by its AICc weight, then its constants. The laws are sums
of film, ash layer and chemical step, so that all of them are one law with three resistances of
which some cost no time: the plant sees one batch.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from leachkin.campaign.stage_results import KineticsStage
from leachkin.inference import akaike_weights
from leachkin.kinetics import FitResult, RateLaw, Resistance, law_terms
from leachkin.run_record import stage_seed

Array = NDArray[np.float64]
KINDS = ("film", "ash_layer", "chemical")
#: ln of the time of a resistance that is not there, relative to the shortest that is.
LN_ABSENT = -60.0


def is_particle(law: str) -> bool:
    """Return True for a law of film, ash layer and chemical control in any sum."""
    return all(term in KINDS for term in law_terms(law))


def carried_fits(stage: KineticsStage) -> tuple[tuple[FitResult, float], ...]:
    """Return the fits that the plant uses with their weights, the law of the stage first.

    Only laws that can be carried to another size and strength, and only those not rejected.
    """
    if stage.fit is None:
        return ()
    rows = () if stage.ranking is None else stage.ranking.rows
    named = () if stage.ranking is None else stage.ranking.indistinguishable
    fits, criteria = [stage.fit], [stage.fit.aicc]
    for row in rows:
        if row.fit is None or row.law == stage.fit.law_name or row.law not in named:
            continue
        if is_particle(row.law) and row.fit.converged and row.fit.covariance is not None:
            fits.append(row.fit)
            criteria.append(row.fit.aicc)
    if not is_particle(stage.fit.law_name) or not np.isfinite(criteria).all():
        return ((stage.fit, 1.0),)
    weights = akaike_weights(criteria)
    return tuple((fit, float(w)) for fit, w in zip(fits, weights, strict=True))


def own_draws(stage: KineticsStage, draws: int, seed: int) -> RateLaw | None:
    """Return draws of the law of a stage alone; None without a fit or without draws."""
    if stage.fit is None or stage.fit.covariance is None or not draws:
        return None
    return stage.fit.draw(draws, stage_seed(seed, f"fit {stage.key}"))


def drawn_laws(
    stage: KineticsStage, draws: int, seed: int
) -> tuple[RateLaw, NDArray[np.intp]] | None:
    """Return draws over the laws not rejected, and which law each draw has; None without a fit.

    One law alone is drawn as it is.
    """
    alone = own_draws(stage, draws, seed)
    if alone is None:
        return None
    carried = carried_fits(stage)
    if len(carried) == 1:
        return alone, np.zeros(draws, dtype=np.intp)
    own = stage_seed(seed, f"fit {stage.key}")
    drawn = [alone, *(fit.draw(draws, own) for fit, _ in carried[1:])]
    generator = np.random.default_rng(stage_seed(seed, f"law {stage.key}"))
    weights = np.array([weight for _, weight in carried])
    which = generator.choice(len(carried), size=draws, p=weights / weights.sum())
    return one_batch(drawn, which), which.astype(np.intp)


def one_batch(laws: list[RateLaw], which: NDArray[np.integer]) -> RateLaw:
    """Return a batch whose member j is member j of law ``which[j]``.

    Parameters
    ----------
    laws : list of RateLaw
        Each of batch shape (n,), sums of film, ash layer and chemical step, of one reference, the
        same knots of the ultimate, the same drive and terms.
    which : ndarray of int, shape (n,)
    """
    n = which.size
    first = laws[0]
    resistances = tuple(_chosen(laws, which, kind) for kind in KINDS)

    def picked(name: str) -> Array:
        each = [np.broadcast_to(np.asarray(getattr(law, name)), (n,)) for law in laws]
        return np.choose(which, each)

    slow = None
    if first.slow is not None:
        slow = one_batch([law.slow for law in laws if law.slow is not None], which)
    knots = first.ultimate.shape[-1]
    ultimate = np.stack([np.broadcast_to(law.ultimate, (n, knots)) for law in laws])
    drive = first.drive
    if drive is not None:
        each = [law.drive.parameters for law in laws if law.drive is not None]
        chosen = {
            name: np.choose(which, [np.broadcast_to(one[name], (n,)) for one in each])
            for name in drive.parameters
        }
        drive = replace(drive, parameters=chosen)
    return replace(
        first,
        name="series",
        resistances=resistances,
        ultimate=ultimate[which, np.arange(n)],
        lag_h=picked("lag_h"),
        soluble_share=picked("soluble_share"),
        fade_per_h=picked("fade_per_h"),
        drive=drive,
        slow=slow,
        slow_share=picked("slow_share"),
    )


def _chosen(laws: list[RateLaw], which: NDArray[np.integer], kind: str) -> Resistance:
    """Return a resistance of the batch; of a law without it one that costs no time."""
    n = which.size
    columns: dict[str, list[Array]] = {}
    for law in laws:
        own = next((r for r in law.resistances if r.kind == kind), None)
        shortest = np.min([np.broadcast_to(r.ln_tau, (n,)) for r in law.resistances], axis=0)
        base = own or replace(law.resistances[0], kind=kind, ln_tau=shortest + LN_ABSENT)  # type: ignore[arg-type]
        for name in (
            "ln_tau",
            "activation_energy_kJ_per_mol",
            "order",
            "size_exponent",
            "stirring_exponent",
        ):
            columns.setdefault(name, []).append(np.broadcast_to(getattr(base, name), (n,)))
    chosen = {name: np.choose(which, values) for name, values in columns.items()}
    return Resistance(kind, **chosen)  # type: ignore[arg-type]
