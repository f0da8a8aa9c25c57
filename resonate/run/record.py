"""What a run leaves behind: checkpoints, contact forces and a ledger, never modal histories."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from resonate.run.track import BodyTrack

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
    then the r linear rigid motions of a supported body as q + 1j q'; a free body's rigid motion
    is ``rigid`` and it has r = 0 here).
    In a contact segment ``force_n`` (c, n) holds the force of each contact held constant over each of n
    steps of ``step_s``; ``rows`` (c, m + r) are its gains on the modes, ``contacts`` the strike numbers;
    ``axes`` and ``arms_m`` (c, 3) where the forces act on a free body: world direction and lever from its centre.
    A free segment has no forces and lasts until the next segment begins.
    """

    begin_s: float
    z: ComplexArray
    rigid: RigidState | None
    step_s: float = 0.0
    force_n: Array | None = None
    rows: Array | None = None
    contacts: tuple[int, ...] = ()
    axes: Array | None = None
    arms_m: Array | None = None

    @property
    def is_contact(self) -> bool:
        """Whether forces act in it."""
        return self.force_n is not None

    @property
    def end_s(self) -> float:
        """End of a contact segment, s; a free segment has none of its own (inf)."""
        if self.force_n is None:
            return float("inf")
        return self.begin_s + self.step_s * int(self.force_n.shape[1])


@dataclass(frozen=True, slots=True)
class Event:
    """One contact, for tables and marks.

    ``begin_s`` and ``end_s`` scene time; ``place_m`` (3,) in the world; ``closing_speed_m_s`` and
    ``leaving_speed_m_s`` of the striker against the struck point, along the push; ``strike`` its number.
    """

    kind: str
    body: str
    other: str
    begin_s: float
    end_s: float
    place_m: Array
    impulse_ns: float
    peak_n: float
    closing_speed_m_s: float
    leaving_speed_m_s: float
    strike: int


@dataclass(frozen=True, slots=True)
class Ledger:
    """Where the energy went, J.

    What is given (strikers, bodies already moving) and the work of gravity equal what is left and lost, but for
    ``residual``; ``scale`` is what the residual is measured against.
    """

    given: float
    gravity_work: float
    modal_left: float
    rigid_left: float
    contact_left: float
    striker_left: float
    lost_material: float
    lost_thermoelastic: float
    lost_support: float
    lost_radiation: float
    lost_contact: float
    lost_truncation: float
    residual: float
    scale: float

    def closes(self, share: float = 1e-6) -> bool:
        """Whether the residual is at most ``share`` of the energy put in."""
        return abs(self.residual) <= share * self.scale

    def plus(self, other: Ledger) -> Ledger:
        """Sum of two ledgers, entry by entry."""
        return Ledger(*(getattr(self, f.name) + getattr(other, f.name) for f in fields(self)))

    @classmethod
    def empty(cls) -> Ledger:
        """A ledger of zeros."""
        return cls(*([0.0] * len(fields(cls))))


@dataclass(frozen=True, slots=True)
class Record:
    """One run: ``bodies`` in the order of the scene, ``events`` in order of time."""

    clock_begin_s: float
    bodies: tuple[BodyTrack, ...]
    events: tuple[Event, ...]
    ledger: Ledger
    warnings: tuple[str, ...] = ()
