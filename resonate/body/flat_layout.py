"""Where the elements of a plate or a membrane lie."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from resonate.body.outline import Edge, area, cut, edges
from resonate.body.polygon import openings
from resonate.body.waves import bending_wavenumber, top_frequency
from resonate.errors import BodyError
from resonate.scene.model import FixHold, MembraneShape, NamedHold, NamedPlace, PlateShape, PolygonOutline

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.spectral import Grid
    from resonate.scene.model import BodySpec, MaterialSpec, Outline

    Array = NDArray[np.float64]

ORDER = 6
# Reissner, J. Appl. Mech. 12 (1945) 69: the parabolic shear of a plate.
SHEAR = 5.0 / 6.0
# Nodes for each wavelength of the highest wanted mode.
_NODES_PER_WAVE = 4.2
# Largest number of nodes.
_BUDGET = 6000
_MARGIN = 1.1
# A plate thicker than this share of its smaller side is a block.
_THICK = 0.5
# A corner this little wider than the widest harmless one does no harm yet, rad.
_OPENED = 0.1
# Largest number of corners with small elements of their own.
_GRADED = 24


@dataclass(frozen=True)
class FlatLayout:
    """A plate or membrane ready to be assembled.

    ``rigidity`` (3, 3) plane-stress stiffness of the material, Pa, for strains (xx, zz, xz).
    """

    outline: Outline
    grid: Grid
    edges: dict[str, Edge]
    thickness_m: float
    tension_n_m: float
    rigidity: Array
    warnings: tuple[str, ...]


def plane_stress(material: MaterialSpec) -> Array:
    """Plane-stress stiffness (3, 3), Pa, for strains (xx, zz, 2 xz); direction 1 along x, 2 along z.

    References
    ----------
    Jones, Mechanics of Composite Materials, eq. 2.61.
    """
    along, across = material.young_pa[0], material.young_pa[1]
    first = material.poisson[0]
    second = first * across / along
    share = 1.0 - first * second
    return np.array(
        [
            [along / share, first * across / share, 0.0],
            [first * across / share, across / share, 0.0],
            [0.0, 0.0, material.shear_pa[0]],
        ]
    )


def _waves(spec: BodySpec, rigidity: Array, hertz: float) -> tuple[float, float, float]:
    """Wavenumbers along x and z of the bending (or tension) waves, and the squared sum of the in-plane ones."""
    shape, material = spec.shape, spec.material
    omega, density = 2.0 * np.pi * hertz, material.density_kg_m3
    if isinstance(shape, MembraneShape):
        wave = omega * np.sqrt(density * shape.thickness_m / shape.tension_n_m)
        return wave, wave, 0.0
    assert isinstance(shape, PlateShape)  # noqa: S101 (the caller sorts the kinds)
    thick = shape.thickness_m
    both = []
    for axis in range(2):
        shear = SHEAR * material.shear_pa[1 + axis] * thick
        wave = bending_wavenumber(
            omega,
            stiffness=np.array(rigidity[axis, axis] * thick**3 / 12.0),
            inertia=np.array(density * thick),
            turning=np.array(density * thick**3 / 12.0),
            shear=np.array(shear),
        )
        both.append(float(wave))
    stretch = float(np.sqrt(rigidity[0, 0] * rigidity[1, 1]))
    in_plane = omega**2 * density * (1.0 / stretch + 1.0 / rigidity[2, 2])
    return both[0], both[1], in_plane


def lay_flat(spec: BodySpec) -> FlatLayout:
    """Choose elements from the highest wanted frequency, within a budget.

    Raises
    ------
    BodyError
        If the plate is too thick for its outline, or the outline cannot be divided.
    """
    shape = spec.shape
    assert isinstance(shape, PlateShape | MembraneShape)  # noqa: S101 (the caller sorts the kinds)
    surface = area(shape.outline)
    _check_thickness(spec, surface)
    rigidity = plane_stress(spec.material)

    def expected(hertz: float) -> float:
        along, across, in_plane = _waves(spec, rigidity, hertz)
        return surface * (along * across + in_plane) / (4.0 * np.pi)

    top = top_frequency(
        expected, wanted=int(_MARGIN * spec.modes.most) + 8, highest_hz=spec.modes.solved_or_default_hz
    )
    along, across, _ = _waves(spec, rigidity, top)
    nodes = surface * along * across * (_NODES_PER_WAVE / (2.0 * np.pi)) ** 2
    warnings: tuple[str, ...] = ()
    coarser = max(1.0, float(np.sqrt(nodes / _BUDGET)))
    if coarser > 1.0:
        warnings = (
            f"body {spec.name!r}: a mesh of about {_BUDGET} nodes instead of the {nodes:.0f} that {top:.0f} Hz asks "
            f"for; modes are resolved up to about {top / coarser**2:.0f} Hz",
        )
    size = tuple(2.0 * np.pi * ORDER / _NODES_PER_WAVE / wave * coarser for wave in (along, across))
    graded, told = _singular(spec)
    grid = cut(shape.outline, size_m=(size[0], size[1]), order=ORDER, graded=graded)
    tension = shape.tension_n_m if isinstance(shape, MembraneShape) else 0.0
    return FlatLayout(
        shape.outline, grid, edges(shape.outline, grid), shape.thickness_m, tension, rigidity, warnings + told
    )


def _singular(spec: BodySpec) -> tuple[tuple[int, ...], tuple[str, ...]]:
    """Corners of a polygon where the supports make stresses infinite, and a warning where they are too many.

    Moments grow as r^(pi/a - 2) in a pinned corner that opens by a (Williams, J. Appl. Mech. 19 (1952) 526):
    a right angle is the widest where they stay finite. Clamped corners, and skins, bear up to half a turn.
    """
    outline = spec.shape.outline if isinstance(spec.shape, PlateShape | MembraneShape) else None
    if not isinstance(outline, PolygonOutline):
        return (), ()
    corners = np.array(outline.corners_m)
    count = len(corners)
    hinged, held = np.zeros(count, dtype=bool), np.zeros(count, dtype=bool)
    for hold in spec.support:
        if not isinstance(hold.where, NamedPlace) or not isinstance(hold.hold, NamedHold | FixHold):
            continue
        for name in hold.where.names:
            sides = slice(None) if name == "edge" else int(name.removeprefix("edge")) - 1
            held[sides] = True
            clamped = isinstance(hold.hold, NamedHold) and hold.hold.kind in ("clamped", "guided")
            hinged[sides] = isinstance(spec.shape, PlateShape) and not clamped
    opening = openings(corners)
    both = held & np.roll(held, 1)
    wide = np.where(hinged | np.roll(hinged, 1), 0.5 * np.pi, np.pi)
    found = np.flatnonzero(both & (opening > wide + _OPENED))
    if len(found) <= _GRADED:
        return tuple(found.tolist()), ()
    return (), (
        f"body {spec.name!r}: {len(found)} wide corners of a pinned outline are more than the {_GRADED} that can be "
        "resolved; its lowest modes may lie a few percent high",
    )


def _check_thickness(spec: BodySpec, surface: float) -> None:
    shape = spec.shape
    assert isinstance(shape, PlateShape | MembraneShape)  # noqa: S101 (the caller sorts the kinds)
    side = float(np.sqrt(surface))
    if shape.thickness_m > _THICK * side:
        raise BodyError(
            what=f"thickness {shape.thickness_m:g} m for an outline of about {side:g} m a side",
            where=f"body {spec.name!r}",
            fix=f"a {shape.kind} is thinner than {_THICK:g} of its side; make it thinner or wider",
        )
