"""The air: speed of sound and density from temperature, humidity and pressure."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from resonate.errors import ResonateError

if TYPE_CHECKING:
    from resonate.scene.model import WorldSpec

# ISO 9613-1:1993, sections 4 and 6.2 and annex B.
REFERENCE_TEMPERATURE_K = 293.15
REFERENCE_SPEED_M_S = 343.2
REFERENCE_PRESSURE_PA = 101_325.0
TRIPLE_POINT_K = 273.16

GAS_CONSTANT_J_MOLK = 8.314462618  # CODATA 2018
DRY_AIR_KG_MOL = 0.0289652  # CIPM-2007 formula for the density of moist air
WATER_KG_MOL = 0.01801528


@dataclass(frozen=True, slots=True)
class Air:
    """Still, uniform air: ``speed_m_s`` of sound and ``density_kg_m3``."""

    speed_m_s: float
    density_kg_m3: float

    def __post_init__(self) -> None:
        """Check that it can carry sound."""
        if not (self.speed_m_s > 0.0 and self.density_kg_m3 > 0.0):
            raise ResonateError(
                what=f"air with {self.speed_m_s} m/s and {self.density_kg_m3} kg/m3",
                where="[world]",
                fix="give a temperature above absolute zero and a positive pressure",
            )

    @classmethod
    def of(cls, world: WorldSpec) -> Air:
        """Air of a scene's ``[world]`` (temperature, relative humidity as a fraction, pressure)."""
        return cls(
            speed_m_s=speed_of_sound_m_s(world.temperature_k),
            density_kg_m3=density_kg_m3(
                world.temperature_k, humidity=world.humidity, pressure_pa=world.pressure_pa
            ),
        )


def speed_of_sound_m_s(temperature_k: float) -> float:
    """Speed of sound at ``temperature_k``, after ISO 9613-1:1993, equation (A.5)."""
    return float(REFERENCE_SPEED_M_S * (temperature_k / REFERENCE_TEMPERATURE_K) ** 0.5)


def saturation_pressure_pa(temperature_k: float) -> float:
    """Saturation pressure of water vapour, after ISO 9613-1:1993, equations (B.2) and (B.3)."""
    exponent = -6.8346 * (TRIPLE_POINT_K / temperature_k) ** 1.261 + 4.6151
    return float(REFERENCE_PRESSURE_PA * 10.0**exponent)


def density_kg_m3(temperature_k: float, *, humidity: float, pressure_pa: float) -> float:
    """Density of moist air as a mixture of two ideal gases.

    Parameters
    ----------
    temperature_k : float
        Temperature, K.
    humidity : float
        Relative humidity as a fraction, 0 to 1.
    pressure_pa : float
        Total pressure, Pa.

    Returns
    -------
    float
        Density, kg/m^3 (1.204 for dry air at 20 degrees Celsius and 101 325 Pa).
    """
    vapour_pa = min(humidity * saturation_pressure_pa(temperature_k), pressure_pa)
    mass_pressure = (pressure_pa - vapour_pa) * DRY_AIR_KG_MOL + vapour_pa * WATER_KG_MOL
    return mass_pressure / (GAS_CONSTANT_J_MOLK * temperature_k)
