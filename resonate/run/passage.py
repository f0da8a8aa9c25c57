"""From the first touch until every striker has left: strikers join and leave, steps become finer where needed."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import RunError
from resonate.run import ledger as books
from resonate.run import window
from resonate.run.flight import kick_of
from resonate.run.ladder import ladder
from resonate.run.record import Ledger, Segment
from resonate.run.subject import State
from resonate.run.track import impulse_of, moved_by

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.run.blow import Blow
    from resonate.run.record import RigidState
    from resonate.run.subject import Subject
    from resonate.run.window import Hit, Moving, Stepper

    Array = NDArray[np.float64]

# A gap to the next strike below this is no step of its own.
_INSTANT_S = 1e-12
# A free body's frame stands still until it has turned by this much; then gains and arms are taken anew.
_STILL_RAD = 1e-3
_LEAST_STEPS = 8


@dataclass(frozen=True, slots=True)
class Passage:
    """What one window of contact did: segments, the strikers, the state after it, and its ledger entries."""

    segments: tuple[Segment, ...]
    hits: tuple[Hit, ...]
    after: State
    ledger: Ledger


@dataclass(frozen=True, slots=True)
class _Mark:
    # Where to go back to when a hit needs finer steps: all just before it joins.
    state: State
    live: tuple[Hit, ...]
    segments: tuple[Segment, ...]
    done: tuple[Hit, ...]
    waiting: tuple[Blow, ...]
    ledger: Ledger


def passage(subject: Subject, state: State, blows: Sequence[Blow]) -> Passage:
    """March from the first blow, which begins at ``state``, until every striker has left.

    Later blows, in order of time, join while it lasts. When a touch turns out to have fewer than 28 steps, all since
    its striker joined is done again with finer ones.

    Raises
    ------
    RunError
        If a striker does not touch, or does not leave.
    """
    run = _Run(subject, state, blows)
    while True:
        run.join()
        if not run.now.live:
            now = run.now
            return Passage(now.segments, now.done, now.state, now.ledger)
        run.stretch()


class _Run:
    def __init__(self, subject: Subject, state: State, blows: Sequence[Blow]) -> None:
        self.subject = subject
        self.now = _Mark(state, (), (), (), tuple(blows), Ledger.empty())
        # Where free ringing would go on if no striker came back.
        self.rest = self.now
        self.marks: dict[int, _Mark] = {}
        self.powers: dict[int, int] = {}

    def _where(self, blow: Blow) -> str:
        return f"strike[{blow.strike}] on body {self.subject.name!r}"

    def join(self) -> None:
        """Let every blow begin whose time has come."""
        while self.now.waiting and self.now.waiting[0].begin_s - self.now.state.time_s <= _INSTANT_S:
            now, blow = self.now, self.now.waiting[0]
            if not now.live and now.segments:
                return
            self.marks[blow.strike] = now
            hit = self._touching(blow, now.state)
            given = replace(Ledger.empty(), given=0.5 * blow.mass_kg * blow.speed_m_s**2)
            self.now = replace(now, live=(*now.live, hit), waiting=now.waiting[1:], ledger=now.ledger.plus(given))

    def _touching(self, blow: Blow, state: State) -> Hit:
        subject, rigid = self.subject, state.rigid
        to_body = subject.to_body(rigid)
        # Without friction a contact pushes along the normal, and only that part of the speed closes it.
        axis, steep = blow.inward, float(blow.way(to_body) @ blow.inward)
        if steep <= 1e-6:  # noqa: PLR2004 (grazing)
            lean = float(np.degrees(np.arcsin(np.clip(steep, -1.0, 1.0))))
            way = "only grazes the surface" if abs(steep) < 1e-3 else "points away from the surface"  # noqa: PLR2004
            raise RunError(
                what=f"its direction {way} at the spot ({lean:.2g} deg into it)",
                where=self._where(blow),
                fix="turn it round, or leave it out to strike along the inward normal",
            )
        body, row = subject.loaded(state), subject.row(blow, axis, rigid)
        speed = steep * blow.speed_m_s
        hit = window.Hit(
            blow=blow,
            # A contact keeps its normal in the world, so a free body may turn under it.
            axis=axis if rigid is None else to_body.T @ axis,
            power=window.LEAST_POWER,
            ladder=ladder(
                subject.modes.omega,
                row[: subject.elastic],
                give_m_n=float(axis @ blow.give_m_n @ axis),
                power=blow.mobility_power,
                least_s_kg=blow.wave_mobility_s_kg,
            ),
            joined_s=state.time_s,
            closing_m_s=speed - float(row @ body.v),
            place_m=subject.in_world(blow.point_m, rigid),
            speed_m_s=speed,
            aside_m_s=float(np.sqrt(max(0.0, blow.speed_m_s**2 - speed**2))),
        )
        power = self.powers.get(blow.strike) or window.first_power(hit, body.omega, row)
        return replace(hit, power=power)

    def stretch(self) -> None:
        """March until a striker leaves, another comes, or the body has turned."""
        now, live = self.now, self.now.live
        step_s = 1.0 / (window.BASE_HZ * 2.0 ** max(hit.power for hit in live))
        ahead = now.waiting[0].begin_s - now.state.time_s if now.waiting else np.inf
        left = int(min(ahead / step_s + 1e-9, 2**40))
        if left == 0:
            # Steps do not end where the next strike begins: one shorter step does.
            step_s, left = ahead, 1
        moving = self._moving(now.state, live)
        stepper = window.Stepper(moving, live, step_s, self._where(live[0].blow))
        pace = self._pace(now.state)
        while True:
            steps = min(window.chunk(step_s), left, max(_LEAST_STEPS, int(pace / step_s)))
            stepper.march(steps)
            left -= steps
            gone = [stepper.gone(number) for number in range(len(live))]
            time_s = now.state.time_s + step_s * stepper.done
            self._refuse_long(live, gone, time_s, stepper)
            if any(gone) or left == 0 or self._turned(stepper) > _STILL_RAD:
                break
        self._close(stepper, gone)

    def _moving(self, state: State, live: tuple[Hit, ...]) -> Moving:
        subject, rigid = self.subject, state.rigid
        body, to_body = subject.loaded(state), subject.to_body(rigid)
        axes = [hit.axis if rigid is None else to_body @ hit.axis for hit in live]
        return window.gather(
            body,
            rows=np.stack([subject.row(hit.blow, axis, rigid) for hit, axis in zip(live, axes, strict=True)]),
            hits=live,
        )

    def _pace(self, state: State) -> float:
        """Time in which a free body turns by half of what its frame may stand still for."""
        rigid = state.rigid
        if rigid is None:
            return window.LONGEST_S
        rate = float(np.linalg.norm(rigid.spin_rad_s))
        axes, arms = self._levers(rigid)
        kick = kick_of(axes, arms, turn=rigid.turn, tensor=self.subject.inertia.tensor)
        for hit, spin in zip(self.now.live, kick.spin, strict=True):
            rate += 2.0 * hit.blow.mass_kg * hit.blow.speed_m_s * float(np.linalg.norm(spin))
        return 0.5 * _STILL_RAD / rate if rate > 0.0 else window.LONGEST_S

    def _levers(self, rigid: RigidState) -> tuple[Array, Array]:
        to_world = self.subject.to_body(rigid).T
        centre = self.subject.inertia.centre_m
        arms = [to_world @ (hit.blow.point_m - centre) for hit in self.now.live]
        return np.stack([hit.axis for hit in self.now.live]), np.stack(arms)

    def _turned(self, stepper: Stepper) -> float:
        if not self.subject.free:
            return 0.0
        moments = np.linalg.eigvalsh(self.subject.inertia.tensor)
        body = stepper.moving.body
        return float(np.linalg.norm(stepper.q[body - 3 : body] / np.sqrt(moments)))

    def _refuse_long(self, live: tuple[Hit, ...], gone: list[bool], time_s: float, stepper: Stepper) -> None:
        for number, (hit, left) in enumerate(zip(live, gone, strict=True)):
            if not left and time_s - hit.joined_s < window.LONGEST_S:
                continue
            touched = np.any(hit.force_n > 0.0) or any(np.any(force[number] > 0.0) for force in stepper.forces)
            if not touched:
                raise RunError(
                    what=f"the striker never touches: the surface moves away from its {hit.blow.speed_m_s:g} m/s",
                    where=self._where(hit.blow),
                    fix="strike faster, at another time or from the other side, or keep the body in place: held = true",
                )
            if not left:
                raise RunError(
                    what=f"the striker has not left after {window.LONGEST_S:g} s",
                    where=self._where(hit.blow),
                    fix="use a lighter or harder striker, or a higher speed: a strike must leave the body",
                )

    def _close(self, stepper: Stepper, gone: list[bool]) -> None:
        """Book a stretch. When everybody has left, time goes back to the last force: ringing is free from there."""
        hits = stepper.advanced(self.now.state.time_s)
        leaving = tuple(hit for hit, left in zip(hits, gone, strict=True) if left)
        for hit in leaving:
            power = window.finer(hit)
            if power > hit.power:
                self.powers[hit.blow.strike] = power
                self.now = self.marks[hit.blow.strike]
                return
        here = self._ended(stepper, stepper.done, stepper.q, stepper.v)
        if stepper.last:
            rest = self._ended(stepper, stepper.last, stepper.last_q, stepper.last_v)
            # What stand-ins and contacts still hold then is lost: no force brings it back.
            standing = float(np.sum(stepper.moving.stands(stepper.last_q, stepper.last_v)))
            unreturned = replace(Ledger.empty(), lost_truncation=standing, lost_contact=stepper.stored_j())
            self.rest = replace(rest, ledger=rest.ledger.plus(unreturned))
        held = stepper.moving.stands(stepper.q, stepper.v)
        for hit, left, energy in zip(hits, gone, held, strict=True):
            if left:
                kept = replace(Ledger.empty(), striker_left=hit.energy_j)
                self.rest = replace(self.rest, ledger=self.rest.ledger.plus(kept))
                here = replace(
                    here, ledger=here.ledger.plus(kept).plus(replace(kept, striker_left=0.0, lost_truncation=energy))
                )
        self.now = replace(
            self.rest if all(gone) else here,
            live=tuple(hit for hit, left in zip(hits, gone, strict=True) if not left),
            done=(*self.now.done, *leaving),
            waiting=self.now.waiting,
        )

    def _ended(self, stepper: Stepper, steps: int, q: Array, v: Array) -> _Mark:
        """Where a stretch is after some of its steps, in state ``q``, ``v``."""
        now = self.now
        segment, after = self._segment(stepper, np.concatenate(stepper.forces, axis=1)[:, :steps], q, v)
        entries = books.stretch(self.subject, stepper.moving, q, v, work=stepper.work, lost=stepper.lost)
        return replace(now, state=after, segments=(*now.segments, segment), ledger=now.ledger.plus(entries))

    def _segment(self, stepper: Stepper, force: Array, q: Array, v: Array) -> tuple[Segment, State]:
        subject, state, body = self.subject, self.now.state, stepper.moving.body
        rigid = state.rigid
        axes, arms = self._levers(rigid) if rigid is not None else (None, None)
        segment = Segment(
            begin_s=state.time_s,
            z=state.z,
            rigid=rigid,
            step_s=stepper.step_s,
            force_n=force,
            rows=np.ascontiguousarray(stepper.moving.rows[:, : subject.kept]),
            contacts=tuple(hit.blow.strike for hit in self.now.live),
            axes=axes,
            arms_m=arms,
        )
        if rigid is not None and axes is not None and arms is not None:
            since = segment.end_s - segment.begin_s
            kick = kick_of(axes, arms, turn=rigid.turn, tensor=subject.inertia.tensor)
            end = np.array([since])
            rigid = subject.pushed_on(rigid, since, moved_by(segment, end)[:, 0], impulse_of(segment, end)[:, 0], kick)
        return segment, State(segment.end_s, subject.closed(q[:body], v[:body]), rigid)
