"""The whole course of one body, any state of which can be had again from its segments."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from resonate.run.flight import fly, kick_of, matrix, turned
from resonate.run.kernels.march import replay
from resonate.run.propagator import coefficients, exponents, from_state, to_state
from resonate.run.twist import finite

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Inertia
    from resonate.modes.modeset import ModeSet
    from resonate.run.record import Segment

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]
    IntArray = NDArray[np.int64]


def impulse_of(segment: Segment, since_s: Array) -> Array:
    """Time integral (c, t) of the forces since a contact segment began, N s."""
    at, rest, last, pushed, _ = _within(segment, since_s)
    return np.asarray(pushed[:, at] + last * rest)


def moved_by(segment: Segment, since_s: Array) -> Array:
    """Double time integral (c, t) of the forces since a contact segment began, N s^2."""
    at, rest, last, pushed, moved = _within(segment, since_s)
    return np.asarray(moved[:, at] + pushed[:, at] * rest + 0.5 * last * rest**2)


def crest(force_n: Array, at: int) -> float:
    """Top of the pulse behind step means ``force_n`` (n,) of equal steps, N, near its step ``at``.

    Three means fix a parabola; where ``at`` is no local maximum its mean stands.
    """
    middle = float(force_n[at])
    if not 0 < at < len(force_n) - 1:
        return middle
    before, after = float(force_n[at - 1]), float(force_n[at + 1])
    bend, slope = 0.5 * (after - 2.0 * middle + before), 0.5 * (after - before)
    if bend >= 0.0 or min(before, after) <= 0.0 or max(before, after) > middle:
        return middle
    # The mean of the parabola over its own step exceeds its middle by bend / 12.
    return middle - bend / 12.0 - slope**2 / (4.0 * bend)


def _within(segment: Segment, since_s: Array) -> tuple[IntArray, Array, Array, Array, Array]:
    # Step each time falls into, time since it began, force in it; both integrals at the steps.
    force, h = segment.force_n, segment.step_s
    assert force is not None  # noqa: S101 (contact segments only)
    steps = force.shape[1]
    none = np.zeros((len(force), 1))
    pushed = np.concatenate((none, np.cumsum(force, axis=1) * h), axis=1)
    moved = np.concatenate((none, np.cumsum(pushed[:, :-1] * h + 0.5 * force * h**2, axis=1)), axis=1)
    at = np.clip(np.floor(since_s / h), 0, steps).astype(np.int64)
    last = np.where(at < steps, force[:, np.minimum(at, steps - 1)], 0.0)
    return at, since_s - at * h, last, pushed, moved


@dataclass(frozen=True)
class BodyTrack:
    """One body through the run.

    Parameters
    ----------
    name, modes : str, ModeSet
        The body and its modes.
    segments : tuple[Segment, ...]
        In order of time, each from a checkpoint.
    free : bool
        Whether it moves as a whole.
    inertia : Inertia
        Its mass properties.
    place_m, turn : Array
        (3,) of its origin and (4,) xyzw: the pose of a supported body.
    gravity : Array
        (3,) what acts on a free body, m/s^2.
    twists : Array
        (6, r) what the motions without stiffness of a supported body do to it as a whole; see `twist`.
    """

    name: str
    modes: ModeSet
    segments: tuple[Segment, ...]
    free: bool
    inertia: Inertia
    place_m: Array
    turn: Array
    gravity: Array
    twists: Array = field(default_factory=lambda: np.zeros((6, 0)))

    @cached_property
    def moves(self) -> bool:
        """Whether its pose changes."""
        if self.free or not self.twists.size:
            return self.free
        return any(np.any(segment.z[self.modes.count :]) for segment in self.segments)

    @cached_property
    def begins_s(self) -> Array:
        """(s,) begin of every segment."""
        return np.array([segment.begin_s for segment in self.segments])

    def _places(self, times_s: Array) -> IntArray:
        return np.clip(np.searchsorted(self.begins_s, times_s, side="right") - 1, 0, None)

    def _elastic(self, number: int, times_s: Array) -> ComplexArray:
        segment, modes = self.segments[number], self.modes
        decay, count = modes.decay.total, modes.count
        z = segment.z[:count]
        since = times_s - segment.begin_s
        if segment.force_n is None:
            return np.asarray(z[:, None] * np.exp(exponents(modes.omega, decay)[:, None] * since))
        assert segment.rows is not None  # noqa: S101 (contact segments have rows)
        rows = np.ascontiguousarray(segment.rows[:, :count])
        h, steps = segment.step_s, segment.force_n.shape[1]
        at = np.clip(np.floor(since / h), 0, steps).astype(np.int64)
        wanted, back = np.unique(at, return_inverse=True)
        q, v = from_state(z, modes.omega, decay)
        q, v = np.ascontiguousarray(q), np.ascontiguousarray(v)
        kept_q, kept_v = np.zeros((len(wanted), count)), np.zeros((len(wanted), count))
        step = coefficients(modes.omega, decay, h).stacked()
        replay(q, v, step, rows, np.ascontiguousarray(segment.force_n), wanted, kept_q, kept_v)
        now = to_state(kept_q[back].T, kept_v[back].T, modes.omega[:, None], decay[:, None])
        rate = exponents(modes.omega, decay)[:, None]
        rest = (since - at * h)[None]
        pressed = np.where(at < steps, segment.force_n[:, np.minimum(at, steps - 1)], 0.0)
        return np.asarray(now * np.exp(rate * rest) + (rows.T @ pressed) * np.expm1(rate * rest) / rate)

    def modal(self, times_s: Array) -> ComplexArray:
        """Complex state (m, t) of the elastic modes at scene times (t,), in any order."""
        times = np.asarray(times_s, dtype=np.float64)
        found = np.zeros((self.modes.count, len(times)), dtype=np.complex128)
        places = self._places(times)
        for number in np.unique(places):
            # At rest before the run.
            at = np.flatnonzero((places == number) & (times >= self.begins_s[0]))
            found[:, at] = self._elastic(int(number), times[at])
        return found

    def linear(self, times_s: Array) -> Array:
        """Motions without stiffness (r, t) of a supported body, kg**0.5 m."""
        times = np.asarray(times_s, dtype=np.float64)
        count = self.modes.rigid.shape[1]
        found = np.zeros((count, len(times)))
        if self.free or count == 0:
            return found
        places = self._places(times)
        for number in np.unique(places):
            at, segment = np.flatnonzero((places == number) & (times >= self.begins_s[0])), self.segments[number]
            state = segment.z[self.modes.count :]
            since = times[at] - segment.begin_s
            found[:, at] = state.real[:, None] + state.imag[:, None] * since
            if segment.force_n is not None and segment.rows is not None:
                found[:, at] += segment.rows[:, self.modes.count :].T @ moved_by(segment, since)
        return found

    def pose(self, times_s: Array) -> tuple[Array, Array]:
        """Place (t, 3) of the mass centre in the world and turn (t, 4) xyzw, continuous in sign."""
        times = np.asarray(times_s, dtype=np.float64)
        if not self.free:
            to_world = matrix(self.turn)
            centre = self.place_m + to_world @ self.inertia.centre_m
            if not self.moves:
                return np.tile(centre, (len(times), 1)), np.tile(self.turn, (len(times), 1))
            shift, turn = finite((self.twists @ self.linear(times)).T, turn=self.turn, to_world=to_world)
            return centre + shift, self._continuous(times, turn)
        place, turn = np.zeros((len(times), 3)), np.zeros((len(times), 4))
        places = self._places(times)
        for number in np.unique(places):
            at = np.flatnonzero(places == number)
            place[at], turn[at] = self._flown(self.segments[number], times[at])
        return place, self._continuous(times, turn)

    def _continuous(self, times: Array, turn: Array) -> Array:
        """Turns (t, 4) with signs continuous from the first time on, whatever order the times are asked in."""
        order = np.argsort(times, kind="stable")
        sorted_turn = turn[order]
        if len(order):
            lead = 1.0 if float(sorted_turn[0] @ self.turn) >= 0.0 else -1.0
            flips = np.sum(sorted_turn[1:] * sorted_turn[:-1], axis=1) < 0.0
            turn[order] = sorted_turn * (lead * np.cumprod(np.where(np.append(False, flips), -1.0, 1.0)))[:, None]
        return turn

    def _flown(self, segment: Segment, times_s: Array) -> tuple[Array, Array]:
        rigid = segment.rigid
        assert rigid is not None  # noqa: S101 (free bodies have a rigid state)
        since = times_s - segment.begin_s
        if segment.force_n is None or segment.axes is None or segment.arms_m is None:
            place, turn, _, _ = fly(rigid, since, tensor=self.inertia.tensor, gravity=self.gravity)
            return place, turn
        # In contact the frame stands still: see Subject.pushed_on, which ends where this does.
        kick = kick_of(segment.axes, segment.arms_m, turn=rigid.turn, tensor=self.inertia.tensor)
        moved, t = moved_by(segment, since).T, since[:, None]
        place = rigid.place_m + t * rigid.speed_m_s + 0.5 * t**2 * self.gravity
        place = place + moved @ kick.axes / self.inertia.mass_kg
        return place, turned(rigid.turn, t * rigid.spin_rad_s + moved @ kick.spin)

    def impulse(self, begin_s: Array, end_s: Array) -> Array:
        """Modal impulse (m, t): integral of the modal forces from ``begin_s`` to ``end_s`` (t,)."""
        found = np.zeros((self.modes.count, len(begin_s)))
        for segment in self.segments:
            if segment.force_n is None or segment.rows is None:
                continue
            inside = _pushed(segment, end_s) - _pushed(segment, begin_s)
            if np.any(inside):
                found += segment.rows[:, : self.modes.count].T @ inside
        return found

    def force(self, times_s: Array) -> Array:
        """Sum of the contact forces (t,), N."""
        found = np.zeros(len(times_s))
        for segment in self.segments:
            if segment.force_n is None:
                continue
            at = np.floor((np.asarray(times_s) - segment.begin_s) / segment.step_s).astype(np.int64)
            inside = (at >= 0) & (at < segment.force_n.shape[1])
            found[inside] += segment.force_n[:, at[inside]].sum(axis=0)
        return found

    def force_peak(self, begin_s: Array, end_s: Array) -> Array:
        """Largest single contact force (t,), N, between ``begin_s`` and ``end_s`` (t,)."""
        found = np.zeros(len(begin_s))
        for segment in self.segments:
            force = segment.force_n
            if force is None:
                continue
            edges = segment.begin_s + segment.step_s * np.arange(force.shape[1] + 1)
            touched = np.flatnonzero((np.asarray(begin_s) < edges[-1]) & (np.asarray(end_s) > edges[0]))
            for frame in touched:
                first = max(int(np.searchsorted(edges, begin_s[frame], side="right")) - 1, 0)
                last = min(int(np.searchsorted(edges, end_s[frame], side="left")), force.shape[1])
                inside = force[:, first:last]
                contact, at = np.unravel_index(int(np.argmax(inside)), inside.shape)
                found[frame] = max(found[frame], crest(force[contact], first + int(at)))
        return found


def _pushed(segment: Segment, times_s: Array) -> Array:
    since = np.asarray(times_s) - segment.begin_s
    return impulse_of(segment, np.clip(since, 0.0, segment.end_s - segment.begin_s))
