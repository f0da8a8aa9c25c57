"""From a scene to a take: one run, and every file from its states."""

from __future__ import annotations

import dataclasses
from pathlib import Path
from typing import TYPE_CHECKING, Final

from resonate.take.folder import building, safe_name

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from resonate.body.body import Body
    from resonate.field.transfer import Transfer
    from resonate.modes.modeset import ModeSet
    from resonate.modes.store import ModeStore
    from resonate.run.record import Record
    from resonate.scene.model import Scene
    from resonate.take.folder import Building

    Progress = Callable[[str], None]

#: What follows NAME in the name of each file.
ENDINGS: Final = {
    "wav": ".wav",
    "curves": ".curves.csv",
    "events": ".events.csv",
    "glb": ".glb",
    "manifest": ".json",
}


def make_take(
    scene: Scene,
    *,
    out: Path | str,
    replace: bool = False,
    store: ModeStore | None = None,
    progress: Progress | None = None,
) -> Path:
    """Run a scene once and write its take.

    Parameters
    ----------
    scene : Scene
        What to make; ``scene.take.files`` says which files.
    out : Path or str
        Folder that holds takes; made if it is missing.
    replace : bool
        Whether a take of the same name gives way once the new one is whole.
    store : ModeStore, optional
        Where solved modes are kept.
    progress : Callable[[str], None], optional
        Told in a few words what begins, and every warning as ``warning: ...``.

    Returns
    -------
    Path
        The folder of the take.

    Raises
    ------
    TakeError
        If the take cannot be written or would clip. Nothing is left behind.
    ResonateError
        Whatever a body, its modes or the run refuse.
    """
    from resonate.take.survey import placing

    name = safe_name(scene.title)
    tell = progress or _say_nothing
    with building(Path(out), name, digest=scene.digest, replace=replace) as place:
        ran = run_scene(scene, store=store, progress=tell)
        with placing(scene):
            _write_files(place, scene, ran, store=store, progress=tell)
    return Path(out) / name


def _say_nothing(_: str) -> None:
    """Tell nobody."""


@dataclasses.dataclass(frozen=True, slots=True)
class Ran:
    """One run: ``bodies`` and ``modes`` in the order of the scene, and the ``record``."""

    bodies: tuple[Body, ...]
    modes: tuple[ModeSet, ...]
    record: Record


def run_scene(scene: Scene, *, store: ModeStore | None = None, progress: Progress = _say_nothing) -> Ran:
    """Build the bodies, find their modes and run; nothing is rendered or written."""
    from resonate.run.engine import run
    from resonate.take.survey import placing, survey

    bodies = survey(scene)
    with placing(scene):
        modes = solve_bodies(bodies, store=store, progress=progress)
        progress("running")
        return Ran(bodies, modes, run(scene, bodies, modes, store=store))


def solve_bodies(bodies: Sequence[Body], *, store: ModeStore | None, progress: Progress) -> tuple[ModeSet, ...]:
    """Find the modes of bodies in their order; those that are alike are solved once."""
    from resonate.modes.solve import solve_modes, solved_hz
    from resonate.modes.store import modes_key
    from resonate.take.survey import check_dampers

    modes: list[ModeSet] = []
    known: dict[str, ModeSet] = {}
    for body in bodies:
        progress(f"modes of {body.name}")
        key = modes_key(body, solved_hz=solved_hz(body))
        if key not in known:
            known[key] = solve_modes(body, store=store)
            check_dampers(body, known[key])
        modes.append(_renamed(known[key], body.name))
    return tuple(modes)


def _renamed(modes: ModeSet, name: str) -> ModeSet:
    if modes.body == name:
        return modes
    notes = tuple(note.replace(f"body {modes.body!r}", f"body {name!r}") for note in modes.warnings)
    return dataclasses.replace(modes, body=name, warnings=notes)


def _write_files(
    place: Building, scene: Scene, ran: Ran, *, store: ModeStore | None, progress: Progress
) -> None:
    from resonate.field.doubts import told
    from resonate.motion.curves import curves as trace
    from resonate.take.deliver import write_sound
    from resonate.take.glb import write_glb
    from resonate.take.manifest import write_manifest
    from resonate.take.tables import write_curves, write_events

    record = ran.record
    path = {kind: place.file(ENDINGS[kind]) for kind in scene.take.files}
    warnings = [*_midnight(scene), *_notes(ran.modes, store), *record.warnings]
    heard = None
    if "wav" in path:
        progress("sound")
        transfers = transfers_of(scene, ran)
        warnings.extend(told([doubt for transfer in transfers for doubt in transfer.doubts]))
        heard = write_sound(path["wav"], scene, record, transfers)
    motion = None
    if "curves" in path or "glb" in path:
        progress("motion")
        motion = trace(record, ran.bodies, scene)
    if motion is not None and "curves" in path:
        write_curves(path["curves"], motion, scene)
    if motion is not None and "glb" in path:
        write_glb(path["glb"], motion, scene, record)
    if "events" in path:
        write_events(path["events"], record, scene)
    warnings = list(dict.fromkeys(warnings))
    # Told, but not written: trouble with the store.
    for note in dict.fromkeys([*(note for found in ran.modes for note in found.warnings), *warnings]):
        progress(f"warning: {note}")
    if "manifest" in path:
        write_manifest(
            path["manifest"],
            scene,
            record,
            bodies=ran.bodies,
            modes=ran.modes,
            heard=heard,
            curves=motion,
            warnings=warnings,
            files=[file for kind, file in path.items() if kind != "manifest"],
        )


def transfers_of(scene: Scene, ran: Ran) -> list[Transfer]:
    """Radiation of every body into the air of the scene."""
    from resonate.field.air import Air
    from resonate.field.transfer import transfer_for

    air = Air.of(scene.world)
    return [transfer_for(body, found, air) for body, found in zip(ran.bodies, ran.modes, strict=True)]


def _midnight(scene: Scene) -> list[str]:
    clock = scene.clock
    if not clock.begins_the_day_before:
        return []
    return [
        f"the handles reach back across midnight: frame 0 is {clock.timecode(0)}, and TimeReference counts from "
        "the midnight before"
    ]


def _notes(modes: Sequence[ModeSet], store: ModeStore | None) -> list[str]:
    # Trouble with the store is the machine's, not the take's: it must not change a byte.
    machine = str(store.path) if store is not None else None
    return [note for found in modes for note in found.warnings if machine is None or machine not in note]
