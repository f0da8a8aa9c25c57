"""How a body hangs from its cords: the tension of each, and what turning the body costs."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Moments below this share of weight x size are balanced: about half a degree.
_BALANCED = 0.01


@dataclass(frozen=True, slots=True)
class Hanging:
    """Tension (k,) of every cord, N, and ``turning`` (3, 3), N m: a small turn a stores ``a . turning . a / 2``.

    ``level``: whether the body is at rest as it is placed, no cord slack.
    """

    tension_n: Array
    turning: Array
    level: bool


def hang(arms_m: Array, share: Array, *, up: Array, weight_n: float) -> Hanging:
    """Share the weight among cords so that the body does not tilt.

    A small turn a about the mass centre moves the point at r by a x r and, to second order, by a x (a x r)/2. The
    tension works against the latter: a pendulum rights itself because its cord is fixed above its mass centre
    (Goldstein, Classical Mechanics, ch. 6).

    Parameters
    ----------
    arms_m, share : Array
        Cords (k, 3) from the mass centre, m, and how they share the weight (k,) where statics leaves it open.
    up : Array
        (3,) unit vector against gravity.
    weight_n : float
        Weight, N.
    """
    size = max(float(np.abs(arms_m).max()), 1e-12)
    balance = np.vstack((np.ones(len(share)), np.cross(arms_m, up).T / size))
    wanted = np.array([1.0, 0.0, 0.0, 0.0])
    root = np.sqrt(share)
    change, *_ = np.linalg.lstsq(balance * root, wanted - balance @ share, rcond=1e-9)
    part = share + root * change
    level = bool(np.abs(balance @ part - wanted).max() <= _BALANCED and np.all(part >= -_BALANCED))
    tension = weight_n * (part if level else share)
    # At rest the pull of all cords together passes through the mass centre, so that only their height matters.
    turning = float(tension @ arms_m @ up) * (np.eye(3) - np.outer(up, up))
    return Hanging(tension, turning, level)


def topples(arms_m: Array, hanging: Hanging, local: Array) -> bool:
    """Whether a rigid body on cords of stiffness ``local`` (k, 3, 3), N/m, would fall over rather than swing."""
    size = max(float(np.abs(arms_m).max()), 1e-12)
    total = np.zeros((6, 6))
    total[3:, 3:] = hanging.turning / size**2
    for (x, y, z), stiffness in zip(arms_m / size, local, strict=True):
        row = np.hstack((np.eye(3), -np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])))
        total += row.T @ stiffness @ row
    least: float = np.linalg.eigvalsh(total)[0]
    return least < -1e-6 * float(hanging.tension_n.sum()) / size
