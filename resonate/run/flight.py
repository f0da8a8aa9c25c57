"""Free flight of a body as a whole: ballistic centre, torque-free turning.

References
----------
Landau & Lifshitz, Mechanics, sec. 36-37 (Euler's equations).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.turning import turn_free

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.run.record import RigidState

    Array = NDArray[np.float64]


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
    """Quaternions xyzw after rotation vectors ``angle`` (..., 3) in the world, rad."""
    half = 0.5 * np.linalg.norm(angle, axis=-1, keepdims=True)
    ax, ay, az = np.moveaxis(0.5 * angle * np.sinc(half / np.pi), -1, 0)
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

    Times may come in any order, and be negative. ``tensor`` (3, 3) inertia about the centre in the body frame;
    ``gravity`` (3,) in the world, m/s^2. The turn is continuous in sign.
    """
    since = np.asarray(since_s, dtype=np.float64)
    t = since[:, None]
    place = state.place_m + state.speed_m_s * t + 0.5 * gravity * t**2
    speed = state.speed_m_s + gravity * t
    if not np.any(state.spin_rad_s):
        return place, np.tile(state.turn, (len(t), 1)), speed, np.zeros_like(place)
    turn, momentum = np.zeros((len(t), 4)), np.zeros((len(t), 3))
    first: Array = np.ascontiguousarray(state.turn, dtype=np.float64)
    angular: Array = np.asarray(tensor, dtype=np.float64) @ (matrix(first).T @ state.spin_rad_s)
    inverse: Array = np.asarray(np.linalg.inv(tensor), dtype=np.float64)
    order = np.argsort(np.abs(since), kind="stable")
    for sign in (1.0, -1.0):
        # Backwards in time a body turns as if its momentum were reversed.
        at = order[(since[order] < 0.0) == (sign < 0.0)]
        if len(at):
            turn[at], found = turn_free(inverse, sign * angular, first, np.abs(since[at]))
            momentum[at] = sign * found
    spin = np.einsum("tij,jk,tk->ti", matrix(turn), inverse, momentum)
    return place, turn, speed, spin


def rigid_energy(state: RigidState, *, mass_kg: float, tensor: Array) -> float:
    """Kinetic energy of the body as a whole, J."""
    spin = matrix(state.turn).T @ state.spin_rad_s
    return float(0.5 * mass_kg * state.speed_m_s @ state.speed_m_s + 0.5 * spin @ tensor @ spin)


@dataclass(frozen=True, slots=True)
class Kick:
    """What contacts (k) do to a free body: ``axes`` (k, 3) of the push, ``spin`` (k, 3) per N s, in the world."""

    axes: Array
    spin: Array


def kick_of(axes: Array, arms_m: Array, *, turn: Array, tensor: Array) -> Kick:
    """Kick of pushes along ``axes`` (k, 3) at ``arms_m`` (k, 3) from the centre, both in the world."""
    frame = matrix(turn)
    inverse = frame @ np.linalg.inv(tensor) @ frame.T
    return Kick(axes, np.asarray(np.cross(arms_m, axes) @ inverse.T))
