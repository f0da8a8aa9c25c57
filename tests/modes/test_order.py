"""The order of elimination: a permutation, and sparse factors on meshes of every kind."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.sparse as sp
from scipy.sparse.csgraph import reverse_cuthill_mckee
from scipy.sparse.linalg import splu

from resonate.modes.factor import factorise
from resonate.modes.order import dissection


def lattice(*counts, freedoms=1):
    """Laplacian of a grid of points, several freedoms each, shifted to be definite."""
    total = sp.csr_matrix((1, 1))
    for count in counts:
        line = sp.diags([-np.ones(count - 1), 2.0 * np.ones(count), -np.ones(count - 1)], [-1, 0, 1])
        total = sp.kronsum(line, total) if total.shape[0] > 1 else line
    whole = sp.kron(total + 0.1 * sp.identity(total.shape[0]), np.ones((freedoms, freedoms)) + np.eye(freedoms))
    return sp.csr_matrix(whole)


def fill(matrix, order):
    """Entries of the factor for one order of elimination."""
    lu = splu(
        matrix[order][:, order].tocsc(),
        permc_spec="NATURAL",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True},
    )
    return lu.L.nnz


CASES = {
    "square": lattice(60, 50),
    "brick": lattice(16, 13, 12),
    "brick of three freedoms": lattice(12, 9, 8, freedoms=3),
    "long slab": lattice(80, 12, 3),
    "two pieces": sp.csr_matrix(sp.block_diag([lattice(30, 30), lattice(8, 8, 8)])),
    "crumbs": sp.csr_matrix(sp.identity(500)),
    "clump": sp.csr_matrix(np.ones((400, 400)) + 400 * np.eye(400)),
}


@pytest.mark.parametrize("case", CASES)
def test_every_freedom_comes_once(case):
    order = dissection(CASES[case])

    np.testing.assert_array_equal(np.sort(order), np.arange(CASES[case].shape[0]))


@pytest.mark.parametrize(("case", "most"), [("square", 0.75), ("brick", 0.75), ("brick of three freedoms", 0.8), ("long slab", 1.3)])
def test_factors_are_sparser_than_by_bandwidth(case, most):
    # Peer: reverse Cuthill-McKee (general library: scipy.sparse.csgraph).
    matrix = CASES[case]

    ours, theirs = fill(matrix, dissection(matrix)), fill(matrix, reverse_cuthill_mckee(matrix, symmetric_mode=True))

    print(f"{case}: {ours / theirs:.2f} of the entries")
    assert ours < most * theirs


def test_fill_of_a_square_grows_as_n_log_n():
    # George (1973): O(n log n) entries for a square grid, where a band takes n^1.5.
    counts = np.array([30, 60, 120])
    entries = np.array([fill(lattice(n, n), dissection(lattice(n, n))) for n in counts], dtype=float)
    growth = np.diff(np.log(entries)) / np.diff(np.log(counts**2))

    print("growth", growth)
    assert np.all(growth < 1.3)


def test_a_large_system_is_solved_and_counted(monkeypatch):
    monkeypatch.setattr("resonate.modes.factor.DISSECT_FROM", 100)
    monkeypatch.setattr("resonate.modes.factor.FAST_FROM", 10**9)
    matrix = lattice(14, 12, 11)
    value = np.linalg.eigvalsh(matrix.toarray())
    shift = 0.5 * (value[20] + value[21])
    factor = factorise(sp.csr_matrix(matrix - shift * sp.identity(matrix.shape[0])), definite=False)
    block = np.random.default_rng(3).standard_normal((matrix.shape[0], 3))

    answer = factor.solve(block)

    np.testing.assert_allclose(matrix @ answer - shift * answer, block, atol=1e-8)
    assert factor.negative == 21
