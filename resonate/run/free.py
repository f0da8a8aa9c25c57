"""Motion of a body as a whole between contacts: ballistic, turning without torque."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.turn import turn_free
from resonate.run.record import RigidState

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Inertia

    Array = NDArray[np.float64]


def rotation(turn: Array) -> Array:
    """Rotation matrices (..., 3, 3) of quaternions (..., 4) xyzw: columns are the body axes in the world."""
    x, y, z, w = np.moveaxis(np.asarray(turn, dtype=np.float64), -1, 0)
    rows = [
        [1.0 - 2.0 * (y * y + z * z), 2.0 * (x * y - z * w), 2.0 * (x * z + y * w)],
        [2.0 * (x * y + z * w), 1.0 - 2.0 * (x * x + z * z), 2.0 * (y * z - x * w)],
        [2.0 * (x * z - y * w), 2.0 * (y * z + x * w), 1.0 - 2.0 * (x * x + y * y)],
    ]
    return np.stack([np.stack(row, axis=-1) for row in rows], axis=-2)


def turned(turn: Array, angle: Array) -> Array:
    """Turn (4,) followed in the body frame by rotation vectors (t, 3), rad: (t, 4), without sign jumps."""
    half = 0.5 * np.linalg.norm(angle, axis=-1, keepdims=True)
    imaginary, real = 0.5 * angle * np.sinc(half / np.pi), np.cos(half)
    first, scalar = turn[:3], turn[3]
    vector = scalar * imaginary + real * first + np.cross(first, imaginary)
    return np.concatenate([vector, scalar * real - np.sum(first * imaginary, axis=-1, keepdims=True)], axis=-1)


def fly(state: RigidState, since_s: Array, *, inertia: Inertia, gravity_m_s2: Array) -> tuple[Array, Array]:
    """Place and turn of a free body.

    Parameters
    ----------
    state : RigidState
        Where the flight starts.
    since_s : Array
        (t,) times from then, at or above zero, in any order.
    inertia : Inertia
        Of the body.
    gravity_m_s2 : Array
        (3,) acceleration in the world; zero for a floating body.

    Returns
    -------
    tuple[Array, Array]
        (t, 3) mass centre, m; (t, 4) turn xyzw, continuous in sign.
    """
    t = since_s[:, None]
    place = state.place_m + t * state.speed_m_s + 0.5 * t**2 * gravity_m_s2
    if not np.any(state.spin_rad_s):
        return place, np.broadcast_to(state.turn, (len(since_s), 4)).copy()
    order = np.argsort(since_s, kind="stable")
    turn = np.empty((len(since_s), 4))
    turn[order] = _turns(state, since_s[order], inertia)[0]
    return place, turn


def flown(state: RigidState, since_s: float, *, inertia: Inertia, gravity_m_s2: Array) -> RigidState:
    """Follow a free body to one later time; everything as in ``fly``."""
    place, _ = fly(state, np.array([since_s]), inertia=inertia, gravity_m_s2=gravity_m_s2)
    speed = state.speed_m_s + since_s * gravity_m_s2
    if not np.any(state.spin_rad_s):
        return RigidState(place[0], state.turn, speed, state.spin_rad_s)
    turn, momentum = _turns(state, np.array([since_s]), inertia)
    spin = rotation(turn[0]) @ np.linalg.solve(inertia.tensor, momentum[0])
    return RigidState(place[0], turn[0], speed, spin)


def _turns(state: RigidState, since_s: Array, inertia: Inertia) -> tuple[Array, Array]:
    slowness = np.linalg.inv(inertia.tensor)
    momentum = inertia.tensor @ (rotation(state.turn).T @ state.spin_rad_s)
    return turn_free(slowness, momentum, np.asarray(state.turn), np.ascontiguousarray(since_s))


def rigid_energy(state: RigidState, inertia: Inertia) -> float:
    """Kinetic energy of a body's motion as a whole, J."""
    spin = rotation(state.turn).T @ state.spin_rad_s
    return float(
        0.5 * inertia.mass_kg * state.speed_m_s @ state.speed_m_s + 0.5 * spin @ inertia.tensor @ spin
    )
