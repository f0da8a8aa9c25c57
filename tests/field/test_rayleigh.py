"""Baffled faces against the closed forms for pistons and supported panels."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import j1

from resonate.errors import BodyError


@pytest.mark.parametrize("wavenumber", [2.0, 30.0, 120.0])
def test_piston_on_its_axis(air_model, wavenumber):
    # Kinsler & Frey, Fundamentals of Acoustics 4th ed., eq. (7.4.5): |p| = 2 rho c u |sin(k/2 (sqrt(r^2+a^2) - r))|;
    # Pierce, Acoustics, eq. (5-7.3).
    air, radius = air_model.air, 0.1
    points, areas = air_model.disc(radius, 120)
    transfer = air_model.face(points, areas, np.ones(len(points)), wavenumber)
    speed = 1.0 / (wavenumber * air.speed_m_s)  # velocity amplitude at an acceleration of 1 m/s^2
    for distance in (0.04, 0.15, 0.6):
        got = abs(transfer.weights(np.array([0.0, distance, 0.0]), 0.0)[0])
        path = np.hypot(distance, radius) - distance
        exact = 2.0 * air.density_kg_m3 * air.speed_m_s * speed * abs(np.sin(0.5 * wavenumber * path))
        # Midpoint sums: (k step)^2 / 24 = 4e-4 at most, and more near the nulls, hence the floor.
        scale = 2.0 * air.density_kg_m3 * air.speed_m_s * speed
        np.testing.assert_allclose(got, exact, rtol=1e-3, atol=1e-3 * scale)


# Directivity 2 J1(x) / x with x = k a sin(angle), Kinsler & Frey eq. (7.4.17): x and level re axis.
PISTON = [(1.613741196, -3.0), (2.211785445, -6.0), (5.135622302, -17.57015)]


@pytest.mark.parametrize(("x", "level_db"), PISTON)
def test_piston_directivity(air_model, x, level_db):
    level = _piston_level(air_model, x)
    # 0.005 dB: midpoint sum and a distance of 2000 radii.
    np.testing.assert_allclose(20.0 * np.log10(level), level_db, atol=0.005)
    np.testing.assert_allclose(level, abs(2.0 * j1(x) / x), rtol=5e-4)


def test_piston_null(air_model):
    # First zero of J1: 3.8317059702 (Abramowitz & Stegun, table 9.5).
    assert _piston_level(air_model, 3.8317059702) < 1e-3


def _piston_level(air_model, x):
    radius, wavenumber = 0.1, 80.0
    points, areas = air_model.disc(radius, 80)
    transfer = air_model.face(points, areas, np.ones(len(points)), wavenumber)
    sine = x / (wavenumber * radius)
    side = 200.0 * np.array([sine, np.sqrt(1.0 - sine**2), 0.0])
    front = np.array([0.0, 200.0, 0.0])
    return abs(transfer.weights(side, 200.0)[0]) / abs(transfer.weights(front, 200.0)[0])


def panel(air_model, orders, sides, wavenumber, per_half_wave=40):
    """Transfer of one mode of a simply supported panel whose corner is the origin."""
    counts = [per_half_wave * order for order in orders]
    x, z = ((np.arange(n) + 0.5) / n * side for n, side in zip(counts, sides, strict=True))
    grid_x, grid_z = (each.ravel() for each in np.meshgrid(x, z, indexing="ij"))
    points = np.stack((grid_x, np.zeros_like(grid_x), grid_z), axis=1)
    motion = np.sin(orders[0] * np.pi * grid_x / sides[0]) * np.sin(orders[1] * np.pi * grid_z / sides[1])
    areas = np.full(len(points), sides[0] * sides[1] / len(points))
    return air_model.face(points, areas, motion, wavenumber)


@pytest.mark.parametrize(("orders", "wavenumber"), [((1, 1), 12.0), ((2, 1), 25.0), ((3, 2), 60.0)])
def test_far_field_of_a_supported_panel(air_model, orders, wavenumber):
    # Wallace, Radiation resistance of a rectangular panel, JASA 51 (1972) 946, eq. (6), written for
    # exp(+j w t): p = j k rho c u e^{-jkr} / (2 pi r) * A(alpha) B(beta) with
    # A = a / (m pi) * (1 - (-1)^m e^{j alpha}) / (1 - (alpha / m pi)^2), alpha = k a sin(theta) cos(phi).
    air, sides, far = air_model.air, (0.4, 0.3), 5000.0
    transfer = panel(air_model, orders, sides, wavenumber)
    for theta, phi in [(0.2, 0.4), (0.7, 2.0), (1.3, 4.4)]:
        cosines = np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi)
        place = far * np.array([cosines[0], np.cos(theta), cosines[1]])
        factor = 1.0 + 0.0j
        for order, side, cosine in zip(orders, sides, cosines, strict=True):
            angle = wavenumber * side * cosine
            ends = 1.0 - (-1.0) ** order * np.exp(1j * angle)
            factor *= side / (order * np.pi) * ends / (1.0 - (angle / (order * np.pi)) ** 2)
        # j k rho c u is rho times the acceleration, here one.
        exact = air.density_kg_m3 / (2.0 * np.pi * far) * factor
        got = transfer.weights(place, far)[0]
        # Midpoint sum: (pi / 40)^2 / 24 = 3e-4; distance: k side^2 / (2 far) = 1e-3 rad.
        assert abs(got - exact) < 3e-3 * abs(exact)


# Radiation efficiency of a square panel at gamma = k / k_mn: Wallace (1972), figures 2-5, from the closed form.
WALLACE = [
    ((1, 1), 0.3, 0.1756586),
    ((1, 1), 1.0, 1.129138),
    ((1, 3), 0.6, 0.2106795),
    ((2, 1), 0.3, 0.03776595),
    ((2, 2), 0.6, 0.2799275),
    ((3, 3), 1.5, 1.331907),
]


@pytest.mark.parametrize(("orders", "gamma", "efficiency"), WALLACE)
def test_power_of_a_supported_panel(air_model, orders, gamma, efficiency):
    air, side, far = air_model.air, 0.3, 3000.0
    wavenumber = gamma * np.pi / side * np.hypot(*orders)
    transfer = panel(air_model, orders, (side, side), wavenumber, per_half_wave=24)
    cosines, weights = np.polynomial.legendre.leggauss(16)
    power = 0.0
    turns = 2.0 * np.pi * (np.arange(24) + 0.5) / 24
    for cosine, weight in zip(0.5 * (cosines + 1.0), 0.5 * weights, strict=True):
        sine = np.sqrt(1.0 - cosine**2)
        for turn in turns:
            place = far * np.array([sine * np.cos(turn), cosine, sine * np.sin(turn)])
            power += weight * 2.0 * np.pi / 24 * abs(transfer.weights(place, far)[0]) ** 2
    power *= far**2 / (2.0 * air.density_kg_m3 * air.speed_m_s)
    # rho c S <v^2>; the mean square of the two sines over the panel is 1/4, in time 1/2.
    frequency = wavenumber * air.speed_m_s
    unit = air.density_kg_m3 * air.speed_m_s * side**2 * 0.125 / frequency**2
    np.testing.assert_allclose(power / unit, efficiency, rtol=5e-3)


def test_the_far_side_has_the_opposite_sign(air_model):
    points, areas = air_model.disc(0.1, 20)
    transfer = air_model.face(points, areas, np.ones(len(points)), 10.0)
    front = transfer.weights(np.array([0.2, 0.5, 0.1]), 0.5)
    behind = transfer.weights(np.array([0.2, -0.5, 0.1]), 0.5)
    # Both places are equally far from every sample.
    np.testing.assert_allclose(behind, -front, rtol=1e-13)


def test_a_face_that_moves_outward_pushes(air_model):
    # Near a large face the pressure is rho c u in phase with the velocity; below that, mass-like:
    # in phase with the acceleration (Kinsler & Frey, section 7.5).
    points, areas = air_model.disc(0.1, 60)
    weight = air_model.face(points, areas, np.ones(len(points)), 0.5).weights(
        np.array([0.0, 0.05, 0.0]), 0.05
    )[0]
    assert weight.real > 0.0
    assert abs(weight.imag) < 0.2 * weight.real


def test_only_heard_modes_sound(air_model):
    points, areas = air_model.disc(0.1, 20)
    motion = np.ones((len(points), 3))
    transfer = air_model.face(points, areas, motion, [1.0, 2.0, 3.0], heard=2)
    weights = transfer.weights(np.array([0.0, 1.0, 0.0]), 1.0)
    assert weights.shape == (3,)
    assert weights[2] == 0.0
    assert np.all(weights[:2] != 0.0)


def test_swings_of_the_whole_body_are_silent(air_model):
    points, areas = air_model.disc(0.1, 20)
    motion = np.ones((len(points), 3))
    place = np.array([0.0, 1.0, 0.0])
    weights = air_model.face(points, areas, motion, [1.0, 2.0, 3.0], swing=1).weights(place, 1.0)
    every = air_model.face(points, areas, motion, [1.0, 2.0, 3.0]).weights(place, 1.0)
    assert weights[0] == 0.0
    np.testing.assert_allclose(weights[1:], every[1:], rtol=1e-12)


def test_chunks_do_not_change_the_sum(air_model, monkeypatch):
    points, areas = air_model.disc(0.1, 12)
    motion = np.cos(np.outer(points[:, 0], np.arange(1, 8)))
    place = np.array([0.3, 0.4, 0.1])
    whole = air_model.face(points, areas, motion, np.arange(1.0, 8.0)).weights(place, 0.0)
    monkeypatch.setattr("resonate.field.samples.CHUNK", 2 * len(points))
    parts = air_model.face(points, areas, motion, np.arange(1.0, 8.0)).weights(place, 0.0)
    np.testing.assert_allclose(parts, whole, rtol=1e-12)


def test_a_microphone_on_the_face_is_refused(air_model):
    points, areas = air_model.disc(0.1, 20)
    transfer = air_model.face(points, areas, np.ones(len(points)), 10.0)
    with pytest.raises(BodyError, match=r"(?s)hatch.*fix.*move the microphone"):
        transfer.weights(np.array([0.03, 0.001, 0.02]), 1.0)
