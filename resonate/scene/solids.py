"""Solid shapes: blocks, balls, cylinders, and solids from a file."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import BeforeValidator, Field, InstanceOf, model_validator

from resonate.scene.kinds import Length, Part, Triple, number, vector
from resonate.scene.refused import RefusedError, shown
from resonate.scene.surface import SolidSurface


class BlockShape(Part):
    """``size = [x, y, z]``: origin at its centre."""

    kind: Literal["block"] = "block"
    size_m: Annotated[Triple, BeforeValidator(vector(number("length", above=0.0)))] = Field(validation_alias="size")


class BallShape(Part):
    """``diameter``: origin at its centre."""

    kind: Literal["ball"] = "ball"
    diameter_m: Length = Field(validation_alias="diameter")


class CylinderShape(Part):
    """``length, diameter, bore``: x along the axis, origin at its centre; ``bore`` is the diameter of a hole."""

    kind: Literal["cylinder"] = "cylinder"
    length_m: Length = Field(validation_alias="length")
    diameter_m: Length = Field(validation_alias="diameter")
    bore_m: Length | None = Field(validation_alias="bore", default=None)

    @model_validator(mode="after")
    def _hollow(self) -> CylinderShape:
        if self.bore_m is not None and self.bore_m >= self.diameter_m:
            raise RefusedError(
                f"bore {self.bore_m:g} m is not below the diameter {self.diameter_m:g} m",
                "make the bore narrower, or leave it out",
                at=("bore",),
            )
        return self


def _file(value: object) -> str:
    if not isinstance(value, str) or not value.strip() or not value.isprintable():
        raise RefusedError(f"{shown(value)} is not the name of a file", 'give a path, such as "cleat.stl"')
    return value


class SolidShape(Part):
    """``file, unit``: the inside of a closed surface (OBJ, STL, PLY, GLB, OFF); origin at its mass centre.

    The file is looked for beside the scene. ``surface`` is what was read and mended, ``content`` its hash.
    """

    set_by_reader: ClassVar[frozenset[str]] = frozenset({"kind", "surface", "content"})

    kind: Literal["solid"] = "solid"
    file: Annotated[str, BeforeValidator(_file)]
    unit: Literal["m", "cm", "mm", "in", "ft"] | None = None
    surface: InstanceOf[SolidSurface] | None = Field(default=None, exclude=True, repr=False)
    content: str = ""


AnySolid = BlockShape | BallShape | CylinderShape | SolidShape

#: Names of the faces of a block.
SIDES = ("x-", "x+", "y-", "y+", "z-", "z+")


def face_names(shape: AnySolid) -> tuple[str, ...]:
    """Faces that a support may hold."""
    if isinstance(shape, BlockShape):
        return (*SIDES, "surface")
    if isinstance(shape, CylinderShape):
        return ("left", "right", "side", *(("bore",) if shape.bore_m else ()), "surface")
    return ("surface",)


def solid_spots(shape: AnySolid) -> tuple[str, ...]:
    """Names of spots; the first is the default."""
    if isinstance(shape, BlockShape):
        return ("top", "bottom", "left", "right", "front", "back", "corner")
    if isinstance(shape, CylinderShape):
        return ("side", "left", "right")
    return ("top", "bottom", "left", "right", "front", "back")
