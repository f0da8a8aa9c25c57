"""Thermal constants of a material, as thermoelastic loss needs them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from resonate.scene.model import MaterialSpec


@dataclass(frozen=True, slots=True)
class Heat:
    """``per_pascal``: alpha^2 T0/(rho cp), 1/Pa, so that E times it is the relaxation strength (Zener 1938).

    ``diffusivity_m2_s``: kappa/(rho cp).
    """

    per_pascal: float
    diffusivity_m2_s: float

    @classmethod
    def of(cls, material: MaterialSpec, temperature_k: float) -> Heat | None:
        """Constants of a material, or None where one of them is not known."""
        expansion, conductivity = material.expansion_1_k, material.conductivity_w_mk
        capacity = material.specific_heat_j_kgk
        if not expansion or not conductivity or not capacity:
            return None
        volume = material.density_kg_m3 * capacity
        return cls(expansion**2 * temperature_k / volume, conductivity / volume)
