"""The tables that describe the delivery: take, picture, sound, world."""

from __future__ import annotations

from fractions import Fraction
from typing import Annotated, Any, Final, Literal

from pydantic import BeforeValidator, Field, InstanceOf, ValidationInfo, model_validator

from resonate.scene.clock import FrameRate, read_start
from resonate.scene.kinds import Flag, Part, number, whole
from resonate.scene.moments import Picture, read_span
from resonate.scene.names import choose
from resonate.scene.refused import RefusedError, shown
from resonate.scene.units import quantity

FILES: Final = ("wav", "curves", "events", "glb", "manifest")
LATER_FILES: Final = ("page", "usd")
SAMPLE_RATES: Final = (44100, 48000, 88200, 96000, 176400, 192000)
STANDARD_GRAVITY: Final = 9.80665  # m/s^2, 3rd CGPM (1901)


def _length(value: object, info: ValidationInfo) -> Fraction:
    if isinstance(value, Fraction):
        span = value
    else:
        rate = info.context.rate if isinstance(info.context, Picture) else None
        span = read_span(value, rate)
    if span <= 0:
        raise RefusedError(f"{shown(value)} is no length", 'give a time above 0, "3 s" or "72 f"')
    return span


def _files(value: object) -> tuple[str, ...]:
    if not isinstance(value, list | tuple) or not value:
        raise RefusedError(f"{shown(value)} is not a list of files", f"list some of {', '.join(FILES)}")
    for place, item in enumerate(value):
        if item in LATER_FILES:
            raise RefusedError(
                f"{shown(item)} is not in this version", f"use {', '.join(FILES)}", at=(place,)
            )
        if item not in FILES:
            raise RefusedError(
                f"{shown(item)} is not a file of a take", choose(str(item), FILES), at=(place,)
            )
    return tuple(item for item in FILES if item in value)


class TakeSpec(Part):
    """``[take]``: ``length = "3 s"  seed = 11  files = ["wav", "curves", "events", "glb", "manifest"]``."""

    length: Annotated[InstanceOf[Fraction], BeforeValidator(_length)]
    seed: Annotated[int, BeforeValidator(whole(0, 2**63 - 1))] = 0
    files: Annotated[tuple[str, ...], BeforeValidator(_files)] = FILES

    @property
    def length_s(self) -> float:
        """Length without handles, s."""
        return float(self.length)


def _shutter(value: object) -> float:
    angle = quantity(value, "angle")
    share = angle / quantity("1 turn", "angle")
    if not 0.0 <= share <= 1.0:
        raise RefusedError(f"{shown(value)} is out of range", 'give an angle from "0 deg" to "360 deg"')
    return share


def _start(value: object) -> str | int:
    if isinstance(value, bool) or not isinstance(value, int | str):
        raise RefusedError(
            f"{shown(value)} is not a start", 'give a timecode such as "01:00:00:00" or a frame number'
        )
    return value


class PictureSpec(Part):
    """``[picture]``: ``rate  start  handles  shutter  up  unit``.

    ``shutter_turn`` is the open part of a frame: 0.5 for 180 degrees. ``start`` is the timecode or
    frame number as given.
    """

    rate: Annotated[InstanceOf[FrameRate], BeforeValidator(FrameRate.read)] = FrameRate(Fraction(24))
    start: Annotated[str | int, BeforeValidator(_start)] = "01:00:00:00"
    handles: Annotated[int, BeforeValidator(whole(0, 10**6))] = 0
    shutter_turn: Annotated[float, BeforeValidator(_shutter)] = Field(validation_alias="shutter", default=0.5)
    up: Literal["y", "z"] = "y"
    unit: Literal["m", "cm"] = "m"

    @property
    def counting(self) -> Picture:
        """Rate and start, as times are counted with."""
        frame, numbered = read_start(self.start, self.rate)
        return Picture(rate=self.rate, start_frame=frame, numbered=numbered)

    @model_validator(mode="after")
    def _starts(self) -> PictureSpec:
        try:
            frame, numbered = read_start(self.start, self.rate)
        except RefusedError as error:
            raise RefusedError(error.what, error.fix, at=("start",)) from error
        # Labels go on before midnight with those of the day before; numbers do not go on below 0.
        if self.handles > (frame if numbered else self.rate.day_frames):
            limit = "frame 0" if numbered else "the day before"
            raise RefusedError(
                f"{self.handles} handles before {shown(self.start)} begin before {limit}",
                "start later or take fewer handles",
                at=("handles",),
            )
        return self


class LevelSpec(Part):
    """``level = "physical"`` (pascal against ``full_scale``) or ``{peak = "-6 dB"}``."""

    kind: Literal["physical", "peak"] = "physical"
    db: Annotated[float, BeforeValidator(number("level", least=-200.0, most=0.0))] = Field(
        validation_alias="peak", default=0.0
    )


def _sample_rate(value: object) -> int:
    rate = quantity(value, "frequency")
    if rate not in SAMPLE_RATES:
        allowed = ", ".join(f"{allowed / 1000:g}" for allowed in SAMPLE_RATES)
        raise RefusedError(f"{shown(value)} is not a sample rate", f"use one of {allowed} kHz")
    return int(rate)


def _dither(known: dict[str, Any]) -> bool:
    return bool(known["format"] == "16-bit")


class SoundSpec(Part):
    """``[sound]``: ``rate format level full_scale head tail dither delay stems``.

    ``dither`` is on for 16-bit and off otherwise unless it is given.
    """

    rate_hz: Annotated[int, BeforeValidator(_sample_rate)] = Field(validation_alias="rate", default=48000)
    format: Literal["16-bit", "24-bit", "float"] = "24-bit"
    level: LevelSpec = LevelSpec()
    full_scale_pa: Annotated[float, BeforeValidator(number("pressure", above=0.0))] = Field(
        validation_alias="full_scale", default=20.0
    )
    head: Literal["picture"] = "picture"
    tail: Literal["keep"] = "keep"
    dither: Flag = Field(default_factory=_dither)
    delay: Flag = False
    stems: Literal["none"] = "none"


class WorldSpec(Part):
    """``[world]``: ``gravity temperature humidity pressure``; gravity acts along -y."""

    gravity_m_s2: Annotated[float, BeforeValidator(number("acceleration", least=0.0, most=1000.0))] = Field(
        validation_alias="gravity", default=STANDARD_GRAVITY
    )
    temperature_k: Annotated[float, BeforeValidator(number("temperature", least=173.15, most=473.15))] = (
        Field(validation_alias="temperature", default=293.15)
    )
    humidity: Annotated[float, BeforeValidator(number("fraction", least=0.0, most=1.0))] = 0.5
    pressure_pa: Annotated[float, BeforeValidator(number("pressure", least=1e3, most=1e6))] = Field(
        validation_alias="pressure", default=101325.0
    )
