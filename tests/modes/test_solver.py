"""How many modes, proof that none is missing, signs, repeatability, and what is refused."""

from __future__ import annotations

import dataclasses
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import scipy.linalg
import scipy.sparse as sp

from resonate.errors import ModesError
from resonate.modes import factor as factor_module
from resonate.modes import solve as solve_module
from resonate.modes import spectrum as spectrum_module
from resonate.modes.pencil import check_pencil, split
from resonate.modes.solve import solve_modes
from resonate.modes.spectrum import count_below, graded_eigh, lowest

TWO_PI = 2.0 * np.pi
ROOT = Path(__file__).resolve().parents[2]


def net(make, rows=45, columns=37, **bands):
    """A net large enough for the sparse solver, and all its eigenvalues in closed form."""
    stiffness, mass = make.grid(rows, columns)
    one, two = (4.0 * np.sin(np.arange(1, n + 1) * np.pi / (2 * (n + 1))) ** 2 for n in (rows, columns))
    known = np.sort(np.add.outer(one, two).ravel())
    return make.Body(stiffness, mass, bands=make.Bands(**bands)), known


@pytest.mark.parametrize("number", [1, 7, 40, 200])
def test_counting_pivots_tells_the_number_below_any_shift(make, number):
    body, known = net(make)
    pencil = check_pencil(body.stiffness, body.mass, where="net")

    shift = 0.5 * (known[number - 1] + known[number])

    assert count_below(pencil, shift) == number


def test_no_mode_is_missed_in_dense_and_sparse_solution(make):
    # The count of negative pivots (Sylvester's law of inertia) just above the last kept mode.
    for size in ((20, 17), (45, 37)):
        body, known = net(make, *size, most=120)
        pencil = check_pencil(body.stiffness, body.mass, where="net")

        found = lowest(pencil, most=120, top=np.inf, free=False)

        count = len(found.value)
        assert found.proved
        assert count_below(pencil, 0.5 * (found.value[-1] + found.beyond)) == count
        np.testing.assert_allclose(found.value, known[:count], rtol=1e-10)
        assert found.beyond == pytest.approx(known[count], rel=1e-8)


def test_a_missed_mode_is_noticed_and_found(make, monkeypatch):
    body, known = net(make, most=30)
    genuine, calls = spectrum_module.lanczos, []

    def forgetful(*arguments, **options):
        found = genuine(*arguments, **options)
        calls.append(options["need"])
        if len(calls) > 1:
            return found
        keep = np.delete(np.arange(len(found.theta)), 11)
        return type(found)(theta=found.theta[keep], vector=found.vector[:, keep])

    monkeypatch.setattr(spectrum_module, "lanczos", forgetful)
    modes = solve_modes(body)

    assert calls == [31, 1]
    np.testing.assert_allclose(modes.omega**2, known[: modes.count], rtol=1e-10)


def test_a_mode_that_stays_missing_is_an_error(make, monkeypatch):
    body, _ = net(make, most=30)
    genuine = spectrum_module.lanczos

    def blind(*arguments, **options):
        found = genuine(*arguments, **options)
        keep = np.abs(found.theta - found.theta[0]) > 0.0 if options["need"] > 5 else found.theta < 0.0
        return type(found)(theta=found.theta[keep], vector=found.vector[:, keep])

    monkeypatch.setattr(spectrum_module, "lanczos", blind)
    with pytest.raises(ModesError, match="counting pivots shows"):
        solve_modes(body)


@pytest.mark.parametrize("rows", [20, 45])
def test_all_modes_up_to_solved_hz_are_kept_and_no_more(make, rows):
    top_hz = 0.07
    body, known = net(make, rows, 37, heard_hz=0.05, solved_hz=top_hz)

    modes = solve_modes(body)

    known_hz = np.sqrt(known) / TWO_PI
    assert modes.count == np.count_nonzero(known_hz <= top_hz)
    assert modes.heard == np.count_nonzero(known_hz <= 0.05)
    assert modes.solved_hz == top_hz
    assert modes.warnings == ()


def test_default_reaches_four_times_what_is_heard(make):
    body, known = net(make, heard_hz=0.02)

    modes = solve_modes(body)

    assert modes.solved_hz == pytest.approx(0.08)
    assert modes.count == np.count_nonzero(np.sqrt(known) / TWO_PI <= 0.08)


def test_budget_cuts_and_says_so_with_numbers(make):
    body, known = net(make, heard_hz=0.1, most=50)

    modes = solve_modes(body)

    assert 49 <= modes.count <= 50
    assert modes.solved_hz == pytest.approx(np.sqrt(known[modes.count - 1]) / TWO_PI, rel=1e-9)
    (warning,) = modes.warnings
    assert f"{modes.count} modes are kept" in warning
    assert "modes.most = 50" in warning
    assert "body 'post'" in warning


def test_budget_never_takes_half_of_a_pair(make):
    # On a square net the second and third eigenvalue are equal.
    body, _ = net(make, 40, 40, heard_hz=0.1, most=2)

    assert solve_modes(body).count == 1


def test_budget_is_shared_between_parts_by_frequency(make):
    fast, slow = make.chain(60, spring_n_m=100.0), make.chain(1400)
    body = make.Body(*make.together(fast, slow), bands=make.Bands(most=100))

    modes = solve_modes(body)

    every = np.sort(np.concatenate([scipy.linalg.eigvalsh(pair[0].toarray()) for pair in (fast, slow)]))
    np.testing.assert_allclose(modes.omega**2, every[:100], rtol=1e-8)


def test_first_mode_above_hearing_is_announced(make):
    modes = solve_modes(make.Body(*make.chain(3, spring_n_m=1e6), bands=make.Bands(heard_hz=100.0)))

    assert modes.heard == 0
    # sqrt(2 - sqrt 2) * 1000 rad/s = 121.8 Hz
    assert any("first mode is at 122 Hz" in warning for warning in modes.warnings)


def test_swings_on_cords_come_first_and_are_counted(make):
    stiffness, mass = make.chain(40, spring_n_m=1e6, ends="free")
    cords = sp.csr_matrix(([30.0, 30.0], ([0, 39], [0, 39])), shape=(40, 40))

    modes = solve_modes(make.Body(sp.csr_matrix(stiffness + cords), mass, cords=cords))

    assert modes.swing == 1
    assert modes.count == 40
    # One swing: total mass 40 kg on 60 N/m; then the free chain, w_1 = 2 sqrt(k/m) sin(pi / 80).
    assert modes.omega[0] == pytest.approx(np.sqrt(60.0 / 40.0), rel=1e-4)
    assert modes.omega[1] == pytest.approx(2000.0 * np.sin(np.pi / 80), rel=1e-3)


def test_the_largest_entry_of_every_shape_is_positive(make):
    for body in (net(make, most=40)[0], make.Body(*make.spar(20), free=True)):
        modes = solve_modes(body)
        for shape in (*modes.shape.T, *modes.rigid.T):
            size = np.abs(shape)
            # Of entries that tie the first decides.
            assert shape[np.argmax(size >= (1.0 - 1e-6) * size.max())] > 0.0


SCRIPT = """
import hashlib, importlib.util, sys
spec = importlib.util.spec_from_file_location("bodies", sys.argv[1])
bodies = importlib.util.module_from_spec(spec)
sys.modules["bodies"] = bodies
spec.loader.exec_module(bodies)
from resonate.modes.solve import solve_modes
seal = hashlib.sha256()
for pencil in (bodies.grid(40, 40), bodies.beam(300), bodies.spar(40)):
    modes = solve_modes(bodies.MatrixBody(*pencil, bands=bodies.Bands(most=60)))
    for array in (modes.omega, modes.shape, modes.rigid, modes.residual):
        seal.update(array.tobytes())
print(seal.hexdigest())
"""


def test_bits_do_not_depend_on_the_process_or_on_threads():
    def seal(threads):
        environment = {**os.environ, "OPENBLAS_NUM_THREADS": threads, "OMP_NUM_THREADS": threads}
        environment["PYTHONPATH"] = str(ROOT)
        command = [sys.executable, "-c", SCRIPT, str(Path(__file__).with_name("conftest.py"))]
        return subprocess.run(command, env=environment, capture_output=True, text=True, check=True).stdout

    assert seal("1") == seal("1") == seal("2")


def test_graded_eigenvalues_keep_their_relative_accuracy():
    # D [[2, 1], [1, 2]] D with D = diag(1, d): eigenvalues 3/2 and 2 d^2 up to relative terms of 1/d^2.
    scale = np.array([1.0, 1e9])
    matrix = np.array([[2.0, 1.0], [1.0, 2.0]]) * np.outer(scale, scale)

    value, vector = graded_eigh(matrix)

    assert value[0] == pytest.approx(1.5, rel=1e-13)
    assert value[1] == pytest.approx(2e18, rel=1e-13)
    np.testing.assert_allclose(vector.T @ vector, np.eye(2), atol=1e-15)


def test_parts_that_nothing_couples_are_solved_apart(make):
    pencil = check_pencil(*make.together(make.chain(4), make.beam(5), make.chain(9)), where="rack")

    parts = split(pencil)

    assert [part.size for part in parts] == [12, 9, 4]
    assert sorted(np.concatenate([part.index for part in parts])) == list(range(25))
    for part in parts:
        np.testing.assert_array_equal(
            part.stiffness.toarray(), pencil.stiffness[part.index][:, part.index].toarray()
        )


def spoiled(matrix, row, column, value):
    changed = sp.lil_matrix(matrix)
    changed[row, column] = value
    return sp.csr_matrix(changed)


def test_asymmetry_is_refused_and_rounding_is_not(make):
    stiffness, mass = make.chain(10)

    with pytest.raises(ModesError, match="stiffness matrix is not symmetric"):
        solve_modes(make.Body(spoiled(stiffness, 3, 4, -1.0 + 1e-9), mass))
    assert solve_modes(make.Body(spoiled(stiffness, 3, 4, -1.0 + 1e-15), mass)).count == 10


@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_entries_that_are_not_finite_are_refused(make, value):
    stiffness, mass = make.chain(10)

    with pytest.raises(ModesError, match="not finite"):
        solve_modes(make.Body(spoiled(stiffness, 3, 3, value), mass))


def test_freedom_without_mass_is_refused(make):
    stiffness, mass = make.chain(10)

    with pytest.raises(ModesError, match=r"1 of 10 freedoms have no mass .* number 6"):
        solve_modes(make.Body(stiffness, spoiled(mass, 6, 6, 0.0)))


@pytest.mark.parametrize("size", [10, 1400])
def test_mass_that_is_not_positive_definite_is_refused(make, size):
    stiffness, mass = make.chain(size)
    mass = spoiled(spoiled(mass, 2, 3, 1.5), 3, 2, 1.5)

    with pytest.raises(ModesError, match="mass matrix has 1 eigenvalues"):
        solve_modes(make.Body(stiffness, mass))


@pytest.mark.parametrize("size", [10, 1400])
def test_unstable_rest_state_is_refused(make, size):
    stiffness, mass = make.chain(size)

    with pytest.raises(ModesError, match="1 negative eigenvalues: at rest the body is unstable"):
        solve_modes(make.Body(spoiled(stiffness, 5, 5, -3.0), mass))


def test_large_residual_is_an_error_with_its_number(make, monkeypatch):
    genuine = solve_module.lowest

    def sloppy(pencil, **options):
        found = genuine(pencil, **options)
        return dataclasses.replace(found, residual=found.residual + 2e-8)

    monkeypatch.setattr(solve_module, "lowest", sloppy)
    with pytest.raises(ModesError, match="mode 1 has a residual of 2e-08; 1e-08 would do"):
        solve_modes(make.Body(*make.chain(10)))


def test_softest_modes_may_be_as_inexact_as_rounding_makes_them(make):
    # 2,000 cubic elements: the smallest eigenvalue is some 1e-15 of the largest (it falls with the
    # fourth power), so that rounding of the stiffness matrix shows in the residual of the first mode.
    modes = solve_modes(make.Body(*make.beam(2000), bands=make.Bands(most=10)))

    assert modes.residual[0] > 1e-8
    # First root squared, Blevins (1979), table 8-1: 22.3733.
    assert modes.omega[0] == pytest.approx(22.373285448, rel=1e-6)


def test_shapes_must_fit(make):
    stiffness, mass = make.chain(10)

    with pytest.raises(ModesError, match="stiffness of shape"):
        solve_modes(make.Body(stiffness, make.chain(9)[1]))
    with pytest.raises(ModesError, match="basis of shape"):
        solve_modes(make.Body(stiffness, mass, basis=sp.csr_matrix(np.ones((12, 9)))))


def test_the_optional_factorisation_gives_the_same_modes_and_counts(make, monkeypatch):
    pytest.importorskip("rslab")
    body, known = net(make, most=40)
    plain = solve_modes(body)
    monkeypatch.setattr(factor_module, "FAST_FROM", 0)
    monkeypatch.setattr(factor_module, "_superlu", None)  # must not be used

    fast = solve_modes(body)

    np.testing.assert_allclose(fast.omega, plain.omega, rtol=1e-11)
    pencil = check_pencil(body.stiffness, body.mass, where="net")
    assert count_below(pencil, 0.5 * (known[6] + known[7])) == 7
