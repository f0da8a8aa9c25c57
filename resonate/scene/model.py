"""The frozen models of a scene; every other room takes its requests from here."""

from __future__ import annotations

from pydantic import InstanceOf

from resonate.scene.bodies import (
    BandSpec,
    BodySpec,
    BoxPlace,
    CordHold,
    FixHold,
    HoldSpec,
    NamedHold,
    NamedPlace,
    PointPlace,
    ShowSpec,
    SpringHold,
)
from resonate.scene.clock import Clock, FrameRate
from resonate.scene.coil import CoilShape
from resonate.scene.formula import FormulaShape, MeshSpec
from resonate.scene.happenings import MicSpec, SpotSpec, StrikeSpec
from resonate.scene.kinds import Part
from resonate.scene.lumps import LinkSpec, LumpSpec, LumpsShape
from resonate.scene.matter import MaterialSpec, StrikerSpec
from resonate.scene.settings import LevelSpec, PictureSpec, SoundSpec, TakeSpec, WorldSpec
from resonate.scene.shapes import (
    BarShape,
    CircleOutline,
    MembraneShape,
    Outline,
    PlateShape,
    PolygonOutline,
    RectangleOutline,
    RingOutline,
    ShapeSpec,
    StringShape,
    TubeShape,
)
from resonate.scene.solids import BallShape, BlockShape, CylinderShape, SolidShape
from resonate.scene.vessel import LugSpec, VesselShape

__all__ = [
    "BallShape",
    "BandSpec",
    "BarShape",
    "BlockShape",
    "BodySpec",
    "BoxPlace",
    "CircleOutline",
    "Clock",
    "CoilShape",
    "CordHold",
    "CylinderShape",
    "FixHold",
    "FormulaShape",
    "FrameRate",
    "HoldSpec",
    "LevelSpec",
    "LinkSpec",
    "LugSpec",
    "LumpSpec",
    "LumpsShape",
    "MaterialSpec",
    "MembraneShape",
    "MeshSpec",
    "MicSpec",
    "NamedHold",
    "NamedPlace",
    "Outline",
    "PictureSpec",
    "PlateShape",
    "PointPlace",
    "PolygonOutline",
    "RectangleOutline",
    "RingOutline",
    "Scene",
    "ShapeSpec",
    "ShowSpec",
    "SolidShape",
    "SoundSpec",
    "SpotSpec",
    "SpringHold",
    "StrikeSpec",
    "StrikerSpec",
    "StringShape",
    "TakeSpec",
    "TubeShape",
    "VesselShape",
    "WorldSpec",
]


class Scene(Part):
    """A whole scene, resolved: presets filled in, units in SI, times in seconds after ``start``.

    ``mics`` is never empty. ``digest`` is the SHA-256 of everything that shapes the take; ``text`` is the
    file as read and ``where`` its name.
    """

    title: str
    take: TakeSpec
    picture: PictureSpec
    sound: SoundSpec
    world: WorldSpec
    bodies: tuple[BodySpec, ...]
    strikes: tuple[StrikeSpec, ...]
    mics: tuple[MicSpec, ...]
    clock: InstanceOf[Clock]
    digest: str
    text: str
    where: str
