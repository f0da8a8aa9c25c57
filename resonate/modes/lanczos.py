"""Block Lanczos with full orthogonalisation in the inner product of the mass."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import scipy.linalg

from resonate.errors import ModesError

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    Array = NDArray[np.float64]

# A Ritz pair has converged when its residual is this small against its own value. The polish that
# follows takes the remainder away; asking for less here would let it drop a mode.
CONVERGED = 1e-10
# Orthogonalisation loses digits where the columns of a block are nearly parallel: below this
# (the smallest pivot of the Gram matrix of unit columns) it is done again in full.
PARALLEL = 0.03


@dataclass(frozen=True, slots=True)
class Ritz:
    """Converged pairs of ``A^-1 M``: ``theta`` (m,) descending, ``vector`` (n, m) M-orthonormal."""

    theta: Array
    vector: Array


@dataclass(frozen=True, slots=True)
class _Block:
    # W = vector @ factor, vector M-orthonormal; heavy = M vector; `spread` is small where W was nearly dependent.
    vector: Array
    heavy: Array
    factor: Array
    spread: float


def _triangle(block: Array, heavy: Array) -> _Block:
    """One Cholesky QR pass in the M inner product, by eigenvectors where Cholesky breaks down."""
    gram = block.T @ heavy
    size = np.sqrt(np.maximum(np.diag(gram), np.finfo(float).tiny))
    scaled = gram / size[:, None] / size[None, :]
    try:
        upper = scipy.linalg.cholesky(scaled)
        back = scipy.linalg.solve_triangular(upper, np.eye(len(size))) / size[:, None]
        factor, spread = upper * size, float(np.min(np.diag(upper)))
    except scipy.linalg.LinAlgError:
        value, turn = scipy.linalg.eigh(scaled)
        root = np.sqrt(np.maximum(value, np.finfo(float).eps))
        back = turn / root / size[:, None]
        factor, spread = root[:, None] * turn.T * size, float(root[0] / root[-1])
    return _Block(vector=block @ back, heavy=heavy @ back, factor=factor, spread=spread)


def orthonormal(block: Array, mass: csr_matrix, against: Array | None = None) -> _Block:
    """M-orthonormalise a block against itself and against the columns of ``against``.

    Parameters
    ----------
    block : Array
        (n, b), destroyed in meaning but not in place.
    mass : csr_matrix
        (n, n), positive definite.
    against : Array, optional
        (n, k), M-orthonormal.

    Returns
    -------
    _Block
        ``vector`` (n, b) and ``factor`` (b, b) with ``projected block = vector @ factor``, and ``heavy``, M times
        ``vector``.
    """
    total = np.eye(block.shape[1])
    spread, heavy = 0.0, mass @ block
    for _ in range(5):
        if 0.0 < spread < PARALLEL:
            # The last pass has divided by little, and what it made of `heavy` is not M times the block any more.
            heavy = mass @ block
        if spread < PARALLEL and against is not None and against.shape[1]:
            block = block - against @ (against.T @ heavy)
            heavy = mass @ block
        step = _triangle(block, heavy)
        block, heavy, total, spread = step.vector, step.heavy, step.factor @ total, step.spread
        if spread > 1.0 - 1e-6:
            break
    return _Block(vector=block, heavy=heavy, factor=total, spread=spread)


@dataclass(frozen=True, slots=True)
class _Check:
    """What the last look at the Ritz values showed: size of the basis, and pairs converged."""

    held: int = 0
    found: int = 0

    def next_size(self, held: int, found: int, *, goal: int, width: int) -> int:
        """When to look again: a look costs as much as several blocks, so not at every one."""
        rate = (found - self.found) / (held - self.held) if self.found else 0.8
        steps = (goal - found) / min(max(rate, 0.25), 1.0)
        least = width * (1 + held // 300)
        return held + max(least, int(steps) // width * width)


class _Basis:
    """Lanczos vectors (n, k) behind ``r`` deflated ones, and the block tridiagonal matrix (k, k)."""

    def __init__(self, deflated: Array, mass: csr_matrix) -> None:
        self.skip = deflated.shape[1]
        self.mass = mass
        self.count = self.skip
        self.vectors = np.empty((deflated.shape[0], self.skip + 64), order="F")
        self.vectors[:, : self.skip] = deflated
        self.projected = np.zeros((64, 64))

    def append(self, block: Array, coupling: Array) -> None:
        """Add a block, and what couples it to the one before it."""
        need = self.count + block.shape[1]
        if need > self.vectors.shape[1]:
            room = need + max(128, need // 2)
            wider = np.empty((len(self.vectors), room), order="F")
            wider[:, : self.count] = self.vectors[:, : self.count]
            bigger = np.zeros((room - self.skip, room - self.skip))
            held = self.count - self.skip
            bigger[:held, :held] = self.projected[:held, :held]
            self.vectors, self.projected = wider, bigger
        self.vectors[:, self.count : need] = block
        here = slice(self.count - self.skip, need - self.skip)
        before = slice(here.start - coupling.shape[1], here.start)
        self.projected[here, before] = coupling
        self.projected[before, here] = coupling.T
        self.count = need

    def step(self, solve: Callable[[Array], Array], last: _Block, coupling: Array) -> _Block:
        """Apply the operator to the last block; enter its coefficients; return what is left of it."""
        at = slice(self.count - last.vector.shape[1], self.count)
        image = solve(last.heavy)
        # First the three-term recurrence, which takes the bulk off, then everything once.
        before = slice(at.start - coupling.shape[1], at.start)
        image = image - self.vectors[:, before] @ coupling.T
        inner = last.heavy.T @ image
        image = image - last.vector @ inner
        at = slice(at.start - self.skip, at.stop - self.skip)
        self.projected[at, at] = 0.5 * (inner + inner.T)
        return orthonormal(image, self.mass, self.vectors[:, : self.count])


def lanczos(
    solve: Callable[[Array], Array],
    mass: csr_matrix,
    *,
    deflated: Array,
    need: int,
    below_theta: float,
    start: Array,
    where: str,
) -> Ritz:
    """Largest eigenvalues of ``A^-1 M`` on the M-complement of some known vectors.

    The basis grows until ``need`` pairs have converged without a gap from the top, or until one has
    converged whose value lies below ``below_theta``.

    Parameters
    ----------
    solve : Callable
        Block (n, b) -> ``A^-1`` block, A positive definite.
    mass : csr_matrix
        (n, n), positive definite, kg.
    deflated : Array
        (n, r) M-orthonormal vectors to stay clear of.
    need : int
        Pairs wanted at most.
    below_theta : float
        s^2/rad^2; values below are of no interest.
    start : Array
        (n, b) first block; b is the width of the blocks, and should exceed the multiplicities.
    where : str
        The body, for errors.

    Returns
    -------
    Ritz
        All pairs that have converged; more than ``need`` when they came along.

    Raises
    ------
    ModesError
        If the whole space is used up without convergence.

    References
    ----------
    Golub & Underwood, The block Lanczos method for computing eigenvalues (1977).
    Grimes, Lewis & Simon, A shifted block Lanczos algorithm for solving sparse symmetric
    generalized eigenproblems, SIAM J. Matrix Anal. Appl. 15 (1994).
    """
    size = len(start)
    basis = _Basis(deflated, mass)
    block = orthonormal(start, mass, deflated)
    width = start.shape[1]
    coupling = np.empty((width, 0))
    basis.append(block.vector, coupling)
    look, last = min(max(4 * width, int(1.5 * min(need, 64))), size - basis.skip), _Check()
    while True:
        left = basis.step(solve, block, coupling)
        held = basis.count - basis.skip
        room = size - basis.count
        if held >= look or room < width:
            theta, turn = scipy.linalg.eigh(basis.projected[:held, :held])
            theta, turn = theta[::-1], turn[:, ::-1]
            error = np.linalg.norm(left.factor @ turn[held - width :], axis=0)
            good = error <= CONVERGED * np.abs(theta)
            found = held if bool(np.all(good)) else int(np.argmin(good))
            goal = min(need, int(np.count_nonzero(theta >= below_theta)) + 1)
            if found >= need or (found and theta[found - 1] < below_theta) or found == held:
                vectors = basis.vectors[:, basis.skip : basis.count] @ turn[:, :found]
                return Ritz(theta=theta[:found], vector=vectors)
            if room < width:
                raise ModesError(
                    what=f"{found} of {goal} modes converged with {held} trial vectors of {size} freedoms",
                    where=where,
                    fix="lower modes.most or modes.solved, or refine the mesh",
                )
            look = last.next_size(held, found, goal=goal, width=width)
            last = _Check(held=held, found=found)
        block, coupling = left, left.factor
        basis.append(block.vector, coupling)
