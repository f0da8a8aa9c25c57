"""Lumps: point masses joined by springs, listed in the scene or in two tables beside it."""

from __future__ import annotations

import csv
import io
import math
from typing import TYPE_CHECKING, Annotated, Any, Final, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.kinds import Name, Part, Place, number
from resonate.scene.names import choose
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from pathlib import Path

_MOST_POINTS: Final = 400
_MOST_SPRINGS: Final = 4000
_BIGGEST_TABLE: Final = 2**20  # bytes
#: Columns of the tables; those after the stroke may be left out.
POINT_COLUMNS: Final = (("name", "mass_kg", "x_m", "y_m", "z_m"), ())
SPRING_COLUMNS: Final = (("from", "to", "stiffness_n_m"), ("damper_ns_m", "rest_m"))


class LumpSpec(Part):
    """``{name, mass, place}``: a point mass; numbered from 1 unless it is named."""

    name: Name
    mass_kg: Annotated[float, BeforeValidator(number("mass", least=1e-12, most=1e9))] = Field(validation_alias="mass")
    place_m: Place = Field(validation_alias="place")


def _pair(value: object) -> tuple[str, str]:
    if not isinstance(value, list | tuple) or len(value) != 2:  # noqa: PLR2004 (two ends)
        raise RefusedError(f"{shown(value)} is not a pair of points", 'give two names, as in ["left", "bob"]')
    ends = tuple(str(end) if isinstance(end, int) and not isinstance(end, bool) else end for end in value)
    if not all(isinstance(end, str) for end in ends):
        raise RefusedError(f"{shown(value)} is not a pair of points", 'give two names, as in ["left", "bob"]')
    if ends[0] == ends[1]:
        raise RefusedError(f"{shown(ends[0])} joined to itself", "name two different points", at=(1,))
    return ends[0], ends[1]


class LinkSpec(Part):
    """``{between, stiffness, damper, rest}``: a spring along the line between two points.

    ``rest`` is its length without force; it is the distance as placed unless it is given.
    """

    between: Annotated[tuple[str, str], BeforeValidator(_pair)]
    stiffness_n_m: Annotated[float, BeforeValidator(number("stiffness", above=0.0, most=1e15))] = Field(
        validation_alias="stiffness"
    )
    damping_ns_m: Annotated[float, BeforeValidator(number("damping", least=0.0, most=1e12))] = Field(
        validation_alias="damper", default=0.0
    )
    rest_m: Annotated[float, BeforeValidator(number("length", least=0.0))] | None = Field(
        validation_alias="rest", default=None
    )


def _numbered(value: object) -> object:
    if not isinstance(value, list | tuple) or not value:
        raise RefusedError(f"{shown(value)} is no list of points", "give a list: [{mass = .., place = [..]}, ..]")
    if len(value) > _MOST_POINTS:
        raise RefusedError(f"{len(value)} points", f"give at most {_MOST_POINTS}; a finer thing is a bar or a plate")
    return tuple(
        {"name": str(place + 1), **point} if isinstance(point, dict) else point for place, point in enumerate(value)
    )


def _links(value: object) -> object:
    if not isinstance(value, list | tuple):
        raise RefusedError(
            f"{shown(value)} is no list of springs", 'give a list: [{between = ["1", "2"], stiffness = ..}, ..]'
        )
    if len(value) > _MOST_SPRINGS:
        raise RefusedError(f"{len(value)} springs", f"give at most {_MOST_SPRINGS}")
    return tuple(value)


class LumpsShape(Part):
    """``points, springs``: lists in the scene, or names of CSV files beside it."""

    kind: Literal["lumps"] = "lumps"
    points: Annotated[tuple[LumpSpec, ...], BeforeValidator(_numbered)]
    springs: Annotated[tuple[LinkSpec, ...], BeforeValidator(_links)] = ()

    @model_validator(mode="after")
    def _joined(self) -> LumpsShape:
        names = [point.name for point in self.points]
        for place, name in enumerate(names):
            if name == "all":
                raise RefusedError(
                    'a point called "all"', "all stands for every point: rename it", at=("points", place)
                )
            if name in names[:place]:
                raise RefusedError(
                    f"the name {shown(name)} is taken by an earlier point", "rename one", at=("points", place, "name")
                )
        places = {point.name: point.place_m for point in self.points}
        for place, link in enumerate(self.springs):
            for end, name in enumerate(link.between):
                if name not in places:
                    raise RefusedError(
                        f"there is no point {shown(name)}", choose(name, names), at=("springs", place, "between", end)
                    )
            if math.dist(*(places[name] for name in link.between)) == 0.0 and link.rest_m != 0.0:
                raise RefusedError(
                    "a spring between two points at the same place has no direction",
                    "move one of them, or give rest = 0",
                    at=("springs", place),
                )
        return self

    @property
    def point_names(self) -> tuple[str, ...]:
        """What a strike may call its spot."""
        return tuple(point.name for point in self.points)

    @property
    def held_names(self) -> tuple[str, ...]:
        """What a support may call its place."""
        return ("all", *self.point_names)

    @property
    def middle_m(self) -> tuple[float, float, float]:
        """Middle of the box round the points."""
        axes = list(zip(*(point.place_m for point in self.points), strict=True))
        x, y, z = (0.5 * (min(axis) + max(axis)) for axis in axes)
        return x, y, z


def read_table(file: Path, columns: tuple[tuple[str, ...], tuple[str, ...]]) -> list[dict[str, str]]:
    """Read a CSV file with a head line into one dictionary a row; raises ``RefusedError``."""
    needed, spare = columns
    hint = f"give a CSV file whose first line is {','.join((*needed, *spare))}"
    try:
        if file.stat().st_size > _BIGGEST_TABLE:
            raise RefusedError(f"{file.name} is larger than 1 MB", "name a table of points or springs")
        text = file.read_bytes().decode("utf-8-sig")
        rows = list(csv.reader(io.StringIO(text), strict=True, skipinitialspace=True))
    except (OSError, ValueError, csv.Error) as error:
        raise RefusedError(f"{file.name} cannot be read: {error}", hint) from error
    rows = [[cell.strip() for cell in row] for row in rows if any(cell.strip() for cell in row)]
    head = rows[0] if rows else []
    wrong = [name for name in head if name not in (*needed, *spare)]
    if not set(needed) <= set(head) or wrong or len(set(head)) != len(head):
        raise RefusedError(f"{file.name} begins with {shown(head)}", hint)
    for line, row in enumerate(rows[1:], start=2):
        if len(row) != len(head):
            raise RefusedError(f"{file.name}: row {line} has {len(row)} cells, not {len(head)}", hint)
    return [dict(zip(head, row, strict=True)) for row in rows[1:]]


def _value(row: dict[str, str], column: str, line: int) -> float:
    try:
        return float(row[column])
    except ValueError as error:
        raise RefusedError(f"row {line}: {column} is {shown(row[column])}", "give plain numbers in SI units") from error


def listed(key: str, file: Path) -> list[dict[str, Any]]:
    """Points or springs (``key``) of a CSV file, as the scene would list them; raises ``RefusedError``."""
    if key == "points":
        return [
            {
                "name": row["name"],
                "mass": _value(row, "mass_kg", line),
                "place": [_value(row, axis, line) for axis in ("x_m", "y_m", "z_m")],
            }
            for line, row in enumerate(read_table(file, POINT_COLUMNS), start=2)
        ]
    springs = []
    for line, row in enumerate(read_table(file, SPRING_COLUMNS), start=2):
        spring: dict[str, Any] = {"between": [row["from"], row["to"]], "stiffness": _value(row, "stiffness_n_m", line)}
        for column, name in (("damper_ns_m", "damper"), ("rest_m", "rest")):
            if row.get(column):
                spring[name] = _value(row, column, line)
        springs.append(spring)
    return springs
