"""Frequencies against closed forms and against known-answer pencils of scipy."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
import scipy.optimize
import scipy.sparse as sp
from scipy.sparse.linalg import LaplacianNd

from resonate.errors import ModesError
from resonate.modes.solve import solve_modes


@pytest.mark.parametrize("count", [1, 5, 300, 1500])
def test_fixed_chain_has_its_closed_form(make, count):
    # w_j = 2 sqrt(k/m) sin(j pi / (2 (n + 1))): Rayleigh, Theory of Sound (1894), section 120.
    stiffness, mass = make.chain(count, spring_n_m=4e4, mass_kg=0.02)

    modes = solve_modes(make.Body(stiffness, mass))

    number = np.arange(1, modes.count + 1)
    expected = 2.0 * np.sqrt(4e4 / 0.02) * np.sin(number * np.pi / (2 * (count + 1)))
    assert modes.count == min(count, 300)
    # Rounding of the largest eigenvalue over the smallest: 2e-16 * (2 (n + 1) / pi)^2 = 2e-10.
    np.testing.assert_allclose(modes.omega, expected, rtol=1e-9)


def test_free_beam_has_the_published_roots(make):
    # cos x cosh x = 1. Blevins, Formulas for Natural Frequency and Mode Shape (1979), table 8-1
    # (from memory): 4.73004074, 7.85320462, 10.9956078, 14.1371655, 17.2787597.
    table = [4.73004074, 7.85320462, 10.9956078, 14.1371655, 17.2787597]
    root = [scipy.optimize.brentq(lambda x: np.cos(x) - 1 / np.cosh(x), x - 0.1, x + 0.1) for x in table]
    np.testing.assert_allclose(root, table, rtol=1e-8)
    elements = 40
    stiffness, mass = make.beam(elements, length_m=0.4, bending_nm2=21.0, line_density_kg_m=0.62)

    modes = solve_modes(make.Body(stiffness, mass))

    expected = np.square(root) * np.sqrt(21.0 / (0.62 * 0.4**4))
    # Cubic elements lie above by (x / n)^4 / 1440 of the frequency; they never lie below.
    over = modes.omega[:5] / expected - 1.0
    assert modes.rigid.shape[1] == 2
    assert np.all(over > -1e-8)
    assert np.all(over < 1.2 * (np.array(root) / elements) ** 4 / 1440 + 1e-8)


def test_beam_error_falls_with_the_fourth_power(make):
    exact = 22.373285448  # 4.730040745^2

    def error(elements):
        return solve_modes(make.Body(*make.beam(elements))).omega[0] / exact - 1.0

    assert np.log2(error(8) / error(16)) == pytest.approx(4.0, abs=0.1)


@pytest.mark.parametrize("shape", [(12, 9), (41, 35)])
def test_net_agrees_with_the_laplacian_of_scipy(make, shape):
    # (12, 9) is solved densely, (41, 35) by Lanczos.
    stiffness, mass = make.grid(*shape)

    modes = solve_modes(make.Body(stiffness, mass, bands=make.Bands(most=100)))

    known = np.sort(-LaplacianNd(shape, boundary_conditions="dirichlet").eigenvalues())
    np.testing.assert_allclose(modes.omega**2, known[: modes.count], rtol=1e-10)


@pytest.mark.parametrize("size", [200, 1400])
def test_mikota_pencil_has_the_natural_numbers(make, size):
    # Mikota, ZAMM 81 (2001) S2 201: a chain of masses 1/j whose frequencies are 1, 2, 3, ...;
    # the matrices as scipy.sparse.linalg's class of that name has them.
    number = np.arange(size, 0, -1)
    side = -np.arange(size - 1, 0, -1)
    stiffness = sp.diags([side, 2 * number - 1, side], [-1, 0, 1], dtype=float)
    mass = sp.diags([1.0 / np.arange(1, size + 1)], [0])

    modes = solve_modes(make.Body(sp.csr_matrix(stiffness), sp.csr_matrix(mass)))

    np.testing.assert_allclose(modes.omega, np.arange(1, modes.count + 1), rtol=1e-9)


@pytest.mark.parametrize(("size", "seed"), [(150, 1), (1300, 2), (1300, 3)])
def test_irregular_nets_agree_with_lapack(make, size, seed):
    # Springs of very different strength between random neighbours, and a mass that couples freedoms:
    # the dense generalised solver of LAPACK is the reference.
    generator = np.random.default_rng(seed)
    near = np.clip(np.arange(3 * size) // 3 + generator.integers(-9, 10, 3 * size), 0, size - 1)
    spring = sp.csr_matrix(
        (
            np.r_[np.ones(3 * size), -np.ones(3 * size)],
            (np.tile(np.arange(3 * size), 2), np.r_[np.arange(3 * size) // 3, near]),
        ),
        shape=(3 * size, size),
    )
    stiffness = spring.T @ sp.diags(10.0 ** generator.uniform(0, 4, 3 * size)) @ spring + 1e-3 * sp.identity(
        size
    )
    mass = sp.diags([np.full(size - 1, 0.2), np.linspace(1, 3, size), np.full(size - 1, 0.2)], [-1, 0, 1])

    modes = solve_modes(make.Body(sp.csr_matrix(stiffness), sp.csr_matrix(mass), bands=make.Bands(most=80)))

    known = scipy.linalg.eigvalsh(stiffness.toarray(), mass.toarray())
    # LAPACK errs by rounding of the largest eigenvalue.
    atol = 1e-14 * known[-1]
    np.testing.assert_allclose(modes.omega**2, known[: modes.count], rtol=1e-9, atol=atol)
    np.testing.assert_allclose(modes.shape.T @ mass @ modes.shape, np.eye(modes.count), atol=1e-10)


def test_square_net_has_its_pairs_and_both_are_independent(make):
    stiffness, mass = make.grid(40, 40)

    modes = solve_modes(make.Body(stiffness, mass, bands=make.Bands(most=60)))

    one = 4.0 * np.sin(np.arange(1, 41) * np.pi / 82) ** 2
    known = np.sort(np.add.outer(one, one).ravel())
    np.testing.assert_allclose(modes.omega**2, known[: modes.count], rtol=1e-10)
    assert np.count_nonzero(np.diff(modes.omega) < 1e-9 * modes.omega[:-1]) > 20
    np.testing.assert_allclose(modes.shape.T @ modes.shape, np.eye(modes.count), atol=1e-10)


def test_shapes_are_normalised_by_mass_and_diagonalise_both_energies(make):
    stiffness, mass = make.beam(60)

    modes = solve_modes(make.Body(stiffness, mass))

    both = np.hstack([modes.rigid, modes.shape])
    np.testing.assert_allclose(both.T @ mass @ both, np.eye(both.shape[1]), atol=1e-10)
    energy = both.T @ stiffness @ both
    scale = np.sqrt(np.outer(modes.omega, modes.omega))
    np.testing.assert_allclose(energy[2:, 2:] / scale**2, np.eye(modes.count), atol=1e-8)
    assert np.max(modes.residual) < 1e-8


def test_equal_parts_give_exact_pairs(make):
    plane = make.beam(20)

    modes = solve_modes(make.Body(*make.together(plane, plane)))

    assert modes.rigid.shape[1] == 4
    np.testing.assert_array_equal(modes.omega[0::2], modes.omega[1::2])
    # Each mode lives in one plane only.
    halves = np.stack([np.abs(modes.shape[:42]).max(0), np.abs(modes.shape[42:]).max(0)])
    assert np.all(halves.min(0) == 0.0)


def test_free_bar_has_six_rigid_motions(make):
    modes = solve_modes(make.Body(*make.spar(30), free=True))

    assert modes.rigid.shape[1] == 6
    assert modes.omega[0] == pytest.approx(22.3733, rel=1e-4)


def test_free_body_with_another_number_of_rigid_motions_is_refused(make):
    with pytest.raises(ModesError, match="6 rigid motions, but 2 were found"):
        solve_modes(make.Body(*make.beam(20), free=True))


def test_pinned_body_keeps_its_mechanism(make):
    # A chain that ends nowhere, beside one that is fixed: one rigid motion in a supported body.
    pencil = make.together(make.chain(40, ends="free"), make.chain(30))

    modes = solve_modes(make.Body(*pencil))

    assert modes.rigid.shape[1] == 1
    np.testing.assert_allclose(np.abs(modes.rigid[:40, 0]), 40**-0.5, rtol=1e-9)
    assert np.all(modes.rigid[40:, 0] == 0.0)


def test_slow_swing_is_not_taken_for_rigid(make):
    # A stiff free chain, held by one spring 1e9 times softer: it swings at sqrt(k / total mass).
    stiffness, mass = make.chain(50, spring_n_m=1e7, ends="free")
    stiffness = stiffness.tolil()
    stiffness[0, 0] += 1e-2

    modes = solve_modes(make.Body(sp.csr_matrix(stiffness), mass))

    assert modes.rigid.shape[1] == 0
    assert modes.omega[0] == pytest.approx(np.sqrt(1e-2 / 50), rel=1e-5)


def test_freedoms_removed_by_supports_come_back_through_the_basis(make):
    stiffness, mass = make.chain(20)
    basis = sp.csr_matrix(sp.vstack([sp.csr_matrix((1, 20)), sp.identity(20)]))

    modes = solve_modes(make.Body(stiffness, mass, basis=basis))

    assert modes.shape.shape == (21, 20)
    assert np.all(modes.shape[0] == 0.0)


def test_body_without_stiffness_has_rigid_motions_only(make):
    empty = sp.csr_matrix((30, 30))

    modes = solve_modes(make.Body(empty, sp.csr_matrix(2.0 * sp.identity(30))))

    assert modes.count == 0
    assert modes.rigid.shape == (30, 30)
    assert any("no mode at all" in warning for warning in modes.warnings)
