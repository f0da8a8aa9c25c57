"""Large motion of formulas against the exact pendulum, conserved quantities and time reversal."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy.optimize import brentq
from scipy.special import ellipk

from resonate.body.tape import evaluate
from resonate.errors import RunError
from resonate.run.kernels.tape import derive
from resonate.run.variational import _packed, energy, swing
from resonate.scene.expression import read_expression
from resonate.scene.model import FormulaShape

POSITION = ["x", "y", "z"]
MESH = {"points": [[0, 0, 0]]}


def formula(coordinates, kinetic, potential, **parameters):
    return FormulaShape.model_validate(
        {
            "coordinates": coordinates, "parameters": parameters, "position": POSITION, "kinetic": kinetic,
            "potential": potential, "mesh": MESH,
        }
    )  # fmt: skip


PENDULUM = formula(["a"], "m*l^2*a'^2/2", "m*g*l*(1 - cos(a))", m=0.7, l=0.4, g=9.80665)
SLOW_S = 2 * np.pi * np.sqrt(0.4 / 9.80665)
# T/T0 = (2/pi) K(sin^2(a/2)) (any book of mechanics, Landau & Lifshitz sec. 11), as computed elsewhere.
STRETCH = {30: 1.0174087976, 60: 1.07318200715, 90: 1.18034059902, 120: 1.37288050062, 170: 2.43936271967}


def crossings(motion, inertia):
    """Times at which the first coordinate passes zero upwards: cubics through places and rates."""
    q, v, t = motion.place[:, 0], motion.momentum[:, 0] / inertia, motion.time_s
    found = []
    for k in np.flatnonzero((q[:-1] < 0) & (q[1:] >= 0)):
        h = t[k + 1] - t[k]

        def cubic(s, k=k, h=h):
            back = 1 - s
            return (
                back**2 * (1 + 2 * s) * q[k] + s**2 * (3 - 2 * s) * q[k + 1]
                + h * s * back * (back * v[k] - s * v[k + 1])
            )  # fmt: skip

        found.append(t[k] + h * brentq(cubic, 0, 1))
    return np.array(found)


def period(degrees, *, steps, order):
    exact = SLOW_S * 2 / np.pi * ellipk(np.sin(np.radians(degrees) / 2) ** 2)
    motion = swing(PENDULUM, [np.radians(degrees)], [0.0], step_s=exact / steps, steps=6 * steps, order=order)
    return np.diff(crossings(motion, 0.7 * 0.4**2)).mean() / exact


@pytest.mark.parametrize("degrees", STRETCH)
def test_the_pendulum_takes_its_exact_time(degrees):
    assert_allclose(SLOW_S * 2 / np.pi * ellipk(np.sin(np.radians(degrees) / 2) ** 2) / SLOW_S, STRETCH[degrees], rtol=1e-10)
    assert_allclose(period(degrees, steps=400, order=4), 1.0, atol=1e-7)


@pytest.mark.parametrize("order", [2, 4])
def test_errors_fall_with_the_power_that_is_claimed(order):
    # Long enough steps that the error stands clear of the crossings' own, h^4 at the places of greatest speed.
    coarse, fine = (abs(period(120, steps=steps, order=order) - 1) for steps in (60, 120))

    assert_allclose(np.log2(coarse / fine), order, atol=0.35)


@pytest.mark.parametrize("order", [2, pytest.param(4, marks=pytest.mark.slow)])
def test_energy_neither_falls_nor_rises_over_a_hundred_thousand_periods(order):
    # Large swings, twenty steps a period: what the step makes wrong comes and goes, and does not add up.
    per = 20
    long_s = SLOW_S * STRETCH[90]
    motion = swing(PENDULUM, [np.pi / 2], [0.0], step_s=long_s / per, steps=per * 100_000, every=7, order=order)
    error = np.abs(motion.energy_j / motion.energy_j[0] - 1.0)
    parts = [part.max() for part in np.array_split(error, 10)]
    print(f"order {order}: energy off by {parts[0]:.3g} in the first tenth, {parts[-1]:.3g} in the last")

    assert parts[0] < {2: 0.03, 4: 2e-3}[order]
    assert max(parts) < 1.02 * parts[0]
    slope = np.polyfit(np.linspace(0, 1, len(error)), motion.energy_j / motion.energy_j[0], 1)[0]
    assert abs(slope) < 1e-3 * parts[0]


def test_a_momentum_that_nothing_acts_on_is_kept_bit_for_bit():
    # A particle in a central force, in polar coordinates: the angle appears nowhere (Goldstein, ch. 3).
    shape = formula(["r", "t"], "m/2*(r'^2 + r^2*t'^2)", "-k/r", m=0.3, k=2.0)
    motion = swing(shape, [1.0, 0.0], [0.3, 2.2], step_s=5e-3, steps=200_000, every=50)

    assert np.ptp(motion.place[:, 0]) > 0.2
    assert np.all(motion.momentum[:, 1] == motion.momentum[0, 1])


def test_angular_momentum_in_a_central_force_is_kept_to_rounding():
    # The same particle in rectangular coordinates: no coordinate is absent, the symmetry is (discrete Noether theorem,
    # Marsden & West sec. 1.3.3).
    shape = formula(["u", "w"], "m/2*(u'^2 + w'^2)", "-k/sqrt(u^2 + w^2)", m=0.3, k=2.0)
    motion = swing(shape, [1.0, 0.0], [0.3, 2.2], step_s=5e-3, steps=400_000, every=50)
    turning = motion.place[:, 0] * motion.momentum[:, 1] - motion.place[:, 1] * motion.momentum[:, 0]

    # Rounding walks at random: some 2e6 substeps of 1e-16 each.
    assert np.abs(turning / turning[0] - 1).max() < 1e-12
    assert np.abs(motion.energy_j / motion.energy_j[0] - 1).max() < 1e-6


def test_what_is_run_backwards_comes_home():
    shape = formula(["a", "b"], "a'^2 + b'^2/2 + a'*b'*cos(a - b)", "-10*(2*cos(a) + cos(b))")
    there = swing(shape, [0.4, -0.9], [0.5, 0.0], step_s=2e-3, steps=2000, every=2000)
    mass = np.array([[2.0, np.cos(there.place[1, 0] - there.place[1, 1])], [0.0, 1.0]])
    mass[1, 0] = mass[0, 1]
    rate = np.linalg.solve(mass, there.momentum[1])
    back = swing(shape, there.place[1], -rate, step_s=2e-3, steps=2000, every=2000)

    assert_allclose(back.place[1], [0.4, -0.9], atol=1e-10)
    assert_allclose(energy(shape, there.place, there.momentum), there.energy_j)


FORMULAS = [
    "a^3*b - 2*a/b + pi", "sin(a*b)^2 + cos(a)^2*tan(b)", "exp(-a^2)*log(b + 2)", "sqrt(1 + a^2 + b**4)",
    "asin(a/3) + acos(b/3) - atan(a*b)", "sinh(a) + cosh(b)*tanh(a - b)", "-a^2^1.5 + 2^-b", "(a + b)^b/(1 + abs(a - 7))",
]  # fmt: skip


@pytest.mark.parametrize("text", FORMULAS)
def test_the_compiled_tape_agrees_with_the_other(text):
    tape, at = read_expression(text, ["a", "b"], {}), np.array([0.7, 1.3])
    size = len(tape.code) + 1
    value, slope, curve = np.zeros(size), np.zeros((size, 2)), np.zeros((size, 2, 2))
    derive(*_packed(tape), at, value, slope, curve)
    found = evaluate(tape, at[None], by=2)

    assert_allclose(value[-2], found.value[0], rtol=1e-14)
    assert_allclose(slope[-2], found.slope[0], rtol=1e-13, atol=1e-15)
    assert_allclose(curve[-2], found.curve[0], rtol=1e-12, atol=1e-14)


def test_a_step_that_leads_nowhere_is_told():
    shape = formula(["q"], "q'^2/2", "sqrt(q)")
    with pytest.raises(RunError, match="cannot be followed"):
        swing(shape, [0.5], [-3.0], step_s=0.1, steps=100)
