"""One body as the run sees it, and its state between contacts."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.run.flight import fly, matrix, rigid_energy, turned
from resonate.run.propagator import energy, exponents, from_state, to_state
from resonate.run.record import RigidState

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Inertia
    from resonate.modes.modeset import ModeSet
    from resonate.run.blow import Blow
    from resonate.run.flight import Kick

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class State:
    """Where a body is: time, modal states (kept,) as in a segment, motion as a whole if it is free."""

    time_s: float
    z: ComplexArray
    rigid: RigidState | None


@dataclass(frozen=True, slots=True)
class Loaded:
    """What of a body takes part in a contact, (b,), each of unit modal mass: modes, then motion as a whole."""

    omega: Array
    decay: Array
    load: Array
    q: Array
    v: Array


@dataclass(frozen=True, slots=True)
class Subject:
    """One body.

    ``place_m`` (3,) of the origin and ``turn`` (4,) of a supported body; ``begin`` motion at ``begin_s`` of a free
    one, which feels ``gravity`` (3,), m/s^2 in the world.
    """

    name: str
    modes: ModeSet
    inertia: Inertia
    place_m: Array
    turn: Array
    gravity: Array
    begin_s: float
    begin: RigidState | None

    @property
    def free(self) -> bool:
        """Whether it moves as a whole."""
        return self.begin is not None

    @property
    def elastic(self) -> int:
        """Number of modes with stiffness."""
        return self.modes.count

    @property
    def kept(self) -> int:
        """Number of modal states in a checkpoint: a free body's motion as a whole is kept apart."""
        return self.modes.count + (0 if self.free else self.modes.rigid.shape[1])

    def first(self) -> State:
        """State in which the run begins: no vibration."""
        return State(self.begin_s, np.zeros(self.kept, dtype=np.complex128), self.begin)

    def to_body(self, rigid: RigidState | None) -> Array:
        """World to body frame (3, 3)."""
        return np.asarray(matrix(self.turn if rigid is None else rigid.turn).T)

    def in_world(self, point_m: Array, rigid: RigidState | None) -> Array:
        """Place a point (3,) of the body frame in the world."""
        if rigid is None:
            return np.asarray(self.place_m + matrix(self.turn) @ point_m)
        return np.asarray(rigid.place_m + matrix(rigid.turn) @ (point_m - self.inertia.centre_m))

    def coast(self, state: State, until_s: float) -> State:
        """Free flight in closed form."""
        since, m = until_s - state.time_s, self.elastic
        z = state.z.copy()
        z[:m] *= np.exp(exponents(self.modes.omega, self.modes.decay.total) * since)
        z[m:] += z[m:].imag * since
        rigid = state.rigid
        if rigid is not None:
            flown = fly(rigid, np.array([since]), tensor=self.inertia.tensor, gravity=self.gravity)
            rigid = RigidState(*(part[0] for part in flown))
        return State(until_s, z, rigid)

    def modal_energy(self, z: ComplexArray) -> Array:
        """Energy (m,) of every mode, J."""
        return energy(z[: self.elastic], self.modes.omega, self.modes.decay.total)

    def whole_energy(self, state: State) -> float:
        """Kinetic energy of motion as a whole, J."""
        if state.rigid is not None:
            return rigid_energy(state.rigid, mass_kg=self.inertia.mass_kg, tensor=self.inertia.tensor)
        return 0.5 * float(np.sum(state.z[self.elastic :].imag ** 2))

    def loaded(self, state: State) -> Loaded:
        """Open a state for stepping.

        A free body moves as a whole by three shifts along the world's axes and three turns about its
        principal axes, counted from now in a frame that stands still.
        """
        omega, decay = self.modes.omega, self.modes.decay.total
        q, v = from_state(state.z[: self.elastic], omega, decay)
        if state.rigid is None:
            whole_q, whole_v = state.z[self.elastic :].real, state.z[self.elastic :].imag
            pull = np.zeros_like(whole_v)
        else:
            root_mass, moments, axes = self._principal()
            spin = axes.T @ (matrix(state.rigid.turn).T @ state.rigid.spin_rad_s)
            whole_v = np.concatenate((root_mass * state.rigid.speed_m_s, np.sqrt(moments) * spin))
            whole_q = np.zeros(6)
            pull = np.concatenate((root_mass * self.gravity, np.zeros(3)))
        none = np.zeros_like(whole_v)
        return Loaded(
            np.concatenate((omega, none)),
            np.concatenate((decay, none)),
            np.concatenate((np.zeros_like(omega), pull)),
            np.concatenate((q, whole_q)),
            np.concatenate((v, whole_v)),
        )

    def row(self, blow: Blow, axis: Array, rigid: RigidState | None) -> Array:
        """Gains (b,) of a push along ``axis`` (3,), in the body frame, at the spot of a blow."""
        if rigid is None:
            return np.asarray(axis @ blow.gains[:, : self.kept])
        root_mass, moments, axes = self._principal()
        shift = matrix(rigid.turn) @ axis / root_mass
        twist = axes.T @ np.cross(blow.point_m - self.inertia.centre_m, axis) / np.sqrt(moments)
        return np.concatenate((axis @ blow.gains[:, : self.elastic], shift, twist))

    def _principal(self) -> tuple[float, Array, Array]:
        moments, axes = np.linalg.eigh(self.inertia.tensor)
        return float(np.sqrt(self.inertia.mass_kg)), moments, axes

    def closed(self, q: Array, v: Array) -> ComplexArray:
        """Checkpoint states (kept,) of stepped ones (b,)."""
        m = self.elastic
        z = to_state(q[:m], v[:m], self.modes.omega, self.modes.decay.total)
        return np.concatenate((z, q[m : self.kept] + 1j * v[m : self.kept]))

    def pushed_on(self, rigid: RigidState, since_s: float, moved: Array, impulse: Array, kick: Kick) -> RigidState:
        """Motion as a whole after a contact of ``since_s`` in a frame that stood still.

        ``impulse`` (k,) and ``moved`` (k,): time integral of the forces and its own, N s and N s^2. The energy of
        spinning is what the stepping left: only then the body turns on freely for as long.
        """
        mass, tensor = self.inertia.mass_kg, self.inertia.tensor
        place = rigid.place_m + since_s * rigid.speed_m_s + 0.5 * since_s**2 * self.gravity
        spin = rigid.spin_rad_s + impulse @ kick.spin
        turn = turned(rigid.turn, since_s * rigid.spin_rad_s + moved @ kick.spin)
        still = RigidState(rigid.place_m, rigid.turn, np.zeros(3), spin)
        _, later, _, later_spin = fly(still, np.array([since_s]), tensor=tensor, gravity=np.zeros(3))
        own_spin = matrix(later[0]).T @ later_spin[0]
        return RigidState(
            place + moved @ kick.axes / mass,
            turn,
            rigid.speed_m_s + since_s * self.gravity + impulse @ kick.axes / mass,
            matrix(turn) @ own_spin,
        )
