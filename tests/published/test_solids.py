"""Blocks, balls and cylinders at their default mesh against exact and published frequencies."""

from __future__ import annotations

import numpy as np
import pytest

from resonate.body.build import build_body
from resonate.body.elastic import mass, stiffness, stiffness_law
from resonate.body.solid_grid import ball_grid, block_grid
from resonate.modes.solve import solve_modes
from resonate.scene.model import BallShape, BlockShape, MaterialSpec
from resonate.scene.read import parse_scene

STEEL = "material = {density = 7850, young = 200e9, poisson = 0.3, loss = 1e-3}"
BANDS = 'modes = {heard = "20 kHz", solved = "1000 kHz", most = 30}'


def build(body: str):
    """The one body of a scene text."""
    scene = parse_scene(f'title = "check"\n[take]\nlength = "1 s"\n[[body]]\nname = "sample"\n{body}')
    return build_body(scene.bodies[0])


def solved(body: str, *, bands: str = BANDS):
    """Its modes at the default mesh."""
    return solve_modes(build(f"{body}\n{bands}"))


def unit(poisson: float) -> str:
    """A material of unit shear speed times 1000 m/s: shear 1 GPa, density 1000 kg/m^3."""
    return f"material = {{density = 1000, young = {2e9 * (1 + poisson)}, poisson = {poisson}, loss = 1e-3}}"


def spread(rows) -> np.ndarray:
    """Each value as often as it is degenerate."""
    return np.repeat([row[0] for row in rows], [row[1] for row in rows])


def splits(hz: np.ndarray, rows) -> float:
    """Largest relative width of a multiplet."""
    ends = np.cumsum([row[1] for row in rows])
    return max(float(np.ptp(hz[end - row[1] : end]) / hz[end - 1]) for row, end in zip(rows, ends, strict=True))


# omega L/c_s and degeneracy of a free cube: the method of Demarest, J. Acoust. Soc. Am. 49 (1971) 768, recomputed with
# Legendre polynomials of degree 16 (nu = 0.3) and 14 (nu = 0.2).
CUBES = {
    0.3: [(2.8560472, 2), (3.8459722, 3), (3.9112514, 3), (4.4428829, 3), (4.5727813, 3), (4.7925646, 3),
          (5.4256492, 2), (5.5107254, 3), (5.5147561, 1), (5.6484855, 3)],
    0.2: [(2.85564, 2), (3.816767, 3), (3.90275, 3), (4.302199, 3), (4.442883, 3), (4.654792, 3), (5.08981, 2),
          (5.458444, 1), (5.503849, 3), (5.540477, 3)],
}  # fmt: skip


@pytest.mark.parametrize("poisson", CUBES)
def test_a_cube_and_its_multiplets(poisson):
    modes = solved(f'shape = "block"\nsize = [0.1, 0.1, 0.1]\n{unit(poisson)}')

    expected = spread(CUBES[poisson]) * 1000.0 / 0.1
    error = modes.omega[: len(expected)] / expected - 1.0
    print(f"cube nu={poisson}: worst {np.abs(error).max():.1e}, multiplets {splits(modes.omega, CUBES[poisson]):.1e}")
    # The tables have seven digits; one mesh for all of these modes.
    assert np.abs(error).max() < 1e-3
    assert np.abs(error[:12]).max() < 5e-4
    assert splits(modes.omega, CUBES[poisson]) < 1e-4
    assert modes.rigid.shape[1] == 6


def test_the_exact_shear_mode_of_lame():
    # omega = pi sqrt(2) c_s/L for any Poisson ratio (Lame 1852; Mindlin 1956).
    for poisson in (0.0, 0.3, 0.45):
        modes = solved(f'shape = "block"\nsize = [0.1, 0.1, 0.1]\n{unit(poisson)}')
        exact = np.pi * np.sqrt(2.0) * 1e4
        assert np.sum(np.abs(modes.omega / exact - 1.0) < 5e-4) >= 3


# Resonances of a free block, Hz: Demarest (1971), Ohno, J. Phys. Earth 24 (1976) 355 and Visscher, Migliori, Bell &
# Reinert, J. Acoust. Soc. Am. 90 (1991) 2154, recomputed with Legendre polynomials of degree 14.
BLOCK = [32234.474, 40725.41, 47902.265, 56853.27, 60240.969, 61330.1, 63387.841, 66644.403, 69242.703, 72239.936]


def test_a_steel_block():
    modes = solved(f'shape = "block"\nsize = ["40 mm", "30 mm", "20 mm"]\n{STEEL}')

    error = modes.frequency_hz[:10] / np.array(BLOCK) - 1.0
    print(f"block: worst {np.abs(error).max():.1e}")
    assert np.abs(error).max() < 2e-3


# omega a/c_s of a free ball: torsional l = 2, 3, 4 do not depend on nu; spheroidal ones do. Lamb, Proc. London Math.
# Soc. 13 (1882) 189; Sato & Usami, Geophys. Mag. 31 (1962) 15; recomputed from the frequency equations.
BALLS = {
    0.25: [(2.5011326204, 5), (2.6398692779, 5), (3.424529732, 3), (3.8646997782, 7), (3.9163370211, 7),
           (4.4399982124, 1)],
    0.3: [(2.5011326204, 5), (2.6462170349, 5), (3.5299873006, 3), (3.8646997782, 7), (3.9374012889, 7),
          (4.9955143404, 1)],
}  # fmt: skip


@pytest.mark.slow
@pytest.mark.parametrize("poisson", BALLS)
def test_a_ball_and_its_multiplets(poisson):
    rows = BALLS[poisson][:5]
    modes = solved(f'shape = "ball"\ndiameter = 0.2\n{unit(poisson)}', bands=BANDS.replace("30", "60"))

    expected = spread(rows) * 1e4
    error = modes.omega[: len(expected)] / expected - 1.0
    print(f"ball nu={poisson}: worst {np.abs(error).max():.1e}, multiplets {splits(modes.omega, rows):.1e}")
    assert np.abs(error).max() < 3e-3
    assert splits(modes.omega, rows) < 1e-4
    # Breathing: alone among its neighbours, with one radial motion.
    breathing = BALLS[poisson][5][0] * 1e4
    assert np.min(np.abs(modes.omega / breathing - 1.0)) < 3e-3
    assert modes.rigid.shape[1] == 6


def test_a_steel_ball_cannot_be_heard_to_ring():
    # 50 mm, E = 208 GPa: torsion at 50830.8 Hz, five times; the football at 53779.4 Hz (as above).
    body = f'shape = "ball"\ndiameter = "50 mm"\n{STEEL.replace("200e9", "208e9")}'
    modes = solved(body, bands='modes = {heard = "20 kHz", solved = "56 kHz"}')

    np.testing.assert_allclose(modes.frequency_hz, [50830.8074] * 5 + [53779.3748] * 5, rtol=1e-3)
    assert modes.heard == 0
    assert any("will not ring" in warning for warning in modes.warnings)


# omega R/c_s and degeneracy of a free cylinder as long as it is wide: Hutchinson, J. Appl. Mech. 47 (1980) 901; Leissa &
# So, J. Acoust. Soc. Am. 98 (1995) 2122; recomputed with Legendre polynomials of degree 14.
STOUT = [(1.570796, 1), (1.978403, 2), (1.993805, 2), (2.15106, 2), (2.326302, 1), (2.338033, 2), (2.487814, 2),
         (2.801518, 2), (2.871784, 1), (3.067142, 1), (3.081332, 2)]  # fmt: skip
# Hz, 20 mm by 60 mm of steel, the same way.
ROD = [(20172.72, 2), (26086.29, 1), (41791.75, 1), (43517.89, 2), (52172.57, 1), (68650.6, 2)]


def test_a_stout_cylinder():
    modes = solved(f'shape = "cylinder"\nlength = 0.2\ndiameter = 0.2\n{unit(0.3)}')

    expected = spread(STOUT) * 1e4
    error = modes.omega[: len(expected)] / expected - 1.0
    print(f"cylinder: worst {np.abs(error).max():.1e}, multiplets {splits(modes.omega, STOUT):.1e}")
    assert np.abs(error).max() < 2e-3
    assert splits(modes.omega, STOUT) < 1e-4


def test_a_rod_like_cylinder():
    modes = solved(f'shape = "cylinder"\nlength = "60 mm"\ndiameter = "20 mm"\n{STEEL}')

    expected = spread(ROD)
    error = modes.frequency_hz[: len(expected)] / expected - 1.0
    print(f"rod: worst {np.abs(error).max():.1e}, multiplets {splits(modes.frequency_hz, ROD):.1e}")
    assert np.abs(error).max() < 2e-3
    assert splits(modes.frequency_hz, ROD) < 1e-4


# NAFEMS R0015 (1987) test FV52 with motion along y zero all over the edge faces. Its printed target, 45.897 Hz, is a
# hard-support plate formula; these are three-dimensional Ritz values of degree 16 (upper bounds).
FV52 = [44.17902, 107.3251, 107.3251, 163.1204, 193.6486, 203.2971, 203.6521, 206.7716]


def test_a_thick_plate_held_at_its_edge_faces():
    body = (
        'shape = "block"\nsize = [10, 1, 10]\n'
        "material = {density = 8000, young = 200e9, poisson = 0.3, loss = 1e-3}\n"
        'support = [{where = ["x-", "x+", "z-", "z+"], hold = {fix = ["y"]}}]'
    )
    modes = solved(body)

    # Three motions in its own plane are left.
    assert modes.rigid.shape[1] == 3
    error = modes.frequency_hz[:8] / np.array(FV52) - 1.0
    print(f"FV52: worst {np.abs(error).max():.1e}")
    assert np.abs(error).max() < 5e-3


def first(grid, poisson: float) -> float:
    """Lowest elastic omega for unit density and shear modulus."""
    from scipy.sparse.linalg import eigsh

    material = MaterialSpec.model_validate({"density": 1.0, "young": 2.0 * (1.0 + poisson), "poisson": poisson})
    at = grid.quadrature()
    value = eigsh(
        stiffness(grid, at, stiffness_law(material)).tocsc(), 8, mass(grid, at, 1.0).tocsc(), sigma=-1.0,
        return_eigenvectors=False, v0=np.ones(3 * len(grid.nodes_m)),
    )  # fmt: skip
    return float(np.sqrt(np.sort(value)[6]))


@pytest.mark.parametrize(
    ("name", "make", "exact", "orders"),
    [
        ("cube", lambda order: block_grid(BlockShape(size_m=(1, 1, 1)), np.ones(3), order), 2.8560472, (2, 3, 4)),
        ("ball", lambda order: ball_grid(BallShape(diameter_m=2), 4.0, order), 2.5011326204, (2, 3, 4)),
    ],
)
def test_the_error_falls_faster_than_any_power_with_the_order(name, make, exact, orders):
    errors = [abs(first(make(order), 0.3) / exact - 1.0) for order in orders]

    rate = [np.log(a / b) / np.log(q / p) for a, b, p, q in zip(errors, errors[1:], orders, orders[1:], strict=False)]
    print(f"{name}: errors {errors}, power of the order {rate}")
    assert errors[2] < 0.5 * errors[1] < 0.25 * errors[0]
    assert errors[-1] < 5e-3


def test_quadratic_elements_converge_as_the_fourth_power_of_their_size():
    # Strang & Fix, An Analysis of the Finite Element Method (1973), ch. 6: frequencies err as size^(2 order).
    errors = [
        first(block_grid(BlockShape(size_m=(1, 1, 1)), np.full(3, 1.0 / count), 2), 0.3) / 2.8560472 - 1.0
        for count in (4, 8)
    ]
    order = float(np.log2(errors[0] / errors[1]))
    print(f"observed order {order:.2f}")
    assert 3.5 < order < 4.7


def test_mass_and_inertia():
    d, (a, b, c) = 7850.0, (0.04, 0.03, 0.02)
    block = build(f'shape = "block"\nsize = [{a}, {b}, {c}]\n{STEEL}').inertia
    total = d * a * b * c
    np.testing.assert_allclose(block.mass_kg, total, rtol=1e-12)
    np.testing.assert_allclose(np.diag(block.tensor) * 12 / total, [b * b + c * c, a * a + c * c, a * a + b * b])
    ball = build(f'shape = "ball"\ndiameter = 0.05\n{STEEL}').inertia
    total = d * np.pi / 6 * 0.05**3
    # The curved surface is met at its nodes; between them order 6 is off by a few parts in 10 million.
    np.testing.assert_allclose(ball.mass_kg, total, rtol=1e-6)
    np.testing.assert_allclose(ball.tensor, 0.4 * total * 0.025**2 * np.eye(3), rtol=1e-6, atol=1e-12)
    tube = build(f'shape = "cylinder"\nlength = 0.06\ndiameter = 0.05\nbore = 0.03\n{STEEL}').inertia
    total, square = d * np.pi / 4 * (0.05**2 - 0.03**2) * 0.06, 0.025**2 + 0.015**2
    np.testing.assert_allclose(tube.mass_kg, total, rtol=1e-6)
    across = total * (square / 4 + 0.06**2 / 12)
    np.testing.assert_allclose(np.diag(tube.tensor), [total * square / 2, across, across], rtol=1e-6)
    np.testing.assert_allclose(tube.centre_m, 0.0, atol=1e-12)
