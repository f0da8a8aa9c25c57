"""Solid shapes: blocks, balls and cylinders."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.kinds import Length, Part, Triple, number, vector
from resonate.scene.refused import RefusedError


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


#: Names of the faces of a block.
SIDES = ("x-", "x+", "y-", "y+", "z-", "z+")


def face_names(shape: BlockShape | BallShape | CylinderShape) -> tuple[str, ...]:
    """Faces that a support may hold."""
    if isinstance(shape, BlockShape):
        return (*SIDES, "surface")
    if isinstance(shape, CylinderShape):
        return ("left", "right", "side", *(("bore",) if shape.bore_m else ()), "surface")
    return ("surface",)


def solid_spots(shape: BlockShape | BallShape | CylinderShape) -> tuple[str, ...]:
    """Names of spots; the first is the default."""
    if isinstance(shape, BlockShape):
        return ("top", "bottom", "left", "right", "front", "back", "corner")
    if isinstance(shape, CylinderShape):
        return ("side", "left", "right")
    return ("top", "bottom", "left", "right", "front", "back")
