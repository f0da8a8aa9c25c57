"""Where a ray from within leaves a region."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

_STEPS = 4001
_HALVINGS = 40


def leave(within: Callable[[Array], NDArray[np.bool_]], far: float) -> float:
    """Reach along a ray, at most ``far``, up to which it stays inside; found to round-off once it has left.

    ``within`` tells for reaches (k,) which of them lie in the region; the ray starts in it.
    """
    steps = np.linspace(0.0, far, _STEPS)
    inside = within(steps)
    if inside.all():
        return far
    first = int(np.argmin(inside))
    low, high = float(steps[max(first - 1, 0)]), float(steps[first])
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        if within(np.array([middle]))[0]:
            low = middle
        else:
            high = middle
    return low
