"""Steps of a discrete Lagrangian, on tapes of operations.

References
----------
Griewank & Walther, Evaluating Derivatives (2008), ch. 3: forward differentiation.
Marsden & West, Discrete mechanics and variational integrators, Acta Numerica 10 (2001) 357, sec. 1.5 and 2.3.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from resonate.run.kernels.compiled import compiled
from resonate.scene.expression import CODES

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    IntArray = NDArray[np.int64]

_NUMBER, _VARIABLE, _PLUS, _TIMES = CODES["number"], CODES["variable"], CODES["+"], CODES["*"]
_RAISED, _POWER, _MINUS, _SQRT = CODES["^"], CODES["power"], CODES["-"], CODES["sqrt"]
_SIN, _COS, _TAN = CODES["sin"], CODES["cos"], CODES["tan"]
_ASIN, _ACOS, _ATAN = CODES["asin"], CODES["acos"], CODES["atan"]
_EXP, _LOG, _SINH, _COSH, _TANH, _ABS = (CODES[name] for name in ("exp", "log", "sinh", "cosh", "tanh", "abs"))
# Newton steps at most; the last must be this small against the coordinates, in units of rounding.
_MOST, _ROUNDINGS = 30, 8.0


@compiled
def _rule(code: int, number: float, x: float) -> tuple[float, float, float]:  # noqa: PLR0911 (a table of functions)
    if code == _MINUS:
        return -x, -1.0, 0.0
    if code == _RAISED:
        first = 0.0 if number == 0.0 else number * x ** (number - 1.0)
        twice = number * (number - 1.0)
        return x**number, first, 0.0 if twice == 0.0 else twice * x ** (number - 2.0)
    if code == _SQRT:
        y = np.sqrt(x)
        return y, 0.5 / y, -0.25 / (x * y)
    if code == _SIN:
        return np.sin(x), np.cos(x), -np.sin(x)
    if code == _COS:
        return np.cos(x), -np.sin(x), -np.cos(x)
    if code == _TAN:
        y = np.tan(x)
        return y, 1.0 + y * y, 2.0 * y * (1.0 + y * y)
    if code == _ASIN:
        rest = 1.0 - x * x
        return np.arcsin(x), rest**-0.5, x * rest**-1.5
    if code == _ACOS:
        rest = 1.0 - x * x
        return np.arccos(x), -(rest**-0.5), -x * rest**-1.5
    if code == _ATAN:
        rest = 1.0 + x * x
        return np.arctan(x), 1.0 / rest, -2.0 * x / (rest * rest)
    if code == _EXP:
        y = np.exp(x)
        return y, y, y
    if code == _LOG:
        return np.log(x), 1.0 / x, -1.0 / (x * x)
    if code == _SINH:
        return np.sinh(x), np.cosh(x), np.sinh(x)
    if code == _COSH:
        return np.cosh(x), np.sinh(x), np.cosh(x)
    if code == _TANH:
        y = np.tanh(x)
        return y, 1.0 - y * y, -2.0 * y * (1.0 - y * y)
    return np.abs(x), np.sign(x), 0.0  # abs; a path crosses its kink at no single point


@compiled
def _times(a: int, b: int, k: int, value: Array, slope: Array, curve: Array) -> None:
    size = slope.shape[1]
    value[k] = value[a] * value[b]
    for i in range(size):
        slope[k, i] = value[a] * slope[b, i] + value[b] * slope[a, i]
        for j in range(size):
            mixed = slope[a, i] * slope[b, j] + slope[b, i] * slope[a, j]
            curve[k, i, j] = value[a] * curve[b, i, j] + value[b] * curve[a, i, j] + mixed


@compiled
def _chain(a: int, k: int, rule: tuple[float, float, float], value: Array, slope: Array, curve: Array) -> None:
    size = slope.shape[1]
    for i in range(size):
        for j in range(size):
            curve[k, i, j] = rule[1] * curve[a, i, j] + rule[2] * slope[a, i] * slope[a, j]
    for i in range(size):
        slope[k, i] = rule[1] * slope[a, i]
    value[k] = rule[0]


@compiled
def derive(code: IntArray, link: IntArray, number: Array, x: Array, value: Array, slope: Array, curve: Array) -> None:
    """Run a tape at ``x`` (v,); fill ``value`` (k + 1,), ``slope`` (k + 1, v) and ``curve`` (k + 1, v, v).

    ``link`` (k, 2) are the entries that each operation takes; the last row of the outputs is spare.
    """
    last = len(code)
    for k in range(last):
        a, b = link[k, 0], link[k, 1]
        if code[k] == _NUMBER or code[k] == _VARIABLE:
            slope[k] = 0.0
            curve[k] = 0.0
            value[k] = number[k]
            if code[k] == _VARIABLE:
                value[k] = x[a]
                slope[k, a] = 1.0
        elif code[k] == _PLUS:
            value[k] = value[a] + value[b]
            slope[k] = slope[a] + slope[b]
            curve[k] = curve[a] + curve[b]
        elif code[k] == _TIMES:
            _times(a, b, k, value, slope, curve)
        elif code[k] == _POWER:
            _chain(a, last, _rule(_LOG, 0.0, value[a]), value, slope, curve)
            # b log a in its own place, then its exponential there.
            _times(b, last, k, value, slope, curve)
            _chain(k, k, _rule(_EXP, 0.0, value[k]), value, slope, curve)
        else:
            _chain(a, k, _rule(code[k], number[k], value[a]), value, slope, curve)


@compiled
def _solved(matrix: Array, right: Array) -> bool:
    """Gauss with pivots, in place: the answer is left in ``right``."""
    size = len(right)
    for i in range(size):
        best = i
        for j in range(i + 1, size):
            if abs(matrix[j, i]) > abs(matrix[best, i]):
                best = j
        if not abs(matrix[best, i]) > 0.0:
            return False
        if best != i:
            for j in range(size):
                matrix[i, j], matrix[best, j] = matrix[best, j], matrix[i, j]
            right[i], right[best] = right[best], right[i]
        for j in range(i + 1, size):
            factor = matrix[j, i] / matrix[i, i]
            for m in range(i, size):
                matrix[j, m] -= factor * matrix[i, m]
            right[j] -= factor * right[i]
    for i in range(size - 1, -1, -1):
        for j in range(i + 1, size):
            right[i] -= matrix[i, j] * right[j]
        right[i] /= matrix[i, i]
    return True


@compiled
def _step(
    q: Array,
    p: Array,
    rate: Array,
    h: float,
    t_code: IntArray,
    t_link: IntArray,
    t_number: Array,
    v_code: IntArray,
    v_link: IntArray,
    v_number: Array,
    t_value: Array,
    t_slope: Array,
    t_curve: Array,
    v_value: Array,
    v_slope: Array,
    v_curve: Array,
) -> bool:
    # One step of the midpoint Lagrangian h L((q0 + q1)/2, (q1 - q0)/h): solves p0 = -D1 Ld(q0, q1) for q1, then
    # p1 = D2 Ld = p0 + h dL/dq at the middle. `rate` is a guess of (q1 - q0)/h, and holds it afterwards.
    n, t_last, v_last = len(q), len(t_code) - 1, len(v_code) - 1
    x, middle = np.empty(2 * n), np.empty(n)
    matrix, right = np.empty((n, n)), np.empty(n)
    settled = False
    for _ in range(_MOST):
        for i in range(n):
            middle[i] = q[i] + 0.5 * h * rate[i]
            x[i], x[n + i] = middle[i], rate[i]
        derive(t_code, t_link, t_number, x, t_value, t_slope, t_curve)
        derive(v_code, v_link, v_number, middle, v_value, v_slope, v_curve)
        if settled:
            break
        for i in range(n):
            push = t_slope[t_last, i] - v_slope[v_last, i]
            right[i] = p[i] + 0.5 * h * push - t_slope[t_last, n + i]
            for j in range(n):
                # Of dL/drate - h/2 dL/dq by the rate: the place in the middle moves by h/2 with it.
                matrix[i, j] = (
                    t_curve[t_last, n + i, n + j]
                    + 0.5 * h * (t_curve[t_last, n + i, j] - t_curve[t_last, i, n + j])
                    - 0.25 * h * h * (t_curve[t_last, i, j] - v_curve[v_last, i, j])
                )
        if not _solved(matrix, right):
            return False
        settled = True
        for i in range(n):
            rate[i] += right[i]
            size = abs(q[i]) + abs(h * rate[i])
            if not abs(h * right[i]) <= _ROUNDINGS * 2.220446049250313e-16 * size:
                settled = False
    if not settled:
        return False
    for i in range(n):
        p[i] += h * (t_slope[t_last, i] - v_slope[v_last, i])
        q[i] += h * rate[i]
    return True


@compiled
def march_tapes(
    q: Array,
    p: Array,
    rate: Array,
    parts: Array,
    every: int,
    t_code: IntArray,
    t_link: IntArray,
    t_number: Array,
    v_code: IntArray,
    v_link: IntArray,
    v_number: Array,
    places: Array,
    momenta: Array,
) -> int:
    """Advance ``every`` times the substeps ``parts`` (s,) for each row of ``places`` and ``momenta`` but the first.

    Returns the number of rows that were filled.
    """
    n = len(q)
    t_value, t_slope = np.zeros(len(t_code) + 1), np.zeros((len(t_code) + 1, 2 * n))
    t_curve = np.zeros((len(t_code) + 1, 2 * n, 2 * n))
    v_value, v_slope = np.zeros(len(v_code) + 1), np.zeros((len(v_code) + 1, n))
    v_curve = np.zeros((len(v_code) + 1, n, n))
    places[0], momenta[0] = q, p
    for row in range(1, len(places)):
        for _ in range(every):
            for h in parts:
                if not _step(
                    q, p, rate, h, t_code, t_link, t_number, v_code, v_link, v_number,
                    t_value, t_slope, t_curve, v_value, v_slope, v_curve,
                ):  # fmt: skip
                    return row
        places[row], momenta[row] = q, p
    return len(places)
