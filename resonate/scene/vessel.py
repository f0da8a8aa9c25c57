"""Vessels: shells of revolution, given by the profile of their middle surface."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.kinds import Flag, Part, number
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Callable

Rows = tuple[tuple[float, float], ...]
Walls = tuple[float, ...]

_read_radius = number("length", least=0.0)
_read_height = number("length")
_read_wall = number("length", above=0.0)
_read_share = number("fraction", least=0.0, most=1.0)
# Longest list of points.
_MOST = 400


def _at(read: Callable[[object], float], value: object, at: tuple[int, ...]) -> float:
    try:
        return read(value)
    except RefusedError as error:
        raise RefusedError(error.what, error.fix, at=at) from error


def _rows(value: object) -> Rows:
    if not isinstance(value, list | tuple) or len(value) < 2:  # noqa: PLR2004 (two ends)
        raise RefusedError(f"{shown(value)} is not a profile", "give at least two points [[radius, height], ...]")
    if len(value) > _MOST:
        raise RefusedError(
            f"a profile of {len(value)} points", f"give at most {_MOST}; smooth = true runs a curve through them"
        )
    rows: list[tuple[float, float]] = []
    for place, row in enumerate(value):
        if not isinstance(row, list | tuple) or len(row) != 2:  # noqa: PLR2004 (radius and height)
            raise RefusedError(f"{shown(row)} is not a point of a profile", "give [radius, height]", at=(place,))
        rows.append((_at(_read_radius, row[0], (place, 0)), _at(_read_height, row[1], (place, 1))))
    _check_rows(rows)
    return tuple(rows)


def _check_rows(rows: list[tuple[float, float]]) -> None:
    last = len(rows) - 1
    for place, row in enumerate(rows):
        if row[0] == 0.0 and place not in (0, last):
            raise RefusedError(
                "the profile meets the axis on its way",
                "a radius of 0 closes an end: give it to the first or the last point only",
                at=(place, 0),
            )
        if place > 1 and row == rows[place - 1] == rows[place - 2]:
            raise RefusedError("the same point three times", "a corner or a step needs it twice", at=(place,))
    if rows[0] == rows[1] or rows[-1] == rows[-2]:
        raise RefusedError("a point given twice at the very end", "give the ends once each", at=(0,))
    if rows[0] == rows[-1]:
        raise RefusedError(
            "the profile ends where it begins", "give an open profile; a closed tube ring is a solid", at=(last,)
        )
    for k in range(last):
        for j in range(k + 2, last):
            if rows[k] != rows[k + 1] and rows[j] != rows[j + 1] and _meet(*rows[k : k + 2], *rows[j : j + 2]):
                raise RefusedError(
                    f"the profile crosses itself: between points {k + 1} and {k + 2}, and {j + 1} and {j + 2}",
                    "list the points in order from one end of the wall to the other",
                    at=(j,),
                )


Point = tuple[float, float]


def _side(a: Point, b: Point, c: Point) -> float:
    return (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0])


def _meet(a: Point, b: Point, c: Point, d: Point) -> bool:
    sides = _side(a, b, c), _side(a, b, d), _side(c, d, a), _side(c, d, b)
    if b == c:  # the two halves of a repeated point are neighbours
        return False
    return sides[0] * sides[1] <= 0 and sides[2] * sides[3] <= 0 and any(sides)


def _walls(value: object) -> Walls:
    if isinstance(value, list | tuple):
        if not value:
            raise RefusedError("an empty list of walls", "give one thickness, or one for each point of the profile")
        return tuple(_at(_read_wall, item, (place,)) for place, item in enumerate(value))
    return (_read_wall(value),)


class LugSpec(Part):
    """``{mass, at = [share of the meridian, share of a turn]}``: a small mass fixed to the wall."""

    mass_kg: Annotated[float, BeforeValidator(number("mass", above=0.0))] = Field(validation_alias="mass")
    at: tuple[float, float]

    @model_validator(mode="before")
    @classmethod
    def _shares(cls, data: object) -> object:
        if not isinstance(data, dict) or "at" not in data:
            return data
        given = data["at"]
        if not isinstance(given, list | tuple) or len(given) != 2:  # noqa: PLR2004 (two shares)
            raise RefusedError(
                f"{shown(given)} is not a place on the wall",
                "give [share from base to rim, share of a turn]",
                at=("at",),
            )
        shares = []
        for place, item in enumerate(given):
            try:
                shares.append(_read_share(item))
            except RefusedError as error:
                raise RefusedError(error.what, error.fix, at=("at", place)) from error
        return {**data, "at": tuple(shares)}


def _lugs(value: object) -> object:
    if not isinstance(value, list | tuple):
        raise RefusedError(f"{shown(value)} is no list of lugs", "give a list: [{mass = .., at = [.., ..]}]")
    return tuple(value)


class VesselShape(Part):
    """``profile, wall, smooth, lugs``: a wall of revolution round y.

    ``profile`` lists (radius, height) of the middle surface from one end to the other; a radius of 0 closes an
    end. ``wall`` is one thickness, or one for each point. With ``smooth`` a curve runs through the points, and a
    point given twice is a corner; without it the pieces are straight. A point given twice may carry two walls.
    """

    kind: Literal["vessel"] = "vessel"
    profile_m: Annotated[Rows, BeforeValidator(_rows)] = Field(validation_alias="profile")
    wall_m: Annotated[Walls, BeforeValidator(_walls)] = Field(validation_alias="wall")
    smooth: Flag = False
    lugs: Annotated[tuple[LugSpec, ...], BeforeValidator(_lugs)] = ()

    @model_validator(mode="after")
    def _matching(self) -> VesselShape:
        if len(self.wall_m) not in (1, len(self.profile_m)):
            raise RefusedError(
                f"{len(self.wall_m)} walls for {len(self.profile_m)} points of the profile",
                "give one thickness, or one for each point",
                at=("wall",),
            )
        size = max(
            2.0 * max(row[0] for row in self.profile_m), math.dist(self.profile_m[0], self.profile_m[-1])
        )
        if max(self.wall_m) >= 0.5 * size:
            raise RefusedError(
                f"a wall of {max(self.wall_m):g} m for a vessel of {size:g} m",
                "make the wall thinner; a body so stout is no shell",
                at=("wall",),
            )
        return self

    @property
    def walls_m(self) -> Walls:
        """One thickness for each point of the profile."""
        return self.wall_m if len(self.wall_m) > 1 else self.wall_m * len(self.profile_m)

    @property
    def length_m(self) -> float:
        """Extent along the axis."""
        heights = [row[1] for row in self.profile_m]
        return max(heights) - min(heights)
