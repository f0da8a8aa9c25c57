"""The lowest modes of one pencil: found, polished, counted, checked."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import scipy.linalg
from scipy.linalg import lapack

from resonate.errors import ModesError
from resonate.modes.factor import DENSE_LIMIT, Factor, factorise
from resonate.modes.lanczos import lanczos, orthonormal
from resonate.modes.pencil import check_mass
from resonate.modes.rigid import softest

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.modes.pencil import Pencil

    Array = NDArray[np.float64]

# Eigenvalues closer than this, relative, are one cluster: a cut never goes through it.
CLUSTER = 1e-6
# Width of the Lanczos blocks: exact multiplicities up to this one come out together.
WIDTH = 12
# A count of pivots is believed when the factor solves a test equation this well.
BELIEVED = 1e-10
# Modes with a residual up to this need no second look.
SETTLED = 5e-9
# The same start on every run; any number does.
SEED = 20_011


@dataclass(frozen=True, slots=True)
class Spectrum:
    """The low end of one pencil.

    ``rigid`` (n, r); ``value`` (m,) ascending, rad^2/s^2; ``vector`` (n, m); all columns
    M-orthonormal together. ``residual`` (m,). ``beyond`` is the next eigenvalue, infinite when
    there is none; ``proved`` tells whether counting pivots has shown that none is missing.
    """

    rigid: Array
    value: Array
    vector: Array
    residual: Array
    beyond: float
    proved: bool


def graded_eigh(matrix: Array) -> tuple[Array, Array]:
    """Eigenvalues ascending, and vectors, each to its own relative accuracy.

    Tridiagonal methods err by rounding of the *largest* eigenvalue, which may exceed the smallest by 1e8
    here. The Jacobi method on a Cholesky factor does not.

    References
    ----------
    Demmel & Veselic, Jacobi's method is more accurate than QR, SIAM J. Matrix Anal. Appl. 13 (1992).
    Drmac & Veselic, New fast and accurate Jacobi SVD algorithm, SIAM J. Matrix Anal. Appl. 29 (2008).
    """
    if len(matrix):
        try:
            # matrix = U'U, where U is a well-conditioned matrix with graded *columns*.
            upper = scipy.linalg.cholesky(matrix)
        except scipy.linalg.LinAlgError:
            pass  # rounding made it indefinite: the ordinary method answers that
        else:
            singular, _, right, work, _, info = lapack.dgejsv(upper, joba=0, jobu=3, jobv=0, jobr=0)
            if info == 0:
                value = (singular * (work[0] / work[1])) ** 2
                return value[::-1].copy(), np.ascontiguousarray(right[:, ::-1])
    value, vector = scipy.linalg.eigh(matrix)
    return value, vector


def _remove(block: Array, known: Array, mass_known: Array) -> Array:
    return block - known @ (mass_known.T @ block) if known.shape[1] else block


@dataclass(frozen=True, slots=True)
class _Pairs:
    # value (m,), vector (n, m), M vector and K vector (n, m).
    value: Array
    vector: Array
    heavy: Array
    stiff: Array

    def first(self, count: int) -> _Pairs:
        return _Pairs(self.value[:count], self.vector[:, :count], self.heavy[:, :count], self.stiff[:, :count])


def _polish(pencil: Pencil, factor: Factor, rigid: Array, vector: Array, rounds: int) -> _Pairs:
    """Inverse iteration, which takes high-frequency rounding out, then Rayleigh-Ritz."""
    pairs = _Pairs(np.empty(0), vector, vector, vector)
    for number in range(rounds if vector.shape[1] else 0):
        heavy = pairs.heavy if number else pencil.mass @ vector
        block = orthonormal(factor.solve(heavy), pencil.mass, rigid)
        stiff = pencil.stiffness @ block.vector
        energy = block.vector.T @ stiff
        value, turn = graded_eigh(0.5 * (energy + energy.T))
        pairs = _Pairs(value, block.vector @ turn, block.heavy @ turn, stiff @ turn)
    return pairs


def _residual(pencil: Pencil, factor: Factor, rigid: Array, pairs: _Pairs) -> Array:
    # |K x - v M x| / |K x| in the norm of (K + s M)^-1, where |K x| = v / sqrt(v + s).
    shift, value = pencil.small_shift, pairs.value
    rest = pairs.stiff - pairs.heavy * value
    answer = _remove(factor.solve(rest), rigid, pencil.mass @ rigid)
    square = np.maximum(np.einsum("ij,ij->j", rest, answer), 0.0)
    size: Array = np.sqrt(square * (value + shift)) / value
    return size


def count_below(pencil: Pencil, value: float) -> int | None:
    """How many eigenvalues lie below ``value``, rad^2/s^2: negative pivots of ``K - value M``.

    None when the factorisation cannot be trusted to tell.

    References
    ----------
    Parlett, The Symmetric Eigenvalue Problem (1998), section 3.3.
    """
    matrix = pencil.shifted(-value)
    factor = factorise(matrix, definite=False)
    if factor.negative is None:
        return None
    test = np.random.default_rng(SEED).standard_normal((pencil.size, 1))
    answer = factor.solve(test)
    largest = float(np.max(np.abs(matrix.data)))
    error = np.linalg.norm(matrix @ answer - test) / (largest * np.linalg.norm(answer) + np.linalg.norm(test))
    return factor.negative if error <= BELIEVED else None


def cut(value: Array, *, most: int, top: float) -> int:
    """How many leading eigenvalues to keep: up to ``top``, ``most`` at most, never half a cluster."""
    inside = int(np.searchsorted(value, top * (1.0 + CLUSTER), side="right"))
    keep = min(inside, most)
    while 0 < keep < min(inside, len(value)) and value[keep] - value[keep - 1] <= CLUSTER * value[keep]:
        keep -= 1
    return keep if keep or not inside else min(inside, most)


def _dense(pencil: Pencil, rigid: int) -> Array:
    # All of them; the first columns are the rigid motions, known better already.
    _, vector = scipy.linalg.eigh(pencil.stiffness.toarray(), pencil.mass.toarray(), driver="gvd")
    return np.asarray(vector[:, rigid:])


def _sparse(
    pencil: Pencil,
    factor: Factor,
    *,
    known: Array,
    need: int,
    top: float,
    generator: np.random.Generator,
) -> Array:
    found = lanczos(
        factor.solve,
        pencil.mass,
        deflated=known,
        need=need,
        below_theta=1.0 / (top * (1.0 + 2.0 * CLUSTER) + pencil.small_shift),
        start=generator.standard_normal((pencil.size, WIDTH)),
        where=pencil.where,
    )
    return found.vector


def _between(value: Array, keep: int, top: float) -> float:
    """Where to count: in the gap above the last kept, and above ``top`` if that lies in the gap."""
    low = value[keep - 1] if keep else 0.0
    if keep == len(value):
        return float(low * (1.0 + 0.5 * CLUSTER))
    high = float(value[keep])
    return 0.5 * (max(low, min(top, high)) + high) if top < high else 0.5 * (low + high)


def lowest(pencil: Pencil, *, most: int, top: float, free: bool) -> Spectrum:
    """All eigenpairs with ``K x = v M x``, ``v <= top``, but at most the ``most`` lowest.

    Parameters
    ----------
    pencil : Pencil
        Positive semidefinite stiffness, positive definite mass.
    most : int
        Largest number wanted, rigid motions not counted.
    top : float
        Largest eigenvalue wanted, rad^2/s^2.
    free : bool
        Whether rigid motions are to be expected.

    Returns
    -------
    Spectrum
        Small pencils are solved densely and whole; of the others it is proved by counting that
        none is missing, wherever the factorisation can count.

    Raises
    ------
    ModesError
        If the mass is not positive definite, the stiffness has a negative eigenvalue, or modes
        are missing that cannot be found.
    """
    check_mass(pencil)
    factor = factorise(pencil.shifted(pencil.small_shift), definite=True)
    if factor.negative != 0:
        raise ModesError(
            what=f"{factor.negative or 'some'} negative eigenvalues: at rest the body is unstable",
            where=pencil.where,
            fix="look for compression (a negative tension) or a material that is not positive definite",
        )
    generator = np.random.default_rng(SEED)
    rigid, slow = softest(pencil, factor.solve, free=free, generator=generator)
    elastic = pencil.size - rigid.shape[1]
    if pencil.size <= DENSE_LIMIT or 4 * min(most, elastic) > pencil.size:
        return _whole(pencil, factor, rigid, most=most, top=top)
    known = np.hstack([rigid, slow])
    rest = _sparse(pencil, factor, known=known, need=most + 1, top=top, generator=generator)
    vector = np.hstack([slow, rest])
    for _ in range(3):
        pairs = _polish(pencil, factor, rigid, vector, 1)
        keep = cut(pairs.value, most=most, top=top)
        count = count_below(pencil, _between(pairs.value, keep, top))
        missing = 0 if count is None else count - rigid.shape[1] - keep
        if missing == 0:
            done = _finish(pencil, factor, rigid, pairs, keep=keep, proved=count is not None)
            calm = int(np.argmax(np.append(done.residual, np.inf) > SETTLED))
            if calm in (0, keep):
                return done
            # Rounding in the softest modes, which the inverse magnifies, has kept the upper ones from converging:
            # find those again with the lower ones known and out of the way.
            known = np.hstack([rigid, pairs.vector[:, :calm]])
            more = _sparse(pencil, factor, known=known, need=keep + 1 - calm, top=top, generator=generator)
            vector = np.hstack([pairs.vector[:, :calm], more])
            continue
        if missing < 0:
            break
        known = np.hstack([rigid, pairs.vector])
        more = _sparse(pencil, factor, known=known, need=missing, top=top, generator=generator)
        vector = np.hstack([pairs.vector, more])
    if missing == 0:
        return done
    raise ModesError(
        what=f"{keep} modes were found where counting pivots shows {count - rigid.shape[1] if count else 0}",
        where=pencil.where,
        fix="this is a defect of the solver; report it with the scene",
    )


def _whole(pencil: Pencil, factor: Factor, rigid: Array, *, most: int, top: float) -> Spectrum:
    vector = _dense(pencil, rigid.shape[1])
    rough = np.einsum("ij,ij->j", vector, pencil.stiffness @ vector)
    # A few more than wanted, so that the polish does not mix in what lies just above.
    enough = min(cut(np.maximum.accumulate(rough), most=most, top=top) + 2 * WIDTH, vector.shape[1])
    pairs = _polish(pencil, factor, rigid, vector[:, :enough], 2)
    keep = cut(pairs.value, most=most, top=top)
    return _finish(pencil, factor, rigid, pairs, keep=keep, proved=True)


def _finish(pencil: Pencil, factor: Factor, rigid: Array, pairs: _Pairs, *, keep: int, proved: bool) -> Spectrum:
    kept = pairs.first(keep)
    return Spectrum(
        rigid=rigid,
        value=kept.value,
        vector=kept.vector,
        residual=_residual(pencil, factor, rigid, kept),
        beyond=float(pairs.value[keep]) if keep < len(pairs.value) else np.inf,
        proved=proved,
    )
