"""One contact step: the scalar equation of a Hunt-Crossley contact on Hertz, solved implicitly.

``y - y_free + C F(y) = 0`` with ``F(y) = max(0, s(y) (1 + mu y/h))`` and ``s`` the discrete gradient of
``V = (2/5) K delta^(5/2)``. F does not fall with y, so the root is unique in [y_free - C F(y_free), y_free].
"""

from __future__ import annotations

import math

from resonate.run.kernels.compiled import compiled

# Relative size of the equation's remainder at which it counts as solved.
_TOLERANCE = 1e-14
_BISECT_EVERY = 8
_MOST = 200


@compiled
def stored(delta: float, stiffness: float) -> float:
    """Energy in the contact, J."""
    if delta <= 0.0:
        return 0.0
    return 0.4 * stiffness * delta * delta * math.sqrt(delta)


@compiled
def pressed(delta: float, y: float, stiffness: float, loss: float) -> float:
    """Mean force over a step that takes the penetration from ``delta`` to ``delta + y``.

    ``loss`` is mu/h. The slope of the stored energy is written without cancellation.
    """
    later = delta + y
    if delta <= 0.0 and later <= 0.0:
        return 0.0
    if delta > 0.0 and later > 0.0:
        a, b = math.sqrt(delta), math.sqrt(later)
        a2, b2 = delta, later
        slope = 0.4 * stiffness * (a2 * a2 + a2 * a * b + a2 * b2 + a * b * b2 + b2 * b2) / (a + b)
    elif later > 0.0:
        slope = 0.4 * stiffness * later * later * math.sqrt(later) / y
    else:
        slope = 0.4 * stiffness * delta * delta * math.sqrt(delta) / (-y)
    return max(0.0, slope * (1.0 + loss * y))


@compiled
def solve(delta: float, y_free: float, give: float, stiffness: float, loss: float) -> tuple[float, float]:
    """Change of penetration and mean force of one step; ``give`` is the compliance C."""
    if delta <= 0.0 and delta + y_free <= 0.0:
        return y_free, 0.0
    top = pressed(delta, y_free, stiffness, loss)
    if top == 0.0:
        return y_free, 0.0
    high, high_left = y_free, give * top
    low = y_free - give * top
    low_force = pressed(delta, low, stiffness, loss)
    low_left = low - y_free + give * low_force
    scale = abs(y_free) + give * top
    if low_left == 0.0:
        return low, low_force
    y, side = high, 0
    for turn in range(_MOST):
        if turn % _BISECT_EVERY == _BISECT_EVERY - 1:
            y = 0.5 * (low + high)
        else:
            y = (low * high_left - high * low_left) / (high_left - low_left)
        force = pressed(delta, y, stiffness, loss)
        left = y - y_free + give * force
        if abs(left) <= _TOLERANCE * scale or high - low <= 4e-16 * scale:
            break
        if left > 0.0:
            high, high_left = y, left
            if side == 1:
                low_left *= 0.5
            side = 1
        else:
            low, low_left = y, left
            if side == -1:
                high_left *= 0.5
            side = -1
    # The force that the motion will be given, so that work and motion agree to the last bit.
    force = (y_free - y) / give
    return y, max(force, 0.0)
