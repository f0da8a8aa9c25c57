"""Writes the manifest: what was asked, what came out, and the hashes of what was written.

No dates and no places of this machine go into it: the same scene gives the same bytes.
"""

from __future__ import annotations

import hashlib
import json
import math
import platform
from dataclasses import asdict, dataclass
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING, Any, Final

from resonate import __version__

if TYPE_CHECKING:
    from collections.abc import Sequence
    from pathlib import Path

    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet
    from resonate.motion.channels import BodyCurves, Curves
    from resonate.run.record import Record
    from resonate.scene.clock import Clock
    from resonate.scene.model import Scene
    from resonate.sound.levels import Levels
    from resonate.take.excerpt import Excerpt

    Json = dict[str, Any]  # a JSON object holds any JSON value

#: Peaks above this call for a word of caution, dB re 20 uPa.
LOUD_DB: Final = 120.0
_LIBRARIES: Final = ("numpy", "scipy", "numba")
_PURPOSE: Final = (
    "Material and contact data are for making pictures and sound, not for engineering safety; "
    "for that, licensed practice and local codes decide."
)


@dataclass(frozen=True, slots=True)
class Arrivals:
    """When the microphones hear the bodies.

    ``removed_s`` the delay that was taken out of every channel; ``late_s`` by body and microphone,
    how much later than the motion the sound of its mass centre still comes; ``reach_s`` by body, how much
    earlier or later its ends may be heard.
    """

    removed_s: float
    late_s: dict[str, dict[str, float]]
    reach_s: dict[str, float]


@dataclass(frozen=True, slots=True)
class Heard:
    """The sound as delivered: ``levels``, ``channels`` in order, ``arrivals``, ``excerpts`` of the run's pressure."""

    levels: Levels
    channels: tuple[str, ...]
    arrivals: Arrivals
    excerpts: tuple[Excerpt, ...]


def write_manifest(
    path: Path,
    scene: Scene,
    record: Record,
    *,
    bodies: Sequence[Body],
    modes: Sequence[ModeSet],
    heard: Heard | None,
    curves: Curves | None,
    warnings: Sequence[str],
    files: Sequence[Path],
) -> None:
    """Write the manifest of a take.

    Parameters
    ----------
    path : Path
        Where to write.
    scene, record : Scene, Record
        What was asked and what the run left behind.
    bodies, modes : Sequence
        In the order of the scene.
    heard : Heard, optional
        Levels and arrivals; None when no sound was made.
    curves : Curves, optional
        What the motion files show; None when none was made.
    warnings : Sequence[str]
        What a person should know, in order.
    files : Sequence[Path]
        The files already written; they are hashed here.
    """
    shown = {body.name: body for body in curves.bodies} if curves is not None else {}
    manifest = {
        "format": 1,
        "title": scene.title,
        "seed": scene.take.seed,
        "draws": {},
        "scene": {
            "text": scene.text,
            "text_sha256": _sha256(scene.text.encode("utf-8")),
            "digest": scene.digest,
        },
        "versions": versions(),
        "clock": clock_facts(scene.clock),
        "tables": {"up": scene.picture.up, "unit": scene.picture.unit},
        "sound": None if heard is None else _sound_facts(heard, scene),
        "bodies": [
            _body_facts(body, found, shown.get(body.name)) for body, found in zip(bodies, modes, strict=True)
        ],
        "events": len(record.events),
        "ledger": ledger_facts(record),
        "warnings": list(warnings),
        "cautions": cautions(heard),
        "files": [_file_facts(file) for file in sorted(files, key=lambda file: file.name)],
    }
    text = json.dumps(_finite(manifest), indent=2, sort_keys=True, ensure_ascii=False, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8", newline="\n")


def versions() -> dict[str, str]:
    """Name what made the take: this package, the interpreter and the numerical libraries."""
    return {
        "resonate": __version__,
        "python": platform.python_version(),
        **{name: _version_of(name) for name in _LIBRARIES},
    }


@cache
def _version_of(name: str) -> str:
    try:
        return version(name)
    except PackageNotFoundError:
        return "absent"


def clock_facts(clock: Clock) -> Json:
    """Every number that places the files in time; exact ones as fractions in text."""
    return {
        "frame_rate": str(clock.frame.fraction),
        "drop_frame": clock.frame.drop,
        "frames": clock.frame_count,
        "handles": clock.handles,
        "start_frame": clock.start_frame,
        "start_is_number": clock.numbered,
        "start_timecode": clock.timecode(clock.handles),
        "frame_0": {"label": clock.label(0), "timecode": clock.timecode(0), "scene_s": str(clock.begin)},
        "sample_rate_hz": clock.sample_rate,
        "samples": clock.sample_count,
        "time_reference": clock.time_reference,
        "time_reference_rest": str(clock.time_reference_rest),
    }


def _sound_facts(heard: Heard, scene: Scene) -> Json:
    sound = scene.sound
    return {
        "channels": list(heard.channels),
        "format": sound.format,
        "dither": sound.dither and sound.format != "float",
        "level": {"kind": sound.level.kind, "db": sound.level.db if sound.level.kind != "physical" else None},
        "full_scale_pa": heard.levels.full_scale_pa,
        "levels": asdict(heard.levels),
        "delay": {
            "kept": sound.delay,
            "removed_s": heard.arrivals.removed_s,
            "late_s": heard.arrivals.late_s,
            "reach_s": heard.arrivals.reach_s,
        },
        "excerpts": [asdict(excerpt) for excerpt in heard.excerpts],
    }


def _body_facts(body: Body, modes: ModeSet, shown: BodyCurves | None) -> Json:
    return {
        "name": body.name,
        "family": body.family,
        "mass_kg": body.inertia.mass_kg,
        "modes": {
            "heard": modes.heard,
            "heard_hz": modes.heard_hz,
            "solved": modes.count,
            "solved_hz": modes.solved_hz,
            "swings": modes.swing,
            "largest_residual": max((float(value) for value in modes.residual), default=0.0),
        },
        "shown": None if shown is None else _shown_facts(shown),
    }


def _shown_facts(shown: BodyCurves) -> Json:
    return {
        "ring": shown.ring,
        "exaggerated": shown.exaggerated,
        "enlarged": shown.gain,
        "note": shown.note,
        "shapes": [
            {"name": label, "kind": kind, "true_hz": float(true), "shown_hz": float(slow)}
            for label, kind, true, slow in zip(
                shown.labels, shown.kinds, shown.true_hz, shown.shown_hz, strict=True
            )
        ],
    }


def ledger_facts(record: Record) -> Json:
    """Entries of the energy ledger, J, and the residual as a share of its scale."""
    entries = {name: float(value) for name, value in asdict(record.ledger).items()}
    scale = entries["scale"]
    return {"joules": entries, "residual_share": abs(entries["residual"]) / scale if scale > 0.0 else 0.0}


def cautions(heard: Heard | None) -> list[str]:
    """Say what a person should be warned of before listening or relying on the data."""
    found = [_PURPOSE]
    if heard is not None and heard.levels.peak_spl_db > LOUD_DB:
        found.append(
            f"The sound peaks at {heard.levels.peak_spl_db:.1f} dB re 20 uPa at a microphone. "
            "Impact sound at such levels can harm hearing: play it back far lower. "
            "This is a usual caution, not a limit value; local codes decide."
        )
    return found


def _file_facts(file: Path) -> Json:
    data = hashlib.sha256()
    with file.open("rb") as stream:
        while block := stream.read(1 << 20):
            data.update(block)
    return {"name": file.name, "bytes": file.stat().st_size, "sha256": data.hexdigest()}


def _sha256(data: bytes) -> str:
    return hashlib.sha256(data).hexdigest()


def _finite(value: object) -> object:
    # JSON has no infinity: silence has the level null.
    if isinstance(value, dict):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
