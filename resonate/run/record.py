"""What a run leaves behind: checkpoints, contact forces and a ledger, never modal histories."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class RigidState:
    """Motion of a body as a whole, in the world.

    ``place_m`` (3,) of the mass centre; ``turn`` (4,) quaternion xyzw, body to world;
    ``speed_m_s`` (3,); ``spin_rad_s`` (3,) world angular velocity.
    """

    place_m: Array
    turn: Array
    speed_m_s: Array
    spin_rad_s: Array


@dataclass(frozen=True, slots=True)
class Segment:
    """A stretch of one body's time that starts from a checkpoint.

    ``z`` (m + r,) complex modal state at ``begin_s`` (elastic modes first: z = q' - conj(lambda) q;
    then the r linear rigid motions of a supported body as q + 1j q'; empty of those for a free
    body, whose rigid motion is ``rigid``).
    In a contact segment ``force_n`` (c, n) holds the force of each contact held constant over each of n
    steps of ``step_s``; ``rows`` (c, m + r) are its gains on the modes, ``contacts`` the strike numbers.
    A free segment has no forces and lasts until the next segment begins.
    """

    begin_s: float
    z: ComplexArray
    rigid: RigidState | None
    step_s: float = 0.0
    force_n: Array | None = None
    rows: Array | None = None
    contacts: tuple[int, ...] = ()

    @property
    def is_contact(self) -> bool:
        """Whether forces act in it."""
        return self.force_n is not None

    @property
    def end_s(self) -> float:
        """End of a contact segment, s; a free segment has none of its own (inf)."""
        if self.force_n is None:
            return float("inf")
        return self.begin_s + self.step_s * self.force_n.shape[1]
