"""A body's track made by hand: known modes under a known force."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from types import SimpleNamespace

import numpy as np
import pytest

from resonate.modes.modeset import Decay, ModeSet
from resonate.run.record import Segment
from resonate.scene.clock import Clock, FrameRate


def modes_of(frequency_hz, t60_s, *, heard_hz=20e3):
    """Modes with given frequencies and decay times, shapes of one."""
    omega = 2.0 * np.pi * np.asarray(frequency_hz, dtype=float)
    decay = np.log(1000.0) / np.broadcast_to(np.asarray(t60_s, dtype=float), omega.shape)
    none = np.zeros_like(omega)
    return ModeSet(
        body="bell rope",
        key="0",
        omega=omega,
        shape=np.ones((1, len(omega))),
        rigid=np.zeros((1, 0)),
        decay=Decay(material=decay, thermoelastic=none, support=none, radiation=none),
        residual=none,
        heard=int(np.sum(omega <= 2.0 * np.pi * heard_hz)),
        heard_hz=heard_hz,
        solved_hz=float(np.max(frequency_hz)),
    )


@dataclass
class Track:
    """Stands in for the run's own: segments, and a pose that may be a function of time."""

    modes: ModeSet
    segments: tuple[Segment, ...]
    place_m: tuple[float, float, float] = (0.0, 0.0, 0.0)
    free: bool = False
    motion: object = None
    name: str = "bell rope"
    inertia: object = field(default_factory=lambda: SimpleNamespace(centre_m=np.zeros(3)))

    @property
    def moves(self):
        """Only a free body does here."""
        return self.free

    def pose(self, times_s):
        times_s = np.asarray(times_s, dtype=float)
        if self.motion is not None:
            return self.motion(times_s)
        place = np.broadcast_to(np.asarray(self.place_m, dtype=float), (len(times_s), 3))
        return place, np.broadcast_to([0.0, 0.0, 0.0, 1.0], (len(times_s), 4))


def exponent_of(modes):
    total = modes.decay.total
    return -total + 1j * np.sqrt(modes.omega**2 - total**2)


def struck(
    modes,
    *,
    times_s=(0.1,),
    step_s=1 / 192000,
    length_s=1e-3,
    gains=None,
    begin_s=-0.02,
    parts=1,
    peak_n=50.0,
):
    """Segments of modes hit by half sines (held constant over each step, split into ``parts``)."""
    lam = exponent_of(modes)
    gains = np.ones(modes.count) if gains is None else np.asarray(gains, dtype=float)
    steps = round(length_s / step_s)
    force = np.repeat(peak_n * np.sin(np.pi * (np.arange(steps) + 0.5) / steps), parts)
    short = step_s / parts
    z, now = np.zeros(modes.count, dtype=complex), begin_s
    segments = [Segment(begin_s=begin_s, z=z, rigid=None)]
    for time_s in times_s:
        z = z * np.exp(lam * (time_s - now))
        segments.append(
            Segment(
                begin_s=time_s,
                z=z,
                rigid=None,
                step_s=short,
                force_n=force[None],
                rows=gains[None],
                contacts=(0,),
            )
        )
        for value in force:
            z = np.exp(lam * short) * z + np.expm1(lam * short) / lam * gains * value
        now = time_s + steps * step_s
        segments.append(Segment(begin_s=now, z=z, rigid=None))
    return tuple(segments)


def scene_of(*places_m, rate_hz=48000, length_s="0.5", delay=False, handles=0, frame=Fraction(24)):
    """The parts of a scene that rendering reads."""
    return SimpleNamespace(
        clock=Clock(FrameRate(frame), rate_hz, 0, True, handles, Fraction(length_s)),
        mics=tuple(SimpleNamespace(name=f"mic {n}", place_m=place) for n, place in enumerate(places_m)),
        world=SimpleNamespace(temperature_k=293.15, humidity=0.0, pressure_pa=101325.0),
        sound=SimpleNamespace(delay=delay, rate_hz=rate_hz),
    )


class Flat:
    """A radiation model with weight 1 / distance for every heard mode."""

    radius_m = 0.1
    warnings = ()

    def __init__(self, modes, scale=None):
        self.scale = np.where(np.arange(modes.count) < modes.heard, 1.0, 0.0) + 0j
        if scale is not None:
            self.scale = self.scale * scale

    def weights(self, place_m, reference_m):
        return self.scale / np.linalg.norm(place_m)


@pytest.fixture
def make():
    """The builders of this file, for tests that cannot import it."""
    return SimpleNamespace(
        modes=modes_of, track=Track, struck=struck, scene=scene_of, flat=Flat, exponent=exponent_of
    )
