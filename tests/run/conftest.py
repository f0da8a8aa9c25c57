"""Bodies of closed-form modes and strikers made by hand, so that the run is tested without meshes."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest

from resonate.body.body import Inertia
from resonate.modes.modeset import Decay, ModeSet
from resonate.run.blow import Blow
from resonate.run.record import RigidState
from resonate.run.subject import Subject
from resonate.run.track import BodyTrack

DOWN = np.array([0.0, -1.0, 0.0])


def make_modes(omega, decay=None, *, rigid=0, support=None, name="deck plate"):
    """Modes without shapes: the tests give gains themselves."""
    omega = np.asarray(omega, dtype=float)
    none = np.zeros_like(omega)
    decay = none if decay is None else np.broadcast_to(np.asarray(decay, dtype=float), omega.shape)
    return ModeSet(
        body=name,
        key="synthetic",
        omega=omega,
        shape=np.ones((1, len(omega))),
        rigid=np.zeros((1, rigid)),
        decay=Decay(material=decay, thermoelastic=none, support=none if support is None else support, radiation=none),
        residual=none,
        heard=len(omega),
        heard_hz=20e3,
        solved_hz=80e3,
    )


def make_blow(row, **changes):
    """A striker that presses down (-y) on a spot whose gains along the push are ``row``."""
    values = {
        "strike": 0,
        "striker": "steel ball",
        "begin_s": 0.0,
        "point_m": np.zeros(3),
        "inward": DOWN,
        "direction": None,
        "angle_rad": 0.0,
        "gains": DOWN[:, None] * np.atleast_1d(np.asarray(row, dtype=float)),
        "give_m_n": np.zeros((3, 3)),
        "mobility_power": None,
        "wave_mobility_s_kg": 0.0,
        "mass_kg": 0.01,
        "speed_m_s": 1.0,
        "stiffness": 1e9,
        "loss_s_m": 0.0,
        "thickness_m": 0.004,
    }
    return Blow(**(values | changes))


def make_subject(modes, *, free=False, mass_kg=1.0, tensor=None, begin_s=0.0, gravity=0.0, motion=None):
    tensor = np.eye(3) * 1e-2 if tensor is None else np.asarray(tensor, dtype=float)
    if free and motion is None:
        motion = RigidState(np.zeros(3), np.array([0.0, 0.0, 0.0, 1.0]), np.zeros(3), np.zeros(3))
    return Subject(
        name=modes.body,
        modes=modes,
        inertia=Inertia(mass_kg, np.zeros(3), tensor),
        place_m=np.zeros(3),
        turn=np.array([0.0, 0.0, 0.0, 1.0]),
        gravity=np.array([0.0, -gravity, 0.0]),
        begin_s=begin_s,
        begin=motion if free else None,
    )


def make_track(subject, course):
    return BodyTrack(
        name=subject.name,
        modes=subject.modes,
        segments=course.segments,
        free=subject.free,
        inertia=subject.inertia,
        place_m=subject.place_m,
        turn=subject.turn,
        gravity=subject.gravity,
    )


def free_bar(length_m, width_m, height_m, *, young_pa, density, below_hz, at):
    """Free-free bending of an Euler-Bernoulli bar: omega (m,), shape (m,) at the share ``at`` of its length, mass.

    cos(b) cosh(b) = 1 (Rao, Mechanical Vibrations, sec. 8.5), the shape written with exponentials that do not overflow;
    the mean square of a mode is 1, so that shape / sqrt(mass) is mass-normalised.
    """
    mass = density * length_m * width_m * height_m
    speed = np.sqrt(young_pa * height_m**2 / 12.0 / density) / length_m**2
    count = int(np.sqrt(2.0 * np.pi * below_hz / speed) / np.pi + 1.0)
    b = (np.arange(1, count + 1) + 0.5) * np.pi
    for _ in range(20):
        # Newton on cos(b) - 1/cosh(b).
        sech = 2.0 * np.exp(-b) / (1.0 + np.exp(-2.0 * b))
        b -= (np.cos(b) - sech) / (-np.sin(b) + sech * np.tanh(b))
    # cosh bx + cos bx - s (sinh bx + sin bx) with s = (cosh b - cos b) / (sinh b - sin b), 1 - s written out.
    small = np.exp(-b)
    s = (1.0 + small**2 - 2.0 * small * np.cos(b)) / (1.0 - small**2 - 2.0 * small * np.sin(b))
    less = (np.cos(b) - np.sin(b) - small) / (0.5 * (1.0 - small**2) - small * np.sin(b))
    growing = 0.5 * less * np.exp(-b * (1.0 - at)) + 0.5 * (1.0 + s) * np.exp(-b * at)
    shape = growing + np.cos(b * at) - s * np.sin(b * at)
    omega = b**2 * speed
    keep = omega < 2.0 * np.pi * below_hz
    return omega[keep], (shape / np.sqrt(mass))[keep], mass


@pytest.fixture
def kit():
    """The makers above, for tests that cannot import this file."""
    return SimpleNamespace(modes=make_modes, blow=make_blow, subject=make_subject, track=make_track, bar=free_bar)
