"""Run a scene: every body with its modes, every happening, one clock."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from threadpoolctl import threadpool_limits

from resonate.errors import Fault, RunError
from resonate.run.blow import make_blow
from resonate.run.course import Course, Subject, follow
from resonate.run.flight import fly, matrix
from resonate.run.limits import beyond_linear
from resonate.run.record import Event, Ledger, Record, RigidState
from resonate.run.track import BodyTrack

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet
    from resonate.modes.store import ModeStore
    from resonate.run.blow import Blow
    from resonate.scene.model import BodySpec, Scene

    Array = NDArray[np.float64]

# A run whose energies do not add up to this share of what was put in is refused.
CLOSES = 1e-6


def run(
    scene: Scene, bodies: Sequence[Body], modes: Sequence[ModeSet], *, store: ModeStore | None = None
) -> Record:
    """Advance rigid motion, modes and contacts together.

    Parameters
    ----------
    scene : Scene
        What happens, and when.
    bodies, modes : Sequence
        One of each for every body of the scene, in its order.
    store : ModeStore, optional
        Keeps static compliances between runs.

    Returns
    -------
    Record
        From which sound and motion are made.

    Raises
    ------
    RunError
        If a striker cannot reach or never leaves a body, a mode is overdamped, or the energies of a body do not
        add up.
    """
    with threadpool_limits(limits=1):
        begin_s, end_s = float(scene.clock.run_begin_s), float(scene.clock.end)
        tracks: list[BodyTrack] = []
        events: list[Event] = []
        warnings: list[str] = []
        ledger = Ledger.empty()
        faults: list[Fault] = []
        for index, (spec, body, found) in enumerate(zip(scene.bodies, bodies, modes, strict=True)):
            _check_damping(body, found)
            subject = _subject(spec, body, found, begin_s=begin_s, gravity_m_s2=scene.world.gravity_m_s2)
            blows = _blows(scene, index, body, found, subject, store)
            course = follow(subject, blows, end_s=end_s, world=_in_world(spec, body))
            faults.extend(_open_ledger(body, course))
            tracks.append(_track(spec, subject, course))
            events.extend(course.events)
            ledger = ledger.plus(course.ledger)
            warnings.extend(beyond_linear(tracks[-1], body, blows))
        if faults:
            raise RunError(faults=tuple(faults))
        ordered = tuple(sorted(events, key=lambda event: (event.begin_s, event.strike)))
        return Record(float(scene.clock.begin), tuple(tracks), ordered, ledger, tuple(warnings))


def _check_damping(body: Body, modes: ModeSet) -> None:
    over = np.flatnonzero(modes.decay.total >= modes.omega)
    if len(over):
        number = int(over[0])
        raise RunError(
            what=f"mode {number + 1} at {modes.frequency_hz[number]:.4g} Hz decays at "
            f"{modes.decay.total[number]:.4g} 1/s and does not swing at all",
            where=f"body {body.name!r}",
            fix="use a weaker damper or a smaller loss factor",
        )


def _subject(spec: BodySpec, body: Body, modes: ModeSet, *, begin_s: float, gravity_m_s2: float) -> Subject:
    free = body.free
    gravity = np.array([0.0, -gravity_m_s2 if free and not spec.floating else 0.0, 0.0])
    begin = None
    if free:
        # Speed and place are given at the scene's time 0: fly back to where the run begins.
        turn = np.array(spec.turn)
        centre = np.array(spec.place_m) + matrix(turn) @ body.inertia.centre_m
        start = RigidState(centre, turn, np.array(spec.speed_m_s), np.array(spec.spin_rad_s))
        place, turns, speed, spin = fly(start, np.array([begin_s]), tensor=body.inertia.tensor, gravity=gravity)
        begin = RigidState(place[0], turns[0], speed[0], spin[0])
    return Subject(body.name, modes, free, body.inertia, gravity, begin_s, begin)


def _blows(
    scene: Scene, index: int, body: Body, modes: ModeSet, subject: Subject, store: ModeStore | None
) -> list[Blow]:
    blows = []
    spec = scene.bodies[index]
    for number, strike in enumerate(scene.strikes):
        if strike.body_index != index:
            continue
        turn = np.array(spec.turn)
        if subject.begin is not None:
            since = np.array([strike.time_s - subject.begin_s])
            turn = fly(subject.begin, since, tensor=body.inertia.tensor, gravity=subject.gravity)[1][0]
        blows.append(make_blow(number, strike, body, modes, to_body=matrix(turn).T, store=store))
    return blows


def _in_world(spec: BodySpec, body: Body) -> Callable[[Array, RigidState | None], Array]:
    def place(point_m: Array, rigid: RigidState | None) -> Array:
        if rigid is None:
            return np.asarray(np.array(spec.place_m) + matrix(np.array(spec.turn)) @ point_m)
        return np.asarray(rigid.place_m + matrix(rigid.turn) @ (point_m - body.inertia.centre_m))

    return place


def _track(spec: BodySpec, subject: Subject, course: Course) -> BodyTrack:
    return BodyTrack(
        name=subject.name,
        modes=subject.modes,
        segments=course.segments,
        free=subject.free,
        inertia=subject.inertia,
        place_m=np.array(spec.place_m),
        turn=np.array(spec.turn),
        gravity=subject.gravity,
    )


def _open_ledger(body: Body, course: Course) -> list[Fault]:
    ledger = course.ledger
    if ledger.closes(CLOSES):
        return []
    strikes = ", ".join(f"strike[{event.strike}]" for event in course.events) or "no strike"
    return [
        Fault(
            what=f"energies differ by {ledger.residual:.3g} J of {ledger.scale:.3g} J put in ({strikes})",
            where=f"body {body.name!r}",
            fix="this is a defect of the run; report it with the scene",
        )
    ]
