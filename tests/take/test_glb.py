"""The glTF file read back by our own parser, by another library, and by the Khronos validator."""

from __future__ import annotations

import dataclasses
import json
import os
import shutil
import struct
import subprocess
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from resonate.body.body import Surface
from resonate.errors import TakeError
from resonate.motion.channels import BodyCurves, Curves
from resonate.scene.clock import Clock, FrameRate
from resonate.take.glb import normal_change, write_glb

RATE = Fraction(24000, 1001)
FRAMES = 40
COMPONENTS = {5123: np.uint16, 5125: np.uint32, 5126: np.float32}
WIDTHS = {"SCALAR": 1, "VEC3": 3, "VEC4": 4}


def sphere(radius_m, rings=9, around=12):
    """Closed mesh of a ball: its normals are known."""
    polar = np.linspace(0.0, np.pi, rings + 1)[1:-1]
    turn = 2 * np.pi * np.arange(around) / around
    p, t = (a.ravel() for a in np.meshgrid(polar, turn, indexing="ij"))
    unit = np.column_stack([np.sin(p) * np.sin(t), np.cos(p), np.sin(p) * np.cos(t)])
    unit = np.concatenate([unit, [[0.0, 1.0, 0.0], [0.0, -1.0, 0.0]]])
    faces = []
    top, bottom = len(unit) - 2, len(unit) - 1
    for a in range(around):
        b = (a + 1) % around
        faces += [(top, a, b), (bottom, (rings - 2) * around + b, (rings - 2) * around + a)]
        for r in range(rings - 2):
            i, j = r * around, (r + 1) * around
            faces += [(i + a, j + a, j + b), (i + a, j + b, i + b)]
    return Surface(radius_m * unit, unit, np.array(faces))


def body_curves(name, *, keys, frames, shapes, seed, spin):
    rng = np.random.default_rng(seed)
    count = len(keys)
    mesh = sphere(0.04)
    turn = np.column_stack(
        [0.1 * np.ones(count), np.sin(0.5 * spin * keys), 0.2 * np.sin(keys), np.cos(0.5 * spin * keys)]
    )
    turn /= np.linalg.norm(turn, axis=1)[:, None]
    place = np.column_stack([0.3 * keys, 1.0 - 4.9 * keys**2, np.sin(keys)])
    weights = rng.uniform(-1.0, 1.0, size=(count, shapes))
    targets = 1e-3 * rng.normal(size=(shapes, len(mesh.points_m), 3))
    return BodyCurves(
        name=name,
        place_m=place[frames],
        turn=turn[frames],
        weights=weights[frames],
        mode_numbers=np.arange(1, shapes + 1),
        labels=tuple(f"mode_{k + 1}" for k in range(shapes)),
        kinds=("ring",) * shapes,
        ring="readable",
        gain=250.0,
        true_hz=np.linspace(400.0, 4000.0, shapes),
        shown_hz=np.linspace(1.2, 4.0, shapes),
        unresolved_m=np.zeros(len(frames)),
        force_peak_n=np.zeros(len(frames)),
        mesh=mesh,
        targets=targets,
        key_place_m=place,
        key_turn=turn,
        key_weights=weights,
    )


def make_curves(extra=(0.3111, 1.0), frames=FRAMES):
    times = np.array([float(k / RATE) for k in range(frames)])
    keys = np.unique(np.concatenate([times, extra]))
    frame_keys = np.searchsorted(keys, times)
    bodies = (
        body_curves("mug", keys=keys, frames=frame_keys, shapes=3, seed=3, spin=9.0),
        body_curves("Kombüse tray", keys=keys, frames=frame_keys, shapes=0, seed=4, spin=0.0),
    )
    return Curves(times_s=times, key_times_s=keys, frame_keys=frame_keys, bodies=bodies)


def make_scene():
    clock = Clock(
        frame=FrameRate(RATE),
        sample_rate=48000,
        start_frame=86400,  # 01:00:00:00 at 24 labels a second
        numbered=False,
        handles=8,
        length=Fraction(FRAMES - 16) / RATE,
    )
    return SimpleNamespace(title="Galley mug", clock=clock)


def make_record():
    strike = SimpleNamespace(kind="strike", body="mug", other="spoon")
    begin = float(Fraction(-8) / RATE)
    return SimpleNamespace(
        events=tuple(
            SimpleNamespace(**vars(strike), begin_s=begin + t, end_s=begin + t + 2e-4) for t in (0.3111, 1.0)
        )
    )


@pytest.fixture
def written(tmp_path):
    path = tmp_path / "mug.glb"
    write_glb(path, make_curves(), make_scene(), make_record())
    return path


def parse(path):
    """The container of the specification's section 4: header, JSON chunk, binary chunk."""
    data = path.read_bytes()
    magic, version, total = struct.unpack_from("<4sII", data)
    assert (magic, version, total) == (b"glTF", 2, len(data))
    text_length, kind = struct.unpack_from("<I4s", data, 12)
    assert kind == b"JSON"
    assert text_length % 4 == 0
    document = json.loads(data[20 : 20 + text_length])
    length, kind = struct.unpack_from("<I4s", data, 20 + text_length)
    assert kind == b"BIN\0"
    assert length % 4 == 0
    assert document["buffers"] == [{"byteLength": length}]
    return document, data[28 + text_length :]


def values(document, binary, number):
    accessor = document["accessors"][number]
    view = document["bufferViews"][accessor["bufferView"]]
    width = WIDTHS[accessor["type"]]
    kind = np.dtype(COMPONENTS[accessor["componentType"]]).newbyteorder("<")
    flat = np.frombuffer(binary, kind, accessor["count"] * width, view["byteOffset"])
    return flat.reshape(-1, width) if width > 1 else flat


def test_views_are_aligned_packed_and_all_used(written):
    document, binary = parse(written)
    end = 0
    for view in document["bufferViews"]:
        assert view["byteOffset"] % 4 == 0
        assert 0 <= view["byteOffset"] - end < 4
        assert view["byteLength"] > 0
        end = view["byteOffset"] + view["byteLength"]
    assert len(binary) - end < 4
    used = [a["bufferView"] for a in document["accessors"]]
    assert sorted(used) == list(range(len(document["bufferViews"])))
    wanted = {s[k] for s in document["animations"][0]["samplers"] for k in ("input", "output")}
    for mesh in document["meshes"]:
        for part in mesh["primitives"]:
            wanted |= {part["indices"], *part["attributes"].values()}
            wanted |= {number for target in part.get("targets", []) for number in target.values()}
    assert wanted == set(range(len(document["accessors"])))


def test_bounds_are_those_of_the_stored_numbers(written):
    document, binary = parse(written)
    bounded = [n for n, a in enumerate(document["accessors"]) if "min" in a]
    assert len(bounded) == 1 + 2 + 3  # times, two meshes, three shapes
    for number in bounded:
        held = values(document, binary, number).astype(np.float64)
        held = held.reshape(len(held), -1)
        np.testing.assert_array_equal(document["accessors"][number]["min"], held.min(axis=0))
        np.testing.assert_array_equal(document["accessors"][number]["max"], held.max(axis=0))


def test_a_body_without_shapes_has_no_weights(written):
    document, _ = parse(written)
    assert "targets" not in document["meshes"][1]["primitives"][0]
    assert "weights" not in document["meshes"][1]
    paths = [(c["target"]["node"], c["target"]["path"]) for c in document["animations"][0]["channels"]]
    assert paths == [(0, "translation"), (0, "rotation"), (0, "weights"), (1, "translation"), (1, "rotation")]
    assert [n["name"] for n in document["nodes"]] == ["mug", "Kombüse tray"]


def test_extras_carry_timecode_rate_events_and_exaggeration(written):
    document, _ = parse(written)
    extras = document["asset"]["extras"]
    assert extras["frame_rate"] == "24000/1001"
    assert extras["drop_frame"] is False
    assert extras["timecode_of_frame_0"] == "00:59:59:16"
    np.testing.assert_allclose([e["begin_s"] for e in extras["events"]], [0.3111, 1.0], atol=1e-15)
    node = document["nodes"][0]["extras"]
    assert node["exaggerated"] is True
    assert node["gain"] == 250.0
    assert "EXAGGERATED" in node["vibration"]
    assert [s["name"] for s in node["shapes"]] == ["mode_1", "mode_2", "mode_3"]
    assert document["meshes"][0]["extras"]["targetNames"] == ["mode_1", "mode_2", "mode_3"]


def test_times_increase_and_near_doubles_are_one_key(tmp_path):
    frame = float(20 / RATE)
    curves = make_curves(extra=(frame + 1e-10, 0.3111, 0.3111 + 1e-11))
    assert len(curves.key_times_s) == FRAMES + 3
    path = tmp_path / "near.glb"
    write_glb(path, curves, make_scene(), make_record())
    document, binary = parse(path)
    times = values(document, binary, document["animations"][0]["samplers"][0]["input"])
    assert len(times) == FRAMES + 1
    assert np.all(np.diff(times) > 0.0)
    np.testing.assert_array_equal(
        np.setdiff1d(times, np.float32([0.3111])), curves.times_s.astype(np.float32)
    )
    # where the two met, the pose is that of the frame
    place = values(document, binary, document["animations"][0]["samplers"][0]["output"])
    at = np.flatnonzero(times == np.float32(frame))[0]
    np.testing.assert_array_equal(place[at], curves.bodies[0].place_m[20].astype(np.float32))


def test_more_frames_than_single_precision_tells_apart_are_refused(tmp_path):
    times = 2000.0 + np.arange(4) * 1e-5
    bodies = make_curves().bodies
    curves = Curves(times_s=times, key_times_s=times, frame_keys=np.arange(4), bodies=bodies)
    with pytest.raises(TakeError, match="single-precision"):
        write_glb(tmp_path / "long.glb", curves, make_scene(), make_record())


def test_same_motion_same_bytes(written, tmp_path):
    again = tmp_path / "again.glb"
    write_glb(again, make_curves(), make_scene(), make_record())
    assert again.read_bytes() == written.read_bytes()


def test_quaternions_are_unit_and_neighbours_in_one_hemisphere(written):
    document, binary = parse(written)
    for channel, sampler in zip(
        document["animations"][0]["channels"], document["animations"][0]["samplers"], strict=True
    ):
        if channel["target"]["path"] == "rotation":
            turn = values(document, binary, sampler["output"]).astype(np.float64)
            np.testing.assert_allclose(np.linalg.norm(turn, axis=1), 1.0, atol=2e-7)
            assert np.all(np.sum(turn[1:] * turn[:-1], axis=1) > 0.0)


def test_normal_change_of_a_ball_matches_a_finite_difference():
    mesh = sphere(0.04)
    shape = np.column_stack(
        [np.zeros(len(mesh.points_m)), 0.1 * mesh.points_m[:, 0], mesh.points_m[:, 1] ** 2]
    )

    def normals(points):
        corner = points[mesh.triangles]
        face = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
        total = np.zeros_like(points)
        for place in range(3):
            np.add.at(total, mesh.triangles[:, place], face)
        return total / np.linalg.norm(total, axis=1)[:, None]

    step = 1e-5
    expected = (normals(mesh.points_m + step * shape) - normals(mesh.points_m - step * shape)) / (2 * step)
    # central difference: the error is of second order in the step
    np.testing.assert_allclose(normal_change(mesh.points_m, mesh.triangles, shape), expected, atol=1e-9)
    assert np.max(np.abs(expected)) > 0.05


def test_an_independent_reader_finds_the_same_motion(written):
    pygltflib = pytest.importorskip("pygltflib", reason="pygltflib, the independent reader, is not installed")
    file = pygltflib.GLTF2().load(str(written))
    curves = make_curves()

    def numbers(index):
        accessor = file.accessors[index]
        view = file.bufferViews[accessor.bufferView]
        blob = file.binary_blob()
        width = {"SCALAR": 1, "VEC3": 3, "VEC4": 4}[accessor.type]
        flat = np.frombuffer(
            blob, "<f4", accessor.count * width, (view.byteOffset or 0) + (accessor.byteOffset or 0)
        )
        return flat.reshape(-1, width).astype(np.float64)

    animation = file.animations[0]
    for number, body in enumerate(curves.bodies):
        mesh = file.meshes[file.nodes[number].mesh].primitives[0]
        rest = numbers(mesh.attributes.POSITION)
        deltas = [numbers(target["POSITION"]) for target in mesh.targets or []]
        found = {}
        for channel in animation.channels:
            if channel.target.node == number:
                sampler = animation.samplers[channel.sampler]
                assert sampler.interpolation == "LINEAR"
                np.testing.assert_array_equal(
                    numbers(sampler.input)[:, 0], curves.key_times_s.astype(np.float32)
                )
                found[channel.target.path] = numbers(sampler.output)
        for key in range(0, len(curves.key_times_s), 7):
            # The specification's own words (3.11.1, 3.7.2.2): weights of one key lie together.
            weights = found["weights"].reshape(-1, len(deltas))[key] if deltas else []
            local = rest + sum((w * d for w, d in zip(weights, deltas, strict=True)), np.zeros_like(rest))
            x, y, z, w = found["rotation"][key]  # xyzw, w the scalar
            axis = np.array([x, y, z])
            turned = local + 2 * np.cross(axis, np.cross(axis, local) + w * local)
            world = turned + found["translation"][key]
            np.testing.assert_allclose(world, expected_world(body, key), atol=1e-6)


def expected_world(body, key):
    from scipy.spatial.transform import Rotation

    local = body.mesh.points_m + np.einsum("kni,k->ni", body.targets, body.key_weights[key])
    return Rotation.from_quat(body.key_turn[key]).apply(local) + body.key_place_m[key]


def validator():
    """Folder of the npm package ``gltf-validator`` and the node that runs it, or None."""
    node = shutil.which("node")
    if node is None:
        return None
    places = [os.environ.get("RESONATE_GLTF_VALIDATOR", "")]
    npm = shutil.which("npm")
    if npm is not None:
        asked = subprocess.run([npm, "root", "-g"], capture_output=True, text=True, check=False)
        places.append(str(Path(asked.stdout.strip()) / "gltf-validator"))
    places.append(str(Path.cwd() / "node_modules" / "gltf-validator"))
    found = [p for p in places if p and (Path(p) / "package.json").is_file()]
    return (node, found[0]) if found else None


VALIDATE = """
const validator = require(process.argv[1]);
const bytes = new Uint8Array(require('fs').readFileSync(process.argv[2]));
validator.validateBytes(bytes).then(report => console.log(JSON.stringify(report.issues)));
"""


def validate(path):
    tool = validator()
    if tool is None:
        pytest.skip(
            "the Khronos validator is not here: npm install gltf-validator@2.0.0-dev.3.10 "
            "and set RESONATE_GLTF_VALIDATOR to its folder"
        )
    node, package = tool
    run = subprocess.run(
        [node, "-e", VALIDATE, package, str(path)], capture_output=True, text=True, check=True, timeout=120
    )
    return json.loads(run.stdout)


def test_the_khronos_validator_has_nothing_to_say(written):
    issues = validate(written)
    assert issues["messages"] == []
    assert (issues["numErrors"], issues["numWarnings"], issues["numInfos"]) == (0, 0, 0)


def test_the_khronos_validator_sees_a_broken_file(written):
    # The check above can fail: one weight fewer than keys times shapes is an error.
    document, _ = parse(written)
    weights = document["animations"][0]["samplers"][2]["output"]
    text = json.dumps(document, separators=(",", ":"), ensure_ascii=False)
    count = document["accessors"][weights]["count"]
    broken = written.read_bytes().replace(
        f'"count":{count},"type":"SCALAR"'.encode(), f'"count":{count - 1},"type":"SCALAR"'.encode()
    )
    assert f'"count":{count},"type":"SCALAR"' in text
    written.write_bytes(broken)
    assert validate(written)["numErrors"] >= 1


def test_large_meshes_use_wide_indices(tmp_path):
    curves = make_curves()
    mesh = sphere(0.04, rings=260, around=256)
    assert len(mesh.points_m) > 65535
    body = dataclasses.replace(curves.bodies[1], mesh=mesh, targets=np.zeros((0, len(mesh.points_m), 3)))
    path = tmp_path / "wide.glb"
    write_glb(path, dataclasses.replace(curves, bodies=(body,)), make_scene(), make_record())
    document, binary = parse(path)
    index = document["meshes"][0]["primitives"][0]["indices"]
    assert document["accessors"][index]["componentType"] == 5125
    np.testing.assert_array_equal(values(document, binary, index), mesh.triangles.ravel())
