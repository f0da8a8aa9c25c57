"""Energies and places written as text: a small language of numbers, read by its grammar and never run as code.

A text becomes a tape: a list of operations, each on earlier entries, that other rooms evaluate and differentiate. The
grammar (``^`` and ``**`` are the same, bind tighter than a sign before them, and group from the right)::

    sum     = product (("+" | "-") product)*
    product = signed (("*" | "/") signed)*
    signed  = ("+" | "-") signed | power
    power   = atom (("^" | "**") signed)?
    atom    = number | name | name "'" | function "(" sum ")" | "(" sum ")"

Names are looked up in the lists given and nowhere else. Length, depth and number of operations are bounded, and
whatever is made of numbers alone is worked out at once, so that no text can ask for more than a few thousand steps.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from resonate.scene.names import listing, nearest
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

#: Longest text, deepest nesting and most operations of one text.
LONGEST: Final = 2000
DEEPEST: Final = 40
MOST: Final = 600

FUNCTIONS: Final[Mapping[str, Callable[[float], float]]] = {
    "sqrt": math.sqrt,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "asin": math.asin,
    "acos": math.acos,
    "atan": math.atan,
    "exp": math.exp,
    "log": math.log,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
    "abs": abs,
}
#: Operation -> its number on a tape.
CODES: Final[Mapping[str, int]] = {
    name: number for number, name in enumerate(("number", "variable", "+", "*", "^", "power", "-", *FUNCTIONS))
}
_TOKEN: Final = re.compile(
    r"\s*(?:((?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)|([A-Za-z][A-Za-z0-9_]*'?)|(\*\*|[-+*/^()]))"
)
_LONGEST_NUMBER: Final = 32
_NAME: Final = re.compile(r"[A-Za-z][A-Za-z0-9]*(?:_[A-Za-z0-9]+)*")
_LONGEST_NAME: Final = 24


@dataclass(frozen=True, slots=True)
class Tape:
    """Operations in order; the last one is the value of the text.

    Entry k is ``code[k]`` of the entries ``left[k]`` and ``right[k]`` (or of the variable ``left[k]``, or of
    ``number[k]``). ``^`` is a power with the constant exponent ``number[k]``; ``power`` of two entries.
    """

    code: tuple[int, ...]
    left: tuple[int, ...]
    right: tuple[int, ...]
    number: tuple[float, ...]


def check_name(name: object, taken: Sequence[str], what: str) -> str:
    """Check a name that a person gives to a coordinate or parameter; raises ``RefusedError``."""
    if not isinstance(name, str) or not _NAME.fullmatch(name) or len(name) > _LONGEST_NAME:
        raise RefusedError(
            f"{shown(name)} cannot name a {what}",
            f"use at most {_LONGEST_NAME} letters and digits, a letter first; single _ in between",
        )
    if name in FUNCTIONS or name == "pi":
        raise RefusedError(f"{shown(name)} is a word of the language itself", "use another name")
    if name in taken:
        raise RefusedError(f"the name {shown(name)} is given twice", "use each name once")
    return name


def read_expression(text: object, variables: Sequence[str], constants: Mapping[str, float]) -> Tape:
    """Read one text.

    Parameters
    ----------
    text : object
        What stands in the scene.
    variables : sequence of str
        Names that stay open, rates with their stroke (``a'``); numbered in this order on the tape.
    constants : mapping
        Names that stand for numbers.

    Raises
    ------
    RefusedError
        With what is wrong, and at which character.

    Examples
    --------
    >>> read_expression("m*a'^2/2", ["a", "a'"], {"m": 3.0}).number[-1]
    0.0
    """
    if isinstance(text, int | float) and not isinstance(text, bool) and math.isfinite(text):
        text = repr(float(text)) if text >= 0 else f"0-{-float(text)!r}"
    if not isinstance(text, str) or not text.strip():
        raise RefusedError(f"{shown(text)} is not a formula", 'give text, as in "m*g*l*(1 - cos(a))"')
    if len(text) > LONGEST:
        raise RefusedError(f"a formula of {len(text)} characters", f"use at most {LONGEST}")
    return _Reader(text, variables, constants).tape()


class _Reader:
    # One pass over one text; every method reads one rule and returns the entry that holds its value.

    def __init__(self, text: str, variables: Sequence[str], constants: Mapping[str, float]) -> None:
        self.text = text
        self.variables = list(variables)
        self.constants = constants
        self.tokens = self.split()
        self.place = 0
        self.depth = 0
        self.entries: list[tuple[int, int, int, float]] = []
        self.known: dict[tuple[int, int, int, float], int] = {}

    def split(self) -> list[tuple[str, str, int]]:
        tokens, at = [], 0
        end = len(self.text.rstrip())
        while at < end:
            found = _TOKEN.match(self.text, at)
            if found is None:
                at += len(self.text[at:]) - len(self.text[at:].lstrip())
                raise self.wrong(f"{shown(self.text[at])} means nothing here", at)
            kind = ("number", "name", "sign")[(found.lastindex or 1) - 1]
            tokens.append((kind, found.group(found.lastindex or 1), found.start(found.lastindex or 1)))
            at = found.end()
        return tokens

    def wrong(self, what: str, at: int, fix: str | None = None) -> RefusedError:
        allowed = f"+ - * / ^ ( ), pi, {', '.join(FUNCTIONS)}, {listing([*self.variables, *self.constants])}"
        return RefusedError(f"character {at + 1} of {shown(self.text)}: {what}", fix or f"use {allowed}")

    def tape(self) -> Tape:
        value = self.sum()
        if self.place < len(self.tokens):
            _, word, at = self.tokens[self.place]
            raise self.wrong(f"{shown(word)} does not follow", at, "join values with + - * / or ^; close brackets")
        if value != len(self.entries) - 1:
            # Something was written after it that it does not need; the last entry must be the value.
            zero = self.enter("number", number=0.0)
            value = self.enter("+", value, zero, fresh=True)
        code, left, right, number = zip(*self.entries, strict=True)
        return Tape(code, left, right, number)

    def peek(self) -> str:
        return self.tokens[self.place][1] if self.place < len(self.tokens) else ""

    def at(self) -> int:
        return self.tokens[self.place][2] if self.place < len(self.tokens) else len(self.text)

    def take(self) -> tuple[str, str, int]:
        if self.place >= len(self.tokens):
            raise self.wrong("the formula ends too early", len(self.text), "finish it, or remove the last sign")
        self.place += 1
        return self.tokens[self.place - 1]

    def enter(self, name: str, left: int = 0, right: int = 0, number: float = 0.0, *, fresh: bool = False) -> int:
        entry = (CODES[name], left, right, number)
        if entry in self.known and not fresh:
            return self.known[entry]
        if len(self.entries) >= MOST:
            raise self.wrong(f"more than {MOST} operations", self.at(), "make the formula shorter")
        self.entries.append(entry)
        self.known[entry] = len(self.entries) - 1
        return len(self.entries) - 1

    def constant(self, entry: int) -> float | None:
        code, _, _, number = self.entries[entry]
        return number if code == CODES["number"] else None

    def fold(self, work: Callable[[], float], at: int) -> int:
        try:
            value = work()
        except (ArithmeticError, ValueError):
            value = math.nan
        if isinstance(value, complex) or not math.isfinite(value):
            raise self.wrong("this is not a finite number", at, "change the numbers or parameters")
        return self.enter("number", number=float(value) + 0.0)

    def two(self, name: str, left: int, right: int, at: int) -> int:
        a, b = self.constant(left), self.constant(right)
        if a is not None and b is not None:
            return self.fold(lambda: {"+": a + b, "*": a * b}[name], at)
        return self.enter(name, left, right)

    def minus(self, entry: int, at: int) -> int:
        value = self.constant(entry)
        return self.enter("-", entry) if value is None else self.fold(lambda: -value, at)

    def power_of(self, base: int, exponent: int, at: int) -> int:
        a, b = self.constant(base), self.constant(exponent)
        if b is None:
            return self.enter("power", base, exponent)
        if a is not None:
            return self.fold(lambda: a**b, at)
        return self.enter("^", base, number=b)

    def sum(self) -> int:
        self.depth += 1
        if self.depth > DEEPEST:
            raise self.wrong(f"nested more than {DEEPEST} deep", self.at(), "make the formula flatter")
        value = self.product()
        while self.peek() in ("+", "-"):
            _, sign, at = self.take()
            right = self.product()
            value = self.two("+", value, right if sign == "+" else self.minus(right, at), at)
        self.depth -= 1
        return value

    def product(self) -> int:
        value = self.signed()
        while self.peek() in ("*", "/"):
            _, sign, at = self.take()
            right = self.signed()
            if sign == "/":
                right = self.power_of(right, self.enter("number", number=-1.0), at)
            value = self.two("*", value, right, at)
        return value

    def signed(self) -> int:
        signs = []
        while self.peek() in ("+", "-"):
            _, sign, at = self.take()
            signs.append((sign, at))
        value = self.power()
        for sign, at in reversed(signs):
            value = self.minus(value, at) if sign == "-" else value
        return value

    def power(self) -> int:
        base = self.atom()
        if self.peek() not in ("^", "**"):
            return base
        _, _, at = self.take()
        self.depth += 1
        if self.depth > DEEPEST:
            raise self.wrong(f"nested more than {DEEPEST} deep", at, "make the formula flatter")
        value = self.power_of(base, self.signed(), at)
        self.depth -= 1
        return value

    def atom(self) -> int:
        kind, word, at = self.take()
        if kind == "number":
            if len(word) > _LONGEST_NUMBER:
                raise self.wrong("a number of too many digits", at, f"write it with at most {_LONGEST_NUMBER}")
            return self.fold(lambda: float(word), at)
        if word == "(":
            value = self.sum()
            self.close(at)
            return value
        if kind != "name":
            raise self.wrong(f"a value should stand where {shown(word)} does", at)
        return self.named(word, at)

    def close(self, at: int) -> None:
        if self.peek() != ")":
            raise self.wrong("this bracket is never closed", at, "close it")
        self.take()

    def named(self, word: str, at: int) -> int:
        if word in FUNCTIONS:
            if self.peek() != "(":
                raise self.wrong(f"{word} needs its value in brackets", at, f"write {word}(..)")
            self.take()
            value = self.sum()
            self.close(at)
            given = self.constant(value)
            return self.enter(word, value) if given is None else self.fold(lambda: FUNCTIONS[word](given), at)
        if word in self.variables:
            return self.enter("variable", self.variables.index(word))
        if word in self.constants:
            return self.enter("number", number=self.constants[word])
        if word == "pi":
            return self.enter("number", number=math.pi)
        close = nearest(word, [*self.variables, *self.constants, *FUNCTIONS])
        raise self.wrong(f"{shown(word)} is not known here" + (f"; did you mean {close!r}?" if close else ""), at)
