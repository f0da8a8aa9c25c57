"""The shapes of this version, their outlines, and the names on them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any, Final, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.coil import CoilShape
from resonate.scene.corners import Corners, at_place, corners
from resonate.scene.formula import FormulaShape
from resonate.scene.kinds import Length, Part, number
from resonate.scene.lumps import LumpsShape
from resonate.scene.refused import RefusedError, shown
from resonate.scene.solids import AnySolid, BallShape, BlockShape, CylinderShape, SolidShape, face_names, solid_spots
from resonate.scene.vessel import VesselShape

if TYPE_CHECKING:
    from collections.abc import Mapping

Profile = tuple[tuple[float, float, float], ...]

_read_fraction = number("fraction", least=0.0, most=1.0)
_read_height = number("length", least=0.0)
_read_width = number("length", above=0.0)


class RectangleOutline(Part):
    """``{rectangle = [a, b]}``: a along x, b along z, origin at the centre."""

    kind: Literal["rectangle"] = "rectangle"
    a_m: Length = Field(validation_alias="a")
    b_m: Length = Field(validation_alias="b")


class CircleOutline(Part):
    """``{circle = d}``: a diameter, origin at the centre."""

    kind: Literal["circle"] = "circle"
    diameter_m: Length = Field(validation_alias="diameter")


class RingOutline(Part):
    """``{ring = [outer, inner]}``: two diameters, origin at the centre."""

    kind: Literal["ring"] = "ring"
    outer_m: Length = Field(validation_alias="outer")
    inner_m: Length = Field(validation_alias="inner")

    @model_validator(mode="after")
    def _nested(self) -> RingOutline:
        if self.inner_m >= self.outer_m:
            raise RefusedError(
                f"inner diameter {self.inner_m:g} m is not below the outer {self.outer_m:g} m",
                "give [outer, inner] with inner < outer",
                at=("inner",),
            )
        return self


class PolygonOutline(Part):
    """``{polygon = [[x, z], ...]}``: corners in order, the origin where they are measured from."""

    kind: Literal["polygon"] = "polygon"
    corners_m: Annotated[Corners, BeforeValidator(corners)] = Field(validation_alias="corners")


Outline = Annotated[
    RectangleOutline | CircleOutline | RingOutline | PolygonOutline, Field(discriminator="kind")
]


def _profile(value: object) -> Profile | tuple[tuple[float, ...], ...]:
    if not isinstance(value, list | tuple):
        raise RefusedError(f"{shown(value)} is not a profile", "give [[fraction, height], ...]")
    if not value:
        return ()
    rows: list[tuple[float, ...]] = []
    for place, row in enumerate(value):
        if isinstance(row, list | tuple) and len(row) == 2:  # noqa: PLR2004 (fraction and height)
            raise RefusedError("a profile without width", "give the bar's width", at=(place,))
        if not isinstance(row, list | tuple) or len(row) != 3:  # noqa: PLR2004 (with width)
            raise RefusedError(
                f"{shown(row)} is not a profile entry",
                "give [fraction, height] or [fraction, height, width]",
                at=(place,),
            )
        reads = (_read_fraction, _read_height, _read_width)
        rows.append(tuple(at_place(reads[k], item, (place, k)) for k, item in enumerate(row)))
    _check_profile(rows)
    return tuple(rows)


def _check_profile(rows: list[tuple[float, ...]]) -> None:
    last = len(rows) - 1
    if last < 1:
        raise RefusedError("a profile of one entry", "give at least [0, height] and [1, height]")
    if rows[0][0] != 0.0 or rows[-1][0] != 1.0:
        raise RefusedError(
            f"the profile runs from {rows[0][0]:g} to {rows[-1][0]:g}",
            "begin with fraction 0 and end with fraction 1",
            at=(0 if rows[0][0] else last, 0),
        )
    for place in range(1, last + 1):
        if rows[place][0] < rows[place - 1][0]:
            raise RefusedError(
                f"fraction {rows[place][0]:g} comes after {rows[place - 1][0]:g}",
                "list the fractions in rising order; the same fraction twice is a step",
                at=(place, 0),
            )
        if place > 1 and rows[place][0] == rows[place - 2][0]:
            raise RefusedError(
                f"fraction {rows[place][0]:g} is given three times", "a step needs it twice", at=(place, 0)
            )
    if rows[0][0] == rows[1][0] or rows[-1][0] == rows[-2][0]:
        raise RefusedError("a step at the very end of the bar", "give fractions 0 and 1 once each", at=(0,))
    for place, row in enumerate(rows):
        if row[1] == 0.0 and place not in (0, last):
            raise RefusedError(
                "height 0 inside the bar", "a height of 0 is allowed only at an end", at=(place, 1)
            )
    if rows[0][1] == rows[-1][1] == 0.0 and last == 1:
        raise RefusedError("the bar has no height anywhere", "give a height above 0", at=(0, 1))


class BarShape(Part):
    """``length, width, height`` or ``length, diameter``; ``profile`` for tapers and undercuts.

    x runs along the bar from its left end; the height is along y, the width along z. A ``profile`` entry
    is (fraction of the length, height, width); ``height_m`` and ``width_m`` may then be None.
    """

    kind: Literal["bar"] = "bar"
    length_m: Length = Field(validation_alias="length")
    width_m: Length | None = Field(validation_alias="width", default=None)
    height_m: Length | None = Field(validation_alias="height", default=None)
    diameter_m: Length | None = Field(validation_alias="diameter", default=None)
    profile: Annotated[Profile, BeforeValidator(_profile)] = ()

    @model_validator(mode="before")
    @classmethod
    def _widen(cls, data: object) -> object:
        # A profile entry without a width takes the bar's.
        if not isinstance(data, dict) or not data.get("profile"):
            return data
        if "diameter" in data or "diameter_m" in data:
            raise RefusedError(
                "a bar with both diameter and profile",
                "give width and profile; a round bar has one diameter",
                at=("profile",),
            )
        width = data.get("width", data.get("width_m"))
        rows = [
            [*row, width] if isinstance(row, list | tuple) and len(row) == 2 and width is not None else row  # noqa: PLR2004
            for row in (data["profile"] if isinstance(data["profile"], list | tuple) else [])
        ]
        return {**data, "profile": rows or data["profile"]}

    @model_validator(mode="after")
    def _section(self) -> BarShape:
        if self.diameter_m is not None:
            extra = [
                key
                for key, value in (("width", self.width_m), ("height", self.height_m))
                if value is not None
            ]
            if extra:
                raise RefusedError(
                    f"a bar with both diameter and {extra[0]}",
                    "give diameter alone for a round bar, or width with height or profile",
                    at=(extra[0],),
                )
            return self
        if not self.profile:
            for key, value in (("width", self.width_m), ("height", self.height_m)):
                if value is None:
                    raise RefusedError(
                        f"a bar without {key}", "give width and height, or diameter", at=(key,)
                    )
            return self
        tallest = max(row[1] for row in self.profile)
        if self.height_m is not None and abs(self.height_m - tallest) > 1e-9 * tallest:
            raise RefusedError(
                f"height {self.height_m:g} m is not the profile's largest, {tallest:g} m",
                "leave out height: the profile gives it",
                at=("height",),
            )
        return self


class TubeShape(Part):
    """``length, outer, wall``: x along the axis, ``outer`` the outer diameter."""

    kind: Literal["tube"] = "tube"
    length_m: Length = Field(validation_alias="length")
    outer_m: Length = Field(validation_alias="outer")
    wall_m: Length = Field(validation_alias="wall")

    @model_validator(mode="after")
    def _hollow(self) -> TubeShape:
        if self.wall_m >= 0.5 * self.outer_m:
            raise RefusedError(
                f"wall {self.wall_m:g} m is not below half the outer diameter, {0.5 * self.outer_m:g} m",
                "make the wall thinner, or use a round bar",
                at=("wall",),
            )
        return self


class StringShape(Part):
    """``length, diameter, tension``: x along the string."""

    kind: Literal["string"] = "string"
    length_m: Length = Field(validation_alias="length")
    diameter_m: Length = Field(validation_alias="diameter")
    tension_n: Annotated[float, BeforeValidator(number("force", above=0.0))] = Field(
        validation_alias="tension"
    )


class MembraneShape(Part):
    """``outline, thickness, tension`` (N/m): in the x-z plane, +y up."""

    kind: Literal["membrane"] = "membrane"
    outline: Outline
    thickness_m: Length = Field(validation_alias="thickness")
    tension_n_m: Annotated[float, BeforeValidator(number("tension", above=0.0))] = Field(
        validation_alias="tension"
    )


class PlateShape(Part):
    """``outline, thickness``: in the x-z plane, +y up."""

    kind: Literal["plate"] = "plate"
    outline: Outline
    thickness_m: Length = Field(validation_alias="thickness")


ShapeSpec = Annotated[
    BarShape
    | TubeShape
    | StringShape
    | CoilShape
    | MembraneShape
    | PlateShape
    | VesselShape
    | AnySolid
    | LumpsShape
    | FormulaShape,
    Field(discriminator="kind"),
]

SHAPES: Final[Mapping[str, type[Part]]] = {
    "bar": BarShape,
    "tube": TubeShape,
    "string": StringShape,
    "coil": CoilShape,
    "membrane": MembraneShape,
    "plate": PlateShape,
    "block": BlockShape,
    "ball": BallShape,
    "cylinder": CylinderShape,
    "solid": SolidShape,
    "vessel": VesselShape,
    "lumps": LumpsShape,
    "formula": FormulaShape,
}
OUTLINES: Final[Mapping[str, type[Part]]] = {
    "rectangle": RectangleOutline,
    "circle": CircleOutline,
    "ring": RingOutline,
    "polygon": PolygonOutline,
}
#: Shapes that a later version will know.
LATER_SHAPES: Final = (
    "sheet assembly".split()  # noqa: SIM905 (a word list)
)


def is_line(shape: Any) -> bool:  # noqa: ANN401 (any member of the union)
    """Whether a shape is a line: bar, tube, string or coil."""
    return isinstance(shape, BarShape | TubeShape | StringShape | CoilShape)


def is_solid(shape: Any) -> bool:  # noqa: ANN401 (any member of the union)
    """Whether a shape is a solid: block, ball, cylinder, or from a file."""
    return isinstance(shape, AnySolid)


def edge_names(shape: Any) -> tuple[str, ...]:  # noqa: ANN401, PLR0911 (any member of the union, each its own)
    """Names that a support of this shape may use in ``where``."""
    if is_line(shape):
        return ("left", "right")
    if is_solid(shape):
        return face_names(shape)
    if isinstance(shape, VesselShape):
        return ("rim", "base")
    if isinstance(shape, LumpsShape | FormulaShape):
        return shape.held_names
    outline = shape.outline
    if isinstance(outline, RectangleOutline):
        return ("x-", "x+", "z-", "z+", "edge")
    if isinstance(outline, CircleOutline):
        return ("outer", "edge")
    if isinstance(outline, RingOutline):
        return ("outer", "inner", "edge")
    return ("edge", *(f"edge{k + 1}" for k in range(len(outline.corners_m))))


def spot_names(shape: Any) -> tuple[str, ...]:  # noqa: ANN401 (any member of the union)
    """Names that a strike on this shape may use as ``spot``; the first is the default."""
    if is_line(shape):
        return ("centre", "left", "right")
    if is_solid(shape):
        return solid_spots(shape)
    if isinstance(shape, VesselShape):
        return ("rim", "base")
    if isinstance(shape, LumpsShape | FormulaShape):
        return shape.point_names
    if isinstance(shape.outline, RingOutline):
        return ("outer", "inner", "edge")
    return ("centre", "edge")
