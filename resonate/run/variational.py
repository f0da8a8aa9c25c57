"""Large motion of a body given by its energies: discrete Euler-Lagrange equations, so that nothing drifts.

The action is made stationary step by step, not the equations of motion approximated: energy errors stay bounded for any
length of time, and what a symmetry keeps (the momentum of a coordinate that appears nowhere, angular momentum about an
axis) is kept to rounding.

References
----------
Marsden & West, Acta Numerica 10 (2001) 357: variational integrators, discrete Noether theorem.
Suzuki, Phys. Lett. A 146 (1990) 319: composition to fourth order.
Hairer, Lubich & Wanner, Geometric Numerical Integration (2006), ch. VI and IX.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from resonate.body.tape import evaluate
from resonate.errors import RunError
from resonate.run.kernels.tape import march_tapes

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.expression import Tape
    from resonate.scene.model import FormulaShape

    Array = NDArray[np.float64]

# Steps of these shares of a whole one, one after the other, are of fourth order.
_OUTER = 1.0 / (4.0 - 4.0 ** (1.0 / 3.0))
_PARTS = {2: (1.0,), 4: (_OUTER, _OUTER, 1.0 - 4.0 * _OUTER, _OUTER, _OUTER)}


@dataclass(frozen=True, slots=True)
class Swing:
    """``time_s`` (t,), ``place`` and ``momentum`` (t, n) of the coordinates, ``energy_j`` (t,)."""

    time_s: Array
    place: Array
    momentum: Array
    energy_j: Array


def _packed(tape: Tape) -> tuple[NDArray[np.int64], NDArray[np.int64], Array]:
    link = np.stack((np.array(tape.left, dtype=np.int64), np.array(tape.right, dtype=np.int64)), axis=1)
    return np.array(tape.code, dtype=np.int64), link, np.array(tape.number, dtype=np.float64)


def energy(shape: FormulaShape, place: Array, momentum: Array) -> Array:
    """T + V (t,), J, of places and momenta (t, n)."""
    count = place.shape[1]
    kinetic = evaluate(shape.kinetic_tape(), np.hstack([place, np.zeros_like(place)]), by=2 * count)
    mass = kinetic.curve[:, count:, count:]
    rate = np.linalg.solve(mass, momentum[:, :, None])[:, :, 0]
    potential = evaluate(shape.potential_tape(), place, by=count, curved=False).value
    return np.asarray(0.5 * np.einsum("tn,tn->t", momentum, rate) + potential)


def swing(
    shape: FormulaShape,
    place: Array,
    rate: Array,
    *,
    step_s: float,
    steps: int,
    every: int = 1,
    order: Literal[2, 4] = 4,
) -> Swing:
    """Let a body move from a place and rates of its coordinates, without loss.

    Parameters
    ----------
    shape : FormulaShape
        Its energies.
    place, rate : Array
        (n,) at time 0.
    step_s : float
        A step; at order 4 it is made of five.
    steps : int
        How many.
    every : int
        Only every so many are kept; ``steps`` counts all.
    order : {2, 4}
        Power of the step with which the error falls.

    Raises
    ------
    RunError
        If a step finds no solution (it is too long, or the energies mean nothing there).
    """
    start, speed = np.array(place, dtype=np.float64), np.array(rate, dtype=np.float64)
    count = len(start)
    kinetic = evaluate(shape.kinetic_tape(), np.concatenate((start, speed))[None], by=2 * count)
    momentum = kinetic.slope[0, count:].copy()
    rows = steps // every + 1
    places, momenta = np.zeros((rows, count)), np.zeros((rows, count))
    filled = march_tapes(
        start.copy(),
        momentum,
        speed,
        step_s * np.array(_PARTS[order]),
        every,
        *_packed(shape.kinetic_tape()),
        *_packed(shape.potential_tape()),
        places,
        momenta,
    )
    if filled < rows or not np.all(np.isfinite(places)):
        raise RunError(
            what=f"its motion cannot be followed beyond {step_s * every * max(filled - 1, 0):.6g} s",
            where="formula",
            fix=f"use steps shorter than {step_s:.3g} s, or look for a place where its energies mean nothing",
        )
    time_s = np.asarray(step_s * every * np.arange(rows), dtype=np.float64)
    return Swing(time_s, places, momenta, energy(shape, places, momenta))
