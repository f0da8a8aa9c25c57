"""A body of closed-form modes and a track advanced step by step, made independently of the run."""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from types import SimpleNamespace

import numpy as np
import pytest
from scipy.sparse import csr_matrix

from resonate.body.body import Inertia, Surface
from resonate.modes.modeset import Decay, ModeSet
from resonate.scene.clock import Clock, FrameRate


def make_modes(frequency_hz, decay, *, shape=None, rigid=None, body="bar"):
    frequency_hz, decay = np.asarray(frequency_hz, float), np.asarray(decay, float)
    count = len(frequency_hz)
    none = np.zeros(count)
    return ModeSet(
        body=body,
        key="synthetic",
        omega=2.0 * np.pi * frequency_hz,
        shape=np.ones((1, count)) if shape is None else shape,
        rigid=np.zeros((1 if shape is None else len(shape), 0)) if rigid is None else rigid,
        decay=Decay(material=decay, thermoelastic=none, support=none, radiation=none),
        residual=none,
        heard=count,
        heard_hz=20e3,
        solved_hz=80e3,
    )


@dataclass(frozen=True)
class Part:
    begin_s: float
    z: np.ndarray
    step_s: float = 0.0
    force_n: np.ndarray | None = None
    rows: np.ndarray | None = None

    @property
    def is_contact(self):
        return self.force_n is not None

    @property
    def end_s(self):
        return np.inf if self.force_n is None else self.begin_s + self.step_s * self.force_n.shape[1]


@dataclass
class Track:
    """Forces held constant over steps, each contact a list (begin_s, step_s, force (n,), gains (m,))."""

    modes: ModeSet
    contacts: list
    begin_s: float = -0.02
    name: str = "bar"
    free: bool = False
    speed_m_s: tuple = (0.0, 0.0, 0.0)
    spin_rad_s: float = 0.0
    linear_m: object = None
    segments: list = field(init=False)

    def __post_init__(self):
        self.segments = [Part(self.begin_s, np.zeros(self.modes.count, complex))]
        for begin, step, force, gains in self.contacts:
            z = self.modal(np.array([begin]))[:, 0]
            self.segments.append(Part(begin, z, step, np.asarray(force)[None, :], np.asarray(gains)[None, :]))
            after = self.modal(np.array([self.segments[-1].end_s]))[:, 0]
            self.segments.append(Part(self.segments[-1].end_s, after))

    @property
    def rate(self):
        decay = self.modes.decay.total
        return -decay + 1j * np.sqrt(self.modes.omega**2 - decay**2)

    def _step(self, z, force, length):
        rate = self.rate[:, None]
        return z * np.exp(rate * length) + force * np.expm1(rate * length) / rate

    def modal(self, times_s):
        times_s = np.asarray(times_s)
        out = np.zeros((self.modes.count, len(times_s)), complex)
        for n, part in enumerate(self.segments):
            until = self.segments[n + 1].begin_s if n + 1 < len(self.segments) else np.inf
            for place in np.flatnonzero((times_s >= part.begin_s) & (times_s < until))[None, :]:
                since = times_s[place] - part.begin_s
                if not part.is_contact:
                    out[:, place] = part.z[:, None] * np.exp(self.rate[:, None] * since)
                    continue
                z = part.z[:, None] * np.ones(len(place))
                for step, held in enumerate(part.force_n[0]):
                    length = np.clip(since - step * part.step_s, 0.0, part.step_s)
                    z = self._step(z, held * part.rows[0][:, None], length[None, :])
                out[:, place] = z * np.exp(
                    self.rate[:, None] * np.maximum(since - part.end_s + part.begin_s, 0.0)
                )
        return out

    def impulse(self, t0, t1):
        out = np.zeros((self.modes.count, len(t0)))
        for part in (p for p in self.segments if p.is_contact):
            edges = part.begin_s + part.step_s * np.arange(part.force_n.shape[1] + 1)
            for n, (a, b) in enumerate(zip(t0, t1, strict=True)):
                length = np.clip(edges[1:], a, b) - np.clip(edges[:-1], a, b)
                out[:, n] += part.rows[0] * np.sum(part.force_n[0] * length)
        return out

    def force_peak(self, t0, t1):
        out = np.zeros(len(t0))
        for part in (p for p in self.segments if p.is_contact):
            edges = part.begin_s + part.step_s * np.arange(part.force_n.shape[1] + 1)
            for n, (a, b) in enumerate(zip(t0, t1, strict=True)):
                meets = (edges[:-1] < b) & (edges[1:] > a)
                out[n] = max(out[n], np.max(part.force_n[0][meets], initial=0.0))
        return out

    def pose(self, times_s):
        t = np.asarray(times_s) - self.begin_s
        place = t[:, None] * np.array(self.speed_m_s)
        half = 0.5 * self.spin_rad_s * t
        turn = np.stack([0 * t, 0 * t, np.sin(half), np.cos(half)], axis=1)
        return place, turn

    def linear(self, times_s):
        if self.linear_m is None:
            return np.zeros((self.modes.rigid.shape[1], len(times_s)))
        return np.atleast_2d(self.linear_m(np.asarray(times_s)))


def make_scene(
    *, rate=Fraction(24), frames=48, handles=8, shutter_turn=0.5, ring="readable", size=None, most=8
):
    show = SimpleNamespace(ring=ring, size=size, most=most)
    return SimpleNamespace(
        title="Galley bar",
        clock=Clock(
            frame=FrameRate(Fraction(rate)),
            sample_rate=48000,
            start_frame=86400,
            numbered=False,
            handles=handles,
            length=Fraction(frames - 2 * handles) / Fraction(rate),
        ),
        picture=SimpleNamespace(shutter_turn=shutter_turn),
        bodies=(SimpleNamespace(name="bar", show=show),),
    )


def make_record(*tracks):
    events = [
        SimpleNamespace(
            kind="strike", body=t.name, other="mallet", begin_s=c[0], end_s=c[0] + c[1] * len(c[2])
        )
        for t in tracks
        for c in t.contacts
    ]
    return SimpleNamespace(bodies=tracks, events=tuple(sorted(events, key=lambda e: e.begin_s)))


@dataclass
class BarBody:
    """A box 0.3 x 0.008 x 0.03 m with ``shape`` rows = the vertical and lateral motion of its stations."""

    stations: int = 41
    free: bool = False
    name: str = "bar"
    length_m: float = 0.3
    extra_rigid: int = 0

    def __post_init__(self):
        x = np.linspace(0.0, self.length_m, self.stations)
        ring = np.array([[-1, -1], [1, -1], [1, 1], [-1, 1]]) * [0.004, 0.015]
        points = np.concatenate([np.column_stack([np.full(4, v), ring]) for v in x])
        triangles = []
        for s in range(self.stations - 1):
            for c in range(4):
                a, b = 4 * s + c, 4 * s + (c + 1) % 4
                triangles += [(a, b, a + 4), (b, b + 4, a + 4)]
        last = 4 * (self.stations - 1)
        triangles += [(0, 2, 1), (0, 3, 2), (last, last + 1, last + 2), (last, last + 2, last + 3)]
        normals = points - np.column_stack([points[:, 0], np.zeros((len(points), 2))])
        normals[:, 0] = 0.0
        normals /= np.linalg.norm(normals, axis=1)[:, None]
        # every row of triangles is turned the same way; flip them all when that way is inwards
        p = points[np.array(triangles)]
        volume = np.sum(np.cross(p[:, 0], p[:, 1]) * p[:, 2]) / 6.0
        triangles = np.array(triangles) if volume > 0 else np.array(triangles)[:, ::-1]
        self.x = x
        self.surface = Surface(points, normals, triangles)
        self.inertia = Inertia(0.2, np.array([self.length_m / 2, 0.0, 0.0]), np.eye(3))

    def probe(self, points_m):
        """Freedom s is the vertical motion of station s."""
        station = np.rint(points_m[:, 0] / self.length_m * (self.stations - 1)).astype(int)
        rows = 3 * np.arange(len(points_m)) + 1
        return csr_matrix((np.ones(len(rows)), (rows, station)), shape=(3 * len(points_m), self.stations))

    def modes(self, frequency_hz, decay, *, rigid=None):
        """Sine shapes of a simply supported bar, unit modal mass for 0.2 kg."""
        number = np.arange(1, len(frequency_hz) + 1)
        shape = np.sqrt(2.0 / 0.2) * np.sin(np.pi * self.x[:, None] / self.length_m * number)
        empty = np.zeros((self.stations, 0))
        return make_modes(frequency_hz, decay, shape=shape, rigid=empty if rigid is None else rigid)


def half_sine(peak_n, steps):
    return peak_n * np.sin(np.pi * (np.arange(steps) + 0.5) / steps)


@pytest.fixture
def kit():
    """The makers above, for tests that cannot import this file."""
    return SimpleNamespace(
        modes=make_modes, Track=Track, scene=make_scene, record=make_record, Bar=BarBody, half_sine=half_sine
    )
