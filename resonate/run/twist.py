"""Motions of a supported body that nothing resists, as finite turns.

A hinged flap swings, a hooked sign slides: the run carries such a motion as one linear coordinate, but a picture of it
must turn and not stretch. Each is a screw, a shift and a turn at once; its exponential is the finite motion.

References
----------
Murray, Li & Sastry, A Mathematical Introduction to Robotic Manipulation (1994), ch. 2: twists and their exponential.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.flight import turned

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet

    Array = NDArray[np.float64]

# Points at which a motion is looked at.
_POINTS = 60
# Below this angle the series of (1 - cos)/a^2 and (a - sin)/a^3 are their first two terms.
_SMALL = 1e-3


def twists_of(body: Body, modes: ModeSet) -> Array:
    """Shift of the mass centre and turn (6, r), in the body frame, by each motion without stiffness.

    None for a free body, which moves as a whole, nor for a held one, which does not.
    """
    count = modes.rigid.shape[1]
    if body.free or count == 0:
        return np.zeros((6, 0))
    points = body.surface.points_m
    points = points[:: max(1, len(points) // _POINTS)]
    arms = points - body.inertia.centre_m
    moved = np.asarray(body.probe(points) @ modes.rigid).reshape(-1, count)
    shifts = [np.broadcast_to(axis, arms.shape) for axis in np.eye(3)]
    turns = [np.cross(axis, arms) for axis in np.eye(3)]
    unit = np.stack(shifts + turns, axis=2).reshape(-1, 6)
    # A length for the turns, so that neither kind counts more.
    scale = np.concatenate((np.ones(3), np.full(3, float(np.abs(arms).max()))))
    return np.asarray(np.linalg.lstsq(unit / scale, moved, rcond=1e-9)[0] / scale[:, None])


def finite(twist: Array, *, turn: Array, to_world: Array) -> tuple[Array, Array]:
    """Shift of the mass centre (t, 3) in the world and turn (t, 4) xyzw after twists (t, 6) in the body frame.

    ``turn`` (4,) and ``to_world`` (3, 3): the pose from which they count.
    """
    shift, angle = twist[:, :3] @ to_world.T, twist[:, 3:] @ to_world.T
    size = np.linalg.norm(angle, axis=1)
    small = size < _SMALL
    safe = np.where(small, 1.0, size)
    first = np.where(small, 0.5 - size**2 / 24.0, (1.0 - np.cos(safe)) / safe**2)
    second = np.where(small, 1.0 / 6.0 - size**2 / 120.0, (safe - np.sin(safe)) / safe**3)
    once = np.cross(angle, shift)
    twice = np.cross(angle, once)
    return shift + first[:, None] * once + second[:, None] * twice, turned(turn, angle)
