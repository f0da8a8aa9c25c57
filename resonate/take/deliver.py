"""From a record to the delivered wave: radiation, levels, header, samples."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Final

import numpy as np

from resonate.take.chunks import Cue, Heading, Loudness, Slate
from resonate.take.excerpt import excerpts_of
from resonate.take.manifest import Arrivals, Heard
from resonate.take.quantise import room
from resonate.take.tables import event_sample, file_time
from resonate.take.wave import write_wave

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from numpy.typing import NDArray

    from resonate.field.transfer import Transfer
    from resonate.run.record import Record
    from resonate.scene.model import LevelSpec, Scene
    from resonate.sound.levels import Levels

    Array = NDArray[np.float64]

# Keeps the dither apart from everything else that the seed of a scene may feed.
_DITHER_STREAM: Final = 0x64697468


def write_sound(path: Path, scene: Scene, record: Record, transfers: Sequence[Transfer]) -> Heard:
    """Render a record at the microphones of a scene and write the wave file.

    Parameters
    ----------
    path : Path
        Where to write.
    scene : Scene
        Microphones, clock, format and level.
    record : Record
        What the run left behind.
    transfers : Sequence[Transfer]
        Radiation of every body, in the order of the record.

    Returns
    -------
    Heard
        Levels before rounding, channels and arrival times.

    Raises
    ------
    TakeError
        If the sound would clip.
    """
    from resonate.sound.levels import deliver_level, measure
    from resonate.sound.render import render

    sound = render(record, transfers, scene)
    delivered = deliver_level(sound, _level(scene), full_scale_pa=scene.sound.full_scale_pa)
    levels = measure(delivered)
    write_wave(
        path,
        delivered.samples,
        rate_hz=scene.clock.sample_rate,
        sample_format=scene.sound.format,
        heading=heading(scene, record, levels),
        rng=dither_source(scene) if _dithers(scene) else None,
    )
    late = arrivals(scene, record, transfers)
    excerpts = excerpts_of(
        sound.pressure_pa,
        _moments_s(scene, record, late),
        rate_hz=scene.clock.sample_rate,
        channels=sound.channel_names,
    )
    return Heard(levels, sound.channel_names, late, excerpts)


def _moments_s(scene: Scene, record: Record, late: Arrivals) -> Array:
    # File time at which every contact reaches every microphone (contacts, microphones).
    begins = [float(file_time(event.begin_s, scene.clock)) for event in record.events]
    rows = [
        [begin + late.late_s[event.body][mic.name] for mic in scene.mics]
        for begin, event in zip(begins, record.events, strict=True)
    ]
    return np.array(rows, dtype=np.float64).reshape(len(rows), len(scene.mics))


def _dithers(scene: Scene) -> bool:
    return scene.sound.dither and scene.sound.format != "float"


def _level(scene: Scene) -> LevelSpec:
    # A peak of 0 dB means the largest code, which in integers lies a hair below full scale.
    level = scene.sound.level
    most = room(scene.sound.format, dither=_dithers(scene))
    if level.kind == "physical" or not math.isfinite(most):
        return level
    # A whisker more, so that rounding of the gain does not reach the next code.
    return level.model_copy(update={"db": min(level.db, 20.0 * math.log10(most) - 1e-9)})


def dither_source(scene: Scene) -> np.random.Generator:
    """Make the generator of the dither of a scene from its seed and nothing else."""
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence([scene.take.seed, _DITHER_STREAM])))


def heading(scene: Scene, record: Record, levels: Levels) -> Heading:
    """Compose what the wave file of a scene says about itself."""
    clock = scene.clock
    rate = clock.frame.fraction
    cues = []
    for number, event in enumerate(record.events, start=1):
        sample = event_sample(event, clock)
        if sample is not None:
            cues.append(Cue(sample, f"{number} {event.kind} {event.body} by {event.other}"))
    return Heading(
        description=f"{scene.title} | full scale {levels.full_scale_pa:.6g} Pa | "
        f"frame 0 at {clock.timecode(0)}, {clock.frame} frames a second",
        reference=scene.digest[:32],
        time_reference=clock.time_reference,
        loudness=Loudness(
            integrated_lufs=levels.integrated_lufs,
            true_peak_dbtp=levels.true_peak_dbtp,
            momentary_lufs=levels.momentary_lufs,
        ),
        cues=tuple(sorted(cues, key=lambda cue: cue.sample)),
        slate=Slate(
            project=scene.title,
            take=scene.digest[:12],
            frame_rate=f"{rate.numerator}/{rate.denominator}",
            drop=clock.frame.drop,
            tracks=tuple(mic.name for mic in scene.mics),
        ),
    )


def arrivals(scene: Scene, record: Record, transfers: Sequence[Transfer]) -> Arrivals:
    """How late every microphone hears every body, how far its sound is spread, and the delay taken out of all."""
    from resonate.field.air import Air
    from resonate.sound.hearing import arrivals_s

    late = arrivals_s(record.bodies, scene)
    names = tuple(mic.name for mic in scene.mics)
    centre_m = record.bodies[0].pose(np.zeros(1))[0][0]
    speed_m_s = Air.of(scene.world).speed_m_s
    travel_s = float(np.linalg.norm(np.asarray(scene.mics[0].place_m) - centre_m)) / speed_m_s
    return Arrivals(
        removed_s=0.0 if scene.sound.delay else travel_s - float(late[0, 0]),
        late_s={
            track.name: {name: float(value) for name, value in zip(names, row, strict=True)}
            for track, row in zip(record.bodies, late, strict=True)
        },
        reach_s={
            track.name: float(transfer.radius_m) / speed_m_s
            for track, transfer in zip(record.bodies, transfers, strict=True)
        },
    )
