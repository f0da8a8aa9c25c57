"""Vessels: mass, rigid motion, spots, supports, lugs, heat, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from resonate.body.build import build_body
from resonate.errors import BodyError
from resonate.modes.decay import thermoelastic_loss
from resonate.modes.solve import solve_modes
from resonate.scene.model import SpotSpec
from resonate.scene.read import parse_scene

STEEL = "material = {density = 7850, young = 200e9, poisson = 0.3, loss = 1e-3}"
CAN = "profile = [[0, 0], [0.04, 0], [0.04, 0.1]]\nwall = 0.001"
TUBE = "profile = [[0.05, 0], [0.05, 0.12]]\nwall = 0.004"


def build(text: str, *, most: int = 30, material: str = STEEL):
    scene = f'title = "check"\n[take]\nlength = "1 s"\n[[body]]\nname = "pot"\nshape = "vessel"\n{text}\n{material}\n'
    return build_body(parse_scene(f"{scene}modes = {{most = {most}}}\n").bodies[0])


def bowl(radius: float = 0.1, wall: float = 0.002, count: int = 17) -> str:
    polar = np.linspace(0.0, 0.5 * np.pi, count)
    rows = [[abs(float(radius * np.sin(p))), float(radius * (1 - np.cos(p)))] for p in polar]
    return f"profile = {rows}\nwall = {wall}\nsmooth = true"


# Kinks of 15 degrees and a base that meets the axis at a slant; a pointed cap.
FACETS = bowl(count=7).replace("smooth = true", "")
CONE = "profile = [[0, 0.3], [0.2, 0]]\nwall = 0.002"


def test_mass_and_inertia_of_a_tube():
    # Hollow cylinder: elementary closed forms with inner and outer radius.
    outer, inner, length = 0.052, 0.048, 0.12
    mass = 7850 * np.pi * (outer**2 - inner**2) * length
    found = build(TUBE).inertia
    np.testing.assert_allclose(found.mass_kg, mass, rtol=1e-12)
    np.testing.assert_allclose(found.centre_m, [0.0, 0.06, 0.0], atol=1e-12)
    round_y = 0.5 * mass * (outer**2 + inner**2)
    across = mass * ((outer**2 + inner**2) / 4 + length**2 / 12)
    np.testing.assert_allclose(found.tensor, np.diag([across, round_y, across]), rtol=1e-12, atol=1e-12 * mass)


def test_mass_and_inertia_of_a_bowl():
    # Half a hollow sphere: differences of solid half spheres (mass 2 pi r^3/3, centre 3 r/8 below the rim, inertia
    # 2 m r^2/5 about any diameter of the rim). The curve through 33 points is good to 1e-6 of the radius.
    outer, inner = 0.102, 0.098
    weight = [7850 * 2 * np.pi / 3 * radius**3 for radius in (outer, inner)]
    mass = weight[0] - weight[1]
    below = 3 / 8 * (weight[0] * outer - weight[1] * inner) / mass
    about_rim = 2 / 5 * (weight[0] * outer**2 - weight[1] * inner**2)
    found = build(bowl(wall=0.004, count=33)).inertia
    np.testing.assert_allclose(found.mass_kg, mass, rtol=1e-5)
    np.testing.assert_allclose(found.centre_m, [0.0, 0.1 - below, 0.0], atol=1e-6)
    np.testing.assert_allclose(found.tensor[1, 1], about_rim, rtol=1e-5)
    np.testing.assert_allclose(found.tensor[0, 0], about_rim - mass * below**2, rtol=1e-5)


@pytest.mark.parametrize("text", [CAN, TUBE, bowl(), f"{CAN}\nlugs = [{{mass = 0.01, at = [0.7, 0.3]}}]", FACETS, CONE], ids=["can", "tube", "bowl", "lug", "facets", "cone"])
def test_rigid_motions_of_a_free_vessel(text):
    # Six, with the mass properties of the body: M-orthonormal motions span translation and rotation.
    body = build(text)
    modes = solve_modes(body)
    assert modes.rigid.shape[1] == 6
    # Fibres of neighbours cross at a kink, so that only the middle face is told apart there.
    middle = body.layout.nodes.place_m[::5]
    turn = np.arange(len(middle)) * 2.4
    points = np.stack((middle[:, 0] * np.cos(turn), middle[:, 1], middle[:, 0] * np.sin(turn)), axis=1)
    if text not in (FACETS, CONE):
        points = np.concatenate((points, body.surface.points_m[::97]))
    moved = np.asarray(body.probe(points) @ modes.rigid).reshape(len(points), 3, 6)
    arms = points - body.inertia.centre_m
    motions = [np.broadcast_to(push, arms.shape) for push in np.eye(3)] + [np.cross(turn, arms) for turn in np.eye(3)]
    exact = np.stack(motions, axis=2).reshape(-1, 6)
    gain, *_ = np.linalg.lstsq(exact, moved.reshape(-1, 6), rcond=None)
    np.testing.assert_allclose(exact @ gain, moved.reshape(-1, 6), atol=1e-7 * np.abs(moved).max())
    # gain gain^T is the inverse of the mass properties.
    mass = np.zeros((6, 6))
    mass[:3, :3], mass[3:, 3:] = body.inertia.mass_kg * np.eye(3), body.inertia.tensor
    np.testing.assert_allclose(gain @ gain.T @ mass, np.eye(6), atol=1e-6)


def test_pairs_are_equal_on_a_round_vessel_and_split_by_a_lug():
    # First-order perturbation of a degenerate pair by a point mass m: the two new values are those of
    # w^2 (1 - m B^T B), B (3, 2) the motion of the pair there (Rayleigh, Theory of Sound, sections 88-90, 221a).
    mass, at = 1e-4, [0.9, 0.2]
    plain = build(bowl())
    modes = solve_modes(plain)
    pairs = modes.omega[:6].reshape(3, 2)
    assert np.all(np.ptp(pairs, axis=1) <= 1e-12 * pairs[:, 0])
    body = build(f"{bowl()}\nlugs = [{{mass = {mass}, at = {at}}}]")
    split = solve_modes(body).omega[:6].reshape(3, 2)
    place = body._lug_points()
    moved = np.asarray(plain.probe(place) @ modes.shape[:, :6])
    for k in range(3):
        pull = mass * np.linalg.eigvalsh(moved[:, 2 * k : 2 * k + 2].T @ moved[:, 2 * k : 2 * k + 2])
        expected = pairs[k, 0] * np.sqrt(1.0 - np.sort(pull)[::-1])
        # The next order is the square of the share that the lug has in the mode (here below 2 %).
        np.testing.assert_allclose(split[k] / pairs[k, 0] - 1.0, expected / pairs[k, 0] - 1.0, rtol=0.1)
    assert np.all(np.ptp(split, axis=1) > 1e-4 * split[:, 0])


def test_probe_follows_the_angle():
    # The cosine mode of n = 2 turned by 45 degrees is the sine mode: motion outward at theta is cos 2 theta.
    body = build(TUBE)
    modes = solve_modes(body)
    turn = np.linspace(0.0, 2.0 * np.pi, 12, endpoint=False)
    ring = np.stack((0.05 * np.cos(turn), np.full(12, 0.06), 0.05 * np.sin(turn)), axis=1)
    out = np.stack((np.cos(turn), np.zeros(12), np.sin(turn)), axis=1)
    moved = np.asarray(body.probe(ring) @ modes.shape[:, :2]).reshape(12, 3, 2)
    outward = np.einsum("tdm,td->tm", moved, out)
    top = np.sqrt((outward**2).sum(axis=1).max())
    np.testing.assert_allclose((outward**2).sum(axis=1), top**2, rtol=1e-9)
    around = np.stack((-np.sin(turn), np.zeros(12), np.cos(turn)), axis=1)
    # Inextensional: d(round)/d(theta) = -outward, so that round = outward/2 a quarter wave off (Rayleigh, sec. 233).
    sideways = np.einsum("tdm,td->tm", moved, around)
    np.testing.assert_allclose((sideways**2).sum(axis=1), 0.25 * top**2, rtol=2e-3)


def test_spots():
    body = build(CAN)
    base = body.spot(SpotSpec(name="base"))
    np.testing.assert_allclose(base.point_m, [0.0, -0.0005, 0.0], atol=1e-9)
    np.testing.assert_allclose(base.normal, [0.0, -1.0, 0.0], atol=1e-12)
    rim = body.spot(SpotSpec(name="rim"))
    assert 0.09 < rim.point_m[1] < 0.1
    np.testing.assert_allclose(rim.normal, [1.0, 0.0, 0.0], atol=1e-12)
    np.testing.assert_allclose(sorted(rim.curvature_1_m), [0.0, 1 / 0.0405], rtol=1e-12)
    # 0.04 of 0.14 m is the base; half of the side is at 0.05 m.
    side = body.spot(SpotSpec(fraction=(0.09 / 0.14, 0.25)))
    np.testing.assert_allclose(side.point_m, [0.0, 0.05, 0.0405], atol=1e-6)
    inside = body.spot(SpotSpec(point_m=(0.0, 0.05, -0.039)))
    np.testing.assert_allclose(inside.normal, [0.0, 0.0, 1.0], atol=1e-12)
    np.testing.assert_allclose(sorted(inside.curvature_1_m), [-1 / 0.0395, 0.0], rtol=1e-12)
    toward = body.spot(SpotSpec(toward=(-1.0, 0.0, 0.0)))
    np.testing.assert_allclose(toward.point_m[[0, 2]], [-0.0405, 0.0], atol=1e-6)
    np.testing.assert_allclose(toward.normal, [-1.0, 0.0, 0.0], atol=1e-12)
    with pytest.raises(BodyError, match="off the wall"):
        body.spot(SpotSpec(point_m=(0.0, 0.3, 0.0)))


def test_curvature_of_a_bowl_is_that_of_a_sphere():
    body = build(bowl(count=33))
    for share in (0.1, 0.5, 0.9):
        spot = body.spot(SpotSpec(fraction=(share, 0.1)))
        np.testing.assert_allclose(spot.curvature_1_m, [1 / 0.101] * 2, rtol=2e-3)
        np.testing.assert_allclose(np.linalg.norm(spot.point_m - [0.0, 0.1, 0.0]), 0.101, rtol=1e-5)


@pytest.mark.parametrize("text", [CAN, TUBE, bowl(), "profile = [[0, 0], [0.05, 0.05], [0, 0.1]]\nwall = 0.001\nsmooth = true", "profile = [[0, 0.3], [0.2, 0]]\nwall = 0.002"])
def test_display_mesh_is_closed_and_holds_the_volume(text):
    body = build(text)
    mesh = body.surface
    _, number = np.unique(np.round(mesh.points_m, 9), axis=0, return_inverse=True)
    faces = number.ravel()[mesh.triangles]
    faces = faces[(faces[:, 0] != faces[:, 1]) & (faces[:, 1] != faces[:, 2]) & (faces[:, 2] != faces[:, 0])]
    edges = np.concatenate((faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]]))
    code, back = edges[:, 0] * len(number) + edges[:, 1], edges[:, 1] * len(number) + edges[:, 0]
    np.testing.assert_array_equal(np.sort(code), np.sort(back))
    corners = mesh.points_m[mesh.triangles]
    volume = float(np.einsum("ti,ti->", corners[:, 0], np.cross(corners[:, 1], corners[:, 2]))) / 6
    # Facets: 1 - sin(x)/x of the angle between neighbours, and a bevel of the wall at corners.
    np.testing.assert_allclose(volume, body.inertia.mass_kg / 7850, rtol=0.03)
    np.testing.assert_allclose(np.linalg.norm(mesh.normals, axis=1), 1.0)


def test_radiating_patches_cover_the_outside():
    body = build(bowl(count=33))
    np.testing.assert_allclose(body.radiator.weights[:, 0].sum(), 2 * np.pi * 0.101**2, rtol=1e-5)
    # All of it faces down and away from the middle.
    outward = np.einsum("ni,ni->n", body.radiator.normals, body.radiator.points_m - [0.0, 0.1, 0.0])
    np.testing.assert_allclose(outward, 0.101, rtol=1e-4)


def test_rim_clamped_by_name_and_by_box_are_the_same():
    by_name = build(f'{TUBE}\nsupport = [{{where = "base", hold = "clamped"}}]')
    by_box = build(f'{TUBE}\nsupport = [{{where = {{box = [[-1, -0.001, -1], [1, 0, 1]]}}, hold = "clamped"}}]')
    one, two = (solve_modes(body).frequency_hz[:10] for body in (by_name, by_box))
    np.testing.assert_allclose(one, two, rtol=1e-9)


def test_springs_all_round_carry_the_mass():
    # Soft springs of k in all at the rim of a short ring: it bounces along y at sqrt(k/m).
    body = build('profile = [[0.05, 0], [0.05, 0.02]]\nwall = 0.004\nsupport = [{where = "rim", hold = {spring = 1000}}]')
    modes = solve_modes(body)
    wanted = np.sqrt(1000 / body.inertia.mass_kg) / (2 * np.pi)
    assert np.min(np.abs(modes.frequency_hz[:6] / wanted - 1.0)) < 1e-4
    # Springs all round leave the harmonics apart.
    pairs = modes.frequency_hz[6:10].reshape(2, 2)
    np.testing.assert_allclose(pairs[:, 0], pairs[:, 1], rtol=1e-9)


def test_a_point_support_couples_and_splits():
    body = build(f"{TUBE}\nsupport = [{{where = {{point = [0.052, 0.12, 0]}}, hold = {{spring = 1e6}}}}]")
    hertz = solve_modes(body).frequency_hz
    bent = hertz[hertz > 700.0][:2]
    assert bent[1] - bent[0] > 1e-3 * bent[0]


def test_thermoelastic_loss_of_a_thin_tube_is_that_of_a_plate():
    # Zener's bending loss in a wall: eta = strength x/(1 + x^2) times the share of bending that heats; for a flat
    # plate in cylindrical bending with free edges it is E alpha^2 T/(rho c) (1 + nu)/(1 - nu) (Lifshitz & Roukes give
    # the beam). Rayleigh's modes of a tube bend round the axis alone.
    hot = "material = {density = 8500, young = 100e9, poisson = 0.35, loss = 1e-9, expansion = 20e-6, conductivity = 120, specific_heat = 380}"
    body = build("profile = [[0.05, 0], [0.05, 0.3]]\nwall = 0.001", material=hot)
    modes = solve_modes(body)
    forms = body.forms()
    inside = np.asarray(forms.basis.T @ modes.shape[:, :1])
    eta = thermoelastic_loss(forms.heat, inside, modes.omega[:1])[0]
    x = modes.omega[0] * 0.001**2 * 8500 * 380 / (np.pi**2 * 120)
    strength = 100e9 * (20e-6) ** 2 * 293.15 / (8500 * 380) * 1.35 / 0.65
    np.testing.assert_allclose(eta, strength * x / (1 + x**2), rtol=0.03)


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("profile = [[0.001, 0], [0.001, 0.1]]\nwall = 0.003", "radius is only"),
        ("profile = [[0.05, 0], [0.051, 0.002], [0.05, 0.004]]\nwall = 0.02\nsmooth = true", "bent to a radius"),
        ("profile = [[0.1, 0], [0.002, 0.05], [0.1, 0.06], [0.1, 0.2]]\nwall = 0.0005\nsmooth = true", "crosses the axis"),
    ],
)
def test_what_is_no_shell_is_refused(text, what):
    with pytest.raises(BodyError, match=what):
        build(text)
