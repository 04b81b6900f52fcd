"""The vessel of a campaign: which keys each kind needs, and where its rate comes from."""

from __future__ import annotations

from typing import Any

from leachkin.campaign.settings import Settings
from leachkin.cementation import (
    CementationDemand,
    CementationLaw,
    CementationVessel,
    bed,
    dust_and_filter,
    launder,
    stirred_tanks,
)
from leachkin.problems import argument_error


def cementation_vessel(
    settings: Settings, demand: CementationDemand, metal: str, fitted: CementationLaw | None
) -> CementationVessel | None:
    """Return the vessel that [cementation.vessel] asks for; None without that table.

    Parameters
    ----------
    settings : Settings
    demand : CementationDemand
    metal : str
        Whose barren is the target.
    fitted : CementationLaw or None
        Of the cementation tests; without areas it serves stirred tanks only.

    Raises
    ------
    InputProblems
        If a key that the kind needs is missing, or the vessel cannot reach the barren.
    """
    if not settings.has("cementation.vessel"):
        return None
    kind = str(_get(settings, "kind"))
    rate: Any = _get(settings, "transfer")
    common: dict[str, Any] = {"metal": metal}
    usable = fitted is not None and (fitted.by_area or kind == "stirred tanks")
    if rate is None and usable and kind != "dust and filter":
        rate = fitted
        common["temperature_K"] = demand.solution.temperature_K
    if kind in ("packed bed", "moving bed"):
        return _bed(settings, demand, rate, common, moving=kind == "moving bed")
    if kind == "dust and filter":
        return _dust(settings, demand, rate, common)
    if rate is None:
        raise argument_error(
            "cementation.vessel.transfer",
            "no rate",
            "a coefficient, or cementation tests with their area",
            'transfer = "2e-5 m/s", or an area column in the cementation tests',
        )
    common |= _given(settings, piece_thickness_mm="piece_thickness")
    if kind == "launder":
        return launder(
            demand,
            rate,
            width_m=_needed(settings, "width"),
            depth_m=_needed(settings, "depth"),
            area_m2_per_m3=_needed(settings, "area"),
            voids=_needed(settings, "voids"),
            **common,
        )
    if not (isinstance(rate, CementationLaw) and not rate.by_area):
        common["area_m2_per_m3"] = _needed(settings, "area")
    return stirred_tanks(demand, rate, **_given(settings, tanks="tanks"), **common)


def _bed(
    settings: Settings,
    demand: CementationDemand,
    rate: Any,
    common: dict[str, Any],
    moving: bool,
) -> CementationVessel:
    return bed(
        demand,
        rate,
        piece_mm=_needed(settings, "piece_size"),
        cross_section_m2=_needed(settings, "cross_section"),
        voids=_needed(settings, "voids"),
        moving=moving,
        **_given(settings, turning_factor="turning_factor"),
        **common,
    )


def _dust(
    settings: Settings, demand: CementationDemand, rate: Any, common: dict[str, Any]
) -> CementationVessel:
    return dust_and_filter(
        demand,
        grain_um=_needed(settings, "grain_size"),
        pipe_contact_s=_needed(settings, "pipe_contact"),
        cake_voids=_needed(settings, "voids"),
        rate=rate,
        **_given(settings, filter_m2="filter_area", excess_g_per_m3="excess"),
        **common,
    )


def _get(settings: Settings, key: str) -> Any:
    return settings.get(f"cementation.vessel.{key}")


def _needed(settings: Settings, key: str) -> float:
    return settings.number(f"cementation.vessel.{key}")


def _given(settings: Settings, **keys: str) -> dict[str, Any]:
    """Keys that the file gives, by argument name."""
    found = {name: _get(settings, key) for name, key in keys.items()}
    return {name: value for name, value in found.items() if value is not None}
