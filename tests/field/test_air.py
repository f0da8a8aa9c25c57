"""The air against ISO 9613-1 and handbook values."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from resonate.errors import ResonateError
from resonate.field.air import Air, density_kg_m3, saturation_pressure_pa, speed_of_sound_m_s

# ISO 9613-1:1993, c = 343.2 sqrt(T / 293.15); degrees Celsius, m/s.
ISO_SPEED = [(0.0, 331.28588), (15.0, 340.26058), (20.0, 343.2), (30.0, 349.00457)]


@pytest.mark.parametrize(("celsius", "speed"), ISO_SPEED)
def test_speed_of_sound_is_that_of_the_standard(celsius, speed):
    # The table has eight digits.
    np.testing.assert_allclose(speed_of_sound_m_s(celsius + 273.15), speed, rtol=2e-8)


def test_dry_air_has_the_handbook_density():
    # 1.204 kg/m^3 at 20 degrees and 1 atm; 1.2929 at 0 degrees (CRC Handbook, both from memory), where air is
    # 0.05 % denser than an ideal gas.
    np.testing.assert_allclose(density_kg_m3(293.15, humidity=0.0, pressure_pa=101325.0), 1.204, atol=5e-4)
    np.testing.assert_allclose(density_kg_m3(273.15, humidity=0.0, pressure_pa=101325.0), 1.2929, rtol=1e-3)


def test_moist_air_has_the_density_of_the_weighing_formula():
    # CIPM-2007 (Picard et al., Metrologia 45 (2008) 149): 20 degrees, 50 %, 101 325 Pa, about 1.1992 kg/m^3
    # (value from memory). That formula includes 0.04 % compressibility, which an ideal gas has not.
    np.testing.assert_allclose(density_kg_m3(293.15, humidity=0.5, pressure_pa=101325.0), 1.1992, rtol=1e-3)


def test_saturation_pressure_is_that_of_steam_tables():
    # Steam tables: 2.339 kPa at 20 degrees, 12.35 kPa at 50 degrees (from memory). ISO 9613-1 claims a fit
    # for -20 to 50 degrees.
    np.testing.assert_allclose(saturation_pressure_pa(293.15), 2339.0, rtol=5e-3)
    np.testing.assert_allclose(saturation_pressure_pa(323.15), 12350.0, rtol=2e-2)


def test_air_of_a_world():
    world = SimpleNamespace(temperature_k=293.15, humidity=0.0, pressure_pa=101325.0)
    air = Air.of(world)
    np.testing.assert_allclose([air.speed_m_s, air.density_kg_m3], [343.2, 1.2041], rtol=1e-4)


def test_air_without_density_is_refused():
    with pytest.raises(ResonateError, match="positive pressure"):
        Air(speed_m_s=343.2, density_kg_m3=0.0)
