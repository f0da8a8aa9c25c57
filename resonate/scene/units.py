"""Quantities with units: bare numbers are SI, strings may carry a unit of a short list.

Factors are exact by definition (BIPM, SI Brochure, 9th ed., 2019, tables 8 and 9; NIST SP 811,
2008, appendix B); a string such as ``"3 mm"`` becomes the float nearest to the exact value.
"""

from __future__ import annotations

import math
import re
from fractions import Fraction
from typing import TYPE_CHECKING, Final

from resonate.scene.names import listing, nearest
from resonate.scene.refused import RefusedError, shown

if TYPE_CHECKING:
    from collections.abc import Mapping

_TURN: Final = Fraction(2 * math.pi)
_MINUTE: Final = 60
_HOUR: Final = 3600


def _si(**prefixed: str) -> dict[str, Fraction]:
    return {name: Fraction(factor) for name, factor in prefixed.items()}


_LENGTH: Final = _si(m="1", km="1000", cm="1/100", mm="1/1000", um="1/1000000", ft="0.3048") | {
    "in": Fraction("0.0254"),
    "µm": Fraction("1/1000000"),
    "μm": Fraction("1/1000000"),
}
_FORCE: Final = _si(N="1", kN="1000", mN="1/1000")
_TENSION: Final = {"N/m": Fraction(1), "kN/m": Fraction(1000), "N/mm": Fraction(1000)}

#: Dimension -> unit -> factor to SI.
UNITS: Final[Mapping[str, Mapping[str, Fraction]]] = {
    "length": _LENGTH,
    "time": _si(s="1", ms="1/1000", us="1/1000000", min="60")
    | {"µs": Fraction("1/1000000"), "μs": Fraction("1/1000000")},
    "speed": {
        "m/s": Fraction(1),
        "mm/s": Fraction(1, 1000),
        "cm/s": Fraction(1, 100),
        "km/h": Fraction(1000, _HOUR),
    },
    "angle": {"rad": Fraction(1), "deg": _TURN / 360, "turn": _TURN},
    "frequency": _si(Hz="1", kHz="1000"),
    "mass": _si(kg="1", g="1/1000", mg="1/1000000", t="1000"),
    "force": _FORCE,
    "pressure": _si(Pa="1", hPa="100", kPa="1000", MPa="1000000", GPa="1000000000"),
    "density": {
        "kg/m^3": Fraction(1),
        "kg/m3": Fraction(1),
        "g/cm^3": Fraction(1000),
        "g/cm3": Fraction(1000),
    },
    "tension": _TENSION,
    "stiffness": _TENSION | {"MN/m": Fraction(1_000_000)},
    "damping": {"N s/m": Fraction(1), "N*s/m": Fraction(1), "Ns/m": Fraction(1)},
    "temperature": {"K": Fraction(1), "degC": Fraction(1)},
    "level": {"dB": Fraction(1)},
    "acceleration": {"m/s^2": Fraction(1), "m/s2": Fraction(1)},
    "spin": {
        "rad/s": Fraction(1),
        "deg/s": _TURN / 360,
        "rev/s": _TURN,
        "turn/s": _TURN,
        "rpm": _TURN / _MINUTE,
    },
    "expansion": {"1/K": Fraction(1), "um/(m K)": Fraction(1, 10**6)},
    "conductivity": {"W/(m K)": Fraction(1), "W/mK": Fraction(1)},
    "specific heat": {"J/(kg K)": Fraction(1), "J/kgK": Fraction(1)},
    "fraction": {"%": Fraction(1, 100)},
    "number": {},
}

_ZERO_CELSIUS: Final = Fraction("273.15")  # SI Brochure, 2.3.1
_LONGEST: Final = 64  # characters of a quantity; longer text is never a sensible one
_WRITTEN: Final = re.compile(r"([+-]?(?:\d[\d_]*\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(\S.*)?")


def quantity(value: object, dimension: str) -> float:
    """Read a quantity and return it in SI units.

    Parameters
    ----------
    value : int, float or str
        A bare number is SI already; a string is a number and a unit.
    dimension : str
        A key of ``UNITS``: ``"length"``, ``"speed"`` and so on.

    Returns
    -------
    float
        The value in the SI unit of the dimension; finite.

    Raises
    ------
    RefusedError
        If it is not a number, not finite, or its unit is not one of the dimension's.

    Examples
    --------
    >>> quantity("3 mm", "length"), quantity("2.5 m/s", "speed"), quantity("20 degC", "temperature")
    (0.003, 2.5, 293.15)
    >>> quantity("4.1 g/cm^3", "density"), quantity("50 %", "fraction"), quantity(0.25, "length")
    (4100.0, 0.5, 0.25)
    """
    return float(exact_quantity(value, dimension))


def exact_quantity(value: object, dimension: str) -> Fraction:
    """Read a quantity as an exact fraction of the SI unit; decimals keep their written value.

    >>> exact_quantity("41.7 ms", "time"), exact_quantity(0.1, "time")
    (Fraction(417, 10000), Fraction(1, 10))
    """
    if isinstance(value, bool):
        raise RefusedError(f"{shown(value)} is not a {_noun(dimension)}", f"give {_example(dimension)}")
    if isinstance(value, int | float):
        return _exact_number(repr(value), value, dimension)
    if not isinstance(value, str):
        raise RefusedError(f"{shown(value)} is not a {_noun(dimension)}", f"give {_example(dimension)}")
    return _exact_text(value, dimension)


def _exact_text(text: str, dimension: str) -> Fraction:
    found = _WRITTEN.fullmatch(text.strip())
    if found is None or len(text) > _LONGEST:
        raise _unreadable(text, dimension)
    number, unit = found.group(1), " ".join((found.group(2) or "").split())
    if unit.startswith(",") and unit[1:2].isdigit():
        raise RefusedError(f"{shown(text)} has a decimal comma", "write decimals with a point, as in 1.5")
    amount = _exact_number(number, text, dimension)
    if not unit:
        return amount
    factors = UNITS[dimension]
    if unit not in factors:
        raise _wrong_unit(unit, text, dimension)
    if dimension == "temperature" and unit == "degC":
        return amount + _ZERO_CELSIUS
    result = amount * factors[unit]
    _check_finite(result, text)
    return result


def _exact_number(number: str, given: object, dimension: str) -> Fraction:
    # The float comes first: it bounds the exponent before an exact power of ten is formed.
    try:
        near = float(number)
    except (ValueError, OverflowError) as error:
        raise _unreadable(given, dimension) from error
    if not math.isfinite(near):
        raise RefusedError(f"{shown(given)} is not a finite number", f"give {_example(dimension)}")
    if near == 0.0:
        if re.search("[1-9]", number.lower().split("e")[0]):
            raise RefusedError(
                f"{shown(given)} is too small to be told from 0", "write 0, or a larger number"
            )
        return Fraction(0)
    return Fraction(number)


def _check_finite(amount: Fraction, given: object) -> None:
    try:
        float(amount)
    except OverflowError as error:
        raise RefusedError(f"{shown(given)} is not a finite number", "give a smaller number") from error


def _unreadable(given: object, dimension: str) -> RefusedError:
    text = str(given).strip().lower()
    if re.fullmatch(r"[+-]?\d+,\d+.*", text):
        return RefusedError(f"{shown(given)} has a decimal comma", "write decimals with a point, as in 1.5")
    if re.match(r"[+-]?(nan|inf)", text):
        return RefusedError(f"{shown(given)} is not a finite number", f"give {_example(dimension)}")
    return RefusedError(f"{shown(given)} is not a {_noun(dimension)}", f"give {_example(dimension)}")


def _wrong_unit(unit: str, text: str, dimension: str) -> RefusedError:
    allowed = [name for name in UNITS[dimension] if name.isascii()]
    other = [name for name, units in UNITS.items() if unit in units]
    if not allowed:
        return RefusedError(
            f"{shown(text)} carries a unit, but this is a plain number", "give the number alone"
        )
    what = f"'{unit}' is not a {dimension} unit"
    if other:
        what += f" but one of {other[0]}"
    close = nearest(unit, allowed)
    hint = f"did you mean '{close}'? " if close and not other else ""
    return RefusedError(f"{what} ({shown(text)})", f"{hint}use one of {listing(allowed)}")


def _noun(dimension: str) -> str:
    return "plain number" if dimension == "number" else dimension


def _example(dimension: str) -> str:
    units = list(UNITS[dimension])
    if not units:
        return "a number such as 0.5"
    if dimension == "fraction":
        return 'a number from 0 to 1, or text such as "50 %"'
    return f'a number in {units[0]}, or text such as "1.5 {units[-1 if dimension == "temperature" else 0]}"'
