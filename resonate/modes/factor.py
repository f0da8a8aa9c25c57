"""One way to factorise a symmetric matrix, whatever its size and whatever is installed."""

from __future__ import annotations

import warnings
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import scipy.linalg
import scipy.sparse
import scipy.sparse.linalg

from resonate.errors import ModesError
from resonate.modes.order import dissection

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    Array = NDArray[np.float64]

# Up to this size a dense factor is quicker than a sparse one.
DENSE_LIMIT = 1200
# The supernodal factorisation of the `fast` extra wins from here on; below, SuperLU is as quick.
FAST_FROM = 4000
# From this size on, of SuperLU's own orders and nested dissection the latter gives the sparser factor.
DISSECT_FROM = 15_000


@dataclass(frozen=True, slots=True)
class Factor:
    """A factorised symmetric matrix.

    ``solve`` maps a block (n, k) to the solution (n, k). ``negative`` is the number of negative
    eigenvalues (Sylvester's law of inertia), or None when the factorisation had to exchange rows
    and columns differently and cannot tell.
    """

    solve: Callable[[Array], Array]
    negative: int | None


def _dense(matrix: Array) -> Factor:
    """Cholesky; the caller only comes here with matrices that should be positive definite."""
    try:
        factor = scipy.linalg.cho_factor(matrix, lower=True, check_finite=False)
    except scipy.linalg.LinAlgError:
        negative = int(np.count_nonzero(scipy.linalg.eigvalsh(matrix, check_finite=False) <= 0.0))
        return Factor(solve=_no_solution, negative=max(negative, 1))

    def solve(block: Array) -> Array:
        found: Array = scipy.linalg.cho_solve(factor, block, check_finite=False)
        return found

    return Factor(solve=solve, negative=0)


def _no_solution(block: Array) -> Array:
    raise ModesError(
        what=f"a system of {len(block)} equations without a positive definite matrix",
        where="modes",
        fix="look at the number of negative pivots before solving",
    )


def _superlu(matrix: csr_matrix) -> Factor:
    """Sparse L D L' without pivoting: by least degree on the pattern of A + A', large ones by nested dissection.

    ``relax=1`` keeps SuperLU from merging leaves of the elimination tree: the blocks of high-order
    elements are dense already, and both factorisation and solution run about twice as fast.
    """
    large = matrix.shape[0] >= DISSECT_FROM
    order = dissection(matrix) if large else np.arange(matrix.shape[0])
    lu = scipy.sparse.linalg.splu(
        (matrix[order][:, order] if large else matrix).tocsc(),
        permc_spec="NATURAL" if large else "MMD_AT_PLUS_A",
        diag_pivot_thresh=0.0,
        relax=1,
        options={"SymmetricMode": True},
    )

    def solve(block: Array) -> Array:
        if not large:
            return np.asarray(lu.solve(np.asfortranarray(block)))
        found = np.empty_like(block)
        found[order] = lu.solve(np.asfortranarray(block[order]))
        return found

    negative = None
    if np.array_equal(lu.perm_r, lu.perm_c):
        negative = int(np.count_nonzero(lu.U.diagonal() < 0.0))
    return Factor(solve=solve, negative=negative)


def _fast(matrix: csr_matrix) -> Factor | None:
    """Use the optional supernodal L D L' with pivoting inside each supernode, if it is installed."""
    try:
        import rslab
    except ImportError:
        return None
    try:
        factor = rslab.ldlt(matrix.tocsc(), threads=1)
    except RuntimeError:
        return None

    def solve(block: Array) -> Array:
        found: Array = np.asarray(factor.solve_many(np.ascontiguousarray(block)))
        return found

    return Factor(solve=solve, negative=int(factor.inertia[1]))


def factorise(matrix: csr_matrix, *, definite: bool) -> Factor:
    """Factorise a real symmetric matrix.

    Parameters
    ----------
    matrix : csr_matrix
        (n, n), symmetric; the caller has checked that.
    definite : bool
        True when it ought to be positive definite; a small one is then done densely. The answer
        says how many eigenvalues are negative all the same.

    Returns
    -------
    Factor
        Solver for blocks of right-hand sides, and the number of negative eigenvalues.

    References
    ----------
    Li, Demmel, Gilbert, Grigori, Shao, Yamazaki, SuperLU Users' Guide (1999), symmetric mode.
    Parlett, The Symmetric Eigenvalue Problem (1998), section 3.3 (counting eigenvalues by pivots).
    """
    size = int(matrix.shape[0])
    if definite and size <= DENSE_LIMIT:
        return _dense(matrix.toarray())
    if size >= FAST_FROM:
        found = _fast(matrix)
        if found is not None:
            return found
    with warnings.catch_warnings():
        warnings.simplefilter("error", scipy.sparse.linalg.MatrixRankWarning)
        try:
            return _superlu(matrix)
        except (RuntimeError, scipy.sparse.linalg.MatrixRankWarning):
            # A zero pivot: the matrix is singular to working precision.
            return Factor(solve=_no_solution, negative=None)
