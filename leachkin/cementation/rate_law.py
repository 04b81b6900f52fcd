"""A rate law with its constants: what is left after a contact, and the contact for a share left."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from leachkin.cementation.rate_laws import rate_form
from leachkin.chemistry import check_temperature
from leachkin.constants import STANDARD_TEMPERATURE_K, GAS_CONSTANT_J_per_mol_K
from leachkin.problems import argument_error

Array = NDArray[np.float64]

_S_PER_H = 3600.0
#: Share of the way to the smallest share left that counts as reached.
_HALVINGS = 80
_LONGEST_THETA = 1e3


@dataclass(frozen=True)
class CementationLaw:
    """A law with its constants; every one may be an array of draws, shape B.

    Attributes
    ----------
    name : str
    k : ndarray, shape B
        At the reference; 1/h, or m/s where areas were known.
    unit : str
        "1/h" or "m/s".
    shapes : mapping of str to ndarray, shape B
    reference_temperature_K : float
    activation_energy_kJ_per_mol : ndarray, shape B
        0 where one temperature was tested.
    reference_rpm : float or None
    stirring_power : ndarray, shape B
    temperature_range_K : tuple of float
        Coldest and warmest test.
    """

    name: str
    k: Array
    unit: str = "1/h"
    shapes: Mapping[str, Array] = field(default_factory=dict)
    reference_temperature_K: float = STANDARD_TEMPERATURE_K
    activation_energy_kJ_per_mol: Array = field(default_factory=lambda: np.zeros(()))
    reference_rpm: float | None = None
    stirring_power: Array = field(default_factory=lambda: np.zeros(()))
    temperature_range_K: tuple[float, float] = (STANDARD_TEMPERATURE_K, STANDARD_TEMPERATURE_K)

    @property
    def by_area(self) -> bool:
        """True where k is a velocity, to be multiplied by area over volume."""
        return self.unit == "m/s"

    def rate_per_h(
        self,
        temperature_K: float | None = None,
        stirring_rpm: float | None = None,
        area_m2_per_m3: ArrayLike | None = None,
    ) -> Array:
        """Return k at given conditions [1/h], shape B; the reference where one is left out.

        Raises
        ------
        InputProblems
            If an area is needed and not given, or given and not needed, or a number has no
            meaning.
        """
        if self.by_area != (area_m2_per_m3 is not None):
            raise argument_error(
                "area_m2_per_m3",
                "no area" if self.by_area else "an area",
                "the area over the volume" if self.by_area else "none: k is in 1/h",
                "fit tests with known areas to carry a rate to another vessel",
            )
        kelvin = self.reference_temperature_K if temperature_K is None else temperature_K
        inverse = 1.0 / check_temperature(kelvin) - 1.0 / self.reference_temperature_K
        energy = 1e3 * np.asarray(self.activation_energy_kJ_per_mol)
        k = self.k * np.exp(-energy / GAS_CONSTANT_J_per_mol_K * inverse)
        if stirring_rpm is not None and self.reference_rpm is not None:
            k = k * (stirring_rpm / self.reference_rpm) ** np.asarray(self.stirring_power)
        if area_m2_per_m3 is None:
            return np.asarray(k)
        area = np.asarray(area_m2_per_m3, dtype=np.float64)
        if not np.all(np.isfinite(area) & (area > 0.0)):
            raise argument_error("area_m2_per_m3", f"{area.min():g} m2/m3", "above 0 m2/m3")
        return np.asarray(_S_PER_H * k * area)

    def left(self, time_h: ArrayLike, **conditions: float) -> Array:
        """Return the share left after a time, shape B + (t,); conditions as :meth:`rate_per_h`."""
        times = np.asarray(time_h, dtype=np.float64)
        k = np.expand_dims(self.rate_per_h(**conditions), tuple(range(-times.ndim, 0)))
        wide = {
            name: np.expand_dims(v, tuple(range(-times.ndim, 0))) for name, v in self.shapes.items()
        }
        return rate_form(self.name).left(k * times, wide)[0]

    def contact_h(self, share_left: float, **conditions: float) -> Array:
        """Return the contact that leaves a share, shape B; infinite where it is never reached.

        Raises
        ------
        InputProblems
            If the share is not above 0 and below 1.
        """
        if not 0.0 < share_left < 1.0:
            raise argument_error("share_left", f"{share_left}", "above 0 and below 1")
        theta = self._theta_at(share_left)
        return np.asarray(theta / self.rate_per_h(**conditions))

    def best_contact_h(self, **conditions: float) -> tuple[Array, Array]:
        """Return the contact at which least is left, and that share; infinite without such one."""
        theta, least = self._lowest()
        return np.asarray(theta / self.rate_per_h(**conditions)), least

    def _share(self, theta: Array) -> Array:
        return rate_form(self.name).left(theta, self.shapes)[0]

    def _lowest(self) -> tuple[Array, Array]:
        """Clock reading at which least is left, and the share there."""
        shape = np.broadcast_shapes(self.k.shape, *(v.shape for v in self.shapes.values()))
        if "fade" not in self.shapes:
            endless = np.full(shape, np.inf)
            return endless, self._share(np.full(shape, _LONGEST_THETA))
        form = rate_form(self.name)
        low, high = np.full(shape, 1e-9), np.full(shape, _LONGEST_THETA)
        for _ in range(_HALVINGS):
            middle = np.sqrt(low * high)
            falling = form.left(middle, self.shapes)[1] < 0.0
            low, high = np.where(falling, middle, low), np.where(falling, high, middle)
        return high, self._share(high)

    def _theta_at(self, share_left: float) -> Array:
        """Clock reading at which a share is left, on the falling part."""
        turning, least = self._lowest()
        end = np.where(np.isfinite(turning), turning, _LONGEST_THETA)
        low, high = np.zeros(end.shape), end
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            above = self._share(middle) > share_left
            low, high = np.where(above, middle, low), np.where(above, high, middle)
        return np.where(least < share_left, high, np.inf)
