"""A pair of symmetric matrices, checked, and taken apart where it falls apart by itself."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import scipy.sparse
import scipy.sparse.csgraph

from resonate.errors import ModesError
from resonate.modes.factor import factorise

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from scipy.sparse import csr_matrix

    Array = NDArray[np.float64]

# Largest asymmetry, relative to the largest entry, that rounding in an assembly explains.
SYMMETRY = 1e-12


@dataclass(frozen=True, slots=True)
class Pencil:
    """Stiffness (n, n), N/m, and mass (n, n), kg, of some freedoms of a body.

    ``index`` (n,) are the places of these freedoms among those of the body; ``where`` names the
    body in errors.
    """

    stiffness: csr_matrix
    mass: csr_matrix
    index: NDArray[np.int64]
    where: str

    @property
    def size(self) -> int:
        """Number of freedoms n."""
        return len(self.index)

    @property
    def stiffest(self) -> float:
        """Largest ratio of diagonal entries, rad^2/s^2: the size of the largest eigenvalue."""
        return float(np.max(np.abs(self.stiffness.diagonal()) / self.mass.diagonal(), initial=0.0))

    @property
    def small_shift(self) -> float:
        """A shift, rad^2/s^2, that makes K + shift M definite and that no elastic mode notices.

        Rounding in K moves eigenvalues by about 2e-16 of the largest; this is 500 times as much.
        """
        return self.stiffest * 2.0**-43 if self.stiffest > 0.0 else 1.0

    def shifted(self, shift: float) -> csr_matrix:
        """``K + shift M``."""
        return scipy.sparse.csr_matrix(self.stiffness + shift * self.mass)


def _symmetric(matrix: csr_matrix, *, name: str, where: str) -> csr_matrix:
    checked = scipy.sparse.csr_matrix(matrix, dtype=np.float64, copy=True)
    checked.sum_duplicates()
    if checked.shape[0] != checked.shape[1]:
        raise ModesError(
            what=f"a {name} matrix of shape {checked.shape}",
            where=where,
            fix="give one row and one column for every freedom that the supports leave",
        )
    if not np.all(np.isfinite(checked.data)):
        raise ModesError(
            what=f"entries of the {name} matrix that are not finite: {np.sum(~np.isfinite(checked.data))}",
            where=where,
            fix="look for a zero thickness, length or density, or an element that is folded over",
        )
    largest = float(np.max(np.abs(checked.data), initial=0.0))
    difference = scipy.sparse.csr_matrix(checked - checked.T)
    worst = float(np.max(np.abs(difference.data), initial=0.0))
    if worst > SYMMETRY * largest:
        raise ModesError(
            what=(
                f"the {name} matrix is not symmetric: entries differ from their mirror images by up to "
                f"{worst:.3g}, where {SYMMETRY * largest:.3g} is allowed"
            ),
            where=where,
            fix="assemble it as the second derivative of an energy, which is symmetric",
        )
    exact = scipy.sparse.csr_matrix(0.5 * (checked + checked.T))
    exact.eliminate_zeros()
    exact.sort_indices()
    return exact


def check_pencil(stiffness: csr_matrix, mass: csr_matrix, *, where: str) -> Pencil:
    """Check the second derivatives of the two energies.

    Parameters
    ----------
    stiffness, mass : csr_matrix
        (f, f), N/m and kg.
    where : str
        The body, for errors.

    Returns
    -------
    Pencil
        Exactly symmetric copies.

    Raises
    ------
    ModesError
        If an entry is not finite, the shapes disagree, or either matrix is asymmetric by more than
        1e-12 of its largest entry, or a freedom has no mass.
    """
    stiff = _symmetric(stiffness, name="stiffness", where=where)
    heavy = _symmetric(mass, name="mass", where=where)
    if stiff.shape != heavy.shape:
        raise ModesError(
            what=f"stiffness of shape {stiff.shape} beside mass of shape {heavy.shape}",
            where=where,
            fix="both must cover the freedoms that the supports leave",
        )
    diagonal = heavy.diagonal()
    if np.any(diagonal <= 0.0):
        first = int(np.argmax(diagonal <= 0.0))
        raise ModesError(
            what=(
                f"{np.count_nonzero(diagonal <= 0.0)} of {len(diagonal)} freedoms have no mass "
                f"(the first is number {first}, with {diagonal[first]:.3g})"
            ),
            where=where,
            fix="give the material a density and every section a size above zero",
        )
    return Pencil(stiffness=stiff, mass=heavy, index=np.arange(len(diagonal)), where=where)


def check_mass(pencil: Pencil) -> None:
    """Raise ``ModesError`` when the mass matrix is not positive definite."""
    if pencil.mass.nnz == pencil.size:
        return  # diagonal, and its entries are positive
    negative = factorise(pencil.mass, definite=True).negative
    if negative != 0:
        raise ModesError(
            what=f"the mass matrix has {negative or 'some'} eigenvalues that are not positive",
            where=pencil.where,
            fix="some motion has no kinetic energy: refine the quadrature or give every part a density",
        )


def split(pencil: Pencil) -> tuple[Pencil, ...]:
    """Take apart what no entry of K or M couples (bending and stretching of a flat plate, say).

    The parts come largest first, those of one size in the order of their first freedom. Their modes together
    are the modes of the whole, and modes of different parts can never mix by rounding.
    """
    pattern = scipy.sparse.csr_matrix(abs(pencil.stiffness) + abs(pencil.mass))
    count, label = scipy.sparse.csgraph.connected_components(pattern, directed=False)
    if count == 1:
        return (pencil,)
    order = np.argsort(label, kind="stable")
    groups = np.split(order, np.cumsum(np.bincount(label, minlength=count))[:-1])
    groups.sort(key=lambda group: (-len(group), int(group[0])))
    stiffness, mass = pencil.stiffness, pencil.mass
    return tuple(
        Pencil(
            stiffness=stiffness[group][:, group],
            mass=mass[group][:, group],
            index=pencil.index[group],
            where=pencil.where,
        )
        for group in groups
    )
