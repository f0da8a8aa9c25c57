"""Materials and strikers by name, from the TOML files that travel with the package."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from functools import cache
from importlib import resources
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final, Literal

from resonate.errors import SceneError
from resonate.scene.matter import MaterialSpec, StrikerSpec
from resonate.scene.names import choose, listing
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Mapping
    from importlib.resources.abc import Traversable

Kind = Literal["materials", "strikers"]
KINDS: Final[tuple[Kind, ...]] = ("materials", "strikers")
_SINGULAR: Final = {"materials": "material", "strikers": "striker"}


def data_dir(kind: Literal["presets", "examples"] = "presets") -> Traversable:
    """Folder of the files that travel with the package: inside it when installed, else in the checkout."""
    installed = resources.files("resonate") / kind
    if installed.is_dir():
        return installed
    return Path(__file__).resolve().parents[2] / kind


@cache
def tables(kind: Kind) -> Mapping[str, Mapping[str, Any]]:
    """All presets of a kind as they are written in the file, by name.

    Raises
    ------
    SceneError
        If the preset file is missing from the installation or cannot be read.
    """
    file = data_dir() / f"{kind}.toml"
    try:
        return tomllib.loads(file.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise SceneError(
            what=f"the {kind} presets cannot be read: {error}",
            where=str(file),
            fix="install the package again",
        ) from error


def preset_table(name: str, kind: Kind) -> dict[str, Any]:
    """One preset as written, with its name.

    Raises
    ------
    RefusedError
        If there is no preset of that name; says which is nearest.
    """
    known = tables(kind)
    if name not in known:
        folded = {key.casefold().replace("_", " ").replace("-", " "): key for key in known}
        match = folded.get(name.casefold().strip().replace("_", " ").replace("-", " "))
        if match is None:
            raise RefusedError(f"{shown(name)} is not a {_SINGULAR[kind]}", choose(name, known))
        name = match
    return {"name": name, **known[name]}


def resolved(value: object, kind: Kind) -> dict[str, Any]:
    """Fill in a material or striker: a preset name, a table, or a table with ``from``.

    >>> resolved({"from": "brass", "loss": 0.004}, "materials")["name"]
    'brass, changed'
    """
    if isinstance(value, str):
        return preset_table(value, kind)
    if not isinstance(value, dict):
        raise RefusedError(
            f"{shown(value)} is not a {_SINGULAR[kind]}", f"give one of {listing(tables(kind))}, or a table"
        )
    if "name" in value:
        raise RefusedError("a material or striker of a scene has no name", "remove name", at=("name",))
    if not isinstance(value.get("source", ""), str):
        raise RefusedError(f"{shown(value['source'])} is not a text", "give a text", at=("source",))
    if "from" not in value:
        return dict(value)
    origin = value["from"]
    if not isinstance(origin, str):
        raise RefusedError(
            f"{shown(origin)} is not the name of a {_SINGULAR[kind]}", "give a name", at=("from",)
        )
    try:
        base = preset_table(origin, kind)
    except RefusedError as error:
        raise RefusedError(error.what, error.fix, at=("from",)) from error
    changes = {key: item for key, item in value.items() if key != "from"}
    if kind == "materials":
        base = _without_stale(base, changes)
    if changes:
        base["source"] = f"{base.get('source', '')}; changed in the scene: {', '.join(changes)}"
        base["name"] = f"{base['name']}, changed"
    return base | changes


def _without_stale(base: dict[str, Any], changes: dict[str, Any]) -> dict[str, Any]:
    # Of E, G and nu of an isotropic solid the unnamed one follows from the named.
    if (
        {"young", "shear"} <= changes.keys()
        and "poisson" not in changes
        and not isinstance(base["young"], list)
    ):
        base = {key: item for key, item in base.items() if key != "poisson"}
    elif "shear" in changes and not isinstance(base["young"], list):
        dropped = "young" if "poisson" in changes else "poisson"
        base = {key: item for key, item in base.items() if key != dropped}
    if (
        isinstance(base.get("young"), list)
        and {"young", "poisson"} <= changes.keys()
        and "shear" not in changes
    ):
        base = {key: item for key, item in base.items() if key != "shear"}
    return base


def material(name: str) -> MaterialSpec:
    """Return the preset material called ``name``.

    Raises
    ------
    SceneError
        If there is none of that name.
    """
    return MaterialSpec.model_validate(_named(name, "materials"))


def striker(name: str) -> StrikerSpec:
    """Return the preset striker called ``name``.

    Raises
    ------
    SceneError
        If there is none of that name.
    """
    return StrikerSpec.model_validate(_named(name, "strikers"))


def _named(name: str, kind: Kind) -> dict[str, Any]:
    try:
        return preset_table(name, kind)
    except RefusedError as error:
        raise SceneError(what=error.what, where=f"presets, {kind}", fix=error.fix) from error


def list_presets(kind: str) -> tuple[MaterialSpec, ...] | tuple[StrikerSpec, ...]:
    """All presets of ``"materials"`` or ``"strikers"``, in the order of the file.

    Raises
    ------
    SceneError
        If there is no such kind.
    """
    if kind == "materials":
        return tuple(material(name) for name in tables("materials"))
    if kind == "strikers":
        return tuple(striker(name) for name in tables("strikers"))
    raise SceneError(what=f"{kind!r} is not a kind of preset", where="presets", fix=choose(kind, KINDS))


@dataclass(frozen=True, slots=True)
class PresetTable:
    """Presets of one kind as text: ``headings`` and one tuple a row, of the same length."""

    headings: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def preset_rows(kind: str) -> PresetTable:
    """Lay out the presets of a kind for reading; three directions stand as three values.

    Raises
    ------
    SceneError
        If there is no such kind.
    """
    rows: list[tuple[str, ...]] = []
    for preset in list_presets(kind):
        if isinstance(preset, MaterialSpec):
            many = 1 if preset.isotropic else 3
            young = " / ".join(f"{value / 1e9:.3g}" for value in preset.young_pa[:many])
            poisson = " / ".join(f"{value:.3g}" for value in preset.poisson[:many])
            loss = " / ".join(f"{eta:.2g}" for _, eta in preset.loss)
            rows.append((preset.name, f"{preset.density_kg_m3:.4g}", young, poisson, loss, preset.source))
        else:
            numbers = (1e3 * preset.mass_kg, 1e3 * preset.tip_radius_m, preset.tip_young_pa / 1e6)
            values = tuple(f"{value:.3g}" for value in (*numbers, preset.restitution))
            rows.append((preset.name, *values, preset.source))
    if kind == "materials":
        return PresetTable(("name", "density kg/m^3", "young GPa", "poisson", "loss", "source"), tuple(rows))
    return PresetTable(
        ("name", "mass g", "tip radius mm", "tip young MPa", "restitution", "source"), tuple(rows)
    )
