"""Lines of dipoles against the oscillating sphere and cylinder."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import h2vp, hankel2

from resonate.errors import BodyError


def sphere(air_model, radius, wavenumber):
    """One slice that stands for a sphere: displaced plus half of that as added volume, moving along y."""
    volume = 1.5 * 4.0 / 3.0 * np.pi * radius**3
    return air_model.line(np.zeros((1, 3)), np.full((1, 3), volume), np.array([[0.0, 1.0, 0.0]]), wavenumber)


@pytest.mark.parametrize("angle", [0.0, 0.8, 2.5])
def test_small_sphere_at_low_frequency(air_model, angle):
    # Landau & Lifshitz, Fluid Mechanics, section 74: p = rho a^3 cos(angle) (dA/dt) / (2 c r) far away.
    air, radius, wavenumber, far = air_model.air, 0.02, 0.5, 400.0
    place = far * np.array([np.sin(angle), np.cos(angle), 0.0])
    weight = sphere(air_model, radius, wavenumber).weights(place, far)[0]
    jerk = 1j * wavenumber * air.speed_m_s
    law = air.density_kg_m3 * radius**3 * np.cos(angle) * jerk / (2.0 * air.speed_m_s * far)
    # What is left is the near field, 1 / (k r) = 5e-3, in quadrature.
    assert abs(weight - law) < 6e-3 * abs(law)


@pytest.mark.parametrize("distance", [0.06, 0.3, 2.0])
def test_sphere_near_and_far(air_model, distance):
    # Oscillating sphere, exact (Morse & Ingard, Theoretical Acoustics, section 7.2; Koss & Alfredson,
    # J. Sound Vib. 27 (1973) 59): p = rho A cos a^3 (1 + jkr) e^{-jk(r-a)} / (r^2 (2 + 2jka - (ka)^2)).
    air, radius, wavenumber = air_model.air, 0.01, 4.0
    weight = sphere(air_model, radius, wavenumber).weights(np.array([0.0, distance, 0.0]), 0.0)[0]
    ka, kr = wavenumber * radius, wavenumber * distance
    exact = air.density_kg_m3 * radius**3 * (1.0 + 1j * kr) * np.exp(-1j * (kr - ka))
    exact /= distance**2 * (2.0 + 2j * ka - ka**2)
    # A compact dipole leaves out terms of order (ka)^2 = 1.6e-3.
    assert abs(weight - exact) < 2e-3 * abs(exact)


def test_long_cylinder_shaken_across(air_model):
    # Rigid cylinder, velocity u = 1/(jw) for an acceleration of one: p = rho c u j H1(kr) cos / H1'(ka), the
    # outgoing solution for exp(+jwt) (Morse & Ingard, section 7.3; Junger & Feit, chapter 6). Displaced plus added
    # volume of a slice: 2 pi a^2 dx (Lamb, Hydrodynamics, section 68).
    air, radius, wavenumber, distance = air_model.air, 0.01, 10.0, 0.5
    x = np.linspace(-60.0, 60.0, 6001)
    # The motion fades slowly towards the ends, so that they do not radiate.
    fade = np.cos(0.5 * np.pi * np.clip((np.abs(x) - 10.0) / 50.0, 0.0, 1.0)) ** 2
    points = np.stack((x, np.zeros_like(x), np.zeros_like(x)), axis=1)
    motion = np.outer(fade, [0.0, 1.0, 0.0])
    volumes = np.full((len(x), 3), 2.0 * np.pi * radius**2 * (x[1] - x[0]))
    transfer = air_model.line(points, volumes, motion, wavenumber)
    weight = transfer.weights(np.array([0.0, distance, 0.0]), 0.0)[0]
    speed = 1.0 / (1j * wavenumber * air.speed_m_s)
    exact = -1j * air.density_kg_m3 * air.speed_m_s * speed
    exact *= hankel2(1, wavenumber * distance) / h2vp(1, wavenumber * radius)
    # Compactness: (ka)^2 ln(1/ka) = 2.5e-2 at most.
    assert abs(weight - exact) < 2.5e-2 * abs(exact)


def test_no_sound_at_right_angles(air_model):
    transfer = sphere(air_model, 0.01, 5.0)
    assert abs(transfer.weights(np.array([1.0, 0.0, 0.0]), 1.0)[0]) < 1e-18


def test_spherical_spreading(air_model):
    # 6.0206 dB for each doubling of the distance, far from the source.
    transfer = sphere(air_model, 0.01, 200.0)
    near, far = (abs(transfer.weights(np.array([0.0, r, 0.0]), r)[0]) for r in (10.0, 20.0))
    np.testing.assert_allclose(20.0 * np.log10(near / far), 6.0206, atol=1e-4)


def test_the_reference_distance_only_turns_the_phase(air_model):
    transfer = sphere(air_model, 0.01, 7.0)
    place = np.array([0.1, 0.8, 0.2])
    plain = transfer.weights(place, 0.0)[0]
    # Phases are good to 1e-7.
    np.testing.assert_allclose(transfer.weights(place, 0.5)[0], plain * np.exp(3.5j), rtol=3e-7)


def test_a_microphone_inside_the_body_is_refused(air_model):
    x = np.linspace(0.0, 0.3, 61)
    points = np.stack((x, np.zeros_like(x), np.zeros_like(x)), axis=1)
    skin = np.concatenate([points + np.array([0.0, y, z]) for y in (-0.015, 0.015) for z in (-0.02, 0.02)])
    volumes = np.full((len(x), 3), 1e-6)
    transfer = air_model.line(points, volumes, np.ones((len(x), 3)), 5.0, surface=skin)
    with pytest.raises(BodyError, match=r"(?s)closer than 0\.025 m.*move the microphone"):
        transfer.weights(np.array([0.15, 0.01, 0.0]), 1.0)
    assert np.isfinite(transfer.weights(np.array([0.15, 0.05, 0.0]), 1.0)[0])
