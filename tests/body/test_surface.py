"""The display mesh: closed, wound outward, of the right size, moving with the body."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from tests.body import exact
from tests.body.samples import EVERY, FREE, PLATES, SKINS, build, rigid


def welded(surface):
    """Triangles over places instead of vertices: sharp edges have vertices of their own for every face."""
    # A step is drawn 1e-7 of the length wide, so that nothing coarser may be merged.
    keys = np.round(surface.points_m / 1e-10).astype(np.int64)
    _, number = np.unique(keys, axis=0, return_inverse=True)
    return number.ravel()[surface.triangles]


def area_vectors(surface):
    a, b, c = (surface.points_m[surface.triangles[:, k]] for k in range(3))
    return 0.5 * np.cross(b - a, c - a)


@pytest.mark.parametrize("name", EVERY)
def test_every_side_of_a_triangle_is_met_by_one_other_the_other_way_round(name):
    faces = welded(build(EVERY[name]).surface)

    sides = np.concatenate([faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]])

    # Each directed side once, and its opposite once: closed, without overlap, wound the same way all over.
    there = {tuple(side) for side in sides.tolist()}
    assert len(there) == len(sides)
    assert there == {(b, a) for a, b in there}


@pytest.mark.parametrize("name", EVERY)
def test_the_mesh_closes_and_faces_outward(name):
    surface = build(EVERY[name]).surface
    vectors = area_vectors(surface)
    size = np.linalg.norm(vectors, axis=1)

    # The vector areas of a closed surface add up to nothing.
    assert np.abs(vectors.sum(axis=0)).max() < 1e-9 * size.sum()
    # Outward: a positive volume (divergence theorem).
    middle = surface.points_m[surface.triangles].mean(axis=1)
    assert np.sum(middle * vectors) / 3.0 > 0.0
    assert_allclose(np.linalg.norm(surface.normals, axis=1), 1.0, rtol=1e-12)
    # The normals of the vertices agree with their triangles.
    for corner in range(3):
        assert np.all(np.sum(surface.normals[surface.triangles[:, corner]] * vectors, axis=1) > 0.5 * size)
    assert set(np.unique(surface.triangles)) == set(range(len(surface.points_m)))


def faceted(count):
    """Area of a regular polygon of ``count`` corners as a share of its circle's, and its rim's."""
    turn = np.pi / count
    return np.sin(2.0 * turn) / (2.0 * turn), np.sin(turn) / turn


# Volume and surface area in closed form; tubes are drawn as their outer skin.
ROUND_AREA, ROUND_RIM = faceted(16)
SOLIDS = {
    "bar": (0.4 * 0.03 * 0.012, 2 * (0.4 * 0.03 + 0.4 * 0.012 + 0.03 * 0.012)),
    "rod": (np.pi * 0.01**2 * 0.4 * ROUND_AREA, 2 * np.pi * 0.01 * (0.01 * ROUND_AREA + 0.4 * ROUND_RIM)),
    "tube": (np.pi * 0.0125**2 * 0.5 * ROUND_AREA, 2 * np.pi * 0.0125 * (0.0125 * ROUND_AREA + 0.5 * ROUND_RIM)),
    "wedge": (0.4 * 0.03 * 0.02 / 2, 2 * 0.03 * np.hypot(0.4, 0.01) + 0.4 * 0.02 + 0.03 * 0.02),
    # Steps are drawn over some 1e-7 of the length.
    "undercut bar": (
        0.4 * 0.03 * (0.6 * 0.02 + 0.4 * 0.008),
        2 * 0.4 * 0.03 + 2 * 0.03 * 0.02 + 2 * 2 * 0.03 * 0.006 + 2 * 0.4 * (0.6 * 0.02 + 0.4 * 0.008),
    ),
}


def size_of(surface):
    vectors = area_vectors(surface)
    middle = surface.points_m[surface.triangles].mean(axis=1)
    return np.sum(middle * vectors) / 3.0, np.linalg.norm(vectors, axis=1).sum()


@pytest.mark.parametrize("name", SOLIDS)
def test_lines_are_drawn_to_size(name):
    rtol = 1e-6 if name == "undercut bar" else 1e-9
    assert_allclose(size_of(build(EVERY[name]).surface), SOLIDS[name], rtol=rtol)


def test_a_taper_is_drawn_to_size():
    # A prismatoid of three sections; Simpson's rule, exact to the third degree, on each part.
    volume = exact.along(exact.PROFILES["tapered bar"], 0.4, lambda x, h, w: h * w)

    # Between stations a flat-sided quadrilateral is drawn as two triangles, alternately in and out: 1e-5 of the volume.
    assert_allclose(size_of(build(EVERY["tapered bar"]).surface)[0], volume, rtol=1e-4)


def perimeter(name):
    if name in ("circle", "ring"):
        return 2.0 * np.pi * (0.15 if name == "circle" else 0.15 + 0.06)
    corners = np.array(exact.CORNERS.get(name, [(0, 0), (0.4, 0), (0.4, 0.25), (0, 0.25)]), dtype=float)
    return np.linalg.norm(np.roll(corners, -1, axis=0) - corners, axis=1).sum()


@pytest.mark.parametrize("name", [*PLATES, *SKINS])
def test_flats_are_drawn_to_size(name):
    outline = {"wooden plate": "rectangle", "wooden disc": "circle"}.get(
        name, name.removesuffix(" plate").removesuffix(" skin")
    )
    thick = 0.004 if name in PLATES else 2e-4
    area = exact.outline(outline)[0]
    volume, surface = size_of(build(EVERY[name]).surface)

    # Straight sides are exact; round ones are drawn by chords, short by some 6.6/(chords)^2: 40 or more of them.
    rtol = 5e-3 if outline in ("circle", "ring") else 1e-9
    assert_allclose(volume, area * thick, rtol=rtol)
    assert_allclose(surface, 2 * area + perimeter(outline) * thick, rtol=rtol)


@pytest.mark.parametrize("name", FREE)
def test_the_drawn_body_moves_as_the_rigid_body_does(name):
    body = build(FREE[name])
    points = body.surface.points_m
    speed, spin, centre = np.array([0.3, -1.0, 0.5]), np.array([1.2, 0.4, -0.8]), np.array([0.1, 0.05, -0.2])

    moved = body.probe(points) @ rigid(body, centre_m=centre) @ np.concatenate((speed, spin))

    # Chords of curved rims lie on the drawn polynomial, 1e-10 off the circle.
    assert_allclose(moved.reshape(-1, 3), speed + np.cross(spin, points - centre), atol=1e-8)


@pytest.mark.parametrize("name", [*SKINS, "string"])
def test_held_bodies_stay_where_they_are_held(name):
    body = build(EVERY[name])
    shape = np.asarray(body.forms().basis @ np.random.default_rng(3).normal(size=body.forms().basis.shape[1]))
    if name == "string":
        ends = np.array([[0.0, 0.0, 0.0], [0.6, 0.0, 0.0]])
    else:
        ends = np.concatenate([edge.outward * 0.0 + body.grid.nodes_m[edge.nodes] for edge in body.layout.edges.values()])
        ends = np.stack((ends[:, 0], 0.0 * ends[:, 0], ends[:, 1]), axis=1)

    assert np.abs(body.probe(ends) @ shape).max() < 1e-11 * np.abs(shape).max()


def test_radiating_samples_add_up():
    # Faces: the area. Slices: the volume of the rod and of the air it carries, pi r^2 again a metre across (Lamb,
    # Hydrodynamics, sec. 68), none along.
    plate = build(EVERY["kite plate"]).radiator
    assert plate.kind == "baffled"
    assert_allclose(plate.weights[:, 0].sum(), exact.outline("kite")[0], rtol=1e-12)

    rod = build(EVERY["rod"]).radiator
    volume = np.pi * 0.01**2 * 0.4
    assert rod.kind == "dipoles"
    assert_allclose(rod.weights.sum(axis=0), [volume, 2 * volume, 2 * volume], rtol=1e-12)
