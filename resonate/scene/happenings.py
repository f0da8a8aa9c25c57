"""What happens in a scene and where it is heard: strikes, spots, microphones."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import BeforeValidator, Field, ValidationInfo, model_validator

from resonate.scene.kinds import Direction, Flag, Name, Part, Place, number, vector, whole
from resonate.scene.matter import StrikerSpec
from resonate.scene.moments import read_moment
from resonate.scene.refused import RefusedError, shown

_read_fraction = number("fraction", least=0.0, most=1.0)


def _fraction(value: object) -> tuple[float, ...]:
    if isinstance(value, list | tuple):
        if len(value) not in (1, 2):
            raise RefusedError(f"{shown(value)} is not a fraction", "give [u] on a line, [u, v] on a plate")
        return vector(_read_fraction, count=len(value))(value)
    return (_read_fraction(value),)


class SpotSpec(Part):
    """A spot on a body: exactly one of a name, fractions, the nearest point, or a direction.

    In a scene: ``spot = "centre"``, ``{fraction = [0.3, 0.5]}`` (0 to 1 along x and z),
    ``{point = [x, y, z]}`` (body frame) or ``{toward = [x, y, z]}`` (from the centre, body frame).
    """

    name: str | None = None
    fraction: Annotated[tuple[float, ...], BeforeValidator(_fraction)] | None = None
    point_m: Place | None = Field(validation_alias="point", default=None)
    toward: Direction | None = None

    @model_validator(mode="after")
    def _one(self) -> SpotSpec:
        given = [self.name, self.fraction, self.point_m, self.toward]
        if sum(value is not None for value in given) != 1:
            raise RefusedError(
                "a spot needs exactly one of name, fraction, point, toward",
                'write "centre", {fraction = [0.3, 0.5]}, {point = [x, y, z]} or {toward = [x, y, z]}',
            )
        return self


def _moment(value: object, info: ValidationInfo) -> float:
    return float(read_moment(value, info.context))


class StrikeSpec(Part):
    """``[[strike]]``: ``body time spot striker speed direction angle``.

    In a scene::

        [[strike]]
        body = "hatch"
        time = "01:00:00:12"
        spot = {fraction = [0.3, 0.5]}
        striker = {from = "felt soft", mass = "40 g"}
        speed = "1.5 m/s"
        angle = "20 deg"

    ``time_s`` is the first touch, seconds after ``start``; ``direction`` a unit world vector, or None for
    the inward normal; ``angle_rad`` is measured from that normal.
    """

    set_by_reader: ClassVar[frozenset[str]] = frozenset({"body_index"})

    body: str
    body_index: Annotated[int, BeforeValidator(whole(0, 10**6))] = Field(validation_alias="body index")
    time_s: Annotated[float, BeforeValidator(_moment)] = Field(validation_alias="time")
    spot: SpotSpec
    striker: StrikerSpec
    speed_m_s: Annotated[float, BeforeValidator(number("speed", above=0.0, most=1000.0))] = Field(
        validation_alias="speed"
    )
    direction: Direction | None = None
    angle_rad: Annotated[float, BeforeValidator(number("angle", least=0.0, below=1.5707963))] = Field(
        validation_alias="angle", default=0.0
    )
    stays: Flag = False


class MicSpec(Part):
    """``[[mic]]``: ``name place aim pattern``; ``place_m`` and ``aim`` in the world."""

    name: Name
    place_m: Place = Field(validation_alias="place")
    aim: Direction | None = None
    pattern: Literal["omni"] = "omni"
