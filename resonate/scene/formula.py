"""Formulas: bodies given by their kinetic and potential energies as text."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Final, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.expression import Tape, check_name, read_expression
from resonate.scene.kinds import Length, Part, Place, Triple
from resonate.scene.names import listing
from resonate.scene.refused import RefusedError, shown
from resonate.scene.units import UNITS, quantity

if TYPE_CHECKING:
    from collections.abc import Mapping

Named = tuple[tuple[str, float], ...]

_MOST_COORDINATES: Final = 12
_MOST_PARAMETERS: Final = 64
_MOST_POINTS: Final = 200
_MOST_CORNERS: Final = 32
#: The point of the mesh that ``position`` moves.
POINT: Final = ("x", "y", "z")


def _any_quantity(value: object) -> float:
    """A number in SI units, or text with any unit of the scene language."""
    if isinstance(value, str):
        unit = value.strip().lstrip("+-0123456789._eE").strip()
        for dimension, units in UNITS.items():
            if unit and unit in units:
                return quantity(value, dimension)
        if unit:
            raise RefusedError(
                f"the unit of {shown(value)} is not known", "give the number alone, in SI units, as in 0.25"
            )
    return quantity(value, "number")


def _table(value: object, what: str, most: int, taken: tuple[str, ...]) -> Named:
    if not isinstance(value, dict):
        raise RefusedError(f"{shown(value)} is no table of {what}s", 'give a table, as in {m = "2 kg", l = 0.4}')
    if len(value) > most:
        raise RefusedError(f"{len(value)} {what}s", f"give at most {most}")
    found: list[tuple[str, float]] = []
    for name, given in value.items():
        try:
            known = check_name(name, (*taken, *(pair[0] for pair in found)), what)
            found.append((known, _any_quantity(given)))
        except RefusedError as error:
            raise RefusedError(error.what, error.fix, at=(name,)) from error
    return tuple(found)


def _coordinates(value: object) -> Named:
    if isinstance(value, list | tuple):
        for place, name in enumerate(value):
            if not isinstance(name, str) or name in value[:place]:
                raise RefusedError(
                    f"{shown(name)} cannot name a coordinate", "give each a name of its own", at=(place,)
                )
        value = dict.fromkeys(value, 0.0)
    found = _table(value, "coordinate", _MOST_COORDINATES, POINT)
    if not found:
        raise RefusedError("no coordinate", 'name at least one, as in ["a"], or {a = "10 deg"} to say where it begins')
    return found


def _parameters(value: object) -> Named:
    return _table(value, "parameter", _MOST_PARAMETERS, POINT)


def _texts(value: object) -> tuple[str, str, str]:
    if not isinstance(value, list | tuple) or len(value) != 3:  # noqa: PLR2004 (x, y and z)
        raise RefusedError(f"{shown(value)} is not a place", 'give three formulas: ["l*sin(a)", "-l*cos(a)", "z"]')
    return _text(value[0]), _text(value[1]), _text(value[2])


def _text(value: object) -> str:
    if isinstance(value, int | float) and not isinstance(value, bool):
        return repr(value)
    return value if isinstance(value, str) else shown(value)


def _numbers(value: object) -> tuple[tuple[int, ...], ...]:
    if not isinstance(value, list | tuple) or len(value) > _MOST_POINTS:
        raise RefusedError(
            f"{shown(value)} is no list", f"give at most {_MOST_POINTS} lists of points, as in [[1, 2], [2, 3]]"
        )
    for place, item in enumerate(value):
        whole = isinstance(item, list | tuple) and all(isinstance(k, int) and not isinstance(k, bool) for k in item)
        if not whole or not 2 <= len(item) <= _MOST_CORNERS or len(set(item)) != len(item):  # noqa: PLR2004 (two ends)
            raise RefusedError(f"{shown(item)} joins no points", "give numbers of points, counted from 1", at=(place,))
    return tuple(tuple(item) for item in value)


def _places(value: object) -> object:
    if not isinstance(value, list | tuple) or not 1 <= len(value) <= _MOST_POINTS:
        raise RefusedError(f"{shown(value)} is no list of points", f"give 1 to {_MOST_POINTS} points [[x, y, z], ...]")
    return tuple(value)


def _mesh(value: object) -> object:
    if not isinstance(value, dict | Part):
        raise RefusedError(f"{shown(value)} is no mesh", "give a table, as in {points = [[0, 0, 0]], width = 0.01}")
    return value


class MeshSpec(Part):
    """``{points, edges, faces, width}``: what is seen, struck and heard of a formula.

    ``points`` are the x, y, z that ``position`` speaks of; ``edges`` (two each) and ``faces`` (three or more) join them
    by number, counted from 1; balls and rods are ``width`` thick.
    """

    points: Annotated[tuple[Place, ...], BeforeValidator(_places)]
    edges: Annotated[tuple[tuple[int, ...], ...], BeforeValidator(_numbers)] = ()
    faces: Annotated[tuple[tuple[int, ...], ...], BeforeValidator(_numbers)] = ()
    width_m: Length = Field(validation_alias="width", default=0.01)

    @model_validator(mode="after")
    def _joined(self) -> MeshSpec:
        for key, least, most in (("edges", 2, 2), ("faces", 3, _MOST_CORNERS)):
            for place, item in enumerate(getattr(self, key)):
                if not least <= len(item) <= most or not all(1 <= k <= len(self.points) for k in item):
                    raise RefusedError(
                        f"{shown(item)} joins no points",
                        f"give {'two' if most == least else 'three or more'} numbers from 1 to {len(self.points)}",
                        at=(key, place),
                    )
        return self


class FormulaShape(Part):
    """``coordinates, parameters, position, kinetic, potential, mesh``.

    ``coordinates`` are names, or a table of names and where the search for rest begins; ``a'`` is the rate of ``a``.
    ``position`` says where the point x, y, z of the mesh is.
    """

    set_by_reader: ClassVar[frozenset[str]] = frozenset({"kind"})

    kind: Literal["formula"] = "formula"
    coordinates: Annotated[Named, BeforeValidator(_coordinates)]
    parameters: Annotated[Named, BeforeValidator(_parameters)] = ()
    position: Annotated[tuple[str, str, str], BeforeValidator(_texts)]
    kinetic: Annotated[str, BeforeValidator(_text)]
    potential: Annotated[str, BeforeValidator(_text)]
    mesh: Annotated[MeshSpec, BeforeValidator(_mesh)]

    @model_validator(mode="after")
    def _readable(self) -> FormulaShape:
        for name, _ in self.parameters:
            if name in self.names:
                raise RefusedError(
                    f"{shown(name)} is both a coordinate and a parameter", "rename one", at=("parameters", name)
                )
        for place in range(3):
            try:
                self.place_tape(place)
            except RefusedError as error:
                raise RefusedError(error.what, error.fix, at=("position", place)) from error
        for key, tape in (("kinetic", self.kinetic_tape), ("potential", self.potential_tape)):
            try:
                tape()
            except RefusedError as error:
                raise RefusedError(error.what, error.fix, at=(key,)) from error
        return self

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the coordinates."""
        return tuple(name for name, _ in self.coordinates)

    @property
    def constants(self) -> Mapping[str, float]:
        """Values of the parameters."""
        return dict(self.parameters)

    def place_tape(self, axis: int) -> Tape:
        """Place along one axis, over coordinates and then x, y, z."""
        return read_expression(self.position[axis], (*self.names, *POINT), self.constants)

    def kinetic_tape(self) -> Tape:
        """T over coordinates and then their rates."""
        return read_expression(self.kinetic, (*self.names, *(f"{name}'" for name in self.names)), self.constants)

    def potential_tape(self) -> Tape:
        """V over the coordinates."""
        if "'" in self.potential:
            raise RefusedError(
                f"a rate in {shown(self.potential)}", f"a potential energy depends on {listing(self.names)} alone"
            )
        return read_expression(self.potential, self.names, self.constants)

    @property
    def point_names(self) -> tuple[str, ...]:
        """What a strike may call its spot."""
        return tuple(str(number + 1) for number in range(len(self.mesh.points)))

    @property
    def held_names(self) -> tuple[str, ...]:
        """None: its energies say what holds it."""
        return ()

    @property
    def middle_m(self) -> Triple:
        """Middle of the mesh as it is written, before ``position`` moves it."""
        axes = list(zip(*self.mesh.points, strict=True))
        x, y, z = (0.5 * (min(axis) + max(axis)) for axis in axes)
        return x, y, z
