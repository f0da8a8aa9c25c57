"""Local stiffness, impact and damping against published and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.special import ellipe, ellipk

from resonate.errors import RunError
from resonate.run import hertz

# Hertz (1882); Johnson, Contact Mechanics (1985) eq. 11.24: T = 2.87 (m^2 / (E*^2 R v))^(1/5), T = 2.94 delta/v;
# the digits beyond his three from the closed form with the gamma function.
JOHNSON_T_V_OVER_DELTA = 2.94327518432
JOHNSON_PREFACTOR = 2.8682656992

# Closed form of Hertz (Johnson 1985, sec. 11.4.1), with g = 9.80665 m/s^2.
# Steel ball, 20 mm, 208 GPa, 0.3, 7850 kg/m^3, dropped 0.1 m on a thick block of the same steel.
STEEL = {"k": 15238095000.0, "delta": 30.859956e-6, "force": 2612.3036, "time": 64.856102e-6, "patch": 0.5555174e-3}
# Glass marble, 16 mm, 70 GPa, 0.22, 2500 kg/m^3, at 1 m/s on thick glass.
GLASS = {"k": 4386290000.0, "delta": 18.777791e-6, "force": 356.91442, "time": 55.268206e-6, "patch": 0.3875853e-3}

# Hunt & Crossley (1975) J. Appl. Mech. 42, 440, the relation between mu v and e solved: {mu v: e}.
HUNT_CROSSLEY = {0.05: 0.9677385785, 0.15: 0.9090157413, 0.5: 0.7484349316, 1.5: 0.487741256}


def ball(diameter_m, density):
    return density * np.pi * diameter_m**3 / 6.0


@pytest.mark.parametrize(
    ("young", "nu", "radius", "mass", "speed", "published"),
    [
        (208e9, 0.3, 0.010, ball(0.020, 7850.0), np.sqrt(2 * 9.80665 * 0.1), STEEL),
        (70e9, 0.22, 0.008, ball(0.016, 2500.0), 1.0, GLASS),
    ],
)
def test_ball_on_a_block(young, nu, radius, mass, speed, published):
    modulus = hertz.reduced_modulus((young, young), (nu, nu))
    contact = hertz.local(modulus, radius, (0.0, 0.0), where="a block")
    pulse = hertz.pulse(contact.stiffness, mass, speed)
    # The published row has seven or eight digits.
    assert contact.stiffness == pytest.approx(published["k"], rel=1e-6)
    assert pulse.depth_m == pytest.approx(published["delta"], rel=1e-6)
    assert pulse.force_n == pytest.approx(published["force"], rel=1e-6)
    assert pulse.duration_s == pytest.approx(published["time"], rel=1e-6)
    assert contact.patch_m(pulse.depth_m) == pytest.approx(published["patch"], rel=1e-6)


def test_constants_of_the_impact_time():
    modulus, radius, mass, speed = 3e9, 0.004, 0.02, 0.7
    pulse = hertz.pulse(4.0 / 3.0 * modulus * np.sqrt(radius), mass, speed)
    assert pulse.duration_s * speed / pulse.depth_m == pytest.approx(JOHNSON_T_V_OVER_DELTA, rel=1e-9)
    scale = (mass**2 / (modulus**2 * radius * speed)) ** 0.2
    assert pulse.duration_s / scale == pytest.approx(JOHNSON_PREFACTOR, rel=1e-9)


# Squared ratio of the axes of the patch (b/a)^2, from almost round to a thin line.
@pytest.mark.parametrize("square", [0.99, 0.8, 0.3, 0.05, 1e-3])
def test_elliptic_patch(square):
    # Johnson (1985) eqs. 4.17-4.20 from the patch to the surfaces: half axes a > b and peak pressure p0 give the
    # relative curvatures 2A, 2B, the approach and the load, with complete elliptic integrals of m = e^2 = 1 - (b/a)^2.
    modulus, a, p0 = 40e9, 1e-3, 2e8
    b, m = a * np.sqrt(square), 1.0 - square
    k, e = ellipk(m), ellipe(m)
    flat = 2.0 * p0 / modulus * b / (m * a**2) * (k - e)
    sharp = 2.0 * p0 / modulus * b / (m * a**2) * (e / square - k)
    approach, load = p0 / modulus * b * k, 2.0 / 3.0 * np.pi * a * b * p0
    tip = 0.5 / flat
    contact = hertz.local(modulus, tip, (sharp - 1.0 / tip, flat - 1.0 / tip), where="a rail")
    assert contact.stiffness * approach**1.5 == pytest.approx(load, rel=1e-8)
    assert contact.patch_m(approach) == pytest.approx(np.sqrt(a * b), rel=1e-8)


def test_nearly_round_patch_goes_over_into_a_circle():
    modulus, tip = 1e9, 0.01
    round_one = hertz.local(modulus, tip, (0.0, 0.0), where="a plate").stiffness
    for curvature in (1e-10, 1e-7, 1e-5, 1e-3):
        # Stiffness falls with the square root of the mean curvature: half the relative change, to first order.
        expected = round_one * (1.0 - 0.25 * curvature * tip)
        found = hertz.local(modulus, tip, (0.0, curvature), where="a plate").stiffness
        assert found == pytest.approx(expected, rel=1e-9)


def test_tip_too_blunt_for_a_hollow_is_refused():
    with pytest.raises(RunError, match="too blunt") as caught:
        hertz.local(1e9, 0.05, (-25.0, 0.0), where="strike[0] on body 'galley pan'")
    assert "tip_radius" in str(caught.value)


@pytest.mark.parametrize(("number", "restitution"), HUNT_CROSSLEY.items())
def test_damping_from_restitution(number, restitution):
    assert hertz.loss(restitution, 1.0) == pytest.approx(number, rel=1e-8)
    # mu has the unit s/m: at a reference speed of 2 m/s half as much does.
    assert hertz.loss(restitution, 2.0) == pytest.approx(0.5 * number, rel=1e-8)


@pytest.mark.parametrize("restitution", [1e-9, 1e-3, 0.05, 0.3, 0.9, 0.97999, 0.98001, 0.999, 1.0 - 1e-7])
def test_damping_solves_the_exact_relation(restitution):
    d, e = hertz.loss(restitution, 1.0), restitution
    # d (1 + e) = ln[(1 + d)/(1 - e d)] as a balance of momentum over energy: integral of v/(1 + d v) from -e to 1 is 0.
    nodes, weights = np.polynomial.legendre.leggauss(60)
    if e > 0.2:
        v = 0.5 * (1.0 - e) + 0.5 * (1.0 + e) * nodes
        left = 0.5 * (1.0 + e) * float(weights @ (v / (1.0 + d * v)))
        slope = 0.5 * (1.0 + e) * float(weights @ (v**2 / (1.0 + d * v) ** 2))
        # Expressed as an error of d, relative to it.
        assert abs(left / slope) < 1e-9 * d + 1e-15
    else:
        # The pole 1 - e d = 0 is approached exponentially: d = (1 - exp(-y)) / e with y of the relation itself.
        y = d * (1.0 + e) - np.log1p(d)
        assert d == pytest.approx(-np.expm1(-y) / e, rel=1e-9)


def test_no_loss_at_restitution_one():
    assert hertz.loss(1.0, 1.0) == 0.0


def test_pulse_against_integration():
    # delta'' = -K delta^1.5 / m, an independent integrator (DOP853).
    stiffness, mass, speed = 2e8, 0.03, 1.7
    pulse = hertz.pulse(stiffness, mass, speed)

    def slope(_, state):
        return [state[1], -stiffness * max(state[0], 0.0) ** 1.5 / mass]

    def parted(time, state):
        return state[0] if time > 0.0 else 1.0

    parted.terminal, parted.direction = True, -1
    run = solve_ivp(slope, (0.0, 1.0), [0.0, speed], method="DOP853", rtol=1e-11, atol=1e-16, events=parted)
    assert run.t_events[0][0] == pytest.approx(pulse.duration_s, rel=1e-8)
