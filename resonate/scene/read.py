"""Reads a scene file: text in, frozen scene out, or every fault of the file at once."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path as FilePath
from typing import TYPE_CHECKING, Any, Final

from resonate.errors import SceneError
from resonate.scene.bodies import default_spot
from resonate.scene.check import check_scene, check_spot, check_strike
from resonate.scene.clock import Clock
from resonate.scene.faults import Faults, keys_of
from resonate.scene.happenings import MicSpec, SpotSpec, StrikeSpec
from resonate.scene.later import refuse_keys, refuse_tables
from resonate.scene.locate import Locator
from resonate.scene.matter import StrikerSpec
from resonate.scene.model import BodySpec, Scene
from resonate.scene.names import choose, listing
from resonate.scene.refused import Path, shown
from resonate.scene.resolve import default_microphone, digest_of
from resonate.scene.settings import LevelSpec, PictureSpec, SoundSpec, TakeSpec, WorldSpec
from resonate.scene.spell import ANY_SHAPE, read_body, read_striker

if TYPE_CHECKING:
    from resonate.scene.moments import Picture

_TOP: Final = ("title", "take", "picture", "sound", "world", "body", "strike", "mic")
# Stands in for a refused striker, so that the rest of the strike is still checked.
_ANY_STRIKER: Final = StrikerSpec(mass_kg=0.01, tip_radius_m=0.01, tip_young_pa=1e9, restitution=0.5)
_BIGGEST_FILE: Final = 8 * 2**20  # bytes; a scene is written by hand


def read_scene(path: FilePath | str) -> Scene:
    """Read a scene file.

    Parameters
    ----------
    path : Path or str
        A TOML 1.0 file in UTF-8.

    Returns
    -------
    Scene
        Presets filled in, SI units, times in seconds after ``start``.

    Raises
    ------
    SceneError
        With every fault of the file: what, ``file:line: key path``, and how to fix it.
    """
    file = FilePath(path)
    where = str(path)
    try:
        if file.is_dir():
            raise SceneError(what="this is a folder, not a scene file", where=where, fix="name a .toml file")
        if file.stat().st_size > _BIGGEST_FILE:
            raise SceneError(what="the file is larger than 8 MB", where=where, fix="name a scene file")
        text = file.read_bytes().decode("utf-8-sig")
    except FileNotFoundError as error:
        raise SceneError(what="there is no such file", where=where, fix="check the path") from error
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        raise SceneError(
            what=f"byte {error.object[error.start]:#04x} is not UTF-8",
            where=f"{where}:{line}",
            fix="save the file as UTF-8",
        ) from error
    except (OSError, ValueError) as error:
        raise SceneError(
            what=f"the file cannot be read: {error}", where=where, fix="check the path"
        ) from error
    return parse_scene(text, where=where)


def parse_scene(text: str, where: str = "scene.toml") -> Scene:
    """Read a scene from text; ``where`` names it in errors.

    Raises
    ------
    SceneError
        With every fault of the text.

    Examples
    --------
    >>> scene = parse_scene('''
    ... [take]
    ... length = "1 s"
    ... [[body]]
    ... name = "tray"
    ... shape = "plate"
    ... outline = {rectangle = ["0.4 m", "0.3 m"]}
    ... thickness = "3 mm"
    ... material = "brass"
    ... ''')
    >>> scene.bodies[0].shape.thickness_m
    0.003
    """
    document = _load(text, where)
    faults = Faults(where, Locator(text))
    scene = _Reading(document, faults, where=where, text=text).scene()
    if faults or scene is None:
        raise SceneError(faults=faults.all)
    return scene


def _load(text: str, where: str) -> dict[str, Any]:
    if not text.strip():
        raise SceneError(
            what="the file is empty", where=f"{where}:1", fix='start one with "resonate new NAME"'
        )
    try:
        return tomllib.loads(text)
    except ValueError as error:  # also a number of thousands of digits
        message = str(error)
        found = re.search(r"\(at line (\d+), column \d+\)", message)
        line = int(found.group(1)) if found else len(text.splitlines())
        reason = message.partition(" (at ")[0]
        raise SceneError(
            what=f"not TOML: {reason}", where=f"{where}:{line}", fix="correct the line; text stands in quotes"
        ) from error
    except RecursionError as error:
        raise SceneError(
            what="the file is nested too deeply", where=f"{where}:1", fix="flatten it"
        ) from error


class _Reading:
    # One pass over one document; every method notes faults and goes on.

    def __init__(self, document: dict[str, Any], faults: Faults, *, where: str, text: str) -> None:
        self.document = refuse_tables(document, faults)
        self.faults = faults
        self.where = where
        self.text = text

    def scene(self) -> Scene | None:
        for key in self.document:
            if key not in _TOP:
                self.faults.unknown((key,), list(_TOP))
        title = self.title()
        picture = self.picture()
        counting = picture.counting if picture else None
        take = self.take(counting)
        sound = self.sound()
        world = self.settings("world", WorldSpec)
        clock = _clock(take, picture, sound)
        bodies = [read_body(item, ("body", place), self.faults) for place, item in self.rows("body")]
        if not self.document.get("body"):
            self.faults.add(
                (), what="no body in the scene", fix="add a [[body]] with name, shape and material"
            )
        strikes = [self.strike(item, place, bodies, counting, clock) for place, item in self.rows("strike")]
        mics = [self.mic(item, place) for place, item in self.rows("mic")]
        check_scene(clock, sound, bodies, mics, self.faults)
        if self.faults or not (take and picture and sound and world and clock and title):
            return None
        known = tuple(body for body in bodies if body is not None)
        parts: dict[str, Any] = {
            "title": title,
            "take": take,
            "picture": picture,
            "sound": sound,
            "world": world,
            "bodies": known,
            "strikes": tuple(strikes),
            "mics": tuple(mics) or (default_microphone(known[0]),),
            "clock": clock,
        }
        return Scene(**parts, digest=digest_of(parts), text=self.text, where=self.where)

    def rows(self, key: str) -> list[tuple[int, object]]:
        value = self.document.get(key, [])
        if not isinstance(value, list):
            self.faults.add(
                (key,), what=f"{key} is not a list of tables", fix=f"write [[{key}]] with two brackets"
            )
            return []
        return list(enumerate(value))

    def title(self) -> str | None:
        given = self.document.get("title", FilePath(self.where).stem)
        if not isinstance(given, str) or not given.strip() or not given.isprintable() or len(given) > 200:  # noqa: PLR2004
            self.faults.add(
                ("title",),
                what=f"{shown(given)} is not a title",
                fix="give one line of text, at most 200 characters",
            )
            return None
        return given.strip()

    def settings(self, key: str, model: type[Any], context: object = None) -> Any:  # noqa: ANN401
        given = self.document.get(key, {})
        table = self.faults.table(given, (key,), hint=f"begin it with [{key}]: {listing(keys_of(model))}")
        return None if table is None else self.faults.part(model, table, (key,), context=context)

    def picture(self) -> PictureSpec | None:
        part: PictureSpec | None = self.settings("picture", PictureSpec)
        return part

    def take(self, counting: Picture | None) -> TakeSpec | None:
        part: TakeSpec | None = self.settings("take", TakeSpec, counting)
        return part

    def sound(self) -> SoundSpec | None:
        given = self.document.get("sound", {})
        table = self.faults.table(
            given, ("sound",), hint=f"begin it with [sound]: {listing(keys_of(SoundSpec))}"
        )
        if table is None:
            return None
        table = refuse_keys(table, "sound", ("sound",), self.faults)
        if "level" in table:
            level = self.level(table["level"])
            if level is None:
                del table["level"]
            else:
                table["level"] = level
        return self.faults.part(SoundSpec, table, ("sound",))

    def level(self, value: object) -> LevelSpec | None:
        path: Path = ("sound", "level")
        if value == "physical":
            return LevelSpec()
        if isinstance(value, dict) and "peak" in value:
            return self.faults.part(LevelSpec, {"kind": "peak", **value}, path)
        self.faults.add(
            path, what=f"{shown(value)} is not a level", fix='write level = "physical" or {peak = "-6 dB"}'
        )
        return None

    def strike(
        self,
        value: object,
        place: int,
        bodies: list[BodySpec | None],
        counting: Picture | None,
        clock: Clock | None,
    ) -> StrikeSpec | None:
        path: Path = ("strike", place)
        table = self.faults.table(value, path, hint="begin it with [[strike]]")
        if table is None:
            return None
        parts = refuse_keys(table, "strike", path, self.faults)
        if "body index" in parts:
            self.faults.unknown((*path, "body index"), keys_of(StrikeSpec))
        index = self.body_index(parts, path)
        body = bodies[index] if index is not None and index < len(bodies) else None
        parts["body"] = body.name if body else "unknown"
        parts["body index"] = index or 0
        parts["spot"] = self.spot(parts.get("spot"), (*path, "spot"), body)
        if "striker" in parts:
            parts["striker"] = read_striker(parts["striker"], (*path, "striker"), self.faults) or _ANY_STRIKER
        strike = self.faults.part(
            StrikeSpec,
            parts,
            path,
            context=counting,
            instead={"time": 0, "speed": 1, "striker": _ANY_STRIKER},
        )
        check_strike(strike, place, clock, self.faults)
        return strike

    def body_index(self, parts: dict[str, Any], path: Path) -> int | None:
        rows = self.document.get("body")
        rows = rows if isinstance(rows, list) else []
        names = [row.get("name") if isinstance(row, dict) else None for row in rows]
        known = [name for name in names if isinstance(name, str)]
        if "body" not in parts:
            if len(rows) == 1:
                return 0
            self.faults.add((*path, "body"), what="body is missing", fix=f"name one of {listing(known)}")
            return None
        given = parts["body"]
        if isinstance(given, int) and not isinstance(given, bool) and 0 <= given < len(rows):
            return given
        if isinstance(given, str) and given.strip() in known:
            return names.index(given.strip())
        fix = choose(str(given), known) if known else "add a [[body]] of that name"
        self.faults.add((*path, "body"), what=f"there is no body {shown(given)}", fix=fix)
        return None

    def spot(self, value: object, path: Path, body: BodySpec | None) -> SpotSpec:
        shape = body.shape if body and body.shape is not ANY_SHAPE else None
        if value is None:
            return SpotSpec(name=default_spot(shape) if shape else "centre")
        spot: SpotSpec | None = None
        if isinstance(value, str):
            spot = SpotSpec(name=value)
        elif isinstance(value, dict):
            spot = self.faults.part(SpotSpec, value, path)
        else:
            self.faults.add(
                path,
                what=f"{shown(value)} is not a spot",
                fix='write "centre", {fraction = [0.3, 0.5]}, {point = [x, y, z]} or {toward = [x, y, z]}',
            )
        if spot and shape:
            check_spot(spot, shape, path, self.faults)
        return spot or SpotSpec(name="centre")

    def mic(self, value: object, place: int) -> MicSpec | None:
        path: Path = ("mic", place)
        table = self.faults.table(value, path, hint="begin it with [[mic]]")
        if table is None:
            return None
        table = refuse_keys(table, "mic", path, self.faults)
        parts = {"name": f"mic{place + 1}", **table}
        return self.faults.part(
            MicSpec, parts, path, instead={"name": f"unnamed {place}", "place": [0.0, 0.0, 0.0]}
        )


def _clock(take: TakeSpec | None, picture: PictureSpec | None, sound: SoundSpec | None) -> Clock | None:
    if take is None or picture is None or sound is None:
        return None
    counting = picture.counting
    return Clock(
        frame=picture.rate,
        sample_rate=sound.rate_hz,
        start_frame=counting.start_frame,
        numbered=counting.numbered,
        handles=picture.handles,
        length=take.length,
    )
