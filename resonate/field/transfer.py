"""What a microphone hears of each mode: the one interface between bodies and sound.

Honest first models stand behind it: flat faces in a baffle, compact dipoles along lines, simple sources on the
outside of vessels and on solids.
A transfer solved from equivalent sources fits behind the same interface.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

import numpy as np

from resonate.field.closed import OVAL, ClosedSurface
from resonate.field.dipoles import DipoleLine
from resonate.field.doubts import closed_doubts, face_doubts, line_doubts, shell_doubts
from resonate.field.rayleigh import BaffledFace
from resonate.field.samples import motion_of, samples_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.field.air import Air
    from resonate.field.doubts import Doubt
    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]


class Transfer(Protocol):
    """Pressure that each mode of one body makes at a place."""

    @property
    def radius_m(self) -> float:
        """Half the extent of what radiates: sets how fast the weights change with direction."""

    @property
    def doubts(self) -> tuple[Doubt, ...]:
        """Where the model is left, with numbers."""

    def weights(self, place_m: Array, reference_m: float) -> ComplexArray:
        """Pressure per unit modal acceleration (m,) at ``place_m`` (3,) in the body frame.

        ``p(t) = sum_i Re[w_i a_i(t - reference_m / c)]`` with a_i the complex modal acceleration: the
        phases are relative to ``reference_m``, so that the caller keeps or drops that delay.
        Modes that do not sound have weight zero. Raises ``BodyError`` too close to the body.
        """


def transfer_for(body: Body, modes: ModeSet, air: Air) -> Transfer:
    """Choose the radiation model that fits a body.

    Parameters
    ----------
    body : Body
        The body, with its radiating samples.
    modes : ModeSet
        Its modes; only the first ``modes.heard`` sound.
    air : Air
        The air outside.

    Returns
    -------
    Transfer
        A baffled Rayleigh sum for skins and plates, compact dipoles for lines, simple sources for vessels and solids.
    """
    samples, motion, radiator = samples_of(body, modes, air), motion_of(body, modes), body.radiator
    if radiator.kind == "dipoles":
        return DipoleLine(samples, motion, radiator.weights, line_doubts(body, modes, air))
    outward = np.einsum("ihn,ni->hn", motion, radiator.normals)
    if radiator.kind == "closed":
        return ClosedSurface(samples, outward, radiator.weights[:, 0], closed_doubts(body, modes))
    if radiator.kind == "surface":
        doubts = shell_doubts(body, modes, air, radius_m=samples.radius_m)
        return ClosedSurface(samples, outward, radiator.weights[:, 0], doubts, gain=OVAL)
    doubts = face_doubts(body, modes, air, outward=outward, radius_m=samples.radius_m)
    return BaffledFace(samples, outward, radiator.normals, radiator.weights[:, 0], doubts)
