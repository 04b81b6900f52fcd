"""The size distribution of the ore in a plant, from its table in the campaign file."""

from __future__ import annotations

from leachkin.campaign.settings import Settings
from leachkin.problems import argument_error
from leachkin.testwork import SizeDistribution

_FORMS = ("gates_gaudin_schuhmann", "rosin_rammler", "class_edges_mm with mass_shares", "single")


def plant_sizes(settings: Settings, stage: str) -> SizeDistribution | None:
    """Return the size distribution of ``[heap.sizes]`` or ``[tank.sizes]``; None without one.

    Raises
    ------
    InputProblems
        If the table holds no complete distribution.
    """
    table = f"{stage}.sizes"
    if not settings.has(table):
        return None
    if settings.has(f"{table}.gates_gaudin_schuhmann"):
        return SizeDistribution.gates_gaudin_schuhmann(
            settings.number(f"{table}.gates_gaudin_schuhmann.top"),
            settings.number(f"{table}.gates_gaudin_schuhmann.slope"),
            edges_mm=_edges(settings, table, "gates_gaudin_schuhmann"),
        )
    if settings.has(f"{table}.rosin_rammler"):
        return SizeDistribution.rosin_rammler(
            settings.number(f"{table}.rosin_rammler.d63"),
            settings.number(f"{table}.rosin_rammler.slope"),
            edges_mm=_edges(settings, table, "rosin_rammler"),
        )
    if settings.get(f"{table}.single") is not None:
        return SizeDistribution.single(settings.number(f"{table}.single"))
    return _from_classes(settings, table)


def _edges(settings: Settings, table: str, form: str) -> tuple[float, ...] | None:
    own = settings.get(f"{table}.{form}.class_edges_mm")
    edges = own if own is not None else settings.get(f"{table}.class_edges_mm")
    return None if edges is None else tuple(edges)


def _from_classes(settings: Settings, table: str) -> SizeDistribution:
    edges = settings.get(f"{table}.class_edges_mm")
    shares = settings.get(f"{table}.mass_shares")
    if edges is None or shares is None:
        raise argument_error(
            table,
            "no size distribution",
            ", ".join(_FORMS),
            'add gates_gaudin_schuhmann = { top = "19 mm", slope = 0.65 }',
        )
    return SizeDistribution.from_classes(edges, shares, settings.get(f"{table}.metal_shares"))
