"""Coils: a round wire wound to a helix round x."""

from __future__ import annotations

import math
from typing import Annotated, Final, Literal

from pydantic import BeforeValidator, Field, model_validator

from resonate.scene.kinds import Length, Part, number
from resonate.scene.refused import RefusedError

# More turns than this are a slip of the pen; half a turn is no coil yet.
_MOST_TURNS: Final = 200.0
_LEAST_TURNS: Final = 0.5


class CoilShape(Part):
    """``wire, diameter, turns, pitch``: x along the axis from the left end.

    ``diameter`` is that of the helix of the wire's middle; ``pitch`` the advance along x in one turn. The wire begins
    above the axis (+y) and winds from +y to +z: a right-handed screw.
    """

    kind: Literal["coil"] = "coil"
    wire_m: Length = Field(validation_alias="wire")
    diameter_m: Length = Field(validation_alias="diameter")
    turns: Annotated[float, BeforeValidator(number("number", least=_LEAST_TURNS, most=_MOST_TURNS))]
    pitch_m: Length = Field(validation_alias="pitch")

    @model_validator(mode="after")
    def _open(self) -> CoilShape:
        if self.wire_m >= 0.5 * self.diameter_m:
            raise RefusedError(
                f"a wire of {self.wire_m:g} m for a coil of {self.diameter_m:g} m",
                "make the wire thinner than half the diameter; diameter is measured to the middle of the wire",
                at=("wire",),
            )
        # Across the wire two turns lie pitch x cos(slope) apart.
        apart = self.pitch_m * math.cos(math.atan2(self.pitch_m, math.pi * self.diameter_m))
        if apart <= self.wire_m:
            raise RefusedError(
                f"turns {apart:g} m apart touch: the wire is {self.wire_m:g} m thick",
                "raise the pitch: a coil wound solid rattles, which this version does not know",
                at=("pitch",),
            )
        return self

    @property
    def length_m(self) -> float:
        """Along the axis, from the middle of one end of the wire to that of the other."""
        return self.turns * self.pitch_m
