"""Free bodies under strikers: momentum, energy, spin, and what is refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from resonate.errors import RunError
from resonate.run.course import follow
from resonate.run.flight import kick_of, matrix
from resonate.run.record import RigidState

UP = np.array([0.0, 0.0, 0.0, 1.0])
# Aluminium bar of 0.3 m, struck at 0.3 of its length.
BAR = {"length_m": 0.3, "width_m": 0.03, "height_m": 0.008, "young_pa": 70e9, "density": 2700.0}
SPOT = 0.3
SIDE = np.array([0.1, 0.004, 0.0])
DOWN = np.array([0.0, -1.0, 0.0])


def closes(course):
    assert abs(course.ledger.residual) <= 1e-9 * course.ledger.scale


def free_body(kit, modes, *, speed=(0.0, 0.0, 0.0), spin=(0.0, 0.0, 0.0), gravity=0.0, mass=0.3, turn=UP, begin_s=0.0):
    motion = RigidState(np.array([0.1, 2.0, 0.0]), np.array(turn), np.array(speed), np.array(spin))
    tensor = np.diag([4e-5, 2.3e-3, 2.27e-3])
    return kit.subject(modes, free=True, mass_kg=mass, tensor=tensor, motion=motion, gravity=gravity, begin_s=begin_s)


def test_striker_that_cannot_catch_up_is_refused(kit):
    subject = free_body(kit, kit.modes([]), speed=(0.0, -5.0, 0.0))
    with pytest.raises(RunError, match="never touches"):
        follow(subject, [kit.blow([], speed_m_s=1.0)], end_s=1.0)


def test_direction_out_of_the_surface_is_refused(kit):
    subject = kit.subject(kit.modes([1e4], 1.0))
    with pytest.raises(RunError, match="points away"):
        follow(subject, [kit.blow([1.0], direction=np.array([0.0, 1.0, 0.0]))], end_s=1.0)


def test_elastic_collision_with_a_free_mass(kit):
    # Central, without loss: v1' = (m1 - m2) v / (m1 + m2), v2' = 2 m1 v / (m1 + m2) (any mechanics text).
    subject = free_body(kit, kit.modes([]))
    blow = kit.blow([], mass_kg=0.1, speed_m_s=2.0, stiffness=1e9)
    course = follow(subject, [blow], end_s=1.0)
    closes(course)
    speed = course.segments[-1].rigid.speed_m_s
    np.testing.assert_allclose(speed, [0.0, -2.0 * 0.1 * 2.0 / 0.4, 0.0], atol=1e-9)
    assert course.events[0].leaving_speed_m_s == pytest.approx(2.0, rel=1e-9)
    assert course.ledger.striker_left == pytest.approx(0.05 * (2.0 * (0.1 - 0.3) / 0.4) ** 2, rel=1e-9)


def test_off_centre_hit_turns_a_free_body(kit):
    # Impulse and lever: dv = J n / m, dL = r x J n, whatever happens in the contact.
    arm = np.array([0.14, 0.004, 0.01])
    subject = free_body(kit, kit.modes([]))
    blow = kit.blow([], mass_kg=0.02, speed_m_s=1.5, point_m=arm, loss_s_m=0.1)
    course = follow(subject, [blow], end_s=0.2)
    closes(course)
    impulse = course.events[0].impulse_ns * np.array([0.0, -1.0, 0.0])
    after = course.segments[-1].rigid
    np.testing.assert_allclose(after.speed_m_s, impulse / 0.3, rtol=1e-9, atol=1e-12)
    momentum = matrix(after.turn) @ subject.inertia.tensor @ matrix(after.turn).T @ after.spin_rad_s
    # The body turns by some 1e-3 rad while it is touched, and the lever with it.
    np.testing.assert_allclose(momentum, np.cross(arm, impulse), atol=1e-3 * np.linalg.norm(np.cross(arm, impulse)))
    # Effective mass of the spot (E. g. Stronge, Impact Mechanics, 2000): what the striker felt.
    kick = kick_of(np.array([[0.0, -1.0, 0.0]]), arm[None], turn=UP, tensor=subject.inertia.tensor)
    mass = 1.0 / (1.0 / 0.3 + float(np.cross(kick.spin[0], arm) @ [0.0, -1.0, 0.0]))
    event = course.events[0]
    e = event.leaving_speed_m_s / event.closing_speed_m_s
    assert event.impulse_ns == pytest.approx(1.5 * (1.0 + e) * 0.02 * mass / (0.02 + mass), rel=2e-4)


@pytest.mark.parametrize("spin", [5.0, 60.0, 300.0])
def test_energy_of_a_spinning_falling_body(kit, spin):
    omega, end, _ = kit.bar(**BAR, below_hz=40e3, at=SPOT)
    subject = free_body(
        kit, kit.modes(omega, 1e-4 * omega), speed=(0.5, -0.2, 0.0), spin=(spin, 0.3 * spin, -spin), gravity=9.80665
    )
    gains = np.zeros((3, len(omega)))
    gains[1] = end
    blows = [
        kit.blow(
            [],
            strike=n,
            begin_s=time,
            gains=gains,
            inward=side,
            point_m=np.array([0.1, -0.004 * side[1], 0.0]),
            mass_kg=0.01,
            speed_m_s=6.0 + 0.2 * spin,
            loss_s_m=0.05,
        )
        for n, (time, side) in enumerate([(0.02, np.array([0.0, -1.0, 0.0])), (0.0903, np.array([0.0, 1.0, 0.0]))])
    ]
    course = follow(subject, blows, end_s=0.3)
    print(f"spin {spin}: residual {course.ledger.residual / course.ledger.scale:.1e}")
    closes(course)
    assert course.ledger.gravity_work != 0.0
    track = kit.track(subject, course)
    # Continuous across every change of segment, in place and turn.
    for part in course.segments[1:]:
        (a, b), (c, d) = track.pose(np.array([part.begin_s - 1e-9, part.begin_s + 1e-9]))
        np.testing.assert_allclose(a, b, atol=1e-7)
        np.testing.assert_allclose(c, d, atol=1e-5)


@pytest.mark.parametrize("loss_s_m", [0.0, 0.6, 3.0])
def test_energy_of_a_long_soft_touch(kit, loss_s_m):
    # A fingertip's worth of contact: the body turns by a tenth of a radian meanwhile, in many frames, and with strong
    # damping the force ends while the surfaces still overlap.
    omega, shape, _ = kit.bar(**BAR, below_hz=20e3, at=SPOT)
    subject = free_body(kit, kit.modes(omega, 3.0 + 1e-4 * omega), spin=(0.0, 2.0, 8.0), gravity=9.80665)
    gains = DOWN[:, None] * shape
    blow = kit.blow([], gains=gains, mass_kg=0.15, stiffness=3e5, loss_s_m=loss_s_m, speed_m_s=4.0, point_m=SIDE)
    blow = replace(blow, give_m_n=1e-9 * np.eye(3))
    course = follow(subject, [blow], end_s=0.3)
    frames = sum(part.is_contact for part in course.segments)
    event, ledger = course.events[0], course.ledger
    print(
        f"{frames} frames, {1e3 * (event.end_s - event.begin_s):.1f} ms, residual {ledger.residual / ledger.scale:.1e}"
    )
    assert frames > 20
    closes(course)
    assert (ledger.lost_contact > 0.01 * ledger.given) == (loss_s_m > 0.0)


def test_spinning_body_converges_with_smaller_frames(kit, monkeypatch):
    """A frame that stands still for a thousandth of a turn is fine enough."""
    from resonate.run import passage

    def final(still):
        monkeypatch.setattr(passage, "_STILL_RAD", still)
        subject = free_body(kit, kit.modes([]), spin=(0.0, 0.0, 40.0))
        blow = kit.blow([], point_m=np.array([0.1, 0.004, 0.0]), mass_kg=0.05, speed_m_s=9.0, stiffness=1e8)
        course = follow(subject, [blow], end_s=0.1)
        rigid = course.segments[-1].rigid
        return np.concatenate((rigid.speed_m_s, 0.1 * rigid.spin_rad_s)), course.events[0]

    fine, coarse = final(1e-4), final(1e-3)
    np.testing.assert_allclose(coarse[0], fine[0], atol=2e-3 * np.linalg.norm(fine[0]))
    assert coarse[1].end_s == pytest.approx(fine[1].end_s, rel=5e-3)


def test_world_direction_meets_a_body_that_an_earlier_hit_has_turned(kit):
    # The first hit sets the body spinning; the second comes from a fixed side and must find it as it then stands.
    subject = free_body(kit, kit.modes([]), mass=0.3)
    first = kit.blow([], point_m=np.array([0.1, 0.004, 0.0]), mass_kg=0.05, speed_m_s=2.0)
    spun = follow(subject, [first], end_s=1.0)
    rate = float(np.linalg.norm(spun.segments[-1].rigid.spin_rad_s))
    # Half a turn later the face looks down: a blow from below now enters it.
    second = kit.blow([], strike=1, begin_s=np.pi / rate, direction=np.array([0.0, 1.0, 0.0]), speed_m_s=9.0)
    course = follow(subject, [first, second], end_s=1.0)
    assert len(course.events) == 2
    closes(course)
    with pytest.raises(RunError, match="points away"):
        follow(
            subject,
            [first, kit.blow([], strike=1, begin_s=np.pi / rate, direction=np.array([0.0, -1.0, 0.0]))],
            end_s=1.0,
        )


def test_no_strikes(kit):
    course = follow(free_body(kit, kit.modes([1e3, 2e3], 5.0), spin=(3.0, 1.0, 9.0), gravity=9.80665), [], end_s=3.0)
    assert course.events == ()
    closes(course)
    # m g h against kinetic energy: fallen 9.80665 * 9 / 2 m.
    assert course.ledger.gravity_work == pytest.approx(0.3 * 9.80665**2 * 4.5, rel=1e-9)
