"""What the scene language names but this version cannot do; asking for it is refused, never ignored."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from resonate.scene.refused import shown

if TYPE_CHECKING:
    from resonate.scene.faults import Faults
    from resonate.scene.refused import Path

_TABLES: Final = {
    "ground": "remove it; a body meets no floor yet",
    "pluck": "remove it; strikes are what this version has",
    "shake": "remove it; strikes are what this version has",
    "rub": "remove it; strikes are what this version has",
    "pair": "remove it; bodies do not touch each other yet",
    "vary": "remove it, and write one scene a take",
}

# Table -> key -> values that are refused (None: any), and what to do instead.
_KEYS: Final[dict[str, dict[str, tuple[tuple[Any, ...] | None, str]]]] = {
    "body": {
        "mesh": (None, "remove mesh; the take carries the body's own mesh"),
        "friction": (None, "remove friction; strikes have none"),
    },
    "strike": {
        "stays": ((True,), "remove stays; the striker leaves after the hit"),
        "friction": (None, "remove friction; strikes have none"),
    },
    "mic": {"array": (None, "remove array and list single microphones, each with its place")},
    "sound": {
        "head": (("hit",), 'remove head, or write head = "picture"'),
    },
}


def refuse_tables(document: dict[str, Any], faults: Faults) -> dict[str, Any]:
    """Note tables of later versions and return the document without them."""
    for name, fix in _TABLES.items():
        if name in document:
            faults.add((name,), what=f"{name} is not in this version", fix=fix)
    return {key: value for key, value in document.items() if key not in _TABLES}


def refuse_keys(table: dict[str, Any], kind: str, path: Path, faults: Faults) -> dict[str, Any]:
    """Note keys of later versions in one table and return it without them."""
    rest = dict(table)
    for key, (values, fix) in _KEYS[kind].items():
        if key == "mesh" and table.get("shape") == "formula":
            continue  # what a formula shows is its own
        if key in rest and (values is None or rest[key] in values):
            given = key if values is None else f"{key} = {shown(rest[key])}"
            faults.add((*path, key), what=f"{given} is not in this version", fix=fix)
            del rest[key]
    if kind == "sound":
        _refuse_sound(rest, path, faults)
    if kind == "mic" and "array" in table:
        rest.setdefault("place", [0.0, 0.0, 0.0])  # an array has its own places
    if kind == "mic" and "pattern" in rest and rest["pattern"] != "omni":
        faults.add(
            (*path, "pattern"),
            what=f"pattern = {shown(rest['pattern'])} is not in this version",
            fix='write pattern = "omni", or leave it out',
        )
        del rest["pattern"]
    return rest


def _refuse_sound(rest: dict[str, Any], path: Path, faults: Faults) -> None:
    if "tail" in rest and rest["tail"] != "keep":
        faults.add(
            (*path, "tail"),
            what=f"tail = {shown(rest['tail'])} is not in this version",
            fix='write tail = "keep"',
        )
        del rest["tail"]
    if rest.get("stems") in ("body", "hit"):
        faults.add(
            (*path, "stems"),
            what=f"stems = {shown(rest['stems'])} is not in this version",
            fix='write stems = "none"',
        )
        del rest["stems"]
    level = rest.get("level")
    if isinstance(level, dict):
        for key in ("true_peak", "loudness"):
            if key in level:
                faults.add(
                    (*path, "level", key),
                    what=f"level by {key} is not in this version",
                    fix='write level = "physical" or {peak = "-6 dB"}',
                )
                rest.pop("level", None)
