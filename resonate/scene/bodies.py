"""A body of the scene: shape, matter, supports, place and motion at the start."""

from __future__ import annotations

from typing import Annotated, Any, Final, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.kinds import (
    Flag,
    Frequency,
    Length,
    Name,
    Part,
    Place,
    Triple,
    Turn,
    number,
    vector,
    whole,
)
from resonate.scene.matter import MaterialSpec
from resonate.scene.names import choose
from resonate.scene.refused import RefusedError, shown
from resonate.scene.shapes import MembraneShape, ShapeSpec, StringShape, edge_names, spot_names

AXES: Final = ("x", "y", "z", "rx", "ry", "rz")
NAMED_HOLDS: Final = ("clamped", "pinned", "guided", "sliding")

#: ``solved`` is this many times ``heard`` unless it is given.
SOLVED_TO_HEARD: Final = 4.0


class NamedPlace(Part):
    """``where = "left"`` or ``["x-", "x+"]``: edges or ends by name."""

    names: tuple[str, ...]


class PointPlace(Part):
    """``where = {point = [x, y, z]}``: the nearest point of the body, body frame."""

    point_m: Place = Field(validation_alias="point")


class BoxPlace(Part):
    """``where = {box = [[x, y, z], [x, y, z]]}``: all of the body inside, body frame."""

    low_m: Place = Field(validation_alias="low")
    high_m: Place = Field(validation_alias="high")

    @model_validator(mode="after")
    def _ordered(self) -> BoxPlace:
        if any(low > high for low, high in zip(self.low_m, self.high_m, strict=True)):
            raise RefusedError("the box is inside out", "give [[least x, y, z], [largest x, y, z]]")
        return self


class NamedHold(Part):
    """``hold = "clamped" | "pinned" | "guided" | "sliding"``."""

    kind: Literal["clamped", "pinned", "guided", "sliding"]


def _axes(value: object) -> tuple[str, ...]:
    if not isinstance(value, list | tuple) or not value:
        raise RefusedError(
            f"{shown(value)} fixes nothing", f"name at least one of {', '.join(AXES)}, as a list"
        )
    for place, axis in enumerate(value):
        if axis not in AXES:
            raise RefusedError(f"{shown(axis)} is not an axis", choose(str(axis), AXES), at=(place,))
        if axis in value[:place]:
            raise RefusedError(f"{shown(axis)} is named twice", "name each axis once", at=(place,))
    return tuple(axis for axis in AXES if axis in value)


class FixHold(Part):
    """``hold = {fix = ["x", "y", "rx"]}``: these motions and rotations are zero."""

    axes: Annotated[tuple[str, ...], BeforeValidator(_axes)] = Field(validation_alias="fix")


class SpringHold(Part):
    """``hold = {spring = k, damper = c}``: springs to the world along x, y and z, N/m and N s/m, or one of both."""

    stiffness_n_m: Annotated[float, BeforeValidator(number("stiffness", least=0.0))] = Field(
        validation_alias="spring", default=0.0
    )
    damping_ns_m: Annotated[float, BeforeValidator(number("damping", least=0.0))] = Field(
        validation_alias="damper", default=0.0
    )

    @model_validator(mode="after")
    def _something(self) -> SpringHold:
        if self.stiffness_n_m == self.damping_ns_m == 0.0:
            raise RefusedError("a spring of 0 without a damper holds nothing", "give a spring, a damper, or both")
        return self


class CordHold(Part):
    """``hold = {cord = length}``: hung from a cord of this length; ``spring`` makes it stretch, N/m."""

    length_m: Length = Field(validation_alias="cord")
    stiffness_n_m: Annotated[float, BeforeValidator(number("stiffness", above=0.0))] | None = Field(
        validation_alias="spring", default=None
    )


Where = NamedPlace | PointPlace | BoxPlace
Hold = NamedHold | FixHold | SpringHold | CordHold


class HoldSpec(Part):
    """One entry of ``support``: where, and how it is held."""

    where: Where
    hold: Hold


class BandSpec(Part):
    """``modes = {heard = "20 kHz", solved = "80 kHz", most = 300}``."""

    heard_hz: Frequency = Field(validation_alias="heard", default=20e3)
    solved_hz: Frequency | None = Field(validation_alias="solved", default=None)
    most: Annotated[int, BeforeValidator(whole(1, 5000))] = 300

    @property
    def solved_or_default_hz(self) -> float:
        """``solved_hz``, or four times ``heard_hz``."""
        return self.solved_hz if self.solved_hz is not None else SOLVED_TO_HEARD * self.heard_hz

    @model_validator(mode="after")
    def _ordered(self) -> BandSpec:
        if self.solved_hz is not None and self.solved_hz <= self.heard_hz:
            raise RefusedError(
                f"solved {self.solved_hz:g} Hz is not above heard {self.heard_hz:g} Hz",
                "raise solved or lower heard; without solved it is four times heard",
                at=("solved",),
            )
        return self


class ShowSpec(Part):
    """``show = {ring = "off" | "true" | "readable", size = "1 %", most = 8}``.

    ``size`` is the largest shown vibration as a share of the body's size.
    """

    ring: Literal["off", "true", "readable"] = "readable"
    size: Annotated[float, BeforeValidator(number("fraction", above=0.0, most=1.0))] | None = None
    most: Annotated[int, BeforeValidator(whole(0, 64))] = 8


def default_support(shape: Any) -> tuple[HoldSpec, ...]:  # noqa: ANN401 (any member of the union)
    """Supports of a body that names none: strings and membranes are pinned, others are free."""
    pinned = NamedHold(kind="pinned")
    if isinstance(shape, StringShape):
        return (HoldSpec(where=NamedPlace(names=("left", "right")), hold=pinned),)
    if isinstance(shape, MembraneShape):
        return (HoldSpec(where=NamedPlace(names=("edge",)), hold=pinned),)
    return ()


def _default_support(known: dict[str, Any]) -> tuple[HoldSpec, ...]:
    return default_support(known["shape"])


class BodySpec(Part):
    """``[[body]]``: ``name shape material support place turn speed spin modes floating held show``.

    In a scene, with the keys of the shape beside the others (``shape = {plate = {..}}`` does the same)::

        [[body]]
        name = "hatch"
        shape = "plate"
        outline = {rectangle = ["0.6 m", "40 cm"]}
        thickness = "3 mm"
        material = {from = "oak", loss = 0.015}
        support = [
            {where = ["x-", "x+"], hold = "pinned"},
            {where = {point = [0, 0, 0.1]}, hold = {spring = "2 kN/m", damper = 3}},
        ]
        place = [0, "1.2 m", 0]
        turn = {axis = [1, 0, 0], angle = "90 deg"}
        modes = {heard = "20 kHz", solved = "80 kHz", most = 300}
        show = {ring = "readable", size = "1 %", most = 8}

    ``place_m`` puts the shape's own origin in the world, ``turn`` is a unit quaternion xyzw from
    body to world; ``speed_m_s`` and ``spin_rad_s`` are world vectors at the start.
    """

    name: Name
    shape: ShapeSpec
    material: MaterialSpec
    support: tuple[HoldSpec, ...] = Field(default_factory=_default_support)
    place_m: Place = Field(validation_alias="place", default=(0.0, 0.0, 0.0))
    turn: Turn = (0.0, 0.0, 0.0, 1.0)
    speed_m_s: Annotated[Triple, BeforeValidator(vector(number("speed", least=-1e3, most=1e3)))] = Field(
        validation_alias="speed", default=(0.0, 0.0, 0.0)
    )
    spin_rad_s: Annotated[Triple, BeforeValidator(vector(number("spin", least=-1e5, most=1e5)))] = Field(
        validation_alias="spin", default=(0.0, 0.0, 0.0)
    )
    modes: BandSpec = BandSpec()
    floating: Flag = False
    held: Flag = False
    show: ShowSpec = ShowSpec()

    @model_validator(mode="after")
    def _possible(self) -> BodySpec:
        allowed = edge_names(self.shape)
        if not self.support and isinstance(self.shape, StringShape | MembraneShape):
            raise RefusedError(
                f"a {self.shape.kind} under tension that nothing holds",
                "leave out support (it is then pinned all round), or hold its ends or edges",
                at=("support",),
            )
        hung = [place for place, entry in enumerate(self.support) if isinstance(entry.hold, CordHold)]
        if hung and self.shape.kind == "lumps":
            raise RefusedError(
                "points do not hang from cords",
                "hang them from a spring: one more point that is pinned, and a spring with its rest length",
                at=("support", hung[0], "hold"),
            )
        moves = {"support": self.support, "held": self.held, "speed": any(self.speed_m_s), "spin": any(self.spin_rad_s)}
        extra = [key for key, value in moves.items() if value]
        if extra and self.shape.kind == "formula":
            raise RefusedError(
                f"a formula with {extra[0]}",
                f"remove {extra[0]}: what holds and moves it stands in its energies",
                at=(extra[0],),
            )
        seen: set[str] = set()
        for place, entry in enumerate(self.support):
            if not isinstance(entry.where, NamedPlace):
                continue
            for name in entry.where.names:
                if name not in allowed:
                    raise RefusedError(
                        f"{shown(name)} is not a place on this {self.shape.kind}",
                        choose(name, allowed),
                        at=("support", place, "where"),
                    )
                if name in seen:
                    raise RefusedError(
                        f"{shown(name)} is held twice",
                        "name it in one entry only",
                        at=("support", place, "where"),
                    )
                seen.add(name)
        moving = [key for key, value in (("speed", self.speed_m_s), ("spin", self.spin_rad_s)) if any(value)]
        if self.held and moving:
            raise RefusedError(
                f"a held body with {moving[0]}", f"remove {moving[0]}, or held = true", at=(moving[0],)
            )
        return self


def default_spot(shape: Any) -> str:  # noqa: ANN401 (any member of the union)
    """Return the named spot of a strike that names none."""
    return spot_names(shape)[0]
