"""What bodies and strikers are made of."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Any, ClassVar

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.kinds import Length, Modulus, Part, Poisson, Triple, number, vector
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Callable

LossPoints = tuple[tuple[float, float], ...]

#: Loss factor of a material table that names none: typical of bare hard solids (from memory).
DEFAULT_LOSS = 1e-3
#: Poisson ratio of a material table that names none: typical of metals (from memory).
DEFAULT_POISSON = 0.3

_read_hz = number("frequency", above=0.0)
_read_loss = number("number", least=0.0, below=2.0)


def _three(read: Callable[[object], float]) -> Callable[[object], tuple[float, ...]]:
    # One value stands for all directions.
    def read_three(value: object) -> tuple[float, ...]:
        if isinstance(value, list | tuple):
            return vector(read)(value)
        return (read(value),) * 3

    return read_three


def _loss(value: object) -> LossPoints:
    if isinstance(value, int | float | str):
        return ((1000.0, _read_loss(value)),)
    if not isinstance(value, list | tuple) or not value:
        raise RefusedError(
            f"{shown(value)} is not a loss factor", "give one number, or pairs [[hertz, loss], ...]"
        )
    points: list[tuple[float, float]] = []
    for place, pair in enumerate(value):
        if not isinstance(pair, list | tuple) or len(pair) != 2:  # noqa: PLR2004 (a pair)
            raise RefusedError(f"{shown(pair)} is not a pair", "give [hertz, loss]", at=(place,))
        for column, read in enumerate((_read_hz, _read_loss)):
            try:
                read(pair[column])
            except RefusedError as error:
                raise RefusedError(error.what, error.fix, at=(place, column)) from error
        points.append((_read_hz(pair[0]), _read_loss(pair[1])))
        if place and points[place][0] <= points[place - 1][0]:
            raise RefusedError(
                f"{points[place][0]:g} Hz does not come after {points[place - 1][0]:g} Hz",
                "list the frequencies in rising order",
                at=(place, 0),
            )
    return tuple(points)


def _isotropic_shear(known: dict[str, Any]) -> Triple:
    young, poisson = known["young_pa"], known["poisson"]
    first, second, third = (young[k] / (2.0 * (1.0 + poisson[k])) for k in range(3))
    return first, second, third


class MaterialSpec(Part):
    """A linear elastic material of one or three principal directions.

    Direction 1 runs along body x (length, grain), 2 along body z (across, in the plane of a plate),
    3 along body y (thickness). ``young_pa`` = (E1, E2, E3), ``shear_pa`` = (G12, G13, G23),
    ``poisson`` = (nu12, nu13, nu23), nu12 the contraction along 2 for a pull along 1. ``loss`` holds
    (hertz, loss factor) points; a single point holds at all frequencies.

    In a scene: ``material = "brass"``, ``{from = "brass", loss = 0.004}``,
    ``{density = 7850, young = "212 GPa", poisson = 0.29, loss = 2e-4}``, or with three directions
    ``{density = 400, young = [..], shear = [..], poisson = [..], loss = [[100, 0.005], [5e3, 0.02]]}``.

    References
    ----------
    Lempriere, AIAA J. 6 (1968) 2226: bounds on the constants of orthotropic materials.
    """

    set_by_reader: ClassVar[frozenset[str]] = frozenset({"name"})
    also_written: ClassVar[tuple[str, ...]] = ("from",)

    name: str = "own"
    density_kg_m3: Annotated[float, BeforeValidator(number("density", above=0.0, most=1e5))] = Field(
        validation_alias="density"
    )
    young_pa: Annotated[Triple, BeforeValidator(_three(number("pressure", above=0.0, most=1e13)))] = Field(
        validation_alias="young"
    )
    poisson: Annotated[Triple, BeforeValidator(_three(number("number", above=-1.0, below=2.0)))] = (
        DEFAULT_POISSON,
        DEFAULT_POISSON,
        DEFAULT_POISSON,
    )
    shear_pa: Annotated[Triple, BeforeValidator(_three(number("pressure", above=0.0, most=1e13)))] = Field(
        validation_alias="shear", default_factory=_isotropic_shear
    )
    loss: Annotated[LossPoints, BeforeValidator(_loss)] = ((1000.0, DEFAULT_LOSS),)
    expansion_1_k: Annotated[float, BeforeValidator(number("expansion", least=-1e-3, most=1e-2))] | None = (
        Field(validation_alias="expansion", default=None)
    )
    conductivity_w_mk: Annotated[float, BeforeValidator(number("conductivity", above=0.0))] | None = Field(
        validation_alias="conductivity", default=None
    )
    specific_heat_j_kgk: Annotated[float, BeforeValidator(number("specific heat", above=0.0))] | None = Field(
        validation_alias="specific_heat", default=None
    )
    source: str = "given in the scene"

    @property
    def isotropic(self) -> bool:
        """Whether all directions are alike and G = E / 2(1 + nu)."""
        alike = len({*self.young_pa}) == len({*self.poisson}) == len({*self.shear_pa}) == 1
        expected = self.young_pa[0] / (2.0 * (1.0 + self.poisson[0]))
        return alike and math.isclose(self.shear_pa[0], expected, rel_tol=1e-9)

    @model_validator(mode="before")
    @classmethod
    def _spell(cls, data: object) -> object:
        if not isinstance(data, dict):
            return data
        young, shear, poisson = (
            data.get(key, data.get(name))
            for key, name in (("young", "young_pa"), ("shear", "shear_pa"), ("poisson", "poisson"))
        )
        if isinstance(young, list | tuple):
            return _check_three(data, shear, poisson)
        if isinstance(poisson, list | tuple) or isinstance(shear, list | tuple):
            key = "poisson" if isinstance(poisson, list | tuple) else "shear"
            raise RefusedError(
                f"{key} has directions but young = {shown(young)} has one value",
                "give one value to each of young, shear and poisson, or three to each",
                at=(key,),
            )
        if shear is not None:
            return _check_shear(data, young, shear, poisson)
        return data

    @model_validator(mode="after")
    def _stable(self) -> MaterialSpec:
        if self.isotropic:
            if self.poisson[0] >= 0.5:  # noqa: PLR2004 (incompressible)
                raise RefusedError(
                    f"{self.poisson[0]:g} is out of range",
                    "give a number above -1 and below 0.5",
                    at=("poisson",),
                )
            return self
        (e1, e2, e3), (n12, n13, n23) = self.young_pa, self.poisson
        # Minors of the compliance, each divided by its diagonal: all must be positive.
        a, b, c = n12 * n12 * e2 / e1, n13 * n13 * e3 / e1, n23 * n23 * e3 / e2
        whole = 1.0 - a - b - c - 2.0 * n12 * n13 * n23 * e3 / e1
        if min(1.0 - a, 1.0 - b, 1.0 - c, whole) <= 0.0:
            raise RefusedError(
                f"poisson = {shown(list(self.poisson))} makes the material unstable with young = "
                f"{shown([float(f'{e:.4g}') for e in self.young_pa])}",
                "give (nu12, nu13, nu23) with |nu_ij| < sqrt(E_i/E_j); nu12 is the contraction along 2 "
                "for a pull along 1",
                at=("poisson",),
            )
        return self


def _check_three(data: dict[str, Any], shear: object, poisson: object) -> dict[str, Any]:
    for key, value in (("shear", shear), ("poisson", poisson)):
        if not isinstance(value, list | tuple):
            given = "is missing" if value is None else f"= {shown(value)} has one value"
            raise RefusedError(
                f"young has three directions but {key} {given}",
                f"give three values: {key} = [{'G12, G13, G23' if key == 'shear' else 'nu12, nu13, nu23'}]",
                at=(key,),
            )
    return data


def _check_shear(data: dict[str, Any], young: object, shear: object, poisson: object) -> dict[str, Any]:
    # Of E, G and nu two make the third.
    expected_key = "poisson"
    modulus = number("pressure", above=0.0)
    if young is None:
        return data
    try:
        ratio = modulus(young) / (2.0 * modulus(shear)) - 1.0
    except RefusedError:
        return data  # the fields report it
    if poisson is None:
        if not -1.0 < ratio < 0.5:  # noqa: PLR2004 (the isotropic range)
            raise RefusedError(
                f"young = {shown(young)} and shear = {shown(shear)} make poisson {ratio:.3g}",
                "give a shear modulus between E/3 and E/2 for ordinary solids",
                at=("shear",),
            )
        return {**data, expected_key: ratio}
    try:
        given = number("number")(poisson)
    except RefusedError:
        return data
    if abs(given - ratio) > 0.01:  # noqa: PLR2004 (rounding of tables)
        raise RefusedError(
            f"shear = {shown(shear)} does not fit young = {shown(young)} and poisson = {shown(poisson)}",
            "leave out one of the three, or give three directions",
            at=("shear",),
        )
    return {key: value for key, value in data.items() if key not in ("shear", "shear_pa")}


class StrikerSpec(Part):
    """A rigid striker with a rounded tip.

    ``restitution`` is the material's own against a rigid massive wall at ``reference_speed_m_s``;
    the outcome of a hit follows from the run.

    In a scene: ``striker = "felt soft"``, ``{from = "felt soft", mass = "12 g"}`` or
    ``{mass = "12 g", tip_radius = "8 mm", tip_young = "2 MPa", restitution = 0.6}``.
    """

    set_by_reader: ClassVar[frozenset[str]] = frozenset({"name"})
    also_written: ClassVar[tuple[str, ...]] = ("from",)

    name: str = "own"
    mass_kg: Annotated[float, BeforeValidator(number("mass", above=0.0, most=1e4))] = Field(
        validation_alias="mass"
    )
    tip_radius_m: Length = Field(validation_alias="tip_radius")
    tip_young_pa: Modulus = Field(validation_alias="tip_young")
    tip_poisson: Poisson = DEFAULT_POISSON
    restitution: Annotated[float, BeforeValidator(number("number", above=0.0, most=1.0))]
    reference_speed_m_s: Annotated[float, BeforeValidator(number("speed", above=0.0))] = Field(
        validation_alias="reference_speed", default=1.0
    )
    source: str = "given in the scene"
