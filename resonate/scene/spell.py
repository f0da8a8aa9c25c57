"""The spellings of a body in a file, turned into models: shape, outline, material, supports."""

from __future__ import annotations

from pathlib import Path as FilePath
from typing import TYPE_CHECKING, Any

from resonate.scene.bodies import (
    NAMED_HOLDS,
    BandSpec,
    BodySpec,
    BoxPlace,
    CordHold,
    FixHold,
    Hold,
    HoldSpec,
    NamedHold,
    NamedPlace,
    PointPlace,
    ShowSpec,
    SpringHold,
    Where,
    default_support,
)
from resonate.scene.faults import Faults, keys_of
from resonate.scene.later import refuse_keys
from resonate.scene.lumps import listed
from resonate.scene.matter import MaterialSpec, StrikerSpec
from resonate.scene.names import choose, listing
from resonate.scene.presets import resolved
from resonate.scene.refused import Path, RefusedError, shown
from resonate.scene.shapes import LATER_SHAPES, OUTLINES, SHAPES, BarShape, edge_names
from resonate.scene.solids import SolidShape
from resonate.scene.surface import load_surface

if TYPE_CHECKING:
    from collections.abc import Collection

    from resonate.scene.kinds import Part

BODY_KEYS = keys_of(BodySpec)
_SHAPE_KEYS = {kind: keys_of(model) for kind, model in SHAPES.items()}

#: Stands in for a refused shape, so that the rest of the body is still checked.
ANY_SHAPE = BarShape(length_m=1.0, diameter_m=0.01)
_ANY_MATERIAL = MaterialSpec.model_validate({"density": 1000.0, "young": 1e9})


def read_body(value: object, path: Path, faults: Faults) -> BodySpec | None:
    """Read one ``[[body]]``; what is refused in it is noted and replaced by a stand-in."""
    table = faults.table(value, path, hint="begin it with [[body]]")
    if table is None:
        return None
    table = refuse_keys(table, "body", path, faults)
    parts: dict[str, Any] = {key: item for key, item in table.items() if key in BODY_KEYS}
    shape = _read_shape(table, path, faults)
    parts["shape"] = shape or ANY_SHAPE
    if "material" in table:
        parts["material"] = read_material(table["material"], (*path, "material"), faults) or _ANY_MATERIAL
    if "support" in table:
        allowed = edge_names(shape) if shape else None
        parts["support"] = _read_support(table["support"], allowed, (*path, "support"), faults)
    if shape is None or parts.get("support", ()) is None:
        parts["support"] = default_support(parts["shape"])
    for key, model in (("modes", BandSpec), ("show", ShowSpec)):
        if key in table:
            parts[key] = _read_table(model, table[key], (*path, key), faults) or model()
    return faults.part(
        BodySpec, parts, path, instead={"name": f"unnamed {path[-1]}", "material": _ANY_MATERIAL}
    )


def _read_table(model: type[Part], value: object, path: Path, faults: Faults) -> Part | None:
    table = faults.table(value, path, hint=f"give a table with some of {listing(keys_of(model))}")
    return None if table is None else faults.part(model, table, path)


def _read_shape(table: dict[str, Any], path: Path, faults: Faults) -> Part | None:
    given = table.get("shape")
    beside = {key: item for key, item in table.items() if key not in BODY_KEYS}
    at = (*path, "shape")
    if isinstance(given, dict):
        return _read_shape_table(given, beside, path, faults)
    if given is None:
        faults.add(at, what="shape is missing", fix=f'add shape = "plate", or another of {listing(SHAPES)}')
        _refuse_beside(beside, SHAPES, path, faults)
        return None
    if not isinstance(given, str) or given not in SHAPES:
        _refuse_kind(given, at, faults)
        if given not in LATER_SHAPES:
            _refuse_beside(beside, SHAPES, path, faults)
        return None
    own = _SHAPE_KEYS[given]
    _refuse_beside(beside, (given,), path, faults)
    parts = {key: item for key, item in beside.items() if key in own}
    for key in own:
        faults.move((*at, key), (*path, key))
    return _build_shape(given, parts, at, faults)


def _read_shape_table(
    given: dict[str, Any], beside: dict[str, Any], path: Path, faults: Faults
) -> Part | None:
    at = (*path, "shape")
    if "kind" in given:
        kind, parts = given["kind"], {key: item for key, item in given.items() if key != "kind"}
        named_at: Path = (*at, "kind")
    elif len(given) == 1:
        kind, inner = next(iter(given.items()))
        named_at = (*at, kind)
        if kind in SHAPES and not isinstance(inner, dict):
            faults.add(
                named_at, what=f"{shown(inner)} is not a table", fix=f"give {listing(_SHAPE_KEYS[kind])}"
            )
            return None
        parts = inner if isinstance(inner, dict) else {}
        for key in {*parts, *_SHAPE_KEYS.get(kind, ())}:
            faults.move((*at, key), (*named_at, key))
    else:
        faults.add(
            at, what=f"{shown(given)} names no shape", fix='write shape = "bar", or {kind = "bar", ...}'
        )
        return None
    _refuse_beside(beside, (), path, faults)
    if not isinstance(kind, str) or kind not in SHAPES:
        _refuse_kind(kind, named_at, faults)
        return None
    return _build_shape(kind, parts, at, faults)


def _refuse_kind(given: object, path: Path, faults: Faults) -> None:
    if given in LATER_SHAPES:
        faults.add(
            path, what=f"shape {shown(given)} is not in this version", fix=f"use one of {listing(SHAPES)}"
        )
    else:
        faults.add(path, what=f"{shown(given)} is not a shape", fix=choose(str(given), SHAPES))


def _refuse_beside(beside: dict[str, Any], kinds: Collection[str], path: Path, faults: Faults) -> None:
    # Of the keys that are not the body's own, only those of these shapes may stand beside them.
    own = [key for kind in kinds for key in _SHAPE_KEYS[kind]]
    for key in beside:
        if key in own:
            continue
        if len(kinds) == 1 and any(key in keys for keys in _SHAPE_KEYS.values()):
            shape = next(iter(kinds))
            faults.add(
                (*path, key),
                what=f"a {shape} has no {key}",
                fix=f"remove it; a {shape} takes {listing(_SHAPE_KEYS[shape])}",
            )
        else:
            faults.unknown((*path, key), [*dict.fromkeys(own), *BODY_KEYS])


def _build_shape(kind: str, parts: dict[str, Any], path: Path, faults: Faults) -> Part | None:
    sound = True
    if "outline" in parts and kind in ("membrane", "plate"):
        outline = _read_outline(parts["outline"], (*path, "outline"), faults)
        sound = outline is not None
        parts = {**parts, "outline": outline or OUTLINES["circle"].model_validate({"diameter": 1.0})}
    for key in ("points", "springs") if kind == "lumps" else ():
        if isinstance(parts.get(key), str):
            # A table beside the scene; its rows then stand as if they were listed.
            try:
                parts = {**parts, key: listed(key, FilePath(faults.where).parent / parts[key])}
            except RefusedError as error:
                faults.refuse((*path, key), error)
                return None
    shape = faults.part(SHAPES[kind], parts, path)
    if isinstance(shape, SolidShape):
        return _with_surface(shape, path, faults)
    return shape if sound else None


def _with_surface(shape: SolidShape, path: Path, faults: Faults) -> Part | None:
    try:
        surface = load_surface(FilePath(faults.where).parent / shape.file, shape.unit)
    except RefusedError as error:
        faults.add((*path, "file"), what=error.what, fix=error.fix)
        return None
    return shape.model_copy(update={"surface": surface, "content": surface.content})


def _read_outline(value: object, path: Path, faults: Faults) -> Part | None:
    hint = (
        "write one of {rectangle = [a, b]}, {circle = d}, {ring = [outer, inner]}, {polygon = [[x, z], ...]}"
    )
    table = faults.table(value, path, hint=hint)
    if table is None:
        return None
    if "kind" in table:
        kind = table["kind"]
        if not isinstance(kind, str) or kind not in OUTLINES:
            faults.add(
                (*path, "kind"), what=f"{shown(kind)} is not an outline", fix=choose(str(kind), OUTLINES)
            )
            return None
        return faults.part(OUTLINES[kind], {key: item for key, item in table.items() if key != "kind"}, path)
    if len(table) != 1:
        faults.add(path, what=f"{shown(table)} is not one outline", fix=hint)
        return None
    kind, given = next(iter(table.items()))
    at = (*path, kind)
    if kind not in OUTLINES:
        faults.add(at, what=f"{shown(kind)} is not an outline", fix=choose(kind, OUTLINES))
        return None
    return _short_outline(kind, given, path, faults)


def _short_outline(kind: str, given: object, path: Path, faults: Faults) -> Part | None:
    keys = keys_of(OUTLINES[kind])
    at = (*path, kind)
    if isinstance(given, dict):
        for key in keys:
            faults.move((*path, key), (*at, key))
        return faults.part(OUTLINES[kind], given, at)
    if len(keys) == 1:
        faults.move((*path, keys[0]), at)
        return faults.part(OUTLINES[kind], {keys[0]: given}, path)
    if not isinstance(given, list) or len(given) != len(keys):
        faults.add(at, what=f"{shown(given)} is not a {kind}", fix=f"give [{', '.join(keys)}]")
        return None
    for place, key in enumerate(keys):
        faults.move((*path, key), (*at, place))
    return faults.part(OUTLINES[kind], dict(zip(keys, given, strict=True)), path)


def read_material(value: object, path: Path, faults: Faults) -> MaterialSpec | None:
    """Read a material: a preset name, a table, or a table with ``from``."""
    try:
        table = resolved(value, "materials")
    except RefusedError as error:
        faults.refuse(path, error)
        return None
    return faults.part(MaterialSpec, table, path)


def read_striker(value: object, path: Path, faults: Faults) -> StrikerSpec | None:
    """Read a striker: a preset name, a table, or a table with ``from``."""
    try:
        table = resolved(value, "strikers")
    except RefusedError as error:
        faults.refuse(path, error)
        return None
    return faults.part(StrikerSpec, table, path)


def _read_support(
    value: object, allowed: tuple[str, ...] | None, path: Path, faults: Faults
) -> tuple[HoldSpec, ...] | None:
    if value == "free":
        return ()
    if isinstance(value, str):
        held = value if value in NAMED_HOLDS else "pinned"
        faults.add(
            path,
            what=f'support = {shown(value)} does not say where; only "free" stands alone',
            fix=f'write support = [{{where = "left", hold = "{held}"}}] with a place of this shape',
        )
        return None
    if isinstance(value, dict):
        value = [value]
        faults.move((*path, 0), path)
    if not isinstance(value, list) or not value:
        faults.add(
            path,
            what=f"{shown(value)} holds nothing",
            fix='write "free", or a list of {where = .., hold = ..}',
        )
        return None
    entries = [_read_entry(item, allowed, (*path, place), faults) for place, item in enumerate(value)]
    kept = [entry for entry in entries if entry is not None]
    return tuple(kept) if len(kept) == len(entries) else None


def _read_entry(
    value: object, allowed: tuple[str, ...] | None, path: Path, faults: Faults
) -> HoldSpec | None:
    table = faults.table(value, path, hint='write {where = "left", hold = "pinned"}')
    if table is None:
        return None
    parts = dict(table)
    sound = True
    if "where" in table:
        where = _read_where(table["where"], allowed, (*path, "where"), faults)
        sound = where is not None
        parts["where"] = where or NamedPlace(names=("edge",))
    if "hold" in table:
        hold = _read_hold(table["hold"], (*path, "hold"), faults)
        sound = sound and hold is not None
        parts["hold"] = hold or NamedHold(kind="pinned")
    entry = faults.part(HoldSpec, parts, path)
    return entry if sound else None


def _read_where(value: object, allowed: tuple[str, ...] | None, path: Path, faults: Faults) -> Where | None:
    hint = (
        "write an edge or end by name, a list of names, {point = [x, y, z]} or {box = [[x, y, z], [x, y, z]]}"
    )
    names = [value] if isinstance(value, str) else value
    if isinstance(names, list) and names and all(isinstance(name, str) for name in names):
        wrong = [name for name in names if allowed is not None and name not in allowed]
        for name in wrong:
            at = path if isinstance(value, str) else (*path, names.index(name))
            faults.add(
                at, what=f"{shown(name)} is not a place on this shape", fix=choose(name, allowed or ())
            )
        return None if wrong else NamedPlace(names=tuple(names))
    if isinstance(value, dict) and value.keys() == {"point"}:
        return faults.part(PointPlace, value, path)
    if isinstance(value, dict) and value.keys() == {"box"}:
        box = value["box"]
        if isinstance(box, list) and len(box) == 2:  # noqa: PLR2004 (two corners)
            faults.move((*path, "low"), (*path, "box", 0))
            faults.move((*path, "high"), (*path, "box", 1))
            return faults.part(BoxPlace, {"low": box[0], "high": box[1]}, path)
    faults.add(path, what=f"{shown(value)} is not a place", fix=hint)
    return None


def _read_hold(value: object, path: Path, faults: Faults) -> Hold | None:
    if isinstance(value, str):
        if value not in NAMED_HOLDS:
            faults.add(path, what=f"{shown(value)} is not a hold", fix=choose(value, NAMED_HOLDS))
            return None
        return faults.part(NamedHold, {"kind": value}, path)
    if isinstance(value, dict):
        models: tuple[tuple[str, type[Hold]], ...] = (
            ("fix", FixHold),
            ("cord", CordHold),
            ("spring", SpringHold),
            ("damper", SpringHold),
        )
        for key, model in models:
            if key in value:
                return faults.part(model, value, path)
    faults.add(
        path,
        what=f"{shown(value)} is not a hold",
        fix=f'write one of {listing(NAMED_HOLDS)}, {{fix = ["x", "rx"]}}, '
        "{spring = k, damper = c} or {cord = length}",
    )
    return None
