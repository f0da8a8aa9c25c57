"""Listen to a take or a scene: quiet at first, peaks limited.

The start level and the ceiling follow common practice for auditioning impulses on headphones; what is safe for a
listener depends on the equipment, and local rules on noise come first.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import TakeError

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path
    from types import ModuleType

    from numpy.typing import NDArray

    from resonate.scene.model import Scene

    Array = NDArray[np.float64]

#: Loudest sample that leaves for the device, dBFS, before ``gain_db``.
START_DB = -24.0
#: Nothing ever leaves above this, whatever the gain, dBFS.
CEILING_DB = -12.0
_RAMP_S = 0.03
_STEREO = 2


def guarded(samples: Array, rate_hz: int, *, gain_db: float) -> Array:
    """Samples (n, c) brought to the start level, then softly kept under the ceiling.

    Parameters
    ----------
    samples : Array
        (n, c) of any scale; what is not a finite number is silence.
    rate_hz : int
        Sample rate.
    gain_db : float
        Louder than the start level.

    Returns
    -------
    Array
        (n, at most 2) float, at most ``CEILING_DB``; the first 30 ms fade in from silence.
    """
    finite = np.where(np.isfinite(samples), samples, 0.0)[:, :_STEREO]
    peak = float(np.max(np.abs(finite), initial=0.0))
    # Divided before anything else: the level of very small samples would be too large a number.
    even = finite / peak if peak > 0.0 else finite
    ramp = np.minimum(1.0, np.arange(len(even)) / (_RAMP_S * rate_hz))
    ceiling = 10.0 ** (CEILING_DB / 20.0)
    level = 10.0 ** ((START_DB + gain_db) / 20.0)
    return np.asarray(ceiling * np.tanh(even * ramp[:, None] * (level / ceiling)))


def _device() -> ModuleType:
    try:
        import sounddevice
    except OSError as error:
        raise TakeError(
            what=f"no sound system: {error}",
            where="play",
            fix="install PortAudio (Debian and Ubuntu: apt install libportaudio2; Fedora: dnf install portaudio; "
            "macOS: brew install portaudio), or open the WAV of a take in any player",
        ) from None
    module: ModuleType = sounddevice
    try:
        module.query_devices(kind="output")
    except (module.PortAudioError, ValueError) as error:
        raise _silent(error) from None
    return module


def _silent(error: Exception) -> TakeError:
    return TakeError(
        what=f"no sound device takes the sound: {error}",
        where="play",
        fix="connect or choose an output device, or open the WAV of a take in any player",
    )


def _samples_of_scene(scene: Scene, progress: Callable[[str], None]) -> tuple[Array, int]:
    from resonate.modes.store import default_store
    from resonate.sound.render import render
    from resonate.take.make import run_scene, transfers_of
    from resonate.take.survey import placing

    ran = run_scene(scene, store=default_store(), progress=progress)
    with placing(scene):
        sound = render(ran.record, transfers_of(scene, ran), scene)
    return sound.pressure_pa, int(sound.rate_hz)


def _samples_of_take(folder: Path) -> tuple[Array, int]:
    import soundfile

    # A renamed folder keeps the names of its files.
    waves = sorted(folder.glob("*.wav"))
    if len(waves) != 1:
        found = "no WAV" if not waves else f"{len(waves)} WAV files"
        raise TakeError(
            what=f"the folder holds {found}",
            where=str(folder),
            fix='name the folder of a take that was made with files = ["wav", ...], or a scene',
        )
    try:
        samples, rate = soundfile.read(waves[0], always_2d=True, dtype="float64")
    except (soundfile.SoundFileError, OSError) as error:
        raise TakeError(
            what=f"the sound cannot be read: {error}",
            where=str(waves[0]),
            fix="make the take again with --replace",
        ) from error
    return samples, int(rate)


def play_path(path: Path, *, gain_db: float, progress: Callable[[str], None]) -> None:
    """Play a take, or run a scene and play it without writing anything.

    Raises
    ------
    TakeError
        If there is nothing to play, no sound system, or no device.
    """
    from resonate.scene.read import read_scene

    if not path.exists():
        raise TakeError(
            what="there is no such take or scene", where=str(path), fix="name the folder of a take, or a scene file"
        )
    # What is cheap to find out comes first: a file that does not read, then a machine that cannot play.
    if path.is_dir():
        samples, rate_hz = _samples_of_take(path)
        device = _device()
    else:
        scene = read_scene(path)
        device = _device()
        samples, rate_hz = _samples_of_scene(scene, progress)
    progress("playing")
    try:
        device.play(guarded(samples, rate_hz, gain_db=gain_db), rate_hz, blocking=True)
    except device.PortAudioError as error:
        raise _silent(error) from None
