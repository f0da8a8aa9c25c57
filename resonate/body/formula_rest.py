"""The rest state of a formula, and the second derivatives of its energies there."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import scipy.linalg

from resonate.body.tape import evaluate
from resonate.errors import BodyError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.scene.expression import Tape
    from resonate.scene.formula import FormulaShape

    Array = NDArray[np.float64]

_STEPS = 300
# A step this small against the coordinate has arrived; one this large is cut; so far away there is no rest.
_ARRIVED, _STRIDE, _LOST = 1e-13, 0.5, 1e6
# Curvature below this share of the largest is none; slopes below this share of what curvature makes of a unit step.
_FLAT = 1e-10
_UNSTABLE = 1e-9
# Kinetic energies of doubled and reversed rates agree with a quadratic form to this.
_QUADRATIC = 1e-9
# Potential departs from its parabola by this share where the pitch begins to glide.
_GLIDE = 0.05
_HALVINGS = 40
# Masses and stiffnesses beyond this, in SI units, are slips.
_LARGEST = 1e24
# rad^2/s^2
_NOTHING = 1e-16


@dataclass(frozen=True, slots=True)
class Rest:
    """``place`` (n,) of the coordinates; ``mass`` and ``stiffness`` (n, n) there."""

    place: Array
    mass: Array
    stiffness: Array


def _refusal(name: str, what: str, fix: str) -> BodyError:
    return BodyError(what=what, where=f"body {name!r}", fix=fix)


def _mass(tape: Tape, place: Array, *, name: str) -> Array:
    """Second derivative of T by the rates, checked to be a quadratic form of them."""
    count = len(place)
    rates = np.random.default_rng(1).standard_normal((3, count))
    tried = np.vstack([np.zeros(count), *(sign * scale * rates for scale in (1.0, 2.0) for sign in (1.0, -1.0))])
    at = np.hstack([np.broadcast_to(place, tried.shape), tried])
    found = evaluate(tape, at, by=2 * count)
    still, once, back, twice = found.value[0], found.value[1:4], found.value[4:7], found.value[7:10]
    if not np.all(np.isfinite(found.value)) or not np.all(np.isfinite(found.curve[0])):
        fix = "look for a division by zero or a root below 0"
        raise _refusal(name, "the kinetic energy is not a number at rest", fix)
    error = max(np.abs(still), float(np.abs(once - back).max()), float(np.abs(twice - 4.0 * once).max()))
    if error > _QUADRATIC * max(float(np.abs(once).max()), 1e-300):
        raise _refusal(
            name,
            "the kinetic energy is no quadratic form of the rates",
            "every term takes two rates, as in m*a'^2/2; what depends on places alone belongs to the potential",
        )
    mass = found.curve[0, count:, count:]
    value = np.linalg.eigvalsh(0.5 * (mass + mass.T) / _scale(mass))
    if not value[0] > 1e-12 * value[-1]:
        raise _refusal(
            name,
            "some motion of the coordinates carries no kinetic energy at rest",
            "give every coordinate its rate in kinetic, and choose coordinates that mean something there",
        )
    return np.asarray(0.5 * (mass + mass.T))


def _scale(matrix: Array) -> Array:
    size = np.sqrt(np.maximum(np.abs(np.diag(matrix)), 1e-300))
    return np.outer(size, size)


def find_rest(shape: FormulaShape, *, name: str) -> Rest:
    """Go down the potential from where the coordinates begin, and check what is found.

    Newton's method with the curvature made positive (Nocedal & Wright, Numerical Optimization, sec. 3.4), in
    coordinates in which the mass is one, so that units do not matter.

    Raises
    ------
    BodyError
        If there is no rest, it is unstable, or an energy has no second derivatives there.
    """
    kinetic, potential = shape.kinetic_tape(), shape.potential_tape()
    start = np.array([begin for _, begin in shape.coordinates])
    count = len(start)
    place, damping = start.copy(), 0.0
    for _ in range(_STEPS):
        root = scipy.linalg.cholesky(_mass(kinetic, place, name=name), lower=True)
        found = evaluate(potential, place[None], by=count)
        slope, bend = found.slope[0], found.curve[0]
        if not (np.isfinite(found.value[0]) and np.all(np.isfinite(slope)) and np.all(np.isfinite(bend))):
            raise _refusal(
                name,
                f"the potential energy has no value, slope or curvature at {_told(shape, place)}",
                "begin elsewhere: coordinates = {a = 0.1}; a kink such as abs(a) cannot be a place of rest",
            )
        value, vector = np.linalg.eigh(_unit_mass(bend, root))
        along = vector.T @ scipy.linalg.solve_triangular(root, slope, lower=True)
        size = float(np.abs(value).max(initial=0.0))
        # In a direction without curvature, a slope that is rounding is none.
        quiet = np.abs(along) <= _FLAT * (float(np.abs(along).max(initial=0.0)) + size)
        newton = -along / np.maximum(np.abs(value) + damping, 1e-300)
        step = np.where(quiet & (np.abs(value) <= _FLAT * size), 0.0, newton)
        moved = scipy.linalg.solve_triangular(root.T, vector @ step, lower=False)
        reach = np.abs(moved) / (_STRIDE * (1.0 + np.abs(place)))
        moved = moved / max(1.0, float(reach.max()))
        if np.all(np.abs(moved) <= _ARRIVED * (1.0 + np.abs(place))):
            return _settled(shape, kinetic, place + moved, name=name)
        tried = evaluate(potential, (place + moved)[None], by=count).value[0]
        if np.isfinite(tried) and tried <= found.value[0] + 1e-14 * abs(found.value[0]):
            place, damping = place + moved, 0.1 * damping
        else:
            damping = max(10.0 * damping, 1e-3 * size)
        if float(np.abs(place).max()) > _LOST * (1.0 + float(np.abs(start).max())):
            break
    raise _refusal(
        name,
        f"its potential energy leads to no rest from {_told(shape, start)}",
        "add what holds it (a spring, a bowl, its weight), or begin nearer to rest: coordinates = {a = 0.1}",
    )


def _unit_mass(matrix: Array, root: Array) -> Array:
    half = scipy.linalg.solve_triangular(root, matrix, lower=True)
    both = scipy.linalg.solve_triangular(root, half.T, lower=True)
    return np.asarray(0.5 * (both + both.T))


def _settled(shape: FormulaShape, kinetic: Tape, place: Array, *, name: str) -> Rest:
    mass = _mass(kinetic, place, name=name)
    found = evaluate(shape.potential_tape(), place[None], by=len(place))
    stiffness = 0.5 * (found.curve[0] + found.curve[0].T)
    value = np.linalg.eigvalsh(_unit_mass(stiffness, scipy.linalg.cholesky(mass, lower=True)))
    if value[0] < -_UNSTABLE * max(abs(value[-1]), 1e-300):
        raise _refusal(
            name,
            f"the rest at {_told(shape, place)} is unstable: it would fall away from there",
            "begin on the other side, or add what holds it: coordinates = {a = 0.1}",
        )
    for what, key, size in (("kinetic", "masses", mass), ("potential", "stiffnesses", stiffness)):
        largest, least = float(np.abs(size).max()), float(np.abs(np.diag(size)).min())
        if largest > _LARGEST or (what == "kinetic" and least < 1.0 / _LARGEST):
            raise _refusal(name, f"{what} makes {key} of {largest:.3g} to {least:.3g}", "look for a slip of the unit")
    # What is so soft that it would take years to swing once is not held at all.
    soft = np.abs(stiffness) < _NOTHING * np.sqrt(np.outer(np.diag(mass), np.diag(mass)))
    return Rest(place, mass, np.where(soft, 0.0, stiffness))


def _told(shape: FormulaShape, place: Array) -> str:
    return ", ".join(f"{name} = {value:.6g}" for name, value in zip(shape.names, place, strict=True))


def glides_at(shape: FormulaShape, rest: Rest, motion: Array) -> float:
    """Displacement (m) of a mode at which the potential leaves its parabola by 5 %; infinite if it never does.

    ``motion`` (p, 3, n): how points of the body move with the coordinates.
    """
    value, vector = scipy.linalg.eigh(rest.stiffness, rest.mass)
    tape, least = shape.potential_tape(), np.inf
    base = evaluate(tape, rest.place[None], by=len(value)).value[0]
    for number in range(len(value)):
        if value[number] <= _FLAT * value[-1]:
            continue
        moved = np.linalg.norm(motion @ vector[:, number], axis=1).max(initial=0.0)
        if moved == 0.0:
            continue
        # From one metre, or one turn, down to where both sides follow the parabola.
        amplitude = 1.0 / max(moved, float(np.abs(vector[:, number]).max()))
        for _ in range(_HALVINGS):
            sides = rest.place + np.array([[amplitude], [-amplitude]]) * vector[:, number]
            rise = evaluate(tape, sides, by=len(value)).value - base
            parabola = 0.5 * value[number] * amplitude**2
            if np.all(np.abs(rise - parabola) <= _GLIDE * parabola):
                break
            amplitude *= 0.7
        least = min(least, amplitude * float(moved))
    return float(least)
