"""A commented scene to start from."""

from __future__ import annotations

from typing import TYPE_CHECKING

from resonate.errors import SceneError
from resonate.scene.names import choose
from resonate.scene.presets import data_dir

if TYPE_CHECKING:
    from pathlib import Path

_MOST_TITLE = 200

STARTER = """\
# A scene for resonate. Bare numbers are SI; text may carry a unit: "3 mm", "2.5 m/s", "20 degC".
# Right-handed, metres, y up. Every key is described in README.md.
title = "{title}"

[take]
length = "2 s"                 # what is delivered, without handles
seed = 1                       # dither; the same seed gives the same bytes

[picture]
rate = 24                      # 24, 25, 30, 48, 50, 60, "24000/1001", "30000/1001 drop", ...
start = "01:00:00:00"          # timecode of the frame after the handles, or a frame number
handles = 8                    # frames before and after

[sound]
rate = "48 kHz"
format = "24-bit"
level = {{ peak = "-6 dB" }}     # or "physical": full_scale is then the pressure of 0 dBFS

[[body]]
name = "plank"
shape = "bar"                  # bar, tube, string, membrane, plate
length = "320 mm"
width = "38 mm"
height = "14 mm"
material = "rosewood"          # see: resonate presets materials
place = [0, 1, 0]              # where its left end is, in the world
# Two soft feet near the nodes of the first mode.
support = [
  {{ where = {{ point = ["72 mm", "-7 mm", 0] }}, hold = {{ spring = "60 kN/m", damper = "6 N s/m" }} }},
  {{ where = {{ point = ["248 mm", "-7 mm", 0] }}, hold = {{ spring = "60 kN/m", damper = "6 N s/m" }} }},
]

[[strike]]
body = "plank"
time = "0.5 s"                 # first touch; frames and timecode work too: "12 f", "01:00:00:12"
spot = {{ fraction = [0.45, 0.5] }}
striker = "wooden mallet"      # see: resonate presets strikers
speed = "1.5 m/s"

[[mic]]
name = "near"
place = ["160 mm", "1.6 m", "0.5 m"]
"""


def examples() -> tuple[str, ...]:
    """Names of the example scenes that travel with the package."""
    found = (entry.name for entry in data_dir("examples").iterdir())
    return tuple(sorted(name.removesuffix(".toml") for name in found if name.endswith(".toml")))


def write_starter(name: Path, *, origin: str | None = None) -> Path:
    """Write the starter as ``name`` (``.toml`` is added) and return its path.

    Parameters
    ----------
    name : Path
        Where to write.
    origin : str, optional
        The example to copy, word for word; the starter without it.

    Raises
    ------
    SceneError
        If there is no such example, the name is none, or the file exists or cannot be written.
    """
    if name.name in ("", ".."):
        raise SceneError(what=f"{str(name)!r} names no file", where="NAME", fix="give the scene a name, such as quay")
    path = name if name.suffix == ".toml" else name.with_name(name.name + ".toml")
    text = _text(path.stem) if origin is None else _example(origin)
    try:
        with path.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError:
        raise SceneError(
            what="a file of this name exists and is kept", where=str(path), fix="choose another name"
        ) from None
    except OSError as error:
        raise SceneError(
            what=f"cannot be written: {error.strerror}",
            where=str(path),
            fix="choose a folder that exists and may be written to",
        ) from None
    return path


def _text(title: str) -> str:
    plain = "".join(letter for letter in title if letter.isprintable()).replace("\\", " ").replace('"', "'")
    return STARTER.format(title=plain.strip()[:_MOST_TITLE] or "take")


def _example(origin: str) -> str:
    known = examples()
    name = origin.removesuffix(".toml")
    if name not in known:
        raise SceneError(what=f"{origin!r} is not an example", where="--from", fix=choose(name, known))
    return (data_dir("examples") / f"{name}.toml").read_text(encoding="utf-8")
