"""Values and exact derivatives of a tape of operations, carried along entry by entry.

Forward differentiation to second order: every entry holds its value, its slope and its curvature with respect to the
chosen variables, and the chain rule makes those of the next. No formula is ever turned into code.

References
----------
Griewank & Walther, Evaluating Derivatives (2008), ch. 3 and 13.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

import numpy as np

from resonate.scene.expression import CODES

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from resonate.scene.expression import Tape

    Array = NDArray[np.float64]

_NAMES: Final = {number: name for name, number in CODES.items()}


@dataclass(frozen=True, slots=True)
class Value:
    """``value`` (p,), ``slope`` (p, n) and ``curve`` (p, n, n) at p points."""

    value: Array
    slope: Array
    curve: Array


def _tan(x: Array) -> tuple[Array, Array, Array]:
    y = np.tan(x)
    return y, 1.0 + y**2, 2.0 * y * (1.0 + y**2)


def _tanh(x: Array) -> tuple[Array, Array, Array]:
    y = np.tanh(x)
    return y, 1.0 - y**2, -2.0 * y * (1.0 - y**2)


def _asin(x: Array) -> tuple[Array, Array, Array]:
    rest = 1.0 - x**2
    return np.arcsin(x), rest**-0.5, x * rest**-1.5


def _acos(x: Array) -> tuple[Array, Array, Array]:
    y, first, second = _asin(x)
    return np.arccos(x), -first, -second + 0.0 * y


def _abs(x: Array) -> tuple[Array, Array, Array]:
    # A kink has no slope: what rests on one is refused.
    return np.abs(x), np.where(x == 0.0, np.nan, np.sign(x)), np.where(x == 0.0, np.nan, 0.0)


# Value, first and second derivative of each function.
_RULES: Final[dict[str, Callable[[Array], tuple[Array, Array, Array]]]] = {
    "-": lambda x: (-x, np.full_like(x, -1.0), np.zeros_like(x)),
    "sqrt": lambda x: (np.sqrt(x), 0.5 * x**-0.5, -0.25 * x**-1.5),
    "sin": lambda x: (np.sin(x), np.cos(x), -np.sin(x)),
    "cos": lambda x: (np.cos(x), -np.sin(x), -np.cos(x)),
    "tan": _tan,
    "asin": _asin,
    "acos": _acos,
    "atan": lambda x: (np.arctan(x), 1.0 / (1.0 + x**2), -2.0 * x / (1.0 + x**2) ** 2),
    "exp": lambda x: (np.exp(x), np.exp(x), np.exp(x)),
    "log": lambda x: (np.log(x), 1.0 / x, -1.0 / x**2),
    "sinh": lambda x: (np.sinh(x), np.cosh(x), np.sinh(x)),
    "cosh": lambda x: (np.cosh(x), np.sinh(x), np.cosh(x)),
    "tanh": _tanh,
    "abs": _abs,
}


def _raised(x: Array, exponent: float) -> tuple[Array, Array, Array]:
    # Factors that are zero are left out, so that 0^-1 does not meet them.
    first = exponent * x ** (exponent - 1.0) if exponent != 0.0 else np.zeros_like(x)
    twice = exponent * (exponent - 1.0)
    return x**exponent, first, twice * x ** (exponent - 2.0) if twice != 0.0 else np.zeros_like(x)


def _chained(inner: Value, rule: tuple[Array, Array, Array]) -> Value:
    value, first, second = rule
    bent = inner.slope[:, : inner.curve.shape[1]]
    outer = bent[:, :, None] * bent[:, None, :]
    return Value(
        value, first[:, None] * inner.slope, first[:, None, None] * inner.curve + second[:, None, None] * outer
    )


def _product(a: Value, b: Value) -> Value:
    many = a.curve.shape[1]
    mixed = a.slope[:, :many, None] * b.slope[:, None, :many]
    return Value(
        a.value * b.value,
        a.value[:, None] * b.slope + b.value[:, None] * a.slope,
        a.value[:, None, None] * b.curve + b.value[:, None, None] * a.curve + mixed + np.swapaxes(mixed, 1, 2),
    )


def evaluate(tape: Tape, at: Array, *, by: int, curved: bool = True) -> Value:
    """Run a tape.

    Parameters
    ----------
    tape : Tape
        Operations.
    at : Array
        (p, v) values of the variables at p points.
    by : int
        Derivatives are taken by the first ``by`` variables.
    curved : bool
        Whether second derivatives are wanted; ``curve`` is empty otherwise.

    Returns
    -------
    Value
        Not finite where the text means nothing there (``sqrt(-1)``).
    """
    points = len(at)
    unit = np.eye(by)
    flat = np.zeros((points, by, by) if curved else (points, 0, 0))
    entries: list[Value] = []
    with np.errstate(all="ignore"):
        for code, left, right, number in zip(tape.code, tape.left, tape.right, tape.number, strict=True):
            name = _NAMES[code]
            if name == "number":
                entry = Value(np.full(points, number), np.zeros((points, by)), flat)
            elif name == "variable":
                slope = np.broadcast_to(unit[left], (points, by)) if left < by else np.zeros((points, by))
                entry = Value(at[:, left], slope, flat)
            elif name == "+":
                a, b = entries[left], entries[right]
                entry = Value(a.value + b.value, a.slope + b.slope, a.curve + b.curve)
            elif name == "*":
                entry = _product(entries[left], entries[right])
            elif name == "^":
                entry = _chained(entries[left], _raised(entries[left].value, number))
            elif name == "power":
                power = _product(entries[right], _chained(entries[left], _RULES["log"](entries[left].value)))
                entry = _chained(power, _RULES["exp"](power.value))
            else:
                entry = _chained(entries[left], _RULES[name](entries[left].value))
            entries.append(entry)
    return entries[-1]
