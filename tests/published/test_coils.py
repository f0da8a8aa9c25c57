"""Coils against published frequencies, the classical surge formula and the classical spring rate."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.sparse.linalg import spsolve

from resonate.errors import SceneError
from tests.body.samples import build, read
from tests.published.scenes import solve

CLAMPED = 'support = [{where = ["left", "right"], hold = "clamped"}]\n'


def coil(wire, diameter, turns, pitch, material, more=""):
    return (
        f'shape = "coil"\nwire = {wire}\ndiameter = {diameter}\nturns = {turns}\npitch = {pitch}\n'
        f"material = {{{material}, loss = 1e-3}}\n{more}"
    )


SLOPE = np.tan(np.radians(8.5744))
SMALL = "density = 7900, young = 2.06e11, poisson = 0.3"
# Yildirim, Int. J. Numer. Meth. Eng. 39 (1996) 99, transfer matrices with shear and rotary inertia, for the spring
# that Mottershead, Int. J. Mech. Sci. 22 (1980) 267, measured (391, 391, 459, 528, 878, 878, 906, 1037, 1282, 1386 Hz);
# both tables from memory. The wire runs 7.6 turns of 10 mm diameter, 1 mm thick, at a slope of 8.5744 degrees.
PUBLISHED_HZ = [393.5, 395.9, 462.8, 525.5, 864.0, 876.9, 914.3, 1037.0, 1310.5, 1363.8]
MEASURED_HZ = [391, 391, 459, 528, 878, 878, 906, 1037, 1282, 1386]


def test_the_ten_first_modes_of_the_benchmark_spring():
    hz = solve(coil(1e-3, 10e-3, 7.6, np.pi * 10e-3 * SLOPE, SMALL, CLAMPED)).hz[:10]

    # The table has four digits, and its author's shear coefficient is not known.
    assert_allclose(hz, PUBLISHED_HZ, rtol=1.5e-3)
    assert_allclose(hz, MEASURED_HZ, rtol=2.5e-2)


def test_twice_the_elements_change_nothing():
    text = coil(1e-3, 10e-3, 7.6, np.pi * 10e-3 * SLOPE, SMALL, CLAMPED)
    few, many = (solve(f"{text}modes = {{most = {most}}}\n").hz[:12] for most in (20, 120))

    assert_allclose(few, many, rtol=1e-6)


@pytest.mark.parametrize(("wire", "diameter", "turns"), [(2e-3, 20e-3, 20), (1e-3, 16e-3, 30)])
def test_the_surge_of_a_long_coil_clamped_at_both_ends(wire, diameter, turns):
    # f = d/(2 pi D^2 n) sqrt(G/(2 rho)): Wahl, Mechanical Springs (1963), ch. 25; half a wave of surge between the ends.
    shear, density = 79e9, 7850.0
    young = 2.6 * shear
    text = coil(wire, diameter, turns, 2.0 * wire, f"density = {density}, young = {young}, poisson = 0.3", CLAMPED)
    body = build(text)
    from resonate.modes.solve import solve_modes

    modes = solve_modes(body)
    # The surge moves the wire along the axis: pick the first mode of which most moves along x.
    moved = np.asarray(body.probe(body.radiator.points_m) @ modes.shape[:, :12]).reshape(-1, 3, 12)
    along = (moved[:, 0] ** 2).sum(axis=0) / (moved**2).sum(axis=(0, 1))
    hz = modes.frequency_hz[int(np.argmax(along > 0.8))]

    # Wahl's formula takes pure twist in a flat helix: slope and curvature are second order, here up to 0.5 %.
    assert_allclose(hz, wire / (2 * np.pi * diameter**2 * turns) * np.sqrt(shear / (2 * density)), rtol=5e-3)


def test_the_rate_of_a_flat_coil():
    # k = G d^4/(8 D^3 n): Wahl, Mechanical Springs (1963), ch. 5, twist alone. With bending and stretch at this slope
    # (Love, sec. 271): k^-1 = L (R^2 cos^2/GJ + R^2 sin^2/EI) to first order, which differs by 0.1 %.
    wire, diameter, turns, pitch, shear = 1e-3, 30e-3, 12, 3e-3, 79e9
    text = coil(
        wire, diameter, turns, pitch, f"density = 7850, young = {2.6 * shear}, poisson = 0.3",
        'support = [{where = "left", hold = "clamped"}, {where = "right", hold = {fix = ["y", "z", "rx", "ry", "rz"]}}]\n',
    )  # fmt: skip
    body = build(text)
    forms = body.forms()
    end = body.layout.helix.place(np.array([body.layout.helix.length_m]))
    pull = np.asarray((body.motion(end)[0] @ forms.basis).todense()).ravel()

    give = float(pull @ spsolve(forms.stiffness.tocsc(), pull))

    assert_allclose(1.0 / give, shear * wire**4 / (8 * diameter**3 * turns), rtol=3e-3)


FREE = coil(1e-3, 12e-3, 6.3, 4e-3, "density = 7850, young = 200e9, poisson = 0.3")


def test_motion_as_a_whole_costs_nothing_and_carries_the_whole_mass():
    body = build(FREE)
    forms, whole = body.forms(), np.zeros((body.freedoms, 6))
    nodes = body.layout.helix.place(body.grid.nodes_m[:, 0]) - body.inertia.centre_m
    for axis in range(3):
        whole[axis::6, axis] = 1.0
        turned = np.cross(np.eye(3)[axis], nodes)
        for other in range(3):
            whole[other::6, 3 + axis] = turned[:, other]
        whole[3 + axis :: 6, 3 + axis] = 1.0
    cost = np.abs(whole.T @ (forms.stiffness @ whole)).max() / np.abs(forms.stiffness.diagonal()).max()
    mass = whole.T @ (forms.mass @ whole)

    assert cost < 1e-14
    assert_allclose(mass[:3, :3], body.inertia.mass_kg * np.eye(3), rtol=1e-9, atol=1e-9 * body.inertia.mass_kg)
    scale = np.abs(body.inertia.tensor).max()
    assert_allclose(mass[3:, 3:], body.inertia.tensor, atol=1e-6 * scale)
    # Mass of a wire: density x section x arc length.
    arc = 6.3 * np.hypot(np.pi * 12e-3, 4e-3)
    assert_allclose(body.inertia.mass_kg, 7850 * np.pi / 4 * 1e-6 * arc, rtol=1e-9)
    assert solve(FREE).rigid == 6


def test_the_display_mesh_is_closed_and_faces_outwards():
    body = build(FREE)
    corners = body.surface.points_m[body.surface.triangles]
    area = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    volume = np.einsum("ti,ti->", corners[:, 0], area) / 6.0

    assert np.abs(area.sum(axis=0)).max() < 1e-9 * np.abs(area).sum()
    # A wire of ten sides has 0.935 of the section, and chords cut its bends.
    assert_allclose(volume, 0.935 * body.inertia.mass_kg / 7850, rtol=4e-2)
    assert (np.einsum("ni,ni->n", body.surface.normals[body.surface.triangles[:, 0]], area) > 0).mean() > 0.99


SPOTS = ['"centre"', '"left"', '"right"', "{fraction = [0.3, 0.25]}", "{point = [0.004, 0.0065, 0]}", "{toward = [0, 1, 0]}"]


@pytest.mark.parametrize("spot", SPOTS)
def test_spots_lie_on_the_wire(spot):
    from resonate.scene.read import parse_scene

    scene = parse_scene(
        f'[take]\nlength = "1 s"\n[[body]]\nname = "coil"\n{FREE}[[strike]]\ntime = 0\nspot = {spot}\n'
        'striker = "cork"\nspeed = 1\n'
    )
    found = build(FREE).spot(scene.strikes[0].spot)
    helix = build(FREE).layout.helix
    far = np.linalg.norm(found.point_m - helix.place(helix.nearest(found.point_m[None]))[0])

    assert_allclose(far, 0.5e-3, rtol=1e-9)
    assert_allclose(np.linalg.norm(found.normal), 1.0)


@pytest.mark.parametrize(
    ("old", "new", "what"),
    [
        ("wire = 0.001", "wire = 0.007", "a wire of 0.007 m"),
        ("pitch = 0.004", "pitch = 0.001", "touch"),
        ("turns = 6.3", "turns = 1e9", "out of range"),
    ],
)
def test_coils_that_cannot_be_wound_are_refused(old, new, what):
    with pytest.raises(SceneError, match=what):
        read(FREE.replace(old, new))
