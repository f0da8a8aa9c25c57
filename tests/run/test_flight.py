"""A body as a whole: ballistic flight and torque-free turning against closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation
from scipy.special import ellipj, ellipk

from resonate.run.flight import fly, kick_of, matrix, rigid_energy, turned
from resonate.run.record import RigidState

NONE = np.zeros(3)
UP = np.array([0.0, 0.0, 0.0, 1.0])


def spinning(spin, turn=UP):
    return RigidState(NONE, np.array(turn, dtype=float), NONE, np.array(spin, dtype=float))


def body_spin(turn, spin):
    return np.einsum("tji,tj->ti", matrix(turn), spin)


@pytest.mark.parametrize(
    ("height", "time", "speed"), [(1.0, 0.4516007558, 4.428690551), (0.75, 0.3910977268, 3.835358523)]
)
def test_free_fall(height, time, speed):
    # h = g t^2 / 2 with the standard acceleration 9.80665 m/s^2 (CGPM 1901).
    start = RigidState(np.array([0.3, height, -1.0]), UP, np.array([2.0, 0.0, 0.0]), NONE)
    place, turn, now, _ = fly(start, np.array([time]), tensor=np.eye(3), gravity=np.array([0.0, -9.80665, 0.0]))
    np.testing.assert_allclose(place[0], [0.3 + 2.0 * time, 0.0, -1.0], atol=1e-9)
    assert now[0, 1] == pytest.approx(-speed, rel=1e-9)
    np.testing.assert_array_equal(turn[0], UP)


# Precession of a thin disc over its spin, Omega_p / w3 = I3 / (I1 cos tilt) = 2 / cos tilt: Landau & Lifshitz,
# Mechanics, sec. 33 (Feynman's wobbling plate).
@pytest.mark.parametrize(("tilt_deg", "ratio"), [(1e-3, 2.0), (5.0, 2.007639675), (30.0, 2.309401077)])
def test_wobble_of_a_disc(tilt_deg, ratio):
    tensor, tilt, own = np.diag([1.0, 1.0, 2.0]), np.radians(tilt_deg), 7.0
    # Angular momentum along world z; the disc's axis leans by the tilt: L3 = I3 w3, L1 = L3 tan(tilt).
    turn = np.array([0.0, np.sin(0.5 * tilt), 0.0, np.cos(0.5 * tilt)])
    own_spin = np.array([-2.0 * own * np.tan(tilt), 0.0, own])
    start = spinning(matrix(turn) @ own_spin, turn)
    times = np.linspace(0.0, 10.0, 2001)
    turns, spins = fly(start, times, tensor=tensor, gravity=NONE)[1::2]
    axis = matrix(turns)[:, :, 2]
    angle = np.unwrap(np.arctan2(axis[:, 1], axis[:, 0]))
    assert angle[-1] / times[-1] / own == pytest.approx(ratio, rel=1e-8 if tilt_deg > 1.0 else 1e-6)
    # The axis keeps its tilt, momentum its direction, energy its size.
    np.testing.assert_allclose(axis[:, 2], np.cos(tilt), atol=1e-12)
    momentum = np.einsum("tij,tj->ti", matrix(turns), body_spin(turns, spins) @ tensor)
    np.testing.assert_allclose(momentum, np.tile(momentum[0], (len(times), 1)), atol=1e-11)


# Landau & Lifshitz, Mechanics, sec. 37: I = (1, 2, 3), w(0) = (0.01, 1, 0.01): period 4 K(k) / p of the turning about
# the unstable middle axis.
PERIOD_S = 39.105734197


def jacobi(inertia, spin, times):
    """Euler's equations solved by Jacobi's functions, for M^2 > 2 E I2 and I1 < I2 < I3 (their eqs. 37.8-37.12)."""
    i1, i2, i3 = inertia
    twice, square = float(np.sum(inertia * spin**2)), float(np.sum((inertia * spin) ** 2))
    assert square > twice * i2
    amplitude = np.sqrt(
        [
            (twice * i3 - square) / (i1 * (i3 - i1)),
            (twice * i3 - square) / (i2 * (i3 - i2)),
            (square - twice * i1) / (i3 * (i3 - i1)),
        ]
    )
    pace = np.sqrt((i3 - i2) * (square - twice * i1) / (i1 * i2 * i3))
    m = (i2 - i1) * (twice * i3 - square) / ((i3 - i2) * (square - twice * i1))
    # Phase from the start: sn = w2 / amplitude, cn = w1 / amplitude, by integrating 1 / sqrt(1 - m sin^2).
    phi = np.arctan2(spin[1] / amplitude[1], spin[0] / amplitude[0])
    from scipy.special import ellipkinc

    sn, cn, dn, _ = ellipj(pace * times + ellipkinc(phi, m), m)
    return np.stack([amplitude[0] * cn, amplitude[1] * sn, amplitude[2] * dn], axis=1), 4.0 * ellipk(m) / pace


def test_flip_about_the_middle_axis():
    inertia, spin = np.array([1.0, 2.0, 3.0]), np.array([0.01, 1.0, 0.01])
    times = np.linspace(0.0, 2.0 * PERIOD_S, 801)
    exact, period = jacobi(inertia, spin, times)
    assert period == pytest.approx(PERIOD_S, rel=1e-9)
    turns, spins = fly(spinning(spin), times, tensor=np.diag(inertia), gravity=NONE)[1::2]
    # Close to the unstable axis a rounding error grows e^(t / 1.7 s) between flips.
    np.testing.assert_allclose(body_spin(turns, spins), exact, atol=1e-7)
    assert np.min(body_spin(turns, spins)[:, 1]) < -0.99


def test_momentum_and_energy_over_ten_periods():
    inertia, spin = np.array([1.0, 2.0, 3.0]), np.array([0.01, 1.0, 0.01])
    times = np.linspace(0.0, 10.0 * PERIOD_S, 500)
    turns, spins = fly(spinning(spin), times, tensor=np.diag(inertia), gravity=NONE)[1::2]
    own = body_spin(turns, spins)
    momentum = np.einsum("tij,tj->ti", matrix(turns), own * inertia)
    np.testing.assert_allclose(momentum, np.tile(inertia * spin, (500, 1)), atol=1e-11)
    np.testing.assert_allclose(np.sum(own**2 * inertia, axis=1), np.sum(spin**2 * inertia), rtol=1e-12)


def test_turn_belongs_to_the_spin():
    # R' = R [w]x, by differences; any inertia, in a frame that is not principal.
    rng = np.random.default_rng(3)
    root = rng.normal(size=(3, 3))
    tensor = root @ root.T + 3.0 * np.eye(3)
    turn = Rotation.from_rotvec([0.4, -1.0, 0.3]).as_quat()
    start = spinning([3.0, -2.0, 5.0], turn)
    at, small = 1.3, 1e-5
    frames = matrix(fly(start, np.array([at - small, at, at + small]), tensor=tensor, gravity=NONE)[1])
    spin = fly(start, np.array([at]), tensor=tensor, gravity=NONE)[3][0]
    rate = (frames[2] - frames[0]) / (2.0 * small) @ frames[1].T
    # Third derivatives of order w^3 = 200 over small^2 / 6, and rounding 1e-16 / small.
    np.testing.assert_allclose([rate[2, 1], rate[0, 2], rate[1, 0]], spin, atol=1e-7)


def test_any_time_in_any_order_backwards_too():
    tensor, start = np.diag([1.0, 1.7, 2.4]), spinning([20.0, 30.0, -11.0])
    times = np.array([0.7, -0.3, 0.0, 2.1, 0.1, -1.0])
    turns, spins = fly(start, times, tensor=tensor, gravity=NONE)[1::2]
    for n, time in enumerate(times):
        alone = fly(start, np.array([time]), tensor=tensor, gravity=NONE)
        np.testing.assert_allclose(turns[n], alone[1][0], atol=1e-12)
        # There and back again.
        back = fly(RigidState(NONE, turns[n], NONE, spins[n]), np.array([-time]), tensor=tensor, gravity=NONE)
        np.testing.assert_allclose(back[1][0], UP, atol=1e-11)
        np.testing.assert_allclose(back[3][0], start.spin_rad_s, atol=1e-9)


def test_quaternions_keep_their_sign():
    times = np.linspace(0.0, 3.0, 4000)
    turns = fly(spinning([9.0, 14.0, 2.0]), times, tensor=np.diag([1.0, 2.0, 2.5]), gravity=NONE)[1]
    assert np.min(np.sum(turns[1:] * turns[:-1], axis=1)) > 0.99


def test_rotation_vectors_against_scipy():
    rng = np.random.default_rng(1)
    turn = Rotation.from_rotvec(rng.normal(size=3)).as_quat()
    for angle in (*rng.normal(size=(5, 3)), np.zeros(3), 1e-9 * rng.normal(size=3)):
        expected = (Rotation.from_rotvec(angle) * Rotation.from_quat(turn)).as_matrix()
        np.testing.assert_allclose(matrix(turned(turn, angle)), expected, atol=1e-14)
        np.testing.assert_allclose(matrix(turn), Rotation.from_quat(turn).as_matrix(), atol=1e-14)


# A free rod (length L, mass m) hit at d from its centre answers there with m / (1 + 12 d^2/L^2): any mechanics text.
@pytest.mark.parametrize(("share", "effective"), [(0.0, 1.0), (0.25, 0.5714285714), (0.5, 0.25)])
def test_effective_mass_of_a_rod(share, effective):
    mass, length = 0.7, 0.4
    tensor = np.diag([1e-5, mass * length**2 / 12.0, mass * length**2 / 12.0])
    turn = Rotation.from_rotvec([0.2, 0.9, -0.4]).as_quat()
    frame = matrix(turn)
    axis, arm = frame @ np.array([0.0, 1.0, 0.0]), frame @ np.array([share * length, 0.0, 0.0])
    kick = kick_of(axis[None], arm[None], turn=turn, tensor=tensor)
    gained = kick.axes[0] / mass + np.cross(kick.spin[0], arm)
    assert 1.0 / float(gained @ axis) == pytest.approx(effective * mass, rel=1e-9)


def test_energy_of_motion_as_a_whole():
    turn = Rotation.from_rotvec([1.0, 0.0, 0.0]).as_quat()
    state = RigidState(NONE, turn, np.array([3.0, 0.0, 4.0]), matrix(turn) @ np.array([0.0, 2.0, 0.0]))
    assert rigid_energy(state, mass_kg=2.0, tensor=np.diag([1.0, 5.0, 9.0])) == pytest.approx(25.0 + 10.0)
