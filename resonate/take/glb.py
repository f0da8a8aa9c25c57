"""Binary glTF 2.0: a node a body, its motion, and its mode shapes as morph targets.

Reference: Khronos Group, glTF 2.0 Specification (2021), ISO/IEC 12113:2022. Units are metres and seconds and
+Y is up by that standard, whatever the scene asks of other files.
"""

from __future__ import annotations

import json
import struct
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from resonate.errors import TakeError

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    from resonate.motion.channels import BodyCurves, Curves
    from resonate.run.record import Record
    from resonate.scene.model import Scene

    Array = NDArray[np.float64]
    Single = NDArray[np.float32]
    Indices = NDArray[np.int64]
    Json = dict[str, Any]  # a JSON object holds any JSON value

# Numbers of the specification, section 5.
_UNSIGNED_SHORT, _UNSIGNED_INT, _FLOAT = 5123, 5125, 5126
_ARRAY_BUFFER, _ELEMENT_ARRAY_BUFFER = 34962, 34963
_MAGIC, _JSON_CHUNK, _BINARY_CHUNK = 0x46546C67, 0x4E4F534A, 0x004E4942
_MOST_BYTES = 2**32 - 1
# The largest 16-bit index is reserved (section 3.7.2.1).
_MOST_SHORT = 65535

# Base colours of the bodies in turn, linear RGB: plain, and apart in grey as well.
_COLOURS = (
    (0.60, 0.36, 0.14),
    (0.20, 0.38, 0.46),
    (0.62, 0.60, 0.54),
    (0.36, 0.12, 0.10),
    (0.16, 0.26, 0.14),
)


@dataclass(slots=True)
class _Buffer:
    """The binary chunk under construction, with the views and accessors that describe it."""

    pieces: list[bytes] = field(default_factory=list)
    length: int = 0
    views: list[Json] = field(default_factory=list)
    accessors: list[Json] = field(default_factory=list)

    def add(self, values: NDArray[Any], kind: str, *, target: int | None = None, bounds: bool = False) -> int:
        """Append one tightly packed array as a view and an accessor; give the accessor's number."""
        component = {"float32": _FLOAT, "uint16": _UNSIGNED_SHORT, "uint32": _UNSIGNED_INT}[values.dtype.name]
        data = values.astype(values.dtype.newbyteorder("<")).tobytes()
        view: Json = {"buffer": 0, "byteOffset": self.length, "byteLength": len(data)}
        if target is not None:
            view["target"] = target
        accessor: Json = {
            "bufferView": len(self.views),
            "componentType": component,
            "count": len(values),
            "type": kind,
        }
        if bounds:
            # From the stored single-precision numbers: readers compare exactly.
            table = values.reshape(len(values), -1)
            accessor["min"] = [float(v) for v in np.min(table, axis=0)]
            accessor["max"] = [float(v) for v in np.max(table, axis=0)]
        padded = data + b"\0" * (-len(data) % 4)
        self.pieces.append(padded)
        self.length += len(padded)
        self.views.append(view)
        self.accessors.append(accessor)
        return len(self.accessors) - 1


def write_glb(path: Path, curves: Curves, scene: Scene, record: Record) -> None:
    """Write the motion of a take as one binary glTF file.

    Time 0 of the file is its first frame. Keys lie on the frames and on the exact begins of
    contacts; single precision cannot hold both where they nearly meet, and then the frame stays.

    Parameters
    ----------
    path : Path
        Where to write.
    curves : Curves
        The motion.
    scene : Scene
        Title, frame rate and timecode.
    record : Record
        The contacts, whose exact times go into the extras.

    Raises
    ------
    TakeError
        If the file would pass the 4 GiB that the format allows, or frames are too many for its times.
    """
    buffer = _Buffer()
    keys = single_keys(curves)
    times = buffer.add(curves.key_times_s[keys].astype(np.float32), "SCALAR", bounds=True)
    nodes: list[Json] = []
    meshes: list[Json] = []
    materials: list[Json] = []
    animation: Json = {"name": "take", "channels": [], "samplers": []}
    for number, body in enumerate(curves.bodies):
        colour = _COLOURS[number % len(_COLOURS)]
        materials.append(_material(body.name, colour))
        meshes.append(_mesh(buffer, body, material=number))
        nodes.append(_node(body, mesh=number))
        for path_name, output in _outputs(buffer, body, keys):
            target = {"node": number, "path": path_name}
            animation["channels"].append({"sampler": len(animation["samplers"]), "target": target})
            animation["samplers"].append({"input": times, "output": output, "interpolation": "LINEAR"})
    document: Json = {
        "asset": {"version": "2.0", "generator": "resonate", "extras": _extras(curves, scene, record)},
        "scene": 0,
        "scenes": [{"name": scene.title, "nodes": list(range(len(nodes)))}],
        "nodes": nodes,
        "meshes": meshes,
        "materials": materials,
        "animations": [animation],
        "accessors": buffer.accessors,
        "bufferViews": buffer.views,
        "buffers": [{"byteLength": buffer.length}],
    }
    text = json.dumps(document, separators=(",", ":"), ensure_ascii=False, allow_nan=False).encode()
    text += b" " * (-len(text) % 4)
    total = 12 + 8 + len(text) + 8 + buffer.length
    if total > _MOST_BYTES:
        raise TakeError(
            what=f"the motion takes {total} bytes; a binary glTF file holds at most {_MOST_BYTES}",
            where=str(path),
            fix="shorten the take, show fewer modes (show.most) or leave glb out of take.files",
        )
    with path.open("wb") as file:
        file.write(struct.pack("<III", _MAGIC, 2, total))
        file.write(struct.pack("<II", len(text), _JSON_CHUNK) + text)
        file.write(struct.pack("<II", buffer.length, _BINARY_CHUNK))
        file.writelines(buffer.pieces)


def single_keys(curves: Curves) -> Indices:
    """Which keys (k,) remain distinct in single precision; every frame is among them."""
    single = curves.key_times_s.astype(np.float32)
    is_frame = np.zeros(len(single), dtype=bool)
    is_frame[curves.frame_keys] = True
    taken = single[is_frame]
    if np.any(np.diff(taken) <= 0.0):
        raise TakeError(
            what=f"{len(taken)} frames, more than the single-precision times of glTF can tell apart",
            where="glb",
            fix="shorten the take or leave glb out of take.files",
        )
    _, first = np.unique(single, return_index=True)
    distinct = np.zeros(len(single), dtype=bool)
    distinct[first] = True
    return np.flatnonzero(is_frame | (distinct & ~np.isin(single, taken)))


def _material(name: str, colour: tuple[float, float, float]) -> Json:
    return {
        "name": name,
        "pbrMetallicRoughness": {
            "baseColorFactor": [*colour, 1.0],
            "metallicFactor": 0.0,
            "roughnessFactor": 0.6,
        },
    }


def _mesh(buffer: _Buffer, body: BodyCurves, *, material: int) -> Json:
    mesh = body.mesh
    points = mesh.points_m.astype(np.float32)
    wide = np.uint16 if len(points) <= _MOST_SHORT else np.uint32
    primitive: Json = {
        "attributes": {
            "POSITION": buffer.add(points, "VEC3", target=_ARRAY_BUFFER, bounds=True),
            "NORMAL": buffer.add(_unit(mesh.normals), "VEC3", target=_ARRAY_BUFFER),
        },
        "indices": buffer.add(mesh.triangles.astype(wide).ravel(), "SCALAR", target=_ELEMENT_ARRAY_BUFFER),
        "material": material,
        "mode": 4,
    }
    result: Json = {"name": body.name, "primitives": [primitive]}
    if len(body.targets):
        primitive["targets"] = [
            {
                "POSITION": buffer.add(shape.astype(np.float32), "VEC3", target=_ARRAY_BUFFER, bounds=True),
                "NORMAL": buffer.add(
                    normal_change(mesh.points_m, mesh.triangles, shape).astype(np.float32),
                    "VEC3",
                    target=_ARRAY_BUFFER,
                ),
            }
            for shape in body.targets
        ]
        result["weights"] = [0.0] * len(body.targets)
        result["extras"] = {"targetNames": list(body.labels)}
    return result


def normal_change(points_m: Array, triangles: Indices, shape_m: Array) -> Array:
    """First-order change of the vertex normals (n, 3) when the mesh moves by a shape.

    With ``S`` the sum of ``e1 x e2`` over the triangles at a vertex, the normal is ``S/|S|`` and its
    change ``(dS - n (n . dS)) / |S|``. Linear in the shape, so that changes of several shapes add up.

    Parameters
    ----------
    points_m : Array
        (n, 3) rest mesh, m.
    triangles : Indices
        (t, 3) counter-clockwise from outside.
    shape_m : Array
        (n, 3) displacement, m.
    """
    corner, moved = points_m[triangles], shape_m[triangles]
    first, second = corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0]
    first_change, second_change = moved[:, 1] - moved[:, 0], moved[:, 2] - moved[:, 0]
    face = np.cross(first, second)
    face_change = np.cross(first_change, second) + np.cross(first, second_change)
    total, change = np.zeros_like(points_m), np.zeros_like(points_m)
    for place in range(3):
        np.add.at(total, triangles[:, place], face)
        np.add.at(change, triangles[:, place], face_change)
    length = np.linalg.norm(total, axis=1, keepdims=True)
    safe = np.where(length > 0.0, length, 1.0)
    normal = total / safe
    along = np.sum(normal * change, axis=1, keepdims=True)
    return np.asarray(np.where(length > 0.0, (change - normal * along) / safe, 0.0))


def _unit(vectors: Array) -> Single:
    return np.asarray(vectors / np.linalg.norm(vectors, axis=1, keepdims=True), dtype=np.float32)


def _node(body: BodyCurves, *, mesh: int) -> Json:
    return {
        "name": body.name,
        "mesh": mesh,
        "translation": [float(v) for v in body.key_place_m[0].astype(np.float32)],
        "rotation": [float(v) for v in _unit(body.key_turn[:1])[0]],
        "extras": {
            "origin": "mass centre",
            "vibration": body.note,
            "exaggerated": body.exaggerated,
            "gain": body.gain,
            "shapes": [
                {
                    "name": label,
                    "kind": kind,
                    "true_hz": float(true),
                    "shown_hz": float(shown),
                    "gain": float(gain),
                    "metres_at_weight_1": float(scale),
                }
                for label, kind, true, shown, gain, scale in zip(
                    body.labels,
                    body.kinds,
                    body.true_hz,
                    body.shown_hz,
                    body.gains,
                    body.scale_m,
                    strict=True,
                )
            ],
        },
    }


def _outputs(buffer: _Buffer, body: BodyCurves, keys: Indices) -> list[tuple[str, int]]:
    """Store the curves of one body: what each drives, and its accessor."""
    outputs = [
        ("translation", buffer.add(body.key_place_m[keys].astype(np.float32), "VEC3")),
        ("rotation", buffer.add(_unit(body.key_turn[keys]), "VEC4")),
    ]
    if len(body.targets):
        # All weights of the first key, then all of the second: one scalar accessor for all targets.
        weights = body.key_weights[keys].astype(np.float32).ravel()
        outputs.append(("weights", buffer.add(weights, "SCALAR")))
    return outputs


def _extras(curves: Curves, scene: Scene, record: Record) -> Json:
    clock = scene.clock
    rate = clock.frame.fraction
    begin = float(clock.begin)
    return {
        "title": scene.title,
        "frame_rate": f"{rate.numerator}/{rate.denominator}",
        "drop_frame": clock.frame.drop,
        "frames": len(curves.times_s),
        "handles": clock.handles,
        "time_zero": "frame 0, the first delivered frame, handles included",
        "timecode_of_frame_0": clock.timecode(0),
        "label_of_frame_0": clock.label(0),
        "events": [
            {
                "kind": event.kind,
                "body": event.body,
                "other": event.other,
                "begin_s": event.begin_s - begin,
                "end_s": event.end_s - begin,
            }
            for event in record.events
        ],
        "vibration": {body.name: body.note for body in curves.bodies},
    }
