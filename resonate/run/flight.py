"""Free flight of a body as a whole: ballistic centre, torque-free turning.

References
----------
Landau & Lifshitz, Mechanics, sec. 36-37 (Euler's equations).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.turning import turn_free

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.run.record import RigidState

    Array = NDArray[np.float64]

# Steps of the turning integrator: at most this long, and this angle.
_STEP_S = 1e-3
_STEP_RAD = 0.01
# Below this the sine of a half angle is half the angle.
_STILL_RAD = 1e-9


def matrix(turn: Array) -> Array:
    """Rotation matrices (..., 3, 3), body to world, of quaternions xyzw (..., 4)."""
    x, y, z, w = np.moveaxis(np.asarray(turn, dtype=np.float64), -1, 0)
    rows = (
        (1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)),
        (2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)),
        (2 * (x * z - y * w), 2 * (y * z + x * w), 1 - 2 * (x * x + y * y)),
    )
    return np.stack([np.stack(row, axis=-1) for row in rows], axis=-2)


def turned(turn: Array, angle: Array) -> Array:
    """Quaternions xyzw after small world rotations ``angle`` (..., 3), rad."""
    size = np.linalg.norm(angle, axis=-1, keepdims=True)
    half = 0.5 * size
    seen = size > _STILL_RAD
    share = np.where(seen, np.sin(half) / np.where(seen, size, 1.0), 0.5)
    ax, ay, az = np.moveaxis(angle * share, -1, 0)
    aw = np.cos(half)[..., 0]
    x, y, z, w = np.moveaxis(np.broadcast_to(turn, (*angle.shape[:-1], 4)), -1, 0)
    product = np.stack(
        (
            aw * x + ax * w + ay * z - az * y,
            aw * y - ax * z + ay * w + az * x,
            aw * z + ax * y - ay * x + az * w,
            aw * w - ax * x - ay * y - az * z,
        ),
        axis=-1,
    )
    return np.asarray(product / np.linalg.norm(product, axis=-1, keepdims=True))


def fly(state: RigidState, since_s: Array, *, tensor: Array, gravity: Array) -> tuple[Array, Array, Array, Array]:
    """Place (t, 3), turn (t, 4), speed (t, 3) and spin (t, 3) a time ``since_s`` (t,) after a checkpoint.

    ``tensor`` (3, 3) inertia about the centre in the body frame; ``gravity`` (3,) in the world, m/s^2.
    """
    t = np.asarray(since_s, dtype=np.float64)[:, None]
    place = state.place_m + state.speed_m_s * t + 0.5 * gravity * t**2
    speed = state.speed_m_s + gravity * t
    size = float(np.linalg.norm(state.spin_rad_s))
    if size == 0.0:
        return place, np.tile(state.turn, (len(t), 1)), speed, np.zeros_like(place)
    order = np.argsort(since_s, kind="stable")
    turn, spin = np.zeros((len(t), 4)), np.zeros((len(t), 3))
    step = min(_STEP_S, _STEP_RAD / size)
    body_spin = matrix(state.turn).T @ state.spin_rad_s
    found_turn, found_spin = turn_free(
        np.ascontiguousarray(state.turn),
        body_spin,
        np.ascontiguousarray(tensor),
        np.asarray(np.linalg.inv(tensor), dtype=np.float64),
        np.ascontiguousarray(np.asarray(since_s)[order]),
        step,
    )
    turn[order] = found_turn
    spin[order] = np.einsum("tij,tj->ti", matrix(found_turn), found_spin)
    return place, turn, speed, spin


def rigid_energy(state: RigidState, *, mass_kg: float, tensor: Array) -> float:
    """Kinetic energy of the body as a whole, J."""
    spin = matrix(state.turn).T @ state.spin_rad_s
    return float(0.5 * mass_kg * state.speed_m_s @ state.speed_m_s + 0.5 * spin @ tensor @ spin)
