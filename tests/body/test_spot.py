"""Spots lie on the body, face outward and move as the body does."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from resonate.errors import BodyError
from resonate.scene.model import SpotSpec
from tests.body import exact
from tests.body.samples import EVERY, FREE, LINES, PLATES, SKINS, STEEL, build, inside, rigid

LENGTH = {"tube": 0.5, "string": 0.6}
ROUND = {"rod": 0.01, "tube": 0.0125, "string": 0.0005}
INNER = {"tube": 0.011}
ON_LINES = [*LINES, "string"]
ON_FLATS = [*PLATES, *SKINS]
THICK = {name: 0.004 if name in PLATES else 2e-4 for name in ON_FLATS}


def outline(name):
    """The sample outline of a flat body."""
    return {"wooden plate": "rectangle", "wooden disc": "circle"}.get(name, name.removesuffix(" plate").removesuffix(" skin"))


def half_sizes(name, x):
    """Half height and half width of a sample bar at x."""
    rows = exact.PROFILES.get(name, [(0.0, 0.012, 0.03), (1.0, 0.012, 0.03)])
    table = np.array(rows)
    # At a step the later row holds, so that a nudge to the right tells it.
    at = x / 0.4 + 1e-12
    return 0.5 * np.interp(at, table[:, 0] + 1e-15 * np.arange(len(table)), table[:, 1]), 0.5 * np.interp(
        at, table[:, 0] + 1e-15 * np.arange(len(table)), table[:, 2]
    )


def depth(name, points):
    """How far (k,) points lie outside a sample body, m; negative inside. Exact signed distance on straight bars."""
    points = np.atleast_2d(points)
    if name in ROUND:
        across = np.hypot(points[:, 1], points[:, 2])
        sides = np.maximum(across - ROUND[name], INNER.get(name, -1.0) - across)
        ends = np.maximum(-points[:, 0], points[:, 0] - LENGTH.get(name, 0.4))
        return np.maximum(sides, ends)
    if name in LINES:
        up, wide = half_sizes(name, np.clip(points[:, 0], 0.0, 0.4))
        ends = np.maximum(-points[:, 0], points[:, 0] - 0.4)
        return np.max([np.abs(points[:, 1]) - up, np.abs(points[:, 2]) - wide, ends], axis=0)
    over = np.abs(points[:, 1]) - THICK[name] / 2
    return np.maximum(over, exact.signed(outline(name), points[:, [0, 2]]))


def check(name, spot):
    """On the surface, with a unit normal that leaves the body."""
    size = 0.5
    assert abs(depth(name, spot.point_m)[0]) < 1e-8 * size
    assert_allclose(np.linalg.norm(spot.normal), 1.0, rtol=1e-12)
    step = 1e-6
    assert depth(name, spot.point_m + step * spot.normal)[0] > 0.9 * step
    assert depth(name, spot.point_m - step * spot.normal)[0] < 1e-8 * size
    assert spot.thickness_m > 0.0


def named(name):
    if name in ON_LINES:
        return ("left", "centre", "right")
    return ("outer", "inner", "edge") if outline(name) == "ring" else ("centre", "edge")


@pytest.mark.parametrize("name", [name for name in EVERY if name != "wedge"])
def test_named_spots_lie_on_the_body(name):
    body = build(EVERY[name])
    for spot in named(name):
        check(name, body.spot(SpotSpec(name=spot)))


@pytest.mark.parametrize("name", [name for name in EVERY if name != "wedge"])
@pytest.mark.parametrize("toward", [(0, 1, 0), (0, -1, 0), (1, 0, 0), (-0.6, 0.01, 0.3), (0.2, -0.1, -0.9)])
def test_spots_toward_a_direction_lie_on_the_body(name, toward):
    body = build(EVERY[name])

    spot = body.spot(SpotSpec(toward=toward))

    check(name, spot)
    if name in ROUND or name in ("bar", "wooden bar"):
        # Where the ray from the mass centre leaves the body; on a tube it leaves the bore for the wall at an end.
        ray = spot.point_m - body.inertia.centre_m
        if name != "tube":
            assert_allclose(np.cross(ray, toward), 0.0, atol=1e-9)
        assert ray @ toward > 0.0


def test_named_spots_stand_where_they_are_said_to():
    assert_allclose(build(EVERY["bar"]).spot(SpotSpec(name="centre")).point_m, [0.2, 0.006, 0.0])
    assert_allclose(build(EVERY["rod"]).spot(SpotSpec(name="left")).point_m, [0.0, 0.01, 0.0], atol=1e-15)
    assert_allclose(build(EVERY["bar"]).spot(SpotSpec(fraction=(0.25, 1.0))).point_m, [0.1, 0.006, 0.015])
    assert_allclose(build(EVERY["rod"]).spot(SpotSpec(fraction=(0.25, 0.75))).point_m, [0.1, 0.0, 0.01], atol=1e-15)
    disc, plate = build(EVERY["circle plate"]), build(EVERY["rectangle plate"])
    assert_allclose(disc.spot(SpotSpec(name="edge")).point_m, [0.95 * 0.15, 0.002, 0.0], atol=1e-12)
    assert_allclose(disc.spot(SpotSpec(fraction=(0.5, 0.25))).point_m, [0.0, 0.002, 0.075], atol=1e-12)
    assert_allclose(plate.spot(SpotSpec(fraction=(0.25, 1.0))).point_m, [-0.1, 0.002, 0.125], atol=1e-12)
    assert_allclose(plate.spot(SpotSpec(name="centre")).point_m, [0.0, 0.002, 0.0], atol=1e-12)
    ring = build(EVERY["ring plate"])
    assert_allclose(ring.spot(SpotSpec(name="inner")).point_m, [0.06 + 0.05 * 0.09, 0.002, 0.0], atol=1e-12)


def test_curvatures_of_round_and_flat_spots():
    # Of a cylinder 1/R round it and none along it.
    assert build(EVERY["rod"]).spot(SpotSpec(name="centre")).curvature_1_m == pytest.approx((0.0, 100.0))
    assert build(EVERY["bar"]).spot(SpotSpec(name="centre")).curvature_1_m == (0.0, 0.0)


def test_stiffness_under_a_spot_is_that_of_the_way_it_faces():
    # Spruce: E1 along x (its ends), E2 along z (its sides), E3 along y (its faces).
    body = build(EVERY["wooden bar"])
    faced = {(0.2, 0.006, 0.0): 0.5e9, (0.2, 0.0, 0.015): 0.9e9, (0.0, 0.0, 0.0): 11.6e9}
    for point, young in faced.items():
        assert body.spot(SpotSpec(point=point)).young_pa == young
    assert build(EVERY["wooden plate"]).spot(SpotSpec(name="centre")).young_pa == 0.5e9
    assert build(EVERY["circle skin"]).spot(SpotSpec(name="centre")).young_pa == np.inf


coordinate = st.floats(-1.0, 1.0)


@pytest.mark.parametrize("name", ["bar", "rod", "tube", "undercut bar", "kite plate", "angle plate", "ring plate", "circle skin"])
@settings(max_examples=60, deadline=None)
@given(u=coordinate, v=coordinate, w=coordinate)
def test_points_near_the_body_land_on_it(name, u, v, w):
    body = build(EVERY[name])
    low, high = body.surface.points_m.min(axis=0), body.surface.points_m.max(axis=0)
    size = float((high - low).max())
    point = 0.5 * (low + high) + 0.55 * (high - low) * [u, v, w]
    far = depth(name, point)[0]

    try:
        spot = body.spot(SpotSpec(point=tuple(point.tolist())))
    except BodyError:
        assert far > 0.03 * size
        return
    check(name, spot)
    if far > 0.0 and name in ("bar", "rod"):
        # No point of the surface is nearer: the gaps along each way add up as in a box or cylinder.
        gaps = gap(name, point)
        assert np.linalg.norm(spot.point_m - point) <= gaps + 1e-9


def gap(name, point):
    """Distance of a point outside a straight bar or rod."""
    x = max(-point[0], point[0] - 0.4, 0.0)
    if name == "rod":
        return np.hypot(x, max(np.hypot(point[1], point[2]) - 0.01, 0.0))
    return np.linalg.norm([x, max(abs(point[1]) - 0.006, 0.0), max(abs(point[2]) - 0.015, 0.0)])


OFF = [
    ("bar", (0.2, 0.106, 0.0), 0.1),
    ("rod", (0.5, 0.0, 0.0), 0.1),
    ("tube", (0.25, 0.0, -0.1125), 0.1),
    ("string", (-0.2, 0.0, 0.0), 0.2),
    ("rectangle plate", (0.3, 0.002, 0.0), 0.1),
    ("circle plate", (0.15, 0.002, 0.2), 0.1),
    ("ring plate", (0.0, 0.002, 0.0), 0.06),
    # Nearest to the re-entrant corner.
    ("angle plate", (0.16, 0.0, 0.18), 0.06),
    ("triangle plate", (0.2, 0.002, -0.05), 0.05),
    ("kite skin", (0.3, 0.0001, -0.05), None),
]


@pytest.mark.parametrize(("name", "point", "far"), OFF)
def test_places_off_the_body_are_refused_with_their_distance(name, point, far):
    body = build(EVERY[name])

    with pytest.raises(BodyError) as caught:
        body.spot(SpotSpec(point=point))

    (fault,) = caught.value.faults
    far = exact.signed(outline(name), np.array([[point[0], point[2]]]))[0] if far is None else far
    told = float(fault.what.split(" lies ")[1].split(" m off")[0])
    assert_allclose(told, far, rtol=1e-5)
    assert "sample" in fault.where
    assert fault.fix


@pytest.mark.parametrize("fraction", [(0.9, 0.9), (0.0, 1.0)])
def test_fractions_outside_an_angular_outline_are_refused(fraction):
    with pytest.raises(BodyError, match="off the body"):
        build(EVERY["angle plate"]).spot(SpotSpec(fraction=fraction)) if fraction == (0.9, 0.9) else build(
            EVERY["triangle plate"]
        ).spot(SpotSpec(fraction=fraction))


@pytest.mark.parametrize("name", FREE)
def test_points_of_a_rigid_body_move_as_it_does(name):
    # v + w x r at every material point, on the surface and within.
    body = build(FREE[name])
    generator = np.random.default_rng(7)
    points = inside(body, generator, 30)
    spots = [body.spot(SpotSpec(name=spot)).point_m for spot in named(name)]
    points = np.concatenate((points, spots))
    speed, spin, centre = generator.normal(size=(3, 3))

    moved = (body.probe(points) @ rigid(body, centre_m=centre) @ np.concatenate((speed, spin))).reshape(-1, 3)

    assert_allclose(moved, speed + np.cross(spin, points - centre), atol=1e-11)


@pytest.mark.parametrize("name", FREE)
def test_sections_of_a_rigid_body_turn_as_it_does(name):
    body = build(FREE[name])
    spin = np.array([0.3, -0.7, 1.1])

    turned = body.turn(body.inertia.centre_m) @ rigid(body)[:, 3:] @ spin

    assert_allclose(turned, spin, atol=1e-9)


def test_a_steel_wedge_has_an_edge_and_no_flat_end():
    body = build(EVERY["wedge"])

    spot = body.spot(SpotSpec(name="right"))

    # Its height there is nothing; the point is still on it.
    assert_allclose(spot.point_m, [0.4, 0.0, 0.0], atol=1e-12)
    assert STEEL in EVERY["wedge"]
