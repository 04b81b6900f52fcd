"""From what was weighed at the bench to the volumes of a vessel: gross masses, slurry samples."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from leachkin.problems import Problem
from leachkin.testwork.charge import Weighed
from leachkin.testwork.readings_sheet import Readings
from leachkin.testwork.records import Array, VesselLog


@dataclass(frozen=True)
class VesselVolumes:
    """What the readings of a test say about its vessel.

    Attributes
    ----------
    log : VesselLog
    aliquot_mL, makeup_mL : ndarray, shape (m,)
        As written, with what masses say where a cell was blank; NaN where nothing does.
    """

    log: VesselLog
    aliquot_mL: Array
    makeup_mL: Array


def vessel_volumes(
    name: str,
    solids_g: float,
    solution_mL: float,
    weighed: Weighed,
    readings: Readings,
    problems: list[Problem],
) -> VesselVolumes:
    """Return the volumes of a vessel from its volumes, masses and samples.

    Parameters
    ----------
    name : str
        Of the test, for messages.
    solids_g, solution_mL : float
        At the start.
    weighed : Weighed
    readings : Readings
    problems : list of Problem
        Added to: what is not known of a mass or a sample.

    Returns
    -------
    VesselVolumes
    """
    count, written = readings.time_h.size, readings.vessel
    blank = np.full(count, np.nan)
    aliquot = blank.copy() if readings.aliquot_mL is None else readings.aliquot_mL.copy()
    makeup = blank.copy() if readings.makeup_mL is None else readings.makeup_mL.copy()
    solids = _solids_of_slurry(name, solids_g, solution_mL, weighed, readings, problems)
    if solids is not None and "slurry" in written:
        liquid = (written["slurry"] - solids) / weighed.density_g_per_mL
        aliquot = np.where(np.isnan(aliquot), np.maximum(liquid, 0.0), aliquot)
    volume = written.get("volume", blank).copy()
    scale = _scale(solids_g, solution_mL, weighed, readings)
    if scale is None and {"bottle", "bottle after"} & set(written):
        problems.append(_no_tare(name, readings))
    elif scale is not None:
        taken = np.zeros(count) if solids is None else np.nan_to_num(solids)
        before = _volume(written.get("bottle", blank), scale, np.cumsum(taken) - taken, weighed)
        volume = np.where(np.isnan(volume), before, volume)
        after = _volume(written.get("bottle after", blank), scale, np.cumsum(taken), weighed)
        known = np.where(np.isnan(volume), np.append(solution_mL, after[:-1]), volume)
        makeup = np.where(np.isnan(makeup), _made_up(known, after, aliquot, written), makeup)
    log = VesselLog(
        volume_mL=_or_none(volume),
        evaporated_mL=written.get("evaporated"),
        returned_mL=written.get("returned"),
        decanted_mL=written.get("decanted"),
        solids_g=solids,
        solids_assays=readings.solids_assays,
        carbon_g=weighed.carbon_g,
    )
    return VesselVolumes(log, aliquot, makeup)


def _or_none(values: Array) -> Array | None:
    return None if np.isnan(values).all() else values


def _scale(
    solids_g: float, solution_mL: float, weighed: Weighed, readings: Readings
) -> tuple[float, float] | None:
    """Gross mass of the filled bottle and the volume it had; None where it is not known."""
    written = readings.vessel
    if weighed.bottle_g is not None:
        return weighed.bottle_g, solution_mL
    first = written.get("bottle")
    if first is not None and readings.time_h[0] == 0.0 and not np.isnan(first[0]):
        return float(first[0]), solution_mL
    if weighed.tare_g is None or not {"bottle", "bottle after"} & set(written):
        return None
    content = solids_g + weighed.carbon_g + solution_mL * weighed.density_g_per_mL
    return weighed.tare_g + content, solution_mL


def _volume(gross_g: Array, scale: tuple[float, float], gone_g: Array, weighed: Weighed) -> Array:
    """Solution by the gross mass, solids that left with samples put back [mL]."""
    start_g, start_mL = scale
    return np.asarray(start_mL + (gross_g + gone_g - start_g) / weighed.density_g_per_mL)


def _made_up(volume: Array, after: Array, aliquot: Array, written: Mapping[str, Array]) -> Array:
    """What came in after a sample, by the mass that the bottle was brought to."""
    nothing = np.zeros(volume.size)
    poured = np.nan_to_num(written.get("decanted", nothing))
    back = np.nan_to_num(written.get("returned", nothing))
    return np.asarray(np.maximum(after - (volume - np.nan_to_num(aliquot) - poured + back), 0.0))


def _solids_of_slurry(
    name: str,
    solids_g: float,
    solution_mL: float,
    weighed: Weighed,
    readings: Readings,
    problems: list[Problem],
) -> Array | None:
    """Dry solids of each sample; where only the slurry was weighed, as the pulp at the start."""
    solids, slurry = (readings.vessel.get(key) for key in ("solids taken", "slurry"))
    if slurry is None:
        return solids
    known = np.full(slurry.size, np.nan) if solids is None else solids
    guessed = np.isnan(known) & ~np.isnan(slurry)
    if not guessed.any():
        return known
    share = solids_g / (solids_g + solution_mL * weighed.density_g_per_mL)
    problems.append(
        Problem(
            readings.file,
            readings.rows[int(np.flatnonzero(guessed)[0])],
            "sampled solids (g)",
            "note",
            f"slurry samples of test {name} without their dry solids: {100 * share:.3g} % solids "
            "taken, as in the pulp at the start",
            "the dry mass of each",
            'filter and weigh them, and add a column "sampled solids (g)"',
        )
    )
    return np.where(guessed, share * slurry, known)


def _no_tare(name: str, readings: Readings) -> Problem:
    return Problem(
        readings.file,
        readings.rows[0] if readings.rows else None,
        "bottle mass (g)",
        "ask",
        f"masses of the bottle of test {name} and neither its tare nor its mass at the start: "
        "they are not used",
        "one of the two, on the tests sheet",
        'add a column "bottle mass at start (g)" or "bottle tare (g)"',
    )
