"""The field types of the scene models: checked numbers, vectors and the common base."""

from __future__ import annotations

import math
import unicodedata
from typing import TYPE_CHECKING, Annotated, ClassVar

from pydantic import BaseModel, BeforeValidator, ConfigDict

from resonate.scene.refused import RefusedError, shown
from resonate.scene.units import quantity

if TYPE_CHECKING:
    from collections.abc import Callable

Triple = tuple[float, float, float]
Quaternion = tuple[float, float, float, float]


class Part(BaseModel):
    """A frozen part of a scene; its fields carry units, their aliases are the keys of the file.

    ``set_by_reader`` are fields that a file does not name itself, ``also_written`` keys that it may name
    besides the fields.
    """

    set_by_reader: ClassVar[frozenset[str]] = frozenset({"kind"})
    also_written: ClassVar[tuple[str, ...]] = ()

    model_config = ConfigDict(
        frozen=True, extra="forbid", validate_by_name=True, validate_by_alias=True, validate_default=False
    )


def number(
    dimension: str,
    *,
    above: float | None = None,
    least: float | None = None,
    below: float | None = None,
    most: float | None = None,
) -> Callable[[object], float]:
    """Make the reader of one quantity whose SI value lies in a range.

    ``above`` and ``below`` are excluded bounds, ``least`` and ``most`` included ones.
    """

    def read(value: object) -> float:
        result = quantity(value, dimension)
        outside = (
            (above is not None and result <= above)
            or (least is not None and result < least)
            or (below is not None and result >= below)
            or (most is not None and result > most)
        )
        if outside:
            allowed = _range(above=above, least=least, below=below, most=most)
            article = "an" if dimension[0] in "aeiou" else "a"
            raise RefusedError(f"{shown(value)} is out of range", f"give {article} {dimension} {allowed}")
        return result

    return read


def _range(*, above: float | None, least: float | None, below: float | None, most: float | None) -> str:
    words = (
        ("above", above),
        ("of at least", least),
        ("below", below),
        ("of at most", most),
    )
    return " and ".join(f"{word} {bound:g}" for word, bound in words if bound is not None)


def vector(read: Callable[[object], float], *, count: int = 3) -> Callable[[object], tuple[float, ...]]:
    """Make the reader of a list of exactly ``count`` quantities."""

    def read_all(value: object) -> tuple[float, ...]:
        if not isinstance(value, list | tuple) or len(value) != count:
            raise RefusedError(
                f"{shown(value)} is not a list of {count} values", f"give {count} values, [..]"
            )
        return tuple(_element(read, item, place) for place, item in enumerate(value))

    return read_all


def _element(read: Callable[[object], float], item: object, place: int) -> float:
    try:
        return read(item)
    except RefusedError as error:
        raise RefusedError(error.what, error.fix, at=(place, *error.at)) from error


def whole(least: int, most: int) -> Callable[[object], int]:
    """Make the reader of a whole number from ``least`` to ``most``."""

    def read(value: object) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
            raise RefusedError(
                f"{shown(value)} is not allowed here", f"give a whole number from {least} to {most}"
            )
        return value

    return read


def _flag(value: object) -> bool:
    if not isinstance(value, bool):
        raise RefusedError(f"{shown(value)} is neither true nor false", "write true or false, without quotes")
    return value


def _direction(value: object) -> tuple[float, ...]:
    length = vector(number("number"))(value)
    norm = math.hypot(*length)
    if norm == 0.0:
        raise RefusedError(f"{shown(value)} has no direction", "give a vector that is not zero")
    return tuple(component / norm for component in length)


def _turn(value: object) -> tuple[float, ...]:
    if isinstance(value, dict):
        unknown = [key for key in value if key not in ("axis", "angle")]
        if unknown or len(value) != 2:  # noqa: PLR2004 (axis and angle)
            raise RefusedError(
                f"{shown(value)} is not a turn", 'give {axis = [0, 1, 0], angle = "90 deg"} or [x, y, z, w]'
            )
        try:
            axis = _direction(value["axis"])
        except RefusedError as error:
            raise RefusedError(error.what, error.fix, at=("axis", *error.at)) from error
        try:
            half = 0.5 * quantity(value["angle"], "angle")
        except RefusedError as error:
            raise RefusedError(error.what, error.fix, at=("angle",)) from error
        return (*(math.sin(half) * part for part in axis), math.cos(half))
    if not isinstance(value, list | tuple) or len(value) != 4:  # noqa: PLR2004 (a quaternion)
        raise RefusedError(
            f"{shown(value)} is not a turn", 'give {axis = [0, 1, 0], angle = "90 deg"} or [x, y, z, w]'
        )
    parts = vector(number("number"), count=4)(value)
    norm = math.hypot(*parts)
    if norm == 0.0:
        raise RefusedError(f"{shown(value)} has no direction", "no turn at all is [0, 0, 0, 1]")
    return tuple(part / norm for part in parts)


def _name(value: object) -> str:
    if not isinstance(value, str) or not value.strip():
        raise RefusedError(f"{shown(value)} is not a name", "give a text that is not empty")
    if not _plain(value.strip()):
        raise RefusedError(
            f"{shown(value)} cannot name a column",
            "use letters, digits, spaces, - and _ only, and begin with a letter or a digit",
        )
    if len(value) > 80:  # noqa: PLR2004 (a column head)
        raise RefusedError(f"{shown(value)} is {len(value)} characters long", "use at most 80")
    return value.strip()


def _plain(name: str) -> bool:
    # Of any script; what begins otherwise a spreadsheet may take for a formula.
    kinds = [unicodedata.category(letter)[0] for letter in name]
    return kinds[0] in "LN" and all(
        kind in "LNM" or letter in " -_" for kind, letter in zip(kinds, name, strict=True)
    )


Flag = Annotated[bool, BeforeValidator(_flag)]
Name = Annotated[str, BeforeValidator(_name)]
Length = Annotated[float, BeforeValidator(number("length", above=0.0))]
Modulus = Annotated[float, BeforeValidator(number("pressure", above=0.0))]
Poisson = Annotated[float, BeforeValidator(number("number", above=-1.0, below=0.5))]
Frequency = Annotated[float, BeforeValidator(number("frequency", above=0.0))]
# A double tells micrometres at this distance.
_FARTHEST_M = 1e5
Place = Annotated[Triple, BeforeValidator(vector(number("length", least=-_FARTHEST_M, most=_FARTHEST_M)))]
Direction = Annotated[Triple, BeforeValidator(_direction)]
Turn = Annotated[Quaternion, BeforeValidator(_turn)]
