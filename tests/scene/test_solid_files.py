"""Surfaces of solids from files: mended with a report, or refused with a reason."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh

from resonate.errors import SceneError
from resonate.scene.mend import signed_volume
from resonate.scene.read import parse_scene
from resonate.scene.surface import load_surface

BALL = trimesh.creation.icosphere(subdivisions=3, radius=50.0)
BOX = trimesh.creation.box((40.0, 30.0, 20.0))


def raw(points, triangles):
    return trimesh.Trimesh(points, triangles, process=False)


def inside_out():
    return raw(BALL.vertices, BALL.faces[:, ::-1])


def mixed():
    faces = BALL.faces.copy()
    faces[::7] = faces[::7, ::-1]
    return raw(BALL.vertices, faces)


def torn():
    return raw(BALL.vertices, np.delete(BALL.faces, [5, 300], axis=0))


def doubled():
    return raw(BALL.vertices, np.concatenate((BALL.faces, BALL.faces[:40])))


def soup():
    return raw(BALL.vertices[BALL.faces].reshape(-1, 3), np.arange(3 * len(BALL.faces)).reshape(-1, 3))


def jittered():
    # Seams that are open by a tenth of a micrometre: less than rounding to any number of digits can close everywhere.
    mesh = soup()
    shake = np.random.default_rng(3).uniform(-5e-5, 5e-5, mesh.vertices.shape)
    return raw(mesh.vertices + shake, mesh.faces)


def flat():
    # One face is cut along a side; the triangle between has no area, and its neighbour knows nothing of the cut.
    a, b, c = BOX.faces[0]
    points = np.vstack((BOX.vertices, 0.5 * (BOX.vertices[a] + BOX.vertices[b])))
    middle = len(points) - 1
    return raw(points, np.vstack((BOX.faces[1:], [[a, middle, c], [middle, b, c], [a, b, middle]])))


MENDED = {
    "inside out": (inside_out, "inside out", BALL),
    "mixed winding": (mixed, "triangles turned over", BALL),
    "two holes": (torn, "2 small holes closed", BALL),
    "doubled triangles": (doubled, "40 doubled triangles removed", BALL),
    "seams": (soup, "points along seams welded", BALL),
    "open seams": (jittered, "points along seams welded", BALL),
    "no area": (flat, "without area removed", BOX),
}


@pytest.mark.parametrize("case", MENDED)
def test_what_needs_no_guessing_is_mended_and_told(tmp_path, case):
    make, note, whole = MENDED[case]
    make().export(tmp_path / "cleat.obj", digits=12)

    surface = load_surface(tmp_path / "cleat.obj", "mm")

    assert any(note in line and "cleat.obj" in line for line in surface.notes)
    # Euler: a closed surface without handles.
    edges = np.sort(np.concatenate([surface.triangles[:, [k, (k + 1) % 3]] for k in range(3)]), axis=1)
    found, times = np.unique(edges, axis=0, return_counts=True)
    assert np.all(times == 2)
    assert len(surface.points_m) - len(found) + len(surface.triangles) == 2
    np.testing.assert_allclose(signed_volume(surface.points_m, surface.triangles), 1e-9 * whole.volume, rtol=1e-3)


def stretched():
    points = BALL.vertices.copy()
    points[0] *= -1.5
    return raw(points, BALL.faces)


def opened():
    return raw(BALL.vertices, BALL.faces[BALL.triangles_center[:, 2] < 20.0])


def finned():
    fin = raw([[20, 15, 10], [20, 15, -10], [60, 60, 0]], [[0, 1, 2]])
    return trimesh.util.concatenate([BOX, fin])


def many():
    small = trimesh.creation.icosphere(subdivisions=1, radius=4.0)
    return trimesh.util.concatenate([small.copy().apply_translation([10.0 * k, 0, 0]) for k in range(26)])


def overlapping():
    return trimesh.util.concatenate([BOX, BOX.copy().apply_translation([15, 10, 5])])


REFUSED = {
    "open": (opened, "an open surface"),
    "fin": (finned, "more than two faces"),
    "26 parts": (many, "26 separate parts"),
    "two overlapping parts": (overlapping, "2 separate parts"),
    "through itself": (stretched, "runs through itself"),
}
CONTENTS = {
    "empty.stl": (b"", "is empty"),
    "text.stl": (b"this is a shopping list\n" * 40, "holds no triangles"),
    "cut.stl": (bytes(80) + (5000).to_bytes(4, "little") + bytes(900), "triangles"),
    "lost.obj": (b"v 0 0 0\nv 1 0 0\nf 1 2 9\n", "can be read"),
    "nan.obj": (b"v 0 0 0\nv nan 0 1\nv 0 1 0\nv 0 0 1\nf 1 2 3\nf 1 3 4\nf 1 4 2\nf 2 4 3\n", "not numbers"),
    "flat.obj": (b"v 0 0 0\nv 1 0 0\nv 0 1 0\nv 1 1 0\nf 1 2 3\nf 2 4 3\nf 1 3 4\nf 1 4 2\n", "encloses nothing|itself"),
    "point.obj": (b"v 1 1 1\nv 1 1 1\nv 1 1 1\nf 1 2 3\n", "one"),
    "cleat.fbx": (b"a", "not a mesh that can be read"),
    "odd.glb": (b"glTF" + bytes(200), "can be read"),
}  # fmt: skip


def scene(file, unit='unit = "mm"'):
    return (
        '[take]\nlength = "1 s"\n[[body]]\nname = "cleat"\nshape = "solid"\n'
        f'file = "{file}"\n{unit}\nmaterial = "brass"\n'
    )


def refused(folder, text):
    with pytest.raises(SceneError) as caught:
        parse_scene(text, where=str(folder / "deck.toml"))
    (fault,) = caught.value.faults
    assert fault.fix
    return fault


@pytest.mark.parametrize("case", REFUSED)
def test_what_would_be_a_guess_is_refused_with_the_reason(tmp_path, case):
    make, reason = REFUSED[case]
    make().export(tmp_path / "cleat.obj")

    fault = refused(tmp_path, scene("cleat.obj"))

    assert reason in fault.what
    assert fault.where.endswith(":6: body[0].file")


@pytest.mark.parametrize("name", CONTENTS)
def test_files_that_hold_no_solid_are_refused(tmp_path, name):
    content, reason = CONTENTS[name]
    (tmp_path / name).write_bytes(content)

    fault = refused(tmp_path, scene(name))

    assert any(part in fault.what for part in reason.split("|")), fault.what


def test_two_million_triangles_are_refused_unread(tmp_path):
    # Only the head is needed: a sparse file of the right length.
    with (tmp_path / "huge.stl").open("wb") as file:
        file.write(bytes(80) + (2_000_000).to_bytes(4, "little"))
        file.truncate(84 + 50 * 2_000_000)

    fault = refused(tmp_path, scene("huge.stl"))

    assert "2e+06 triangles" in fault.what
    assert "decimate" in fault.fix


def test_a_file_that_is_not_there(tmp_path):
    assert "cannot be read" in refused(tmp_path, scene("gone.stl")).what


def test_the_unit_must_be_known(tmp_path):
    BALL.export(tmp_path / "cleat.stl")
    assert "in which unit" in refused(tmp_path, scene("cleat.stl", "")).what
    # glTF is in metres by its standard (glTF 2.0 section 3.3).
    trimesh.Trimesh(BALL.vertices / 1000.0, BALL.faces).export(tmp_path / "cleat.glb")
    body = parse_scene(scene("cleat.glb", ""), where=str(tmp_path / "deck.toml")).bodies[0]
    np.testing.assert_allclose(np.ptp(body.shape.surface.points_m, axis=0), 0.1, rtol=1e-3)


def test_millimetres_called_metres_are_doubted(tmp_path):
    BALL.export(tmp_path / "cleat.stl")
    (note,) = [line for line in load_surface(tmp_path / "cleat.stl", "m").notes if "large" in line]
    assert "100 m large" in note
    assert 'unit = "m"' in note


@pytest.mark.parametrize("ending", ["obj", "stl", "ply", "off"])
def test_every_format_gives_the_same_solid(tmp_path, ending):
    moved = BOX.copy().apply_translation([500.0, 0.0, -20.0])
    moved.export(tmp_path / f"cleat.{ending}")

    surface = load_surface(tmp_path / f"cleat.{ending}", "mm")

    # The frame is the mass centre's.
    np.testing.assert_allclose(surface.shift_m, [0.5, 0.0, -0.02], atol=1e-7)
    np.testing.assert_allclose(surface.points_m.max(axis=0), [0.02, 0.015, 0.01], atol=1e-7)
    np.testing.assert_allclose(surface.points_m.min(axis=0), [-0.02, -0.015, -0.01], atol=1e-7)


def test_the_digest_follows_the_content_of_the_file(tmp_path):
    BALL.export(tmp_path / "cleat.stl")
    where = str(tmp_path / "deck.toml")
    first = parse_scene(scene("cleat.stl"), where=where).digest
    assert parse_scene(scene("cleat.stl"), where=where).digest == first
    BOX.export(tmp_path / "cleat.stl")
    assert parse_scene(scene("cleat.stl"), where=where).digest != first
