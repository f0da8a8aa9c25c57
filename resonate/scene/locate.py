"""Where each key of a TOML text stands: key path -> line and column.

The reader of the standard library keeps no positions. This scanner follows TOML 1.0 over a text
that the standard reader has already accepted, so it need not judge the grammar.
"""

from __future__ import annotations

import json
import re
import tomllib
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from resonate.scene.refused import Path

_BLANK: Final = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_SPACE: Final = re.compile(r"[ \t]*")
_BARE: Final = re.compile(r"[A-Za-z0-9_-]+")
_STRING: Final = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}(?!")|\'\'\'.*?\'{3,5}(?!\')|"(?:\\.|[^"\\\n])*"|\'[^\'\n]*\'', re.DOTALL
)
_PLAIN: Final = re.compile(r"[^,\]\}#\n]+")


@dataclass(frozen=True, slots=True)
class Spot:
    """A place in a text, both counted from 1."""

    line: int
    column: int


@dataclass(slots=True)
class _Scanner:
    text: str
    at: int = 0
    found: dict[Path, int] = field(default_factory=dict)
    lengths: dict[Path, int] = field(default_factory=dict)

    def document(self) -> None:
        table: Path = ()
        while True:
            self.skip(_BLANK)
            if self.at >= len(self.text):
                return
            if self.text[self.at] == "[":
                table = self.header()
            else:
                self.pair(table)

    def skip(self, pattern: re.Pattern[str]) -> str:
        match = pattern.match(self.text, self.at)
        if match is None:
            # Only our own mistake can lead here: the standard reader accepted the text.
            raise AssertionError(f"no {pattern.pattern!r} at {self.at}")
        self.at = match.end()
        return match.group()

    def header(self) -> Path:
        start = self.at
        many = self.text.startswith("[[", start)
        self.at += 2 if many else 1
        keys = self.keys()
        self.at += 2 if many else 1
        path: Path = ()
        for place, key in enumerate(keys):
            path = (*path, key)
            self.found.setdefault(path, start)
            if place < len(keys) - 1:
                path = self.newest(path)
        if many:
            self.lengths[path] = self.lengths.get(path, 0) + 1
            path = (*path, self.lengths[path] - 1)
        self.found[path] = start
        return path

    def newest(self, path: Path) -> Path:
        # [a.b] below [[a]] belongs to the newest element of a.
        return (*path, self.lengths[path] - 1) if path in self.lengths else path

    def keys(self) -> list[str]:
        names = [self.key()]
        while self.text[self.at] == ".":
            self.at += 1
            names.append(self.key())
        return names

    def key(self) -> str:
        self.skip(_SPACE)
        quoted = self.text[self.at] in "\"'"
        name = _unquoted(self.skip(_STRING)) if quoted else self.skip(_BARE)
        self.skip(_SPACE)
        return name

    def pair(self, table: Path) -> None:
        start = self.at
        path = table
        for key in self.keys():
            path = (*path, key)
            self.found.setdefault(path, start)
        self.at += 1  # =
        self.skip(_SPACE)
        self.value(path)

    def value(self, path: Path) -> None:
        first = self.text[self.at]
        if first == "[":
            self.at += 1
            self.elements(path)
        elif first == "{":
            self.at += 1
            self.inline(path)
        elif first in "\"'":
            self.skip(_STRING)
        else:
            self.skip(_PLAIN)

    def elements(self, path: Path) -> None:
        place = 0
        while True:
            self.skip(_BLANK)
            if self.text[self.at] == ",":
                self.at += 1
                continue
            if self.text[self.at] == "]":
                self.at += 1
                return
            self.found[(*path, place)] = self.at
            self.value((*path, place))
            place += 1

    def inline(self, path: Path) -> None:
        while True:
            self.skip(_BLANK)
            if self.text[self.at] == ",":
                self.at += 1
                continue
            if self.text[self.at] == "}":
                self.at += 1
                return
            self.pair(path)


def _unquoted(text: str) -> str:
    if text[0] == "'" or "\\" not in text:
        return text[1:-1]
    return next(iter(tomllib.loads(f"{text} = 0")))


class Locator:
    """Finds keys in a TOML text.

    Examples
    --------
    >>> text = chr(10).join(["a = 1", "[[body]]", 'name = "pan"'])
    >>> Locator(text).find(("body", 0, "name"))
    Spot(line=3, column=1)
    """

    def __init__(self, text: str) -> None:
        """Scan a text that ``tomllib.loads`` accepts."""
        # Line ends as the standard reader sees them.
        scanner = _Scanner(text.replace("\r\n", "\n"))
        scanner.document()
        self._text = scanner.text
        self._found = scanner.found

    def find(self, path: Path) -> Spot:
        """Return where ``path`` stands, or the nearest table above it (line 1 for the file)."""
        while path and path not in self._found:
            path = path[:-1]
        offset = self._found.get(path, 0)
        line = self._text.count("\n", 0, offset) + 1
        return Spot(line=line, column=offset - (self._text.rfind("\n", 0, offset) + 1) + 1)

    def knows(self, path: Path) -> bool:
        """Whether ``path`` is written in the text."""
        return path in self._found


def written(path: Path) -> str:
    """Write a path as people read it.

    >>> written(("body", 0, "material"))
    'body[0].material'
    """
    text = ""
    for key in path:
        if isinstance(key, int):
            text += f"[{key}]"
        else:
            name = key if _BARE.fullmatch(key) else json.dumps(key, ensure_ascii=False)
            text += f".{name}" if text else name
    return text
