"""The course of one body: free flight and contact, one after the other."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from resonate.run import window
from resonate.run.flight import fly, matrix, rigid_energy, turned
from resonate.run.propagator import energy, exponents, from_state, to_state
from resonate.run.record import Event, Ledger, RigidState, Segment
from resonate.run.track import lever_moved

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from numpy.typing import NDArray

    from resonate.body.body import Inertia
    from resonate.modes.modeset import ModeSet
    from resonate.run.blow import Blow
    from resonate.run.window import Hit, Motion, Stretch

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# A gap to the next strike below this is no step of its own.
_INSTANT_S = 1e-12


@dataclass(frozen=True)
class Subject:
    """One body as the run sees it.

    ``place_m`` (3,) of its origin, ``turn`` (4,) and ``begin`` motion at ``begin_s``; ``gravity`` (3,) in the
    world (zero for supported and floating bodies).
    """

    name: str
    modes: ModeSet
    free: bool
    inertia: Inertia
    gravity: Array
    begin_s: float
    begin: RigidState | None

    @property
    def elastic(self) -> int:
        """Number of modes with stiffness."""
        return self.modes.count

    @property
    def kept(self) -> int:
        """Number of modal states in a checkpoint: a free body's rigid motion is kept apart."""
        return self.modes.count + (0 if self.free else self.modes.rigid.shape[1])


@dataclass
class State:
    """Where a body is: time, modal states (kept,), motion as a whole."""

    time_s: float
    z: ComplexArray
    rigid: RigidState | None


@dataclass(frozen=True)
class Passage:
    """What one window of contact did: segments, the strikers, the state after it and the modal work."""

    segments: tuple[Segment, ...]
    hits: tuple[Hit, ...]
    after: State
    work: Array
    truncated: float


def coast(subject: Subject, state: State, until_s: float) -> State:
    """Free flight in closed form."""
    since = until_s - state.time_s
    modes, m = subject.modes, subject.elastic
    z = state.z.copy()
    z[:m] *= np.exp(exponents(modes.omega, modes.decay.total) * since)
    z[m:] += z[m:].imag * since
    rigid = state.rigid
    if rigid is not None:
        place, turn, speed, spin = fly(
            rigid, np.array([since]), tensor=subject.inertia.tensor, gravity=subject.gravity
        )
        rigid = RigidState(place[0], turn[0], speed[0], spin[0])
    return State(until_s, z, rigid)


def _loaded(subject: Subject, state: State) -> Motion:
    modes, m = subject.modes, subject.elastic
    q, v = from_state(state.z[:m], modes.omega, modes.decay.total)
    rigid = modes.rigid.shape[1]
    if subject.free:
        whole_q, whole_v = np.zeros(rigid), np.zeros(rigid)
    else:
        whole_q, whole_v = state.z[m:].real.copy(), state.z[m:].imag.copy()
    return window.Motion(
        np.concatenate((modes.omega, np.zeros(rigid))),
        np.concatenate((modes.decay.total, np.zeros(rigid))),
        np.concatenate((q, whole_q)),
        np.concatenate((v, whole_v)),
        np.zeros(m + rigid),
    )


def _unloaded(subject: Subject, motion: Motion) -> ComplexArray:
    modes, m = subject.modes, subject.elastic
    z = to_state(motion.q[:m], motion.v[:m], modes.omega, modes.decay.total)
    if subject.free:
        return z
    whole = slice(m, m + modes.rigid.shape[1])
    return np.concatenate((z, motion.q[whole] + 1j * motion.v[whole]))


class _Window:
    """One window being marched; see ``passage``."""

    def __init__(self, subject: Subject, state: State, power: int) -> None:
        self.subject, self.power = subject, power
        self.begin = state
        self.motion = _loaded(subject, state)
        self.time_s = state.time_s
        self.live: list[Hit] = []
        self.done: list[Hit] = []
        self.pieces: list[tuple[ComplexArray, Stretch]] = []
        self.top = float(subject.modes.omega[-1]) if subject.elastic else 0.0

    @property
    def step_s(self) -> float:
        return float(1.0 / (window.BASE_HZ * 2**self.power))

    def join(self, blow: Blow) -> None:
        for hit in (*self.live, *self.done):
            hit.row = np.append(hit.row, 0.0) if blow.give_m_n > 0.0 else hit.row
        row = np.concatenate((blow.row, np.zeros(len(self.motion.omega) - len(blow.row))))
        if blow.give_m_n > 0.0:
            omega, decay, gain = window.stand_in(blow, self.top)
            self.motion = self.motion.grown(omega, decay)
            row = np.append(row, gain)
        moving = float(row @ self.motion.v) + self.drift_speed(blow, self.time_s)
        closing = blow.speed_m_s - moving
        self.live.append(window.Hit(blow, row, 0.0, blow.speed_m_s, 0.0, closing))
        self.power = max(self.power, window.first_power(blow, abs(closing)))

    def drift_speed(self, blow: Blow, time_s: float) -> float:
        rigid = self.begin.rigid
        if not self.subject.free or rigid is None:
            return 0.0
        turn = matrix(rigid.turn)
        arm = turn @ (blow.point_m - self.subject.inertia.centre_m)
        speed = rigid.speed_m_s + np.cross(rigid.spin_rad_s, arm)
        return float((turn @ blow.axis) @ (speed + self.subject.gravity * (time_s - self.begin.time_s)))

    def march(self, steps: int, step_s: float) -> None:
        start = self.time_s + step_s * np.arange(steps)
        drift = np.zeros((len(self.live), steps))
        if self.subject.free:
            for number, hit in enumerate(self.live):
                first = self.drift_speed(hit.blow, self.time_s)
                gained = self.drift_speed(hit.blow, self.time_s + 1.0) - first
                drift[number] = first * step_s + gained * (start - self.time_s + 0.5 * step_s) * step_s
        before = _unloaded(self.subject, self.motion)
        stretch = window.advance(
            self.motion,
            self.live,
            begin_s=self.time_s,
            step_s=step_s,
            steps=steps,
            quiet=window.quiet_steps(step_s),
            drift=drift,
        )
        self.pieces.append((before, stretch))
        self.time_s += step_s * stretch.force_n.shape[1]

    def leave(self) -> None:
        """Let every striker go that can never touch again."""
        quiet = window.quiet_steps(self.step_s)
        for hit in list(self.live):
            window.too_long(hit.blow.begin_s, self.time_s, hit, self.subject.name)
            last = np.concatenate([force for _, _, force in hit.forces[-4:]])[-quiet:]
            if len(last) < quiet or np.any(last > 0.0):
                continue
            lost = self.drift_speed(hit.blow, self.time_s)
            if window.parted(self.motion, hit, elastic=self.subject.elastic, lost_speed_m_s=lost):
                self.live.remove(hit)
                self.done.append(hit)


def passage(subject: Subject, state: State, blows: Sequence[Blow]) -> Passage:
    """March from the first blow until every striker has left; later blows join while it lasts.

    When the first touch turns out shorter than 28 steps, all is done again with half the step.
    """
    power = window.LEAST_POWER
    while True:
        run = _passage(subject, state, blows, power)
        short = min(window.shortest_run(hit) for hit in run.done)
        if short >= window.LEAST or run.power >= window.MOST_POWER:
            return _finish(subject, state, run)
        power = run.power + 1


def _passage(subject: Subject, state: State, blows: Sequence[Blow], power: int) -> _Window:
    run = _Window(subject, state, power)
    run.join(blows[0])
    waiting = list(blows[1:])
    while run.live:
        steps = window.chunk(run.step_s)
        if waiting and waiting[0].begin_s <= run.time_s + steps * run.step_s:
            ahead = waiting[0].begin_s - run.time_s
            steps = int(ahead / run.step_s + 1e-9)
            if steps == 0:
                if ahead > _INSTANT_S:
                    run.march(1, ahead)
                run.join(waiting.pop(0))
                continue
        run.march(steps, run.step_s)
        run.leave()
    return run


def _finish(subject: Subject, state: State, run: _Window) -> Passage:
    segments: list[Segment] = []
    rigid = state.rigid
    place = 0
    while place < len(run.pieces):
        z, first = run.pieces[place]
        same = [first]
        while (
            place + len(same) < len(run.pieces)
            and run.pieces[place + len(same)][1].step_s == first.step_s
            and run.pieces[place + len(same)][1].numbers == first.numbers
        ):
            same.append(run.pieces[place + len(same)][1])
        place += len(same)
        hits = [hit for number in first.numbers for hit in run.done if hit.blow.strike == number]
        segment = Segment(
            begin_s=first.begin_s,
            z=z,
            rigid=rigid,
            step_s=first.step_s,
            force_n=np.concatenate([part.force_n for part in same], axis=1),
            rows=np.stack([hit.blow.row[: subject.kept] for hit in hits]),
            contacts=first.numbers,
        )
        if rigid is not None:
            turn = matrix(rigid.turn)
            centre = subject.inertia.centre_m
            segment = replace(
                segment,
                axes=np.stack([turn @ hit.blow.axis for hit in hits]),
                arms_m=np.stack([turn @ (hit.blow.point_m - centre) for hit in hits]),
            )
            rigid = _pushed_on(subject, segment)
        segments.append(segment)
    m, whole = subject.elastic, subject.modes.rigid.shape[1]
    after = State(segments[-1].end_s, _unloaded(subject, run.motion), rigid)
    truncated = float(run.motion.work[m + whole :].sum())
    return Passage(tuple(segments), tuple(run.done), after, run.motion.work[:m].copy(), truncated)


def _pushed_on(subject: Subject, segment: Segment) -> RigidState:
    """Motion as a whole at the end of a contact segment."""
    rigid, force = segment.rigid, segment.force_n
    assert rigid is not None  # noqa: S101 (free bodies only)
    assert force is not None  # noqa: S101 (contact segments only)
    assert segment.axes is not None  # noqa: S101
    assert segment.arms_m is not None  # noqa: S101
    since = np.array([segment.end_s - segment.begin_s])
    place, turn, speed, spin = fly(rigid, since, tensor=subject.inertia.tensor, gravity=subject.gravity)
    moved = lever_moved(segment, since)[:, 0]
    impulse = force.sum(axis=1) * segment.step_s
    frame = matrix(rigid.turn)
    inverse = frame @ np.linalg.inv(subject.inertia.tensor) @ frame.T
    twist = np.cross(segment.arms_m, segment.axes) @ inverse.T
    return RigidState(
        place[0] + moved @ segment.axes / subject.inertia.mass_kg,
        turned(turn[0], moved @ twist),
        speed[0] + impulse @ segment.axes / subject.inertia.mass_kg,
        spin[0] + impulse @ twist,
    )


@dataclass(frozen=True)
class Course:
    """Everything one body did."""

    segments: tuple[Segment, ...]
    events: tuple[Event, ...]
    ledger: Ledger


def follow(
    subject: Subject, blows: Sequence[Blow], *, end_s: float, world: Callable[[Array, RigidState | None], Array]
) -> Course:
    """Run one body from its begin to ``end_s``.

    ``world`` maps a point (3,) of the body frame, and the rigid state if it is free, into the world.
    """
    state = State(subject.begin_s, np.zeros(subject.kept, dtype=np.complex128), subject.begin)
    segments = [Segment(state.time_s, state.z, state.rigid)]
    events: list[Event] = []
    given = _kinetic(subject, state.rigid)
    ledger = replace(Ledger.empty(), given=given)
    waiting = sorted(blows, key=lambda blow: (blow.begin_s, blow.strike))
    while waiting:
        at = coast(subject, state, waiting[0].begin_s)
        ledger = ledger.plus(_ringing_loss(subject, state, at))
        done = passage(subject, at, waiting)
        struck = {hit.blow.strike for hit in done.hits}
        waiting = [blow for blow in waiting if blow.strike not in struck]
        segments.extend(done.segments)
        segments.append(Segment(done.after.time_s, done.after.z, done.after.rigid))
        ledger = ledger.plus(_contact_entries(subject, at, done))
        events.extend(_event(subject, hit, world(hit.blow.point_m, at.rigid)) for hit in done.hits)
        state = done.after
    last = coast(subject, state, max(end_s, state.time_s))
    ledger = ledger.plus(_ringing_loss(subject, state, last))
    return Course(tuple(segments), tuple(events), _closed(subject, ledger, last))


def _kinetic(subject: Subject, rigid: RigidState | None) -> float:
    if rigid is None:
        return 0.0
    return rigid_energy(rigid, mass_kg=subject.inertia.mass_kg, tensor=subject.inertia.tensor)


def _split(subject: Subject, lost: Array) -> Ledger:
    decay = subject.modes.decay
    share = lost / np.where(decay.total > 0.0, decay.total, 1.0)
    return replace(
        Ledger.empty(),
        lost_material=float(share @ decay.material),
        lost_thermoelastic=float(share @ decay.thermoelastic),
        lost_support=float(share @ decay.support),
        lost_radiation=float(share @ decay.radiation),
    )


def _modal(subject: Subject, z: ComplexArray) -> Array:
    modes = subject.modes
    return energy(z[: subject.elastic], modes.omega, modes.decay.total)


def _ringing_loss(subject: Subject, before: State, after: State) -> Ledger:
    return _split(subject, _modal(subject, before.z) - _modal(subject, after.z))


def _contact_entries(subject: Subject, before: State, done: Passage) -> Ledger:
    kept = _modal(subject, done.after.z) - _modal(subject, before.z)
    lost = _split(subject, done.work - kept)
    return replace(
        lost,
        given=sum(0.5 * hit.blow.mass_kg * hit.blow.speed_m_s**2 for hit in done.hits),
        striker_left=sum(0.5 * hit.blow.mass_kg * hit.speed_m_s**2 for hit in done.hits),
        lost_contact=sum(hit.lost for hit in done.hits),
        lost_truncation=done.truncated,
    )


def _closed(subject: Subject, ledger: Ledger, last: State) -> Ledger:
    work = 0.0
    whole = 0.5 * float(np.sum(last.z[subject.elastic :].imag ** 2))
    if last.rigid is not None and subject.begin is not None:
        fallen = last.rigid.place_m - subject.begin.place_m
        work = subject.inertia.mass_kg * float(subject.gravity @ fallen)
        whole = _kinetic(subject, last.rigid)
    filled = replace(
        ledger, gravity_work=work, modal_left=float(_modal(subject, last.z).sum()), rigid_left=whole
    )
    out = (
        filled.modal_left
        + filled.rigid_left
        + filled.contact_left
        + filled.striker_left
        + filled.lost_material
        + filled.lost_thermoelastic
        + filled.lost_support
        + filled.lost_radiation
        + filled.lost_contact
        + filled.lost_truncation
    )
    return replace(filled, residual=filled.given + work - out, scale=filled.given + abs(work))


def _event(subject: Subject, hit: Hit, place_m: Array) -> Event:
    depth = np.concatenate(hit.depths)
    force = np.concatenate([part for _, _, part in hit.forces])
    ends = np.concatenate([begin + step * (np.arange(len(part)) + 1) for begin, step, part in hit.forces])
    steps = np.concatenate([np.full(len(part), step) for _, step, part in hit.forces])
    touching = np.flatnonzero(depth > 0.0)
    end_s, leaving = hit.blow.begin_s, 0.0
    if len(touching):
        at = int(touching[-1])
        after = min(at + 1, len(depth) - 1)
        fall = depth[at] - depth[after]
        end_s = float(ends[at] + (steps[after] * depth[at] / fall if fall > 0.0 else 0.0))
        free = min(at + 2, len(depth) - 1)
        leaving = float((depth[free - 1] - depth[free]) / steps[free])
    return Event(
        kind="strike",
        body=subject.name,
        other=hit.blow.striker,
        begin_s=hit.blow.begin_s,
        end_s=end_s,
        place_m=place_m,
        impulse_ns=float(force @ steps),
        peak_n=float(force.max(initial=0.0)),
        closing_speed_m_s=hit.closing_m_s,
        leaving_speed_m_s=leaving,
        strike=hit.blow.strike,
    )
