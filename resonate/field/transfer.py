"""What a microphone hears of each mode: the one interface between bodies and sound.

Two honest first models stand behind it: flat faces in a baffle and compact dipoles along lines.
A transfer solved from equivalent sources fits behind the same interface.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

import numpy as np

from resonate.field.dipoles import DipoleLine
from resonate.field.rayleigh import BaffledFace
from resonate.field.samples import motion_of, samples_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.field.air import Air
    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Common practice: a slice is compact while wavenumber times half its thickness stays below one.
COMPACT = 1.0


class Transfer(Protocol):
    """Pressure that each mode of one body makes at a place."""

    @property
    def radius_m(self) -> float:
        """Half the extent of what radiates: sets how fast the weights change with direction."""

    @property
    def warnings(self) -> tuple[str, ...]:
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
        A baffled Rayleigh sum for skins and plates, compact dipoles for lines.
    """
    samples, motion, radiator = samples_of(body, modes, air), motion_of(body, modes), body.radiator
    if radiator.kind == "dipoles":
        return DipoleLine(samples, motion, radiator.weights, _line_warnings(body, modes, air))
    outward = np.einsum("ihn,ni->hn", motion, radiator.normals)
    warnings = _face_warnings(body, modes, air, samples.radius_m)
    return BaffledFace(samples, outward, radiator.normals, radiator.weights[:, 0], warnings)


def _face_warnings(body: Body, modes: ModeSet, air: Air, radius_m: float) -> tuple[str, ...]:
    if not body.free or modes.heard == 0:
        return ()
    # Front and back cancel while the way round the edge is short against the wavelength: k * radius < 1.
    below_hz = air.speed_m_s / (2.0 * np.pi * radius_m)
    count = int(np.sum(modes.frequency_hz[: modes.heard] < below_hz))
    return (
        f"body {body.name!r}: a free plate is heard through a baffled model; below about {below_hz:.0f} Hz "
        f"({count} of its {modes.heard} heard modes) it would be quieter",
    )


def _line_warnings(body: Body, modes: ModeSet, air: Air) -> tuple[str, ...]:
    if modes.heard == 0:
        return ()
    middle = body.radiator.points_m
    span = body.surface.points_m - middle[0]
    axis = middle[-1] - middle[0]
    length = float(np.linalg.norm(axis))
    if length > 0.0:
        span = span - np.outer(span @ axis, axis) / length**2
    half_m = float(np.sqrt(np.max(np.einsum("ni,ni->n", span, span))))
    limit_hz = COMPACT * air.speed_m_s / (2.0 * np.pi * half_m) if half_m > 0.0 else np.inf
    count = int(np.sum(modes.frequency_hz[: modes.heard] > limit_hz))
    if count == 0:
        return ()
    return (
        f"body {body.name!r}: {count} of its {modes.heard} heard modes lie above {limit_hz:.0f} Hz, where "
        "its cross-section is not small against the wavelength; compact dipoles make them too loud",
    )
