"""Solids from files, filled with quadratic tetrahedra at their default size, against the same exact frequencies."""

from __future__ import annotations

from itertools import product
from math import factorial

import numpy as np
import pytest
import trimesh

from resonate.body import tetra
from resonate.body.build import build_body
from resonate.modes.solve import solve_modes
from resonate.scene.model import SpotSpec
from resonate.scene.read import parse_scene

STEEL = "material = {density = 7850, young = 200e9, poisson = 0.3, loss = 1e-3}"


def built(folder, mesh, *, bands: str):
    """A body of a surface in millimetres."""
    pytest.importorskip("netgen", reason="the mesher is not on every platform")
    mesh.export(folder / "kedge.stl")
    scene = parse_scene(
        f'[take]\nlength = "1 s"\n[[body]]\nname = "kedge"\nshape = "solid"\nfile = "kedge.stl"\nunit = "mm"\n'
        f"{STEEL}\nmodes = {bands}\n",
        where=str(folder / "deck.toml"),
    )
    return build_body(scene.bodies[0])


# As in test_solids.py: Demarest (1971), Ohno (1976), Visscher et al. (1991), Ritz of degree 14.
BLOCK = [32234.474, 40725.41, 47902.265, 56853.27, 60240.969, 61330.1, 63387.841, 66644.403, 69242.703, 72239.936]


@pytest.mark.slow
def test_a_block(tmp_path):
    body = built(tmp_path, trimesh.creation.box((40, 30, 20)), bands='{solved = "80 kHz"}')
    modes = solve_modes(body)

    error = modes.frequency_hz[:10] / np.array(BLOCK) - 1.0
    print(f"block of tetrahedra: worst {np.abs(error).max():.1e}, {body.freedoms} freedoms")
    assert np.abs(error).max() < 5e-3
    assert modes.rigid.shape[1] == 6
    # A polyhedron is filled exactly.
    np.testing.assert_allclose(body.inertia.mass_kg, 7850 * 24e-6, rtol=1e-6)
    np.testing.assert_allclose(body.inertia.centre_m, 0.0, atol=1e-7)


@pytest.mark.slow
def test_a_ball_and_its_spots(tmp_path):
    # Lamb (1882): 2.50113 (5) and 2.64622 (5) times c_s/a, as in test_solids.py.
    body = built(tmp_path, trimesh.creation.icosphere(subdivisions=4, radius=50.0), bands='{solved = "30 kHz"}')
    modes = solve_modes(body)

    expected = np.repeat([2.5011326204, 2.6462170349], 5) * np.sqrt(200e9 / 2.6 / 7850) / 0.05 / (2 * np.pi)
    error = modes.frequency_hz[:10] / expected - 1.0
    split = max(float(np.ptp(modes.frequency_hz[k : k + 5]) / modes.frequency_hz[k]) for k in (0, 5))
    print(f"ball of tetrahedra: worst {np.abs(error).max():.1e}, split {split:.1e}, {body.freedoms} freedoms")
    assert np.abs(error).max() < 5e-3
    # A mesh without the symmetry of the ball: pairs of an unstructured mesh split.
    assert split < 2e-3
    # 5120 flat faces hold 0.3 % less than the ball.
    np.testing.assert_allclose(body.inertia.mass_kg, 7850 * np.pi / 6 * 1e-3, rtol=5e-3)
    spot = body.spot(SpotSpec(toward=(1.0, 2.0, -1.0)))
    np.testing.assert_allclose(np.linalg.norm(spot.point_m), 0.05, rtol=3e-3)
    np.testing.assert_allclose(spot.normal, spot.point_m / 0.05, atol=0.05)
    np.testing.assert_allclose(spot.curvature_1_m, [20.0, 20.0], rtol=0.05)


def test_the_rule_is_exact_to_degree_five():
    # integral of x^a y^b z^c over the unit simplex: a! b! c!/(a + b + c + 3)! (Stroud 1971, ch. 7).
    points, weights = tetra._rule()
    for a, b, c in product(range(6), repeat=3):
        if a + b + c <= 5:
            found = weights @ (points[:, 0] ** a * points[:, 1] ** b * points[:, 2] ** c)
            exact = factorial(a) * factorial(b) * factorial(c) / factorial(a + b + c + 3)
            np.testing.assert_allclose(found, exact, rtol=1e-12, atol=1e-17)
