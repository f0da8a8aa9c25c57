"""One contact step: the scalar equation of a Hunt-Crossley contact on Hertz, solved implicitly.

``y - y_free + C F(y) = 0`` with ``F(y) = max(0, s(y) (1 + mu y/h))`` and ``s`` the discrete gradient of
``V = (2/5) K delta^(5/2)``. F does not fall with y, so the root is unique in [y_free - C F(y_free), y_free].

References
----------
Hunt & Crossley, J. Appl. Mech. 42 (1975) 440. Chatziioannou & van Walstijn, J. Sound Vib. 339 (2015) 262:
the discrete gradient of a contact potential.
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from resonate.run.kernels.compiled import compiled

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

# Relative size of the equation's remainder at which it counts as solved.
_TOLERANCE = 1e-14
_ROUNDING = 4e-16
_BISECT_EVERY = 8
_MOST = 200
_QUICK = 6
# Sweeps over several contacts, and the change of force relative to the largest at which they agree.
_SWEEPS = 400
_AGREED = 1e-14


@compiled
def gradient(delta: float, y: float, stiffness: float) -> float:
    """Secant slope [V(delta + y) - V(delta)] / y, N, without cancellation."""
    later = delta + y
    if delta > 0.0 and later > 0.0:
        a, b = math.sqrt(delta), math.sqrt(later)
        total = delta * delta + delta * a * b + delta * later + a * b * later + later * later
        return 0.4 * stiffness * total / (a + b)
    if later > 0.0:
        return 0.4 * stiffness * later * later * math.sqrt(later) / y
    if delta > 0.0:
        return 0.4 * stiffness * delta * delta * math.sqrt(delta) / (-y)
    return 0.0


@compiled
def pressed(delta: float, y: float, stiffness: float, loss: float) -> float:
    """Mean force over a step that takes the penetration from ``delta`` to ``delta + y``; ``loss`` is mu/h."""
    return max(0.0, gradient(delta, y, stiffness) * (1.0 + loss * y))


@compiled
def bracketed(delta: float, y_free: float, give: float, stiffness: float, loss: float) -> float:
    """Mean force of one step by secants within the bracket, whatever the contact; negative if it was not found."""
    top = pressed(delta, y_free, stiffness, loss)
    if top == 0.0:
        return 0.0
    high, high_left = y_free, give * top
    low = y_free - give * top
    low_left = low - y_free + give * pressed(delta, low, stiffness, loss)
    side = 0
    for turn in range(1, _MOST):
        y = 0.5 * (low + high)
        if turn % _BISECT_EVERY and high_left > low_left:
            secant = (low * high_left - high * low_left) / (high_left - low_left)
            if low <= secant <= high:
                y = secant
        force = pressed(delta, y, stiffness, loss)
        left = y - y_free + give * force
        # Where the bracket has shrunk to rounding, no better answer can be told apart.
        if abs(left) <= _TOLERANCE * (abs(y_free) + give * force) or high - low <= _ROUNDING * max(abs(low), abs(high)):
            return force
        # An end that stays twice counts half (the Illinois rule), so that both ends close in.
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
    return -1.0


@compiled
def solve(delta: float, y_free: float, give: float, stiffness: float, loss: float, guess: float) -> float:
    """Mean force of one step; ``give`` is the compliance C, ``guess`` a force near it. Negative if it was not found."""
    # Contacts resolved by many steps give way little in one: from the last force two or three looks are enough.
    y, before, before_left = y_free - give * guess, 0.0, 0.0
    for turn in range(_QUICK):
        force = pressed(delta, y, stiffness, loss)
        left = y - y_free + give * force
        if abs(left) <= _TOLERANCE * (abs(y_free) + give * force):
            return force
        slope = (left - before_left) / (y - before) if turn and y != before else 1.0
        before, before_left = y, left
        # The left side rises at least as fast as y.
        y -= left / max(1.0, slope)
    return bracketed(delta, y_free, give, stiffness, loss)


@compiled
def settle(delta: Array, y_free: Array, give: Array, stiffness: Array, loss: Array, force: Array) -> bool:
    """Forces (k,) of all contacts: y + W F(y) = y_free by nonlinear Gauss-Seidel; False if not found.

    The forces minimise a convex function and each sweep descends it, so it always converges. ``force`` holds the
    last step's as a start; ``give`` (k, k) is W, ``loss`` (k,) mu/h.
    """
    count = delta.shape[0]
    for _ in range(_SWEEPS):
        change, largest = 0.0, 0.0
        for j in range(count):
            reach = y_free[j]
            for k in range(count):
                if k != j:
                    reach -= give[j, k] * force[k]
            found = solve(delta[j], reach, give[j, j], stiffness[j], loss[j], force[j])
            if found < 0.0:
                return False
            change = max(change, abs(found - force[j]))
            largest = max(largest, found)
            force[j] = found
        if count == 1 or change <= _AGREED * largest:
            return True
    return False
