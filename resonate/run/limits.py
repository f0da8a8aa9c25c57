"""Where a run leaves what linear vibration can tell: said with numbers, never silently."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet
    from resonate.run.record import Event, Ledger
    from resonate.run.track import BodyTrack

# Mobility of a spot, against that of a particle of the body's mass, below which it is held.
HELD = 1e-6
# Turning faster than this share of the first mode splits and shifts it.
SPIN = 0.02
# Share of the energy of its strikes that may go where nothing is heard before it is said.
UNHEARD = 0.01
# A supported body may turn by so much, rad, and its centre move by this share of its size, and still be where it was.
TURNS, STRAYS = 0.1, 0.1
_LOOKS = 256
_POINTS = 150


def _bent(track: BodyTrack, body: Body, strike: int) -> float:
    """Largest bending, m, soon after a strike: what is left of the motion when the body's sway is taken off."""
    modes = track.modes
    parts = [part for part in track.segments if strike in part.contacts]
    assert parts[0].rows is not None  # noqa: S101 (contact segments have rows)
    row = parts[0].rows[parts[0].contacts.index(strike), : modes.count]
    swing = np.sqrt((modes.omega - modes.decay.total) * (modes.omega + modes.decay.total))
    # No mode can move more than it did, and what all forces of these segments give it.
    most = np.abs(parts[0].z[: modes.count])
    for part in parts:
        if part.rows is not None and part.force_n is not None:
            most += np.abs(part.rows[:, : modes.count]).T @ np.sum(part.force_n, axis=1) * part.step_s
    if float(np.abs(row) @ (most / swing)) <= body.linear_reach_m:
        return 0.0
    times = parts[0].begin_s + np.linspace(0.0, 2.0 / float(modes.frequency_hz[0]), _LOOKS)
    q = track.modal(times).imag / swing[:, None]
    moved = np.abs(row @ q)
    if float(moved.max()) <= body.linear_reach_m:
        return 0.0
    points = body.surface.points_m
    points = points[:: max(1, len(points) // _POINTS)]
    field = np.asarray(body.probe(points) @ (modes.shape @ q[:, int(np.argmax(moved))]))
    arms = points - body.inertia.centre_m
    # Small rigid motions of the points: three shifts, three turns.
    turns = [np.cross(axis, arms) for axis in np.eye(3)]
    sway = np.stack([np.broadcast_to(axis, arms.shape) for axis in np.eye(3)] + turns, axis=2).reshape(-1, 6)
    left = field - sway @ np.linalg.lstsq(sway, field, rcond=None)[0]
    return float(np.linalg.norm(left.reshape(-1, 3), axis=1).max())


def beyond_kept(modes: ModeSet, ledger: Ledger) -> tuple[str, ...]:
    """Warn about energy that went into modes which are not kept."""
    if not modes.count or ledger.lost_truncation <= UNHEARD * ledger.scale:
        return ()
    share, top_hz = ledger.lost_truncation / ledger.scale, float(modes.frequency_hz[-1])
    return (
        f"body {modes.body!r}: {100.0 * share:.0f} % of the energy of its strikes goes into modes above {top_hz:.0f} "
        "Hz, which it feels but nobody hears: raise modes.most to hear them",
    )


def beyond_rest(track: BodyTrack, body: Body, *, end_s: float) -> tuple[str, ...]:
    """Warn when a supported body leaves the place where its supports are."""
    if track.free or not track.moves:
        return ()
    times = np.append(track.begins_s, max(end_s, float(track.begins_s[-1])))
    twist = np.abs(track.twists @ track.linear(times))
    angle = float(np.linalg.norm(twist[3:], axis=0).max())
    shift_m = float(np.linalg.norm(twist[:3], axis=0).max())
    far_m = STRAYS * float(np.ptp(body.surface.points_m, axis=0).max())
    if angle <= TURNS and shift_m <= far_m:
        return ()
    return (
        f"body {track.name!r}: its supports let it turn by {np.degrees(angle):.3g} deg (its centre goes {shift_m:.3g} "
        "m); this version has nothing to right or stop it, and contacts keep to where it was",
    )


def _on_what_is_held(track: BodyTrack, body: Body, events: Sequence[Event]) -> tuple[str, ...]:
    """Warn about strikes on a place that hardly moves: they bounce as from a wall and excite nothing."""
    notes = []
    for event in events:
        part = next(part for part in track.segments if event.strike in part.contacts)
        assert part.rows is not None  # noqa: S101 (contact segments have rows)
        row = part.rows[part.contacts.index(event.strike)]
        # A free particle of the body's mass would take 1/mass.
        if float(row @ row) * body.inertia.mass_kg < HELD:
            notes.append(
                f"body {track.name!r}: strike[{event.strike}] meets a place that is held and excites next to nothing: "
                "strike where the body can move"
            )
    return tuple(notes)


def beyond_linear(track: BodyTrack, body: Body, events: Sequence[Event]) -> tuple[str, ...]:
    """Warnings about deflection and spin."""
    notes: list[str] = []
    modes = track.modes
    if not modes.count:
        return ()
    notes.extend(_on_what_is_held(track, body, events))
    for event in events:
        most = _bent(track, body, event.strike)
        if most > body.linear_reach_m:
            notes.append(
                f"body {track.name!r}: strike[{event.strike}] deflects it by {1e3 * most:.3g} mm; above "
                f"{1e3 * body.linear_reach_m:.3g} mm its pitch would glide, which this linear model leaves out"
            )
    spins = [float(np.linalg.norm(s.rigid.spin_rad_s)) for s in track.segments if s.rigid is not None]
    fastest = max(spins, default=0.0)
    if fastest > SPIN * float(modes.omega[0]):
        notes.append(
            f"body {track.name!r}: it turns at {fastest:.3g} rad/s, {fastest / float(modes.omega[0]):.2g} of its first "
            f"mode; above {SPIN} the modes would shift, which is left out"
        )
    return tuple(notes)
