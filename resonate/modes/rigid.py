"""Motions that cost no strain energy, told apart from slow modes by rounding error."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import scipy.linalg

from resonate.modes.lanczos import orthonormal

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.modes.pencil import Pencil

    Array = NDArray[np.float64]

# A free rigid body in space.
FREE_COUNT = 6
# Strain energy below this many times its own rounding error is none.
NOISE = 100.0
# For a free body, where rigid motions are known to exist: they may be this noisy, provided that
# the next eigenvalue stands clear of them by the factor below.
LOUD_NOISE = 1e4
CLEAR = 1e3
ITERATIONS = 4
# Eigenvalues this far below the largest of the block are settled by so many iterations.
SLOW = 1e-3


def rounding(pencil: Pencil, vector: Array) -> Array:
    """Root-mean-square rounding error (k,) of ``phi' K phi`` for the columns of ``vector`` (n, k)."""
    squares = pencil.stiffness.power(2)
    spread = np.einsum("ij,ij->j", vector**2, squares @ vector**2)
    error: Array = np.finfo(float).eps * np.sqrt(spread)
    return error


def _how_many(value: Array, noise: Array, *, free: bool) -> int:
    size = np.abs(value)
    if free:
        for count in range(len(size) - 1, 0, -1):
            quiet = size[:count] <= LOUD_NOISE * noise[:count]
            if np.all(quiet) and size[count] >= CLEAR * np.max(size[:count]):
                return count
    return int(np.count_nonzero(size <= NOISE * noise))


def rigid_motions(
    pencil: Pencil,
    solve: Callable[[Array], Array],
    *,
    free: bool,
    generator: np.random.Generator,
) -> Array:
    """Find every motion without strain energy.

    A few inverse iterations on a random block turn it into the softest motions there are; one
    counts as rigid when its strain energy is lost in the rounding of the stiffness matrix itself.
    That bound is absolute for the matrix at hand, so that a body swinging slowly on cords is not
    taken for one that floats.

    Parameters
    ----------
    pencil : Pencil
        Stiffness and mass, n freedoms.
    solve : Callable
        Solves with ``K + small_shift M``.
    free : bool
        Whether nothing supports the body.
    generator : Generator
        Start of the iteration.

    Returns
    -------
    Array
        (n, r), M-orthonormal, kg**-0.5.
    """
    return softest(pencil, solve, free=free, generator=generator)[0]


def softest(
    pencil: Pencil,
    solve: Callable[[Array], Array],
    *,
    free: bool,
    generator: np.random.Generator,
) -> tuple[Array, Array]:
    """Find rigid motions as above, and motions that are softer than all others by far.

    The swings of a body on cords are so slow that rounding in them would drown the inverse of the stiffness for all
    other modes: they are better known beforehand.

    Returns
    -------
    tuple of Array
        Rigid motions (n, r), and those slow ones (n, s), M-orthonormal together.
    """
    width = min(2 * FREE_COUNT, pencil.size)
    while True:
        block = orthonormal(generator.standard_normal((pencil.size, width)), pencil.mass).vector
        for _ in range(ITERATIONS):
            block = orthonormal(solve(pencil.mass @ block), pencil.mass).vector
            energy = block.T @ (pencil.stiffness @ block)
            value, turn = scipy.linalg.eigh(0.5 * (energy + energy.T))
            block = block @ turn
        order = np.argsort(np.abs(value), kind="stable")
        value, block = value[order], block[:, order]
        count = _how_many(value, rounding(pencil, block), free=free)
        if count < width or width == pencil.size:
            # Iterations have settled what lies so far below the rest of the block.
            slow = count + int(np.count_nonzero(value[count:] < SLOW * value[-1]))
            both = orthonormal(block[:, :slow], pencil.mass).vector if slow else block[:, :0]
            return both[:, :count], both[:, count:]
        width = min(2 * width, pencil.size)
