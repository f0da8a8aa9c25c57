"""What missing modes give way, against the exact inverse."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
import scipy.sparse as sp

from resonate.errors import ModesError
from resonate.modes.compliance import residual_compliance
from resonate.modes.solve import solve_modes
from resonate.modes.store import ModeStore


def missing_sum(stiffness, mass, rows, known):
    """The compliance of all modes behind the first ``known``, from a whole dense solution."""
    value, vector = scipy.linalg.eigh(stiffness.toarray(), mass.toarray())
    return np.sum((rows @ vector[:, known:]) ** 2 / value[known:], axis=1)


def spots(size):
    rows = np.zeros((4, size))
    rows[0, 0] = 1.0
    rows[1, size // 3] = 1.0
    rows[2, size // 3 : size // 3 + 2] = 0.5
    rows[3, [2, 8]] = [1.0, -1.0]
    return rows


@pytest.mark.parametrize("most", [1, 6, 25])
def test_supported_body_lacks_what_the_exact_inverse_has_more(make, most):
    stiffness, mass = make.chain(60, spring_n_m=3e3, mass_kg=0.01)
    body = make.Body(stiffness, mass, bands=make.Bands(most=most))
    modes = solve_modes(body)
    rows = spots(60)

    found = residual_compliance(body, modes, sp.csr_matrix(rows))

    whole = np.einsum("ij,ij->i", rows, scipy.linalg.solve(stiffness.toarray(), rows.T).T)
    solved = np.sum((rows @ modes.shape) ** 2 / modes.omega**2, axis=1)
    np.testing.assert_allclose(found, whole - solved, rtol=1e-8, atol=1e-13 * whole.max())


@pytest.mark.parametrize("most", [4, 12])
def test_free_body_leaves_its_rigid_motions_out(make, most):
    stiffness, mass = make.spar(12)
    body = make.Body(stiffness, mass, free=True, bands=make.Bands(most=most))
    modes = solve_modes(body)
    rows = spots(stiffness.shape[0])

    found = residual_compliance(body, modes, rows)

    expected = missing_sum(stiffness, mass, rows, 6 + modes.count)
    np.testing.assert_allclose(found, expected, rtol=1e-6, atol=1e-12 * expected.max())


def test_large_body_is_done_sparsely(make):
    stiffness, mass = make.grid(40, 36)
    body = make.Body(stiffness, mass, bands=make.Bands(most=40))
    modes = solve_modes(body)
    rows = spots(1440)

    np.testing.assert_allclose(
        residual_compliance(body, modes, rows), missing_sum(stiffness, mass, rows, modes.count), rtol=1e-9
    )


def test_nothing_is_missing_when_all_modes_are_there(make):
    body = make.Body(*make.chain(20))

    found = residual_compliance(body, solve_modes(body), spots(20))

    assert np.all(found >= 0.0)
    assert np.all(found < 1e-12)


def test_rows_run_over_all_freedoms_also_those_that_are_held(make):
    stiffness, mass = make.chain(20)
    # Freedom 0 is held; freedoms 1 and 2 are tied together by a rigid link that halves their share.
    basis = sp.lil_matrix((22, 20))
    basis[1, 0] = basis[2, 0] = 0.5
    for freedom in range(1, 20):
        basis[freedom + 2, freedom] = 1.0
    body = make.Body(stiffness, mass, basis=sp.csr_matrix(basis), bands=make.Bands(most=5))
    rows = np.zeros((2, 22))
    rows[0, 0] = 1.0
    rows[1, 1] = 2.0

    found = residual_compliance(body, solve_modes(body), rows)

    first = np.zeros((1, 20))
    first[0, 0] = 1.0
    np.testing.assert_allclose(found, [0.0, missing_sum(stiffness, mass, first, 5)[0]], rtol=1e-9)


def test_answer_is_kept_by_content(make, tmp_path):
    store = ModeStore(tmp_path)
    body = make.Body(*make.chain(30), bands=make.Bands(most=5))
    modes = solve_modes(body, store=store)
    rows = sp.csr_matrix(spots(30))

    first = residual_compliance(body, modes, rows, store=store)
    again = residual_compliance(body, modes, rows.toarray(), store=store)
    assembled = body.assembled
    other = residual_compliance(body, modes, 2.0 * rows, store=store)

    assert assembled == 2  # once for the modes, once for the compliance
    assert body.assembled == 3
    assert again.tobytes() == first.tobytes()
    np.testing.assert_allclose(other, 4.0 * first, rtol=1e-10)


def test_rows_of_another_body_are_refused(make):
    body = make.Body(*make.chain(30))

    with pytest.raises(ModesError, match="rows over 29 freedoms for a body of 30"):
        residual_compliance(body, solve_modes(body), np.ones((1, 29)))


def test_a_held_body_does_not_give_way_as_a_whole(make):
    # Motion as a whole is neither among its modes nor a compliance: the missing modes alone give.
    stiffness, mass = make.chain(40, spring_n_m=2e5, mass_kg=0.02, ends="free")
    body = make.Body(stiffness, mass, held=True, bands=make.Bands(most=6))
    rows = spots(40)

    modes = solve_modes(body)

    assert modes.rigid.shape[1] == 0
    found = residual_compliance(body, modes, rows)
    np.testing.assert_allclose(found, missing_sum(stiffness, mass, rows, 1 + modes.count), rtol=1e-8)
