"""Size distributions: classes with a size, a share of the mass and a share of the metal."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.problems import argument_error
from leachkin.tables import read_table

Array = NDArray[np.float64]

#: Shares that sum to 1 within this are taken as rounded and made to sum to 1 exactly.
SUM_TOLERANCE = 1e-6
#: Largest share that may lie above the top edge of a distribution without an upper end.
_TAIL_ABOVE = 0.01
_EDGE_RATIO = 0.75  #: default edges step down by at least this
_DEFAULT_EDGES = 21
_HALF_WIDTH = 4.2  #: reach of the log-normal classes, in standard deviations of the logarithm


@dataclass(frozen=True, eq=False)
class SizeDistribution:
    """Size classes of an ore, each with one size.

    Attributes
    ----------
    size_mm : ndarray, shape (c,)
        Size of each class [mm]; for classes between sieves the geometric mean of the two.
    mass_share : ndarray, shape (c,)
        Share of the mass; sums to 1.
    metal_share : ndarray, shape (c,)
        Share of the metal; sums to 1. The mass share where no assays by size are given.
    edges_mm : ndarray, shape (c + 1,), or None
        Edges of the classes in the order of the classes, where they are known.

    Raises
    ------
    InputProblems
        If a size is not above zero, a share is negative, or shares do not sum to 1 within 1e-6.

    Examples
    --------
    >>> ore = SizeDistribution.from_classes([12.5, 9.5, 6.7], [0.4, 0.6])
    >>> ore.size_mm.round(3).tolist()
    [10.897, 7.978]
    """

    size_mm: Array
    mass_share: Array
    metal_share: Array = field(default_factory=lambda: np.empty(0))
    edges_mm: Array | None = None

    def __post_init__(self) -> None:
        size = _positive("size_mm", self.size_mm)
        mass = _shares("mass_share", self.mass_share, size.size)
        given = np.asarray(self.metal_share, dtype=float)
        metal = _shares("metal_share", given, size.size) if given.size else mass
        object.__setattr__(self, "size_mm", size)
        object.__setattr__(self, "mass_share", mass)
        object.__setattr__(self, "metal_share", metal)
        if self.edges_mm is not None:
            edges = np.asarray(self.edges_mm, dtype=float)
            if edges.shape != (size.size + 1,):
                raise argument_error(
                    "edges_mm",
                    f"{edges.size} edges for {size.size} classes",
                    f"{size.size + 1} edges",
                )
            object.__setattr__(self, "edges_mm", edges)

    @property
    def classes(self) -> int:
        """Number of classes."""
        return int(self.size_mm.size)

    @property
    def mass_mean_mm(self) -> float:
        """Mean size by mass [mm]."""
        return float(self.mass_share @ self.size_mm)

    @property
    def p80_mm(self) -> float | None:
        """Size that 80 % of the mass passes [mm], linear in the logarithms of size and passing.

        None where the edges of the classes are not known, or where 80 % lies in the finest class.
        """
        if self.edges_mm is None:
            return None
        down = bool(self.edges_mm[0] > self.edges_mm[-1])
        edges = self.edges_mm[::-1] if down else self.edges_mm
        mass = self.mass_share[::-1] if down else self.mass_share
        passing = np.minimum(np.concatenate([[0.0], np.cumsum(mass)]), 1.0)
        above = int(np.searchsorted(passing, 0.8))
        if edges[above] == edges[above - 1] or passing[above - 1] <= 0.0:
            return None
        logs = np.interp(
            np.log(0.8),
            np.log(passing[above - 1 : above + 1]),
            np.log(edges[above - 1 : above + 1]),
        )
        return float(np.exp(logs))

    @classmethod
    def single(cls, size_mm: float) -> SizeDistribution:
        """Return one class of one size [mm]."""
        return cls(np.array([size_mm], dtype=float), np.ones(1))

    @classmethod
    def from_classes(
        cls, edges_mm: ArrayLike, mass_share: ArrayLike, metal_share: ArrayLike | None = None
    ) -> SizeDistribution:
        """Return classes between edges, each at the geometric mean of its two edges.

        Parameters
        ----------
        edges_mm : array_like, shape (c + 1,)
            Edges [mm], coarse to fine or fine to coarse. Two equal edges at the fine end make
            a class at that size.
        mass_share : array_like, shape (c,)
        metal_share : array_like, shape (c,), optional
            The mass share where left out.
        """
        edges = _edges(edges_mm)
        mass = np.asarray(mass_share, dtype=float)
        if mass.size != edges.size - 1:
            raise argument_error(
                "mass_share",
                f"{mass.size} shares for {edges.size} edges",
                f"{edges.size - 1} shares, one for each pair of neighbouring edges",
            )
        metal = np.empty(0) if metal_share is None else np.asarray(metal_share, dtype=float)
        return cls(np.sqrt(edges[:-1] * edges[1:]), mass, metal, edges)

    @classmethod
    def from_sieves(
        cls,
        aperture_mm: ArrayLike,
        retained_g: ArrayLike,
        grade: ArrayLike | None = None,
        pan_mm: float | None = None,
    ) -> SizeDistribution:
        """Return the classes of a sieve table.

        Parameters
        ----------
        aperture_mm : array_like, shape (k,)
            Apertures [mm], in either direction; the pan may be written as aperture 0.
        retained_g : array_like, shape (k,) or (k + 1,)
            Mass that stays on each sieve [g]. One number more than apertures is the pan, at the
            fine end.
        grade : array_like, same shape as retained_g, optional
            Metal assay of each fraction, any unit.
        pan_mm : float, optional
            Size given to what passes the finest sieve; the finest aperture where left out, which
            is on the slow side.

        Raises
        ------
        InputProblems
            If something stays on the coarsest sieve: its size has no upper end.
        """
        aperture = np.asarray(aperture_mm, dtype=float)
        mass = np.asarray(retained_g, dtype=float)
        assay = np.ones_like(mass) if grade is None else np.asarray(grade, dtype=float)
        aperture, mass, assay = _coarse_to_fine(aperture, mass, assay)
        _check_sieves(aperture, mass, assay)
        upper, lower = aperture[:-1], aperture[1:]
        lower = np.where(lower > 0.0, lower, upper)
        size = np.sqrt(upper * lower)
        if aperture[-1] == 0.0 and pan_mm is not None:
            size[-1] = pan_mm
            lower[-1] = min(pan_mm, lower[-1])
        kept, assay = mass[1:], assay[1:]
        metal = kept * assay
        if metal.sum() <= 0.0:
            raise argument_error("grade", "no metal in any fraction", "at least one above 0")
        edges = np.concatenate([upper[:1], lower])
        return cls(size, kept / kept.sum(), metal / metal.sum(), edges)

    @classmethod
    def gates_gaudin_schuhmann(
        cls, top_mm: float, slope: float, edges_mm: ArrayLike | None = None
    ) -> SizeDistribution:
        """Return the classes of passing = (size / top)^slope.

        Parameters
        ----------
        top_mm : float
            Size that everything passes [mm].
        slope : float
            Above 0.
        edges_mm : array_like, optional
            Edges from the top size down; from the sieve series where left out. What is finer
            than the last edge is a class at that edge.
        """
        _one_positive("top_mm", top_mm)
        _one_positive("slope", slope)
        edges = _edges(default_edges(top_mm) if edges_mm is None else edges_mm)
        passing = np.minimum(np.sort(edges)[::-1] / top_mm, 1.0) ** slope
        return _from_passing(edges, passing)

    @classmethod
    def rosin_rammler(
        cls, d63_mm: float, slope: float, edges_mm: ArrayLike | None = None
    ) -> SizeDistribution:
        """Return the classes of passing = 1 - exp(-(size / d63)^slope).

        Parameters
        ----------
        d63_mm : float
            Size that 63.2 % passes [mm].
        slope : float
            Above 0.
        edges_mm : array_like, optional
            As in :meth:`gates_gaudin_schuhmann`. Up to 1 % above the top edge joins the top class.
        """
        _one_positive("d63_mm", d63_mm)
        _one_positive("slope", slope)
        top = d63_mm * np.log(1.0 / _TAIL_ABOVE**1.5) ** (1.0 / slope)
        edges = _edges(default_edges(float(top)) if edges_mm is None else edges_mm)
        passing = -np.expm1(-((np.sort(edges)[::-1] / d63_mm) ** slope))
        return _from_passing(edges, passing)

    @classmethod
    def log_normal(cls, median_mm: float, cv: float, classes: int = 15) -> SizeDistribution:
        """Return classes of a log-normal distribution by mass, evenly spaced in log size.

        Parameters
        ----------
        median_mm : float
            Size that half of the mass passes [mm].
        cv : float
            Standard deviation over mean, above 0. The mean is median * sqrt(1 + cv^2).
        classes : int
            At least 5.
        """
        _one_positive("median_mm", median_mm)
        _one_positive("cv", cv)
        if classes < 5:
            raise argument_error("classes", str(classes), "at least 5")
        spread = np.sqrt(np.log1p(cv**2))
        deviate = np.linspace(-_HALF_WIDTH, _HALF_WIDTH, classes)
        share = np.exp(-0.5 * deviate**2)
        share = share / share.sum()
        size = np.exp(spread * deviate)
        mean = np.sqrt(1.0 + cv**2)  # keep the mean exact: the reach of the classes is finite
        return cls(median_mm * size * (mean / (share @ size)), share)


def default_edges(top_mm: float) -> Array:
    """Return class edges [mm] from a top size down through the standard sieve series.

    Steps down by a quarter or more, at most 21 edges; below the finest sieve by the same ratio.
    """
    _one_positive("top_mm", top_mm)
    series = sorted(row.number("aperture_mm") for row in read_table("sieve_series").rows)[::-1]
    edges = [float(top_mm)]
    for aperture in series:
        if aperture <= _EDGE_RATIO * edges[-1] and len(edges) < _DEFAULT_EDGES:
            edges.append(aperture)
    while len(edges) < _DEFAULT_EDGES:
        edges.append(_EDGE_RATIO * edges[-1])
    return np.array(edges)


def _from_passing(edges: Array, passing: Array) -> SizeDistribution:
    """Classes between edges in falling order of passing, and one at the last edge for the rest."""
    falling = np.sort(edges)[::-1]
    if passing[0] < 1.0 - _TAIL_ABOVE:
        raise argument_error(
            "edges_mm",
            f"{100 * (1 - passing[0]):.1f} % of the mass is coarser than the top edge",
            f"at most {100 * _TAIL_ABOVE:.0f} %",
            "add a coarser edge",
        )
    passing = np.concatenate([[1.0], passing[1:], [0.0]])
    closed = np.concatenate([falling, falling[-1:]])
    size = np.sqrt(closed[:-1] * closed[1:])
    share = passing[:-1] - passing[1:]
    return SizeDistribution(size, share / share.sum(), edges_mm=closed)


def _coarse_to_fine(aperture: Array, mass: Array, assay: Array) -> tuple[Array, Array, Array]:
    """Put a sieve table in falling order with the pan, if there is one, as aperture 0."""
    if mass.shape != assay.shape:
        raise argument_error(
            "grade", f"{assay.size} assays for {mass.size} masses", f"{mass.size} assays"
        )
    rising = aperture.size > 1 and bool(aperture[0] < aperture[-1])
    if mass.size == aperture.size + 1:
        aperture = np.insert(aperture, 0, 0.0) if rising else np.append(aperture, 0.0)
    if mass.size != aperture.size:
        raise argument_error(
            "retained_g",
            f"{mass.size} masses for {aperture.size} apertures",
            "one mass for each sieve, and one more for the pan",
        )
    return (aperture[::-1], mass[::-1], assay[::-1]) if rising else (aperture, mass, assay)


def _check_sieves(aperture: Array, mass: Array, assay: Array) -> None:
    for name, values in (("aperture_mm", aperture), ("retained_g", mass), ("grade", assay)):
        if not np.all(np.isfinite(values)) or np.any(values < 0.0):
            raise argument_error(name, f"{values.tolist()}", "finite numbers, none below 0")
    if aperture.size < 2 or np.any(np.diff(aperture) >= 0.0):
        raise argument_error(
            "aperture_mm", f"{aperture.tolist()}", "two or more apertures in one direction"
        )
    if mass[0] > 0.0:
        raise argument_error(
            "retained_g",
            f"{mass[0]:g} g stays on the coarsest sieve, {aperture[0]:g} mm",
            "0 g on the coarsest sieve",
            "add a coarser sieve that everything passes, with 0 g on it",
        )
    if mass.sum() <= 0.0:
        raise argument_error("retained_g", "0 g in all", "some mass")


def _edges(edges_mm: ArrayLike) -> Array:
    edges = np.asarray(edges_mm, dtype=float)
    steps = np.diff(edges) if edges.ndim == 1 else np.empty(0)
    one_way = bool(np.all(steps < 0.0) or np.all(steps > 0.0))
    if edges.ndim != 1 or edges.size < 2 or not one_way:
        raise argument_error("edges_mm", f"{edges.tolist()}", "two or more edges in one direction")
    return _positive("edges_mm", edges)


def _positive(name: str, values: ArrayLike) -> Array:
    array = np.array(values, dtype=float)
    if array.ndim != 1 or array.size == 0 or not np.all(np.isfinite(array)) or np.any(array <= 0):
        raise argument_error(name, f"{array.tolist()}", "a list of finite sizes above 0 mm")
    return array


def _one_positive(name: str, value: float) -> None:
    if not np.isfinite(value) or value <= 0.0:
        raise argument_error(name, f"{value}", "a finite number above 0")


def _shares(name: str, values: ArrayLike, classes: int) -> Array:
    array = np.array(values, dtype=float)
    if array.shape != (classes,):
        raise argument_error(name, f"{array.size} shares for {classes} sizes", f"{classes} shares")
    if not np.all(np.isfinite(array)) or np.any(array < 0.0):
        raise argument_error(name, f"{array.tolist()}", "finite shares, none below 0")
    total = float(array.sum())
    if abs(total - 1.0) > SUM_TOLERANCE:
        raise argument_error(
            name,
            f"shares sum to {total:.6g}",
            f"1 within {SUM_TOLERANCE:g}",
            "give fractions of the whole, not percent, and include every class",
        )
    return array / total
