"""What the modes that were left out would still give way under a slow force."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import scipy.sparse
from threadpoolctl import threadpool_limits

from resonate.errors import ModesError
from resonate.modes.factor import factorise
from resonate.modes.pencil import check_pencil
from resonate.modes.rigid import rigid_motions
from resonate.modes.store import content_key, modes_key

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet
    from resonate.modes.store import ModeStore

    Array = NDArray[np.float64]


def residual_compliance(
    body: Body, modes: ModeSet, rows: csr_matrix | Array, *, store: ModeStore | None = None
) -> Array:
    """Find the static compliance of the missing modes for forces along some rows.

    The part of the force that drives rigid motions and solved modes is taken off first,
    ``r' = r - M Phi Phi^T r``; then ``r'^T (K + s M)^-1 r'`` is what only the missing modes answer,
    without a difference of large numbers. (K + s M, with a very small s, can be inverted for a free
    body too.)

    Parameters
    ----------
    body : Body
        The body the modes belong to.
    modes : ModeSet
        Its modes.
    rows : csr_matrix or Array
        (k, d), the response of a spot to each of the d freedoms, as ``Body.probe`` gives it.
    store : ModeStore, optional
        Where answers are kept.

    Returns
    -------
    Array
        (k,) m/N, at least 0: ``sum_missing (row phi_i)^2 / omega_i^2``.

    Raises
    ------
    ModesError
        If the rows do not fit, or the stiffness cannot be factorised.

    References
    ----------
    MacNeal, A hybrid method of component mode synthesis, Computers & Structures 1 (1971) 581:
    residual flexibility. Rubin, AIAA J. 13 (1975) 995 (both from memory).
    """
    where = f"body {body.name!r}"
    gains = scipy.sparse.csr_matrix(rows, dtype=np.float64, copy=True)
    gains.sum_duplicates()
    if gains.shape[1] != body.freedoms:
        raise ModesError(
            what=f"rows over {gains.shape[1]} freedoms for a body of {body.freedoms}",
            where=where,
            fix="take the rows from the probe of the same body",
        )
    key = content_key(
        modes_key(body, solved_hz=modes.solved_hz),
        modes.omega,
        gains.shape,
        gains.indptr.astype(np.int64),
        gains.indices.astype(np.int64),
        gains.data,
    )
    entry = store.load("compliance", key) if store is not None else None
    if entry is not None:
        return entry.arrays["compliance_m_n"]
    with threadpool_limits(limits=1):
        answer = _missing(body, modes, gains, where=where)
    if store is not None:
        store.save("compliance", key, {"compliance_m_n": answer})  # without it, solved again next time
    return answer


def _missing(body: Body, modes: ModeSet, gains: csr_matrix, *, where: str) -> Array:
    forms = body.forms()
    pencil = check_pencil(forms.stiffness, forms.mass, where=where)
    factor = factorise(pencil.shifted(pencil.small_shift), definite=True)
    if factor.negative != 0:
        raise ModesError(
            what="the stiffness is not positive semidefinite",
            where=where,
            fix="look for compression (a negative tension) in the body",
        )
    force = np.asarray((gains @ forms.basis).todense()).T
    both = np.hstack([modes.rigid, modes.shape])
    # Shapes over the freedoms that the supports leave: M phi there is what a force is measured by.
    inside = _restrict(forms.basis, both)
    if body.held:
        # Motions as a whole are not among the modes of a held body, and give no way either.
        still = rigid_motions(pencil, factor.solve, free=True, generator=np.random.default_rng(0))
        inside = np.hstack([still, inside])
    heavy = pencil.mass @ inside
    for _ in range(2):
        force = force - heavy @ (inside.T @ force)
    moved = factor.solve(force)
    moved = moved - inside @ (heavy.T @ moved)
    answer: Array = np.maximum(np.einsum("ij,ij->j", force, moved), 0.0)
    return answer


def _restrict(basis: csr_matrix, shape: Array) -> Array:
    """Undo ``basis`` (d, f): the coordinates (f, m) whose image is ``shape`` (d, m)."""
    gram = scipy.sparse.csr_matrix(basis.T @ basis)
    image = np.asarray(basis.T @ shape)
    diagonal = gram.diagonal()
    if gram.nnz == len(diagonal):
        return np.asarray(image / diagonal[:, None])
    found = factorise(gram, definite=True)
    if found.negative != 0:
        raise ModesError(
            what="the basis of free motions has dependent columns",
            where="supports",
            fix="this is a defect of the body; report it with the scene",
        )
    return found.solve(image)
