"""What a scene leaves unsaid: the default microphone, and the digest of the whole."""

from __future__ import annotations

import dataclasses
import hashlib
import json
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Final

from pydantic import BaseModel

from resonate.scene.formula import FormulaShape
from resonate.scene.happenings import MicSpec
from resonate.scene.lumps import LumpsShape
from resonate.scene.shapes import PolygonOutline, is_line, is_solid
from resonate.scene.vessel import VesselShape

if TYPE_CHECKING:
    from resonate.scene.bodies import BodySpec
    from resonate.scene.kinds import Quaternion, Triple


#: From the middle of a body to its default microphone, in the body frame: 1 m, mostly up, a little forward and along.
FRONT: Final = (0.36, 0.8, 0.48)
# Fields that shape nothing by themselves: where a material's values come from, a surface that its hash stands for.
_SILENT: Final = frozenset({"source", "surface"})


def default_microphone(body: BodySpec) -> MicSpec:
    """One omni, 1 m from the middle of the body.

    It stands off every axis and plane of symmetry. Straight above the middle all modes with a node line through
    it would be silent, and a plate with free edges next to silent; a line that bends in one plane alone is not
    heard at all from straight across that plane.
    """
    x, y, z = (middle + away for middle, away in zip(_middle(body.shape), FRONT, strict=True))
    x, y, z = rotated((x, y, z), body.turn)
    place = body.place_m
    return MicSpec(name="front", place_m=(place[0] + x, place[1] + y, place[2] + z))


def _middle(shape: Any) -> Triple:  # noqa: ANN401 (any member of the union)
    # In the body frame: lines begin at their left end, polygons where their corners are measured from.
    if is_line(shape):
        return 0.5 * shape.length_m, 0.0, 0.0
    if is_solid(shape):
        return 0.0, 0.0, 0.0
    if isinstance(shape, LumpsShape | FormulaShape):
        return shape.middle_m
    if isinstance(shape, VesselShape):
        heights = [row[1] for row in shape.profile_m]
        return 0.0, 0.5 * (min(heights) + max(heights)), 0.0
    if isinstance(shape.outline, PolygonOutline):
        x, z = ([corner[axis] for corner in shape.outline.corners_m] for axis in (0, 1))
        return 0.5 * (min(x) + max(x)), 0.0, 0.5 * (min(z) + max(z))
    return 0.0, 0.0, 0.0


def rotated(vector: Triple, turn: Quaternion) -> Triple:
    """Turn a vector by a unit quaternion xyzw."""
    x, y, z, w = turn
    a, b, c = vector
    # v + 2 q x (q x v + w v), q the vector part
    u = (y * c - z * b + w * a, z * a - x * c + w * b, x * b - y * a + w * c)
    return (
        a + 2.0 * (y * u[2] - z * u[1]),
        b + 2.0 * (z * u[0] - x * u[2]),
        c + 2.0 * (x * u[1] - y * u[0]),
    )


def digest_of(parts: dict[str, Any]) -> str:
    """SHA-256 of the canonical JSON of a resolved scene: equal scenes, equal digests.

    Where a material's values come from (``source``) shapes nothing and is left out.
    """
    text = json.dumps(
        _plain(parts), sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False
    )
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def _plain(value: Any) -> Any:  # noqa: ANN401 (a tree of any values)
    if isinstance(value, BaseModel):
        return {name: _plain(getattr(value, name)) for name in type(value).model_fields if name not in _SILENT}
    if dataclasses.is_dataclass(value) and not isinstance(value, type):
        return {item.name: _plain(getattr(value, item.name)) for item in dataclasses.fields(value)}
    if isinstance(value, dict):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return str(value) if isinstance(value, Fraction) else value
