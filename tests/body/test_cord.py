"""Bodies hung from cords against pendulums in closed form.

Each case is a rigid body on cords, small motions about rest: textbook pendulums (Thomson, Theory of Vibration with
Applications; Goldstein, Classical Mechanics, ch. 6).
"""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg
from numpy.testing import assert_allclose

from resonate.errors import BodyError
from resonate.modes.solve import solve_modes
from tests.body.samples import STEEL, build, rigid

GRAVITY, DENSITY = 9.80665, 7850.0
STIFF = 1e7


def swings(body, count):
    """First angular frequencies, rad/s."""
    forms = body.forms()
    value = scipy.linalg.eigh(
        forms.stiffness.toarray(), forms.mass.toarray(), eigvals_only=True, subset_by_index=[0, count - 1]
    )
    return np.sqrt(np.maximum(value, 0.0))


def bar(*points, cord, turn="", length=0.4, width=0.03, height=0.012, spring=STIFF):
    """A bar on cords at points of its own frame."""
    holds = ", ".join(f"{{where = {{point = {list(point)}}}, hold = {{cord = {cord}, spring = {spring}}}}}" for point in points)
    return build(
        f'shape = "bar"\nlength = {length}\nwidth = {width}\nheight = {height}\n{STEEL}support = [{holds}]\n{turn}\n', most=4
    )


def matrices(mass, tensor, cords, *, up, gravity=GRAVITY):
    """Mass and stiffness (6, 6) of a rigid body about its mass centre on cords at points (k, 3) of (length, stiffness).

    The tension T stretches sideways motion by T/length; a turn lifts the point r by half (a x (a x r)) . up, which
    T works against. Derived here from V = sum of cord energies - m g up.
    """
    stiffness = np.zeros((6, 6))
    tension = mass * gravity / len(cords)
    for r, length, spring in cords:
        x, y, z = r
        cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
        row = np.hstack([np.eye(3), -cross])
        stiffness += row.T @ (tension / length * np.eye(3) + (spring - tension / length) * np.outer(up, up)) @ row
        # up . (a x (a x r)) = (a.r)(a.up) - (a.a)(r.up); cords shorten by minus half of it.
        second = 0.5 * (np.outer(r, up) + np.outer(up, r)) - np.dot(r, up) * np.eye(3)
        stiffness[3:, 3:] -= tension * second
    return np.diag([mass] * 3 + list(tensor)), stiffness


MASS = DENSITY * 0.4 * 0.03 * 0.012
TENSOR = MASS / 12 * np.array([0.03**2 + 0.012**2, 0.4**2 + 0.03**2, 0.4**2 + 0.012**2])
TURNS = {
    "level": ("", (0.0, 1.0, 0.0)),
    "on edge": ('turn = {axis = [1, 0, 0], angle = "90 deg"}', (0.0, 0.0, -1.0)),
    # Its left end up.
    "upright": ('turn = {axis = [0, 0, 1], angle = "-90 deg"}', (-1.0, 0.0, 0.0)),
}


def test_a_level_bar_swings_to_and_fro():
    # All cords equal: sqrt(g/l) along and across, whatever the body.
    omega = swings(bar((0.1, 0, 0), (0.3, 0, 0), cord=0.5), 6)

    along = np.sqrt(GRAVITY / 0.5)
    # Beside stiff cords rounding leaves 1e-5.
    assert_allclose(omega[2:4], along, rtol=1e-4)
    # Bifilar suspension: twist about the vertical, half spacing d, radius of gyration k: (d/k) sqrt(g/l).
    assert_allclose(omega[1], 0.1 / np.sqrt(TENSOR[1] / MASS) * along, rtol=1e-4)


@pytest.mark.parametrize("length", [0.2, 1.0])
def test_a_chime_hung_by_its_end_is_a_double_pendulum(length):
    # Lagrange's equations of a cord and a rod hung by its end, each with an angle of its own.
    body = bar((0, 0, 0), cord=length, turn=TURNS["upright"][0])
    half, gyration = 0.2, TENSOR[2] / MASS

    omega = swings(body, 5)

    # M = m [[l^2, l h], [l h, h^2 + k^2]], K = m g diag(l, h); h to the mass centre, k radius of gyration.
    mass = np.array([[length**2, length * half], [length * half, half**2 + gyration]])
    expected = np.sqrt(scipy.linalg.eigh(GRAVITY * np.diag([length, half]), mass, eigvals_only=True))
    for root in expected:
        assert np.min(np.abs(omega / root - 1.0)) < 1e-4


CORDS = {
    "level, two points": ("level", [(0.1, 0, 0), (0.3, 0, 0)]),
    "level, above": ("level", [(0.1, 0.006, 0.0), (0.3, 0.006, 0.0)]),
    "level, four corners": ("level", [(x, 0.006, z) for x in (0.05, 0.35) for z in (-0.015, 0.015)]),
    "on edge": ("on edge", [(0.1, 0, -0.015), (0.3, 0, -0.015)]),
    "upright, by its end": ("upright", [(0, 0, 0)]),
    "upright, below its end": ("upright", [(0.08, 0, 0)]),
    "upright, two cords": ("upright", [(0.05, 0.006, 0), (0.05, -0.006, 0)]),
}


@pytest.mark.parametrize("case", CORDS)
def test_bars_on_cords_swing_as_rigid_bodies(case):
    way, points = CORDS[case]
    turn, up = TURNS[way]
    body = bar(*points, cord=0.3, turn=turn, spring=1e4)

    omega = swings(body, 6)

    arms = [(np.array(point) - [0.2, 0, 0], 0.3, 1e4) for point in points]
    mass, stiffness = matrices(MASS, TENSOR, arms, up=np.array(up))
    expected = np.sqrt(np.maximum(scipy.linalg.eigh(stiffness, mass, eigvals_only=True), 0.0))
    # The bar itself gives way a little beside the cords' stretch.
    assert_allclose(omega, expected, rtol=5e-3, atol=1e-3 * expected.max() if expected[0] < 1e-3 else 1e-6)


SQUARE = 'shape = "plate"\noutline = {rectangle = [0.3, 0.2]}\nthickness = 0.01\n' + STEEL
PANEL = DENSITY * 0.3 * 0.2 * 0.01
PANEL_TENSOR = PANEL / 12 * np.array([0.2**2 + 0.01**2, 0.3**2 + 0.2**2, 0.3**2 + 0.01**2])
# By the edge at +z, which is up.
PANELS = {
    "one cord": [(0.0, 0.0, 0.1)],
    "two cords": [(-0.1, 0.0, 0.1), (0.1, 0.0, 0.1)],
    "two cords inside": [(-0.1, 0.0, 0.03), (0.1, 0.0, 0.03)],
}


def hung_panel(points, *, extra=""):
    holds = ", ".join(f"{{where = {{point = {list(point)}}}, hold = {{cord = 0.25, spring = 1e4}}}}" for point in points)
    return build(f'{SQUARE}support = [{holds}]\nturn = {{axis = [1, 0, 0], angle = "-90 deg"}}\n{extra}', most=4)


@pytest.mark.parametrize("case", PANELS)
def test_an_upright_plate_swings_as_a_rigid_body(case):
    body = hung_panel(PANELS[case])
    arms = [(np.array(point), 0.25, 1e4) for point in PANELS[case]]
    mass, stiffness = matrices(PANEL, PANEL_TENSOR, arms, up=np.array([0.0, 0.0, 1.0]))

    omega = swings(body, 6)

    expected = np.sqrt(np.maximum(scipy.linalg.eigh(stiffness, mass, eigvals_only=True), 0.0))
    assert_allclose(omega, expected, rtol=5e-3, atol=0.05)


def test_a_chime_has_its_pendulum_among_its_modes():
    # A uniform rod on a very short cord swings about its end: sqrt(3 g/(2 L)), 0.9648 Hz for 0.4 m.
    body = bar((0, 0, 0), cord=1e-4, turn=TURNS["upright"][0])

    modes = solve_modes(body)

    assert_allclose(modes.frequency_hz[:2], np.sqrt(3 * GRAVITY / 0.8) / (2 * np.pi), rtol=2e-3)
    # A spin about the cord costs nothing.
    assert modes.rigid.shape[1] == 1


def test_floating_bodies_have_slack_cords():
    text = 'turn = {axis = [0, 0, 1], angle = "-90 deg"}\nfloating = true'
    cords = bar((0, 0, 0), cord=0.3, turn=text, spring=1e4).forms().cords

    # Only the stretch is left, at one point.
    assert np.linalg.matrix_rank(cords.toarray()) == 1


def test_uneven_cords_share_the_weight_by_the_lever():
    # From the mass centre 0.05 to the left and 0.1 to the right: two thirds and one third of the weight.
    body = bar((0.15, 0, 0), (0.3, 0, 0), cord=0.5)
    motion = rigid(body)

    sway = motion.T @ (body.forms().cords @ motion)

    weight = MASS * GRAVITY
    assert_allclose(sway[2, 2], weight / 0.5, rtol=1e-12)
    # A turn about y moves x along z by -x: sum of tension x^2/length.
    assert_allclose(sway[4, 4], weight / 0.5 * (2 / 3 * 0.15**2 + 1 / 3 * 0.3**2), rtol=1e-10)
    assert not body.warnings


def test_a_body_that_hangs_askew_is_told():
    (warning,) = bar((0, 0, 0), cord=0.5).warnings

    assert "'sample'" in warning
    assert "would not hang still" in warning


def test_a_body_that_would_fall_over_is_refused():
    # One cord at the lower end.
    body = bar((0.4, 0, 0), cord=0.5, turn=TURNS["upright"][0])

    with pytest.raises(BodyError, match="below its mass centre") as caught:
        body.forms()
    (fault,) = caught.value.faults
    assert "sample" in fault.where
    assert "[0.2, 0.0, 0.0] m" in fault.fix


def test_two_cords_below_the_mass_centre_may_hold_a_wide_body():
    # A level bar on cords at the lower corners: it cannot tip along its length; across, the two rows of cords hold it.
    points = [(x, -0.006, z) for x in (0.05, 0.35) for z in (-0.015, 0.015)]

    assert swings(bar(*points, cord=0.3), 6)[0] > 1.0
