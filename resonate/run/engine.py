"""Run a scene: every body with its modes, every happening, one clock."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from threadpoolctl import threadpool_limits

from resonate.errors import Fault, RunError
from resonate.run.blow import make_blows
from resonate.run.course import Course, follow
from resonate.run.flight import fly, matrix
from resonate.run.limits import beyond_kept, beyond_linear, beyond_rest
from resonate.run.record import Event, Ledger, Record, RigidState
from resonate.run.subject import Subject
from resonate.run.track import BodyTrack
from resonate.run.twist import twists_of

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet
    from resonate.modes.store import ModeStore
    from resonate.scene.model import BodySpec, Scene

    Array = NDArray[np.float64]

# A run whose energies do not add up to this share of what was put in is refused.
CLOSES = 1e-6


def run(scene: Scene, bodies: Sequence[Body], modes: Sequence[ModeSet], *, store: ModeStore | None = None) -> Record:
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
            asked = [(n, strike) for n, strike in enumerate(scene.strikes) if strike.body_index == index]
            course = follow(subject, make_blows(asked, body, found, store=store), end_s=end_s)
            faults.extend(_open_ledger(body, course))
            tracks.append(_track(subject, course, twists_of(body, found)))
            events.extend(course.events)
            ledger = ledger.plus(course.ledger)
            warnings.extend(beyond_kept(found, course.ledger))
            warnings.extend(beyond_linear(tracks[-1], body, course.events))
            warnings.extend(beyond_rest(tracks[-1], body, end_s=end_s))
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
    place, turn = np.array(spec.place_m), np.array(spec.turn)
    gravity = np.array([0.0, -gravity_m_s2 if body.free and not spec.floating else 0.0, 0.0])
    begin = None
    if body.free:
        # Place and motion are given at the scene's time 0: fly back to where the run begins.
        centre = place + matrix(turn) @ body.inertia.centre_m
        start = RigidState(centre, turn, np.array(spec.speed_m_s), np.array(spec.spin_rad_s))
        flown = fly(start, np.array([begin_s]), tensor=body.inertia.tensor, gravity=gravity)
        begin = RigidState(*(part[0] for part in flown))
    return Subject(body.name, modes, body.inertia, place, turn, gravity, begin_s, begin)


def _track(subject: Subject, course: Course, twists: Array) -> BodyTrack:
    return BodyTrack(
        name=subject.name,
        modes=subject.modes,
        segments=course.segments,
        free=subject.free,
        inertia=subject.inertia,
        place_m=subject.place_m,
        turn=subject.turn,
        gravity=subject.gravity,
        twists=twists,
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
