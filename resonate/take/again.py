"""Runs the scene of a take again and lays the two side by side."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

import numpy as np

from resonate.errors import ResonateError
from resonate.take.make import run_scene, transfers_of
from resonate.take.readback import read_table
from resonate.take.report import Finding, equal, same_hash, within
from resonate.take.sync import sync_by_correlation

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from resonate.modes.store import ModeStore
    from resonate.scene.model import Scene
    from resonate.take.make import Ran

    Json = dict[str, Any]  # a JSON object holds any JSON value

#: The sound may be off the run's own states by this much.
SYNC_LIMIT_SAMPLES: Final = 0.5
_AGAIN: Final = "the file was changed or damaged; make the take again with --replace"


def again_findings(manifest_file: Path, manifest: Json, *, store: ModeStore | None) -> Iterator[Finding]:
    """Run the scene that the manifest holds, and compare contacts and sound with what was written.

    Parameters
    ----------
    manifest_file : Path
        The manifest; the other files lie beside it.
    manifest : dict
        What it says.
    store : ModeStore, optional
        Where solved modes are kept.
    """
    from resonate.scene.read import parse_scene

    try:
        scene = parse_scene(manifest["scene"]["text"], where=f"{manifest_file.name}: scene")
        digest = scene.digest
    except ResonateError as error:
        digest = f"refused: {error.faults[0].what}"
    yield same_hash(
        "the scene means what it meant",
        digest,
        manifest["scene"]["digest"],
        where=manifest_file.name,
        fix="check with the version and the presets that made the take, or make it again",
    )
    if digest == manifest["scene"]["digest"]:
        yield from _compare(manifest_file, scene, store=store)


def _compare(manifest_file: Path, scene: Scene, *, store: ModeStore | None) -> Iterator[Finding]:
    ran = run_scene(scene, store=store)
    clock, stem = scene.clock, manifest_file.name.removesuffix(".json")
    events_file = manifest_file.with_name(f"{stem}.events.csv")
    if events_file.is_file():
        written = read_table(events_file).numbers("begin_s")
        found = np.array([event.begin_s - clock.begin_s for event in ran.record.events])
        yield equal("contacts of a second run", len(written), len(found), where=events_file.name, fix=_AGAIN)
        if len(written) == len(found):
            late = float(np.max(np.abs(written - found), initial=0.0)) * clock.sample_rate
            yield within(
                "contacts against a second run",
                late,
                SYNC_LIMIT_SAMPLES,
                unit="samples",
                where=events_file.name,
                fix=_AGAIN,
            )
    sound_file = manifest_file.with_name(f"{stem}.wav")
    if sound_file.is_file():
        yield from _compare_sound(sound_file, scene, ran)


def _compare_sound(sound_file: Path, scene: Scene, ran: Ran) -> Iterator[Finding]:
    import soundfile

    from resonate.sound.render import render

    samples, rate_hz = soundfile.read(sound_file, always_2d=True)
    reference = render(ran.record, transfers_of(scene, ran), scene)
    for channel, name in enumerate(reference.channel_names):
        wave, again = samples[:, channel], reference.pressure_pa[:, channel]
        if not np.any(again):
            continue
        late = sync_by_correlation(wave, again, rate_hz=rate_hz) if np.any(wave) else float("nan")
        yield within(
            f"sound at {name} against a second run",
            late,
            SYNC_LIMIT_SAMPLES,
            unit="samples",
            where=sound_file.name,
            fix=_AGAIN,
        )
