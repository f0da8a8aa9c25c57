"""What modes that are not kept do to a contact: against the infinite plate, and whatever the number kept."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from resonate.body.build import build_body
from resonate.modes.solve import solve_modes
from resonate.run.engine import run
from resonate.run.ladder import ladder
from resonate.scene.read import parse_scene

DENSITY, YOUNG, POISSON = 7850.0, 210e9, 0.29
BALL_KG, BALL_M = 0.0139, 0.0075


def impedance(thickness_m):
    """Driving-point impedance of an infinite plate, N s/m: Cremer, Heckl & Petersson (2005), ch. 5."""
    bending = YOUNG * thickness_m**3 / 12.0 / (1.0 - POISSON**2)
    return 8.0 * np.sqrt(bending * DENSITY * thickness_m)


def zener(thickness_m, speed_m_s):
    """Peak force and restitution of a sphere on an infinite plate: Zener, Phys. Rev. 59 (1941) 669."""
    stiffness = 4.0 / 3.0 * YOUNG / (2.0 * (1.0 - POISSON**2)) * np.sqrt(BALL_M)
    drag = impedance(thickness_m)

    def change(_, state):
        force = stiffness * max(state[0], 0.0) ** 1.5
        return [state[1] - force / drag, -force / BALL_KG]

    found = solve_ivp(change, (0.0, 3e-3), [0.0, speed_m_s], max_step=1e-6, rtol=1e-9, atol=1e-14)
    force = stiffness * np.maximum(found.y[0], 0.0) ** 1.5
    return float(force.max()), float(-found.y[1, -1] / speed_m_s)


def strike(*, size, thickness_m, most, spot=(0.43, 0.46)):
    """A steel ball on a free steel plate."""
    scene = parse_scene(
        f"""
        title = "check"
        [take]
        length = "0.2 s"
        [[body]]
        name = "sheet"
        shape = "plate"
        outline = {{rectangle = {list(size)}}}
        thickness = {thickness_m}
        material = {{density = {DENSITY}, young = {YOUNG}, poisson = {POISSON}, loss = 1e-3}}
        floating = true
        modes = {{most = {most}}}
        [[strike]]
        body = "sheet"
        time = "0.05 s"
        spot = {{fraction = {list(spot)}}}
        speed = "1 m/s"
        striker = {{mass = {BALL_KG}, tip_radius = {BALL_M}, tip_young = {YOUNG}, tip_poisson = {POISSON}, restitution = 1}}
        """
    )
    body = build_body(scene.bodies[0], temperature_k=293.15, gravity_m_s2=9.80665)
    return run(scene, [body], [solve_modes(body)])


@pytest.mark.parametrize(("size", "thickness_m", "most"), [((1.0, 0.7), 1e-3, 100), ((0.8, 0.6), 2e-3, 100)])
def test_a_ball_on_a_large_sheet_meets_the_impedance_of_an_infinite_plate(size, thickness_m, most):
    # The mean over the pressed patch, shear and the finite number of modes at the spot leave some percent.
    record = run_event = strike(size=size, thickness_m=thickness_m, most=most)
    peak, restitution = zener(thickness_m, 1.0)
    (event,) = run_event.events

    assert event.peak_n == pytest.approx(peak, rel=0.15)
    assert event.leaving_speed_m_s == pytest.approx(restitution, abs=0.1)
    # What the kept modes cannot take has gone, and is told.
    assert record.ledger.lost_truncation > 0.1 * record.ledger.scale
    assert any("nobody hears" in warning for warning in record.warnings)


def test_the_force_hardly_depends_on_how_many_modes_are_kept():
    peaks = [strike(size=(0.5, 0.4), thickness_m=1.5e-3, most=most).events[0].peak_n for most in (40, 90, 200)]

    assert np.ptp(peaks) < 0.12 * np.mean(peaks)


@pytest.mark.parametrize("most", [40, 120])
def test_a_ball_on_a_large_drum_meets_a_plate_however_few_modes_are_kept(most):
    # A curved wall is stiff below its ring frequency, 1.7 kHz here, but a short blow sees a plate (Cremer, Heckl &
    # Petersson 2005, ch. 3).
    scene = parse_scene(
        f"""
        title = "check"
        [take]
        length = "0.2 s"
        [[body]]
        name = "drum"
        shape = "vessel"
        profile = [[0.5, 0], [0.5, 1.0]]
        wall = 0.002
        material = {{density = {DENSITY}, young = {YOUNG}, poisson = {POISSON}, loss = 1e-3}}
        floating = true
        modes = {{most = {most}}}
        [[strike]]
        time = "0.05 s"
        spot = {{fraction = [0.45, 0.1]}}
        speed = "1 m/s"
        striker = {{mass = {BALL_KG}, tip_radius = {BALL_M}, tip_young = {YOUNG}, tip_poisson = {POISSON}, restitution = 1}}
        """
    )
    body = build_body(scene.bodies[0])
    (event,) = run(scene, [body], [solve_modes(body)]).events

    assert event.peak_n == pytest.approx(zener(0.002, 1.0)[0], rel=0.15)


def evenly(count, *, density):
    """Modes of a plate: evenly spaced in frequency, gains alike."""
    omega = np.arange(1, count + 1) * 1000.0
    return omega, np.full(count, np.sqrt(density * 1000.0))


def test_a_push_displaces_an_infinite_plate_at_once_and_for_good():
    # Unit impulse: the spot of an infinite plate jumps by 1/Z and stays; sum of gain^2 sin(w t)/w is that jump.
    omega, gains = evenly(60, density=2e-5)
    found = ladder(omega, gains, give_m_n=0.0, power=0.0)
    jump = 0.5 * np.pi * 2e-5

    for time_s in (2e-6, 5e-6, 2e-5, 1e-4):
        swing = np.sqrt(found.omega**2 - found.decay**2)
        kept = np.sum(gains**2 / omega * np.sin(omega * time_s))
        missing = np.sum(found.gain**2 / swing * np.exp(-found.decay * time_s) * np.sin(swing * time_s))
        assert kept + missing == pytest.approx(jump, rel=0.2)


@pytest.mark.parametrize("power", [None, 0.0])
def test_stand_ins_carry_the_static_compliance_of_what_is_missing(power):
    omega, gains = evenly(80, density=3e-6)
    give = 3e-6 / omega[-1]

    found = ladder(omega, gains, give_m_n=give, power=power)

    assert np.sum((found.gain / found.omega) ** 2) == pytest.approx(give, rel=0.02)
    assert np.all(np.diff(found.omega) > 0.0)
    assert np.all(found.decay < found.omega)


def test_bending_bars_thin_out_as_the_root_of_frequency():
    # omega_n = n^2, equal gains: squared gains per band fall as omega**-1/2, and the rest of sum 1/n^4 is missing.
    number = np.arange(1.0, 61.0)
    give = np.sum(1.0 / np.arange(61.0, 1e5) ** 4)

    found = ladder(100.0 * number**2, np.ones(60), give_m_n=give / 1e4)

    band = found.gain[:-1] ** 2 / (np.diff(100.0 * 3600.0 * 1.5 ** np.arange(12)))
    slope = np.polyfit(np.log(found.omega[:-1]), np.log(band), 1)[0]
    assert slope == pytest.approx(-0.5, abs=0.05)


def test_a_spot_that_no_mode_moves_needs_nothing():
    found = ladder(np.array([100.0, 200.0]), np.zeros(2), give_m_n=0.0)

    assert not found.gain.any()
    assert not ladder(np.zeros(0), np.zeros(0), give_m_n=0.0).gain.any()
