"""Gathers every fault of one scene file, each with its line and key path."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Any, Final, TypeVar

from pydantic import ValidationError

from resonate.errors import Fault
from resonate.scene.kinds import Part
from resonate.scene.locate import Locator, written
from resonate.scene.names import choose, listing, nearest
from resonate.scene.refused import Path, RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Mapping

P = TypeVar("P", bound=Part)

#: How a missing key may be written.
_EXAMPLES: Final = {
    "length": '"0.3 m"',
    "width": '"30 mm"',
    "height": '"5 mm"',
    "diameter": '"20 mm"',
    "outer": '"25 mm"',
    "wall": '"1.5 mm"',
    "tension": '"80 N" (a string) or "2 kN/m" (a membrane)',
    "profile": '[[0, 0], ["40 mm", 0], ["40 mm", "90 mm"]]',
    "outline": '{rectangle = ["0.4 m", "0.3 m"]}',
    "thickness": '"3 mm"',
    "name": '"pan"',
    "shape": '"plate"',
    "material": '"brass"',
    "density": '"7.85 g/cm^3"',
    "young": '"200 GPa"',
    "shear": '"80 GPa"',
    "mass": '"12 g"',
    "tip_radius": '"8 mm"',
    "tip_young": '"2 GPa"',
    "restitution": "0.6",
    "body": '"pan"',
    "time": '"0.5 s"',
    "striker": '"wooden knob"',
    "speed": '"1.5 m/s"',
    "place": "[0, 1, 0]",
    "where": '"left"',
    "hold": '"pinned"',
}


def keys_of(model: type[Part]) -> list[str]:
    """Keys of a model as a file writes them."""
    fields = {name: info.validation_alias for name, info in model.model_fields.items()}
    names = [
        alias if isinstance(alias, str) else name
        for name, alias in fields.items()
        if name not in model.set_by_reader
    ]
    return [*names, *model.also_written]


class Faults:
    """The faults found so far in one file."""

    def __init__(self, where: str, locator: Locator) -> None:
        """Begin without faults; ``where`` names the file, ``locator`` finds its lines."""
        self._where = where
        self._locator = locator
        self._found: list[tuple[int, Fault]] = []
        self._moved: dict[Path, Path] = {}
        self._missing: dict[Path, Fault] = {}
        self._misspelt: set[Path] = set()

    @property
    def all(self) -> tuple[Fault, ...]:
        """Every fault, in the order of the file; a key that is only misspelt is not called missing too."""
        excused = {self._missing[path] for path in self._misspelt if path in self._missing}
        ordered = sorted(self._found, key=lambda pair: pair[0])
        return tuple(dict.fromkeys(fault for _, fault in ordered if fault not in excused))

    @property
    def where(self) -> str:
        """Name of the file."""
        return self._where

    def __bool__(self) -> bool:
        """Whether anything is wrong."""
        return bool(self._found)

    def move(self, path: Path, written_at: Path) -> None:
        """Note that what the models call ``path`` is written at ``written_at`` in the file."""
        self._moved[path] = written_at

    def add(self, path: Path, *, what: str, fix: str) -> Fault:
        """Note one fault at a key path of the models, and return it."""
        source = self._source(path)
        line = self._locator.find(source).line
        name = written(source)
        place = f"{self._where}:{line}: {name}" if name else f"{self._where}:{line}"
        fault = Fault(what=what, where=place, fix=fix)
        self._found.append((line, fault))
        return fault

    def refuse(self, path: Path, error: RefusedError) -> None:
        """Note a refused value at ``path``."""
        self.add((*path, *error.at), what=error.what, fix=error.fix)

    def table(self, value: object, path: Path, *, hint: str) -> dict[str, Any] | None:
        """Return ``value`` when it is a table; note a fault and return None otherwise."""
        if isinstance(value, dict):
            return value
        self.add(path, what=f"{shown(value)} is not a table", fix=hint)
        return None

    def part(
        self,
        model: type[P],
        data: Mapping[str, Any],
        path: Path,
        *,
        context: object = None,
        instead: Mapping[str, Any] | None = None,
    ) -> P | None:
        """Validate one table into a model and note its faults.

        Parameters
        ----------
        model : type
            What to make.
        data : mapping
            The table.
        path : tuple
            Where it stands.
        context : object
            Passed to the validators.
        instead : mapping
            Stands in for refused keys, so that what remains is still checked as a whole.

        Returns
        -------
        Part or None
            With faults, None, or the model without its refused keys where ``instead`` is given.
        """
        parts = dict(data)
        for _ in range(3):  # values, then what is checked across values
            try:
                return model.model_validate(parts, by_alias=True, by_name=False, context=context)
            except ValidationError as error:
                items = error.errors(include_url=False)
            for item in items:
                self._note(item, path, keys_of(model))
            if instead is None:
                return None
            bad = {str(item["loc"][0]) if item["loc"] else _culprit(item) for item in items}
            parts = {key: value for key, value in parts.items() if key not in bad}
            parts |= {key: value for key, value in instead.items() if key in bad}
        return None

    def unknown(self, path: Path, allowed: list[str]) -> None:
        """Note an unknown key."""
        key = str(path[-1])
        close = nearest(key, allowed)
        if close:
            self._misspelt.add(self._source((*path[:-1], close)))
        self.add(
            path,
            what=f"unknown key '{key}'" + (f"; did you mean '{close}'?" if close else ""),
            fix=f"use one of {listing(allowed)}, or remove it",
        )

    def _source(self, path: Path) -> Path:
        # The longest moved prefix first; a part of a moved part is moved twice.
        for _ in range(3):
            for cut in range(len(path), 0, -1):
                if path[:cut] in self._moved:
                    path = (*self._moved[path[:cut]], *path[cut:])
                    break
            else:
                return path
        return path

    def _note(self, item: Any, path: Path, allowed: list[str]) -> None:  # noqa: ANN401
        kind, at = item["type"], (*path, *item["loc"])
        cause = item.get("ctx", {}).get("error")
        if isinstance(cause, RefusedError):
            self.refuse(at, cause)
        elif kind == "missing":
            key = str(at[-1])
            example = f" = {_EXAMPLES[key]}" if key in _EXAMPLES else ""
            fault = self.add(at, what=f"{key} is missing", fix=f"add {key}{example}")
            self._missing[self._source(at)] = fault
        elif kind == "extra_forbidden":
            self.unknown(at, allowed)
        elif kind == "literal_error":
            options = re.findall(r"'([^']*)'", str(item["ctx"]["expected"]))
            self.add(
                at,
                what=f"{shown(item['input'])} is not allowed here",
                fix=choose(str(item["input"]), options),
            )
        elif kind != "default_factory_not_called":
            self.add(
                at, what=f"{shown(item['input'])} cannot be used here: {item['msg']}", fix="see the manual"
            )


def _culprit(item: Any) -> str:  # noqa: ANN401 (an error of the validator)
    cause = item.get("ctx", {}).get("error")
    return str(cause.at[0]) if isinstance(cause, RefusedError) and cause.at else ""
