"""In which way each mode moves its body, by where its kinetic energy sits."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final

import numpy as np

if TYPE_CHECKING:
    from resonate.body.body import Body
    from resonate.modes.modeset import ModeSet

# Which of the freedoms of a node belong to which motion. Lines: moves along x, y, z and turns about x, y, z.
# Plates: moves along x, y, z and turns about x and z. Skins: moves along y.
_MOTIONS: Final[dict[str, dict[str, tuple[int, ...]]]] = {
    "line": {"up": (1, 5), "across": (2, 4), "along": (0,), "twist": (3,)},
    "wall": {"bending": (1, 3, 4), "in-plane": (0, 2)},
    "skin": {"normal": (0,)},
}


def motions(body: Body, modes: ModeSet) -> tuple[str, ...]:
    """Name the motion that holds most of the kinetic energy of each mode (m,).

    Lines move ``up`` (along the body's y), ``across`` (z), ``along`` (x) or ``twist``; plates by ``bending`` or
    ``in-plane``; skins along their ``normal``; solids and points ``up``, ``across`` or ``along``.

    Parameters
    ----------
    body : Body
        The body; its mass is assembled for this.
    modes : ModeSet
        Its modes, solved or from the store.
    """
    if body.family not in _MOTIONS:
        return _moved(body, modes)
    kinds = _MOTIONS[body.family]
    fields = sum(len(places) for places in kinds.values())
    forms = body.forms()
    momentum = forms.basis @ (forms.mass @ (forms.basis.T @ modes.shape))
    # Shapes are mass-normalised: the products sum up to one over all freedoms.
    share = np.asarray(modes.shape * momentum).reshape(-1, fields, modes.count).sum(axis=0)
    parts = np.stack([share[list(places)].sum(axis=0) for places in kinds.values()])
    names = tuple(kinds)
    return tuple(names[place] for place in np.argmax(parts, axis=0))


def _moved(body: Body, modes: ModeSet) -> tuple[str, ...]:
    points = body.radiator.points_m
    moved = np.asarray(body.probe(points) @ modes.shape).reshape(len(points), 3, modes.count)
    names = ("along", "up", "across")
    return tuple(names[axis] for axis in np.argmax((moved**2).sum(axis=0), axis=0))
