"""A body in, its modes out."""

from __future__ import annotations

import dataclasses
from typing import TYPE_CHECKING

import numpy as np
from threadpoolctl import threadpool_limits

from resonate.errors import ModesError
from resonate.modes.decay import decays, energy_share, within_critical
from resonate.modes.modeset import ModeSet
from resonate.modes.pencil import Pencil, check_pencil, split
from resonate.modes.rigid import FREE_COUNT, rounding
from resonate.modes.spectrum import CLUSTER, Spectrum, cut, lowest
from resonate.modes.store import load_modes, modes_key, save_modes

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    from resonate.body.body import Body
    from resonate.modes.store import ModeStore

    Array = NDArray[np.float64]

# Default of `solved`, as a multiple of `heard`: contact feels modes that nobody hears.
SOLVED_TIMES_HEARD = 4.0
# Strain energy share above which a slow mode is a swing on the cords.
SWING_SHARE = 0.99
# A body on cords swings in six ways at most; these do not count against the budget.
SWINGS = 6
# Largest accepted residual, and departure from orthonormality.
RESIDUAL = 1e-8
RESIDUAL_MOST = 1e-4
ORTHONORMAL = 1e-10
# Entries this close to the largest compete for fixing the sign; the first of them wins.
SIGN_TIE = 1e-6


@dataclasses.dataclass(frozen=True, slots=True)
class _Found:
    # All parts of the body together, over the f freedoms: rigid (f, r), value (m,), vector (f, m).
    rigid: Array
    value: Array
    vector: Array
    residual: Array
    beyond: float
    proved: bool


def solved_hz(body: Body) -> float:
    """Tell the frequency, Hz, up to which modes are asked for."""
    bands = body.bands
    return SOLVED_TIMES_HEARD * bands.heard_hz if bands.solved_hz is None else bands.solved_hz


def solve_modes(body: Body, *, store: ModeStore | None = None) -> ModeSet:
    """Find the rigid motions, the modes and their decay, or fetch them from the store.

    Solves ``K phi = omega^2 M phi`` for every mode up to ``solved_hz`` (default four times
    ``heard_hz``), but for the ``most`` lowest at most. Runs on one thread, so that the number of
    processors cannot change a bit of the answer.

    Parameters
    ----------
    body : Body
        Its forms are assembled only when the store does not hold the answer.
    store : ModeStore, optional
        Where solved modes are kept. Trouble with it is a warning in the result, never an error.

    Returns
    -------
    ModeSet
        Modes ascending, mass-normalised, the largest entry of each positive.

    Raises
    ------
    ModesError
        If K or M is not symmetric, M not positive definite, K indefinite, a free body does not have
        six rigid motions, or a mode fails its residual.

    References
    ----------
    Bathe, Finite Element Procedures (1996), chapters 10 and 11.
    """
    with threadpool_limits(limits=1):
        key = modes_key(body, solved_hz=solved_hz(body))
        modes = load_modes(store, key) if store is not None else None
        trouble = ""
        if modes is None:
            modes = _solve(body)
            trouble = save_modes(store, key, modes) if store is not None else ""
    # What is kept serves any body of the same content, so names come in only here.
    notes = [f"body {body.name!r}: {note}" for note in (*modes.warnings, trouble) if note]
    return dataclasses.replace(modes, body=body.name, key=body.key, warnings=(*body.warnings, *notes))


def _solve(body: Body) -> ModeSet:
    where = f"body {body.name!r}"
    forms = body.forms()
    pencil = check_pencil(forms.stiffness, forms.mass, where=where)
    if forms.basis.shape != (body.freedoms, pencil.size):
        raise ModesError(
            what=f"a basis of shape {forms.basis.shape} for {body.freedoms} and {pencil.size} freedoms",
            where=where,
            fix="the basis takes the freedoms that the supports leave to all of them",
        )
    if not pencil.size:
        raise ModesError(
            what="its supports hold all of it, so that nothing is left to ring",
            where=where,
            fix="hold less of it",
        )
    most, asked = body.bands.most, solved_hz(body)
    spare = SWINGS if forms.cords is not None else 0
    top = (2.0 * np.pi * asked) ** 2
    found = _merge(pencil, split(pencil), most=most + spare, top=top, free=body.free)
    _check(found, pencil, free=body.free, where=where)
    swing = _swings(forms.cords, found)
    keep = cut(found.value, most=most + swing, top=top)
    omega = np.sqrt(found.value[:keep])
    vector = _signed(found.vector[:, :keep])
    whole = keep == len(found.value) and found.beyond > top
    last_hz = float(omega[-1] / (2.0 * np.pi)) if keep else 0.0
    beyond = float(found.value[keep]) if keep < len(found.value) else found.beyond
    notes = _warnings(body, omega[swing:], whole=whole, asked=asked, next_hz=np.sqrt(beyond) / (2.0 * np.pi))
    decay, strong = within_critical(decays(forms, body.loss, vector, omega), omega)
    notes = (*notes, *strong)
    if not found.proved:
        notes = (*notes, "counting pivots could not confirm that no mode is missing")
    return ModeSet(
        body=body.name,
        key=body.key,
        omega=omega,
        shape=np.asarray(forms.basis @ vector),
        # A held body rings but does not move as a whole.
        rigid=np.asarray(forms.basis @ _signed(found.rigid[:, :0] if body.held else found.rigid)),
        decay=decay,
        residual=found.residual[:keep],
        heard=int(np.searchsorted(omega, 2.0 * np.pi * body.bands.heard_hz, side="right")),
        heard_hz=body.bands.heard_hz,
        solved_hz=asked if whole else last_hz,
        warnings=notes,
        swing=swing,
    )


def _merge(pencil: Pencil, parts: tuple[Pencil, ...], *, most: int, top: float, free: bool) -> _Found:
    """Solve the parts one after the other; later ones need only reach what earlier ones left open."""
    spectra: list[Spectrum] = []
    limit, beyond = top, np.inf
    for number, part in enumerate(parts):
        twin = number > 0 and _same(part, parts[number - 1])
        spectra.append(spectra[-1] if twin else lowest(part, most=most, top=limit, free=free))
        values = np.sort(np.concatenate([spectrum.value for spectrum in spectra]))
        beyond = min(beyond, spectra[-1].beyond)
        limit = min(limit, beyond, float(values[most - 1]) if len(values) >= most else np.inf)
    value = np.concatenate([spectrum.value for spectrum in spectra])
    order = np.argsort(value, kind="stable")
    keep = cut(value[order], most=most, top=top)
    if keep < len(value):
        beyond = min(beyond, float(value[order[keep]]))
    # One part may have been left off within a cluster that another part has whole.
    order = order[:keep]
    clear = order[value[order] < beyond * (1.0 - CLUSTER)]
    order = clear if len(clear) else order
    return _Found(
        rigid=_spread(pencil, parts, [spectrum.rigid for spectrum in spectra]),
        value=value[order],
        vector=_spread(pencil, parts, [spectrum.vector for spectrum in spectra])[:, order],
        residual=np.concatenate([spectrum.residual for spectrum in spectra])[order],
        beyond=beyond,
        proved=all(spectrum.proved for spectrum in spectra),
    )


def _same(one: Pencil, other: Pencil) -> bool:
    """Whether two parts are equal number by number, as the two of a round body are."""
    return all(
        left.nnz == right.nnz
        and np.array_equal(left.indptr, right.indptr)
        and np.array_equal(left.indices, right.indices)
        and np.array_equal(left.data, right.data)
        for left, right in ((one.stiffness, other.stiffness), (one.mass, other.mass))
    )


def _spread(pencil: Pencil, parts: tuple[Pencil, ...], blocks: list[Array]) -> Array:
    whole = np.zeros((pencil.size, sum(block.shape[1] for block in blocks)))
    column = 0
    for part, block in zip(parts, blocks, strict=True):
        whole[part.index, column : column + block.shape[1]] = block
        column += block.shape[1]
    return whole


def _check(found: _Found, pencil: Pencil, *, free: bool, where: str) -> None:
    count = found.rigid.shape[1]
    if free and count != FREE_COUNT:
        raise ModesError(
            what=f"a free body has {FREE_COUNT} rigid motions, but {count} were found",
            where=where,
            fix="an element resists rigid motion, or parts are not joined: look at the mesh and the strains",
        )
    doubtful = np.flatnonzero(~(found.residual <= RESIDUAL))
    # Where the softest modes lie 1e13 below the stiffest, rounding in K alone does more than that; what it does to the
    # softest, such as swings, also leaks into the others.
    leak = rounding(pencil, found.vector[:, :FREE_COUNT]) / np.sqrt(found.value[:FREE_COUNT])
    own = rounding(pencil, found.vector[:, doubtful]) / found.value[doubtful]
    unavoidable = np.maximum(own, np.max(leak, initial=0.0) / np.sqrt(found.value[doubtful]))
    allowed = np.clip(10.0 * unavoidable, RESIDUAL, RESIDUAL_MOST)
    for number, limit in zip(doubtful, allowed, strict=True):
        size = found.residual[number]
        if not size <= limit:
            raise ModesError(
                what=f"mode {number + 1} has a residual of {size:.2g}; {limit:.1g} would do",
                where=where,
                fix="sizes or moduli differ too much within the body: use fewer or better shaped elements",
            )
    both = np.hstack([found.rigid, found.vector])
    error = np.abs(both.T @ (pencil.mass @ both) - np.eye(both.shape[1]))
    if float(np.max(error, initial=0.0)) > ORTHONORMAL:
        raise ModesError(
            what=f"modes depart from orthonormality by {float(np.max(error)):.2g}",
            where=where,
            fix="this is a defect of the solver; report it with the scene",
        )


def _swings(cords: csr_matrix | None, found: _Found) -> int:
    """How many leading modes are swings: almost all their energy sits in the cords."""
    share = energy_share(cords, found.vector, np.sqrt(found.value))
    swinging = share > SWING_SHARE
    return len(share) if np.all(swinging) else int(np.argmin(swinging))


def _signed(vector: Array) -> Array:
    """Make the largest entry of each column positive, the first of them where several tie."""
    if not vector.size:
        return vector
    size = np.abs(vector)
    row = np.argmax(size >= (1.0 - SIGN_TIE) * np.max(size, axis=0), axis=0)
    sign: Array = np.where(vector[row, np.arange(vector.shape[1])] < 0.0, -1.0, 1.0)
    return vector * sign


def _warnings(body: Body, omega: Array, *, whole: bool, asked: float, next_hz: float) -> tuple[str, ...]:
    notes: list[str] = []
    frequency_hz = omega / (2.0 * np.pi)
    if not whole:
        reach = f"up to {frequency_hz[-1]:.0f} Hz" if len(omega) else "none of a cluster"
        heard_hz, last_hz = body.bands.heard_hz, float(frequency_hz[-1]) if len(omega) else 0.0
        deaf = f"nothing is heard from there to {heard_hz:.0f} Hz"
        said = deaf if last_hz < heard_hz else f"{asked:.0f} Hz was asked"
        notes.append(
            f"{len(omega)} modes are kept, {reach}; {said} "
            f"(the next mode is at {next_hz:.0f} Hz; modes.most = {body.bands.most})"
        )
    first_hz = float(frequency_hz[0]) if len(omega) else next_hz
    if first_hz > body.bands.heard_hz:
        what = f"its first mode is at {first_hz:.0f} Hz" if np.isfinite(first_hz) else "it has no mode at all"
        notes.append(f"{what}, above the {body.bands.heard_hz:.0f} Hz that are heard: it will not ring")
    return tuple(notes)
