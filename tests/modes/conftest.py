"""Small bodies with known spectra, given by their matrices."""

from __future__ import annotations

from dataclasses import dataclass, field
from types import SimpleNamespace

import numpy as np
import pytest
import scipy.sparse as sp

from resonate.body.body import Forms


@dataclass(frozen=True)
class Bands:
    """The bands of a scene's body."""

    heard_hz: float = 1e9
    solved_hz: float | None = None
    most: int = 300


@dataclass
class MatrixBody:
    """The part of a body that the modes need, from ready matrices."""

    stiffness: sp.csr_matrix
    mass: sp.csr_matrix
    name: str = "post"
    key: str = "post-1"
    family: str = "line"
    free: bool = False
    held: bool = False
    bands: Bands = field(default_factory=Bands)
    loss: tuple[tuple[float, float], ...] = ((1000.0, 0.0),)
    warnings: tuple[str, ...] = ()
    basis: sp.csr_matrix | None = None
    cords: sp.csr_matrix | None = None
    damper_rows: sp.csr_matrix | None = None
    damper_ns_m: np.ndarray = field(default_factory=lambda: np.zeros(0))
    heat: tuple = ()
    assembled: int = 0

    @property
    def freedoms(self):
        return self.stiffness.shape[0] if self.basis is None else self.basis.shape[0]

    def forms(self):
        self.assembled += 1
        size = self.stiffness.shape[0]
        return Forms(
            stiffness=sp.csr_matrix(self.stiffness),
            mass=sp.csr_matrix(self.mass),
            basis=sp.csr_matrix(sp.identity(size) if self.basis is None else self.basis),
            cords=self.cords,
            springs=None,
            damper_rows=sp.csr_matrix((0, size)) if self.damper_rows is None else self.damper_rows,
            damper_ns_m=self.damper_ns_m,
            heat=self.heat,
        )


def chain(count, *, spring_n_m=1.0, mass_kg=1.0, ends="fixed"):
    """Equal masses on equal springs; ends ``fixed`` or ``free``."""
    main = np.full(count, 2.0)
    if ends == "free":
        main[[0, -1]] = 1.0
    stiffness = spring_n_m * sp.diags([-np.ones(count - 1), main, -np.ones(count - 1)], [-1, 0, 1])
    return sp.csr_matrix(stiffness), sp.csr_matrix(mass_kg * sp.identity(count))


def beam(elements, *, length_m=1.0, bending_nm2=1.0, line_density_kg_m=1.0):
    """A free Euler-Bernoulli beam in one plane: cubic elements, consistent mass."""
    h = length_m / elements
    stiff = np.array(
        [
            [12, 6 * h, -12, 6 * h],
            [6 * h, 4 * h**2, -6 * h, 2 * h**2],
            [-12, -6 * h, 12, -6 * h],
            [6 * h, 2 * h**2, -6 * h, 4 * h**2],
        ]
    ) * (bending_nm2 / h**3)
    heavy = np.array(
        [
            [156, 22 * h, 54, -13 * h],
            [22 * h, 4 * h**2, 13 * h, -3 * h**2],
            [54, 13 * h, 156, -22 * h],
            [-13 * h, -3 * h**2, -22 * h, 4 * h**2],
        ]
    ) * (line_density_kg_m * h / 420)
    size = 2 * elements + 2
    stiffness, mass = np.zeros((2, size, size))
    for element in range(elements):
        at = slice(2 * element, 2 * element + 4)
        stiffness[at, at] += stiff
        mass[at, at] += heavy
    return sp.csr_matrix(stiffness), sp.csr_matrix(mass)


def grid(rows, columns):
    """A net of unit masses on unit springs, fixed all round: eigenvalues add up over the directions."""
    across, along = chain(rows)[0], chain(columns)[0]
    stiffness = sp.kron(across, sp.identity(columns)) + sp.kron(sp.identity(rows), along)
    return sp.csr_matrix(stiffness), sp.csr_matrix(sp.identity(rows * columns))


def together(*pencils):
    """Several pencils as one, without coupling."""
    return (
        sp.csr_matrix(sp.block_diag([stiffness for stiffness, _ in pencils])),
        sp.csr_matrix(sp.block_diag([mass for _, mass in pencils])),
    )


def spar(elements):
    """A free straight bar: two bending planes, stretching and twisting; 2 + 2 + 1 + 1 rigid motions."""
    return together(
        beam(elements),
        beam(elements, bending_nm2=2.0),
        chain(elements, spring_n_m=4e5, mass_kg=1.0 / elements, ends="free"),
        chain(elements, spring_n_m=1e5, mass_kg=1.0 / elements, ends="free"),
    )


@pytest.fixture
def make():
    """Builders of the small bodies."""
    return SimpleNamespace(
        Bands=Bands, Body=MatrixBody, chain=chain, beam=beam, grid=grid, together=together, spar=spar
    )
