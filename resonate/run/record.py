"""What a run leaves behind: checkpoints, contact forces and a ledger, never modal histories."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Inertia
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
    For a free body ``kick`` (c, 6) is what an impulse of 1 N s of each contact does to the motion as a whole:
    change of speed (world) and of spin (body frame, held still over the segment).
    A free segment has no forces and lasts until the next segment begins.
    """

    begin_s: float
    z: ComplexArray
    rigid: RigidState | None
    step_s: float = 0.0
    force_n: Array | None = None
    rows: Array | None = None
    contacts: tuple[int, ...] = ()
    kick: Array | None = None

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


@dataclass(frozen=True, slots=True)
class BodyTrack:
    """All of one body's motion, to be had at any time.

    Parameters
    ----------
    name : str
        The body.
    modes : ModeSet
        Its modes.
    segments : tuple[Segment, ...]
        In order of time; the first begins with the run.
    place_m, turn : Array
        (3,) mass centre in the world and (4,) turn xyzw at the start.
    free : bool
        Whether it moves as a whole.
    inertia : Inertia
        Mass properties.
    gravity_m_s2 : Array
        (3,) acceleration that a free body feels.
    """

    name: str
    modes: ModeSet
    segments: tuple[Segment, ...]
    place_m: Array
    turn: Array
    free: bool
    inertia: Inertia
    gravity_m_s2: Array

    def modal(self, times_s: Array) -> ComplexArray:
        """Complex states (m, t) of the elastic modes at any times (t,); at rest before the run."""
        from resonate.run.replay import modal  # noqa: PLC0415 (replay knows this class)

        return modal(self, times_s)[: self.modes.count]

    def linear(self, times_s: Array) -> Array:
        """Linear rigid coordinates (r, t) of a supported body, m kg**0.5."""
        from resonate.run.replay import modal  # noqa: PLC0415 (replay knows this class)

        count = self.modes.count
        if self.free or len(self.segments[0].z) == count:
            return np.zeros((0 if self.free else self.modes.rigid.shape[1], len(times_s)))
        return np.asarray(modal(self, times_s)[count:].real)

    def pose(self, times_s: Array) -> tuple[Array, Array]:
        """Mass centre (t, 3) and turn (t, 4) xyzw in the world, sign-continuous."""
        from resonate.run.replay import pose  # noqa: PLC0415 (replay knows this class)

        return pose(self, times_s)

    def impulse(self, t0_s: Array, t1_s: Array) -> Array:
        """Integral (m, t) of the modal forces from t0 (t,) to t1 (t,), N s kg**-0.5."""
        from resonate.run.replay import impulse  # noqa: PLC0415 (replay knows this class)

        return impulse(self, t0_s, t1_s)

    def force(self, times_s: Array) -> Array:
        """Largest single contact force (t,) at any times (t,), N."""
        from resonate.run.replay import force  # noqa: PLC0415 (replay knows this class)

        return force(self, times_s)

    def force_peak(self, t0_s: Array, t1_s: Array) -> Array:
        """Largest single contact force (t,) within each [t0, t1], N."""
        from resonate.run.replay import force_peak  # noqa: PLC0415 (replay knows this class)

        return force_peak(self, t0_s, t1_s)


@dataclass(frozen=True, slots=True)
class Event:
    """One hit, from the first touch to the last parting.

    Times are scene seconds, from roots of the indentation within steps; ``place_m`` (3,) is where it was
    touched, in the world. Closing and leaving speed are the striker's against the surface point.
    """

    kind: Literal["strike"]
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
    """Where the energy of a run came from and went, J.

    ``given`` by strikers and by the bodies' first motion, ``gravity_work`` on falling bodies; what is left
    at the end in modes, in motion as a whole, in contacts and in strikers; what was lost by cause
    (``lost_truncation``: in what stands for the modes beyond the solved band).
    ``residual`` is what does not add up, ``scale`` what it is measured by.
    """

    given: float = 0.0
    gravity_work: float = 0.0
    modal_left: float = 0.0
    rigid_left: float = 0.0
    contact_left: float = 0.0
    striker_left: float = 0.0
    lost_material: float = 0.0
    lost_thermoelastic: float = 0.0
    lost_support: float = 0.0
    lost_radiation: float = 0.0
    lost_contact: float = 0.0
    lost_truncation: float = 0.0
    residual: float = 0.0
    scale: float = 0.0

    def closes(self, share: float) -> bool:
        """Whether the residual is at most this share of the scale."""
        return abs(self.residual) <= share * self.scale

    def __add__(self, other: Ledger) -> Ledger:
        """Both ledgers in one."""
        return Ledger(
            **{entry.name: getattr(self, entry.name) + getattr(other, entry.name) for entry in fields(self)}
        )


@dataclass(frozen=True, slots=True)
class Record:
    """The outcome of a run.

    ``clock_begin_s`` is the scene time of frame 0; ``bodies`` in the order of the scene, ``events`` in the
    order of time.
    """

    clock_begin_s: float
    bodies: tuple[BodyTrack, ...]
    events: tuple[Event, ...]
    ledger: Ledger
    warnings: tuple[str, ...] = ()
