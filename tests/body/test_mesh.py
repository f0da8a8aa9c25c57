"""Laws that hold for every mesh and every set of constraints."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_allclose
from scipy.sparse import csr_matrix

from resonate.body.energy import eliminate
from resonate.body.outline import cut, edges
from resonate.body.polygon import openings
from resonate.body.spectral import gauss, lagrange, line_grid, lobatto, lobatto_weights
from resonate.scene.model import PolygonOutline
from tests.body import exact
from tests.body.samples import EVERY, PLATES, build

order = st.integers(2, 16)


# Nodes and weights.

# Abramowitz & Stegun, Handbook of Mathematical Functions, table 25.6 (Lobatto), n = 3 to 6.
LOBATTO = {
    2: ([0.0], [1.33333333, 0.33333333]),
    3: ([0.44721360], [0.83333333, 0.16666667]),
    4: ([0.0, 0.65465367], [0.71111111, 0.54444444, 0.10000000]),
    5: ([0.28523152, 0.76505532], [0.55485837, 0.37847496, 0.06666667]),
}


@pytest.mark.parametrize("degree", LOBATTO)
def test_nodes_and_weights_are_those_of_the_table(degree):
    inner, weights = LOBATTO[degree]
    positive = lobatto(degree) >= -1e-12

    assert_allclose(lobatto(degree)[positive], [*inner, 1.0], atol=5e-9)
    assert_allclose(lobatto_weights(degree)[positive], weights, atol=5e-9)


@given(degree=order, coefficients=arrays(float, 32, elements=st.floats(-1.0, 1.0)))
def test_weights_integrate_every_polynomial_up_to_their_degree(degree, coefficients):
    # Exact to 2 order - 1 (Abramowitz & Stegun, 25.4.32).
    polynomial = np.polynomial.Polynomial(coefficients[: 2 * degree])
    whole = polynomial.integ()

    found = lobatto_weights(degree) @ polynomial(lobatto(degree))

    assert_allclose(found, whole(1.0) - whole(-1.0), atol=1e-13 * 2 * degree)
    assert np.all(lobatto_weights(degree) > 0.0)


@given(degree=order)
def test_one_degree_more_is_not_integrated(degree):
    # Otherwise the test above could not fail.
    top = np.polynomial.Polynomial([0.0] * (2 * degree) + [1.0])

    assert abs(lobatto_weights(degree) @ top(lobatto(degree)) - 2.0 / (2 * degree + 1)) > 1e-12


@given(degree=order, coefficients=arrays(float, 17, elements=st.floats(-1.0, 1.0)), at=st.floats(-1.0, 1.0))
def test_nodal_functions_draw_every_polynomial_of_their_order(degree, coefficients, at):
    polynomial = np.polynomial.Polynomial(coefficients[: degree + 1])

    value, slope = lagrange(degree, np.array([at]))

    nodal = polynomial(lobatto(degree))
    assert_allclose(value[0] @ nodal, polynomial(at), atol=1e-12)
    assert_allclose(slope[0] @ nodal, polynomial.deriv()(at), atol=1e-10)
    assert_allclose(value.sum(), 1.0, rtol=1e-12)


@given(count=st.integers(1, 20))
def test_gauss_points_integrate_twice_their_number(count):
    points, weights = gauss(count)
    for degree in range(2 * count):
        assert_allclose(weights @ points**degree, (1 + (-1) ** degree) / (degree + 1), atol=1e-14)


@given(
    marks=st.lists(st.floats(0.01, 0.99), min_size=0, max_size=5, unique_by=lambda x: round(x, 2)),
    counts=st.lists(st.integers(1, 4), min_size=6, max_size=6),
)
def test_lines_are_cut_at_every_mark(marks, counts):
    breaks = np.concatenate(([0.0], np.sort(marks), [1.0]))

    grid = line_grid(breaks, counts[: len(breaks) - 1], 8)

    assert np.all(np.diff(grid.nodes_m[:, 0]) > 0.0)
    ends = grid.nodes_m[grid.elements[:, [0, -1]], 0].ravel()
    assert set(breaks) <= set(ends)
    assert_allclose(grid.measure().sum(), 1.0, rtol=1e-12)


# Constraints.

entries = st.sampled_from([0.0, 0.0, 0.0, 1.0, -1.0, 0.5, 2.0, -0.3])


@st.composite
def constraints(draw):
    rows, size = draw(st.integers(0, 12)), draw(st.integers(1, 14))
    return draw(arrays(float, (rows, size), elements=entries))


@settings(max_examples=300, deadline=None)
@given(rows=constraints())
def test_what_is_left_keeps_every_constraint_and_nothing_else_is_lost(rows):
    size = rows.shape[1]

    basis = eliminate(csr_matrix(rows), size).toarray()

    # As many columns as the constraints leave freedoms (rank and nullity), all of them independent.
    rank = np.linalg.matrix_rank(rows, tol=1e-8) if rows.size else 0
    assert basis.shape == (size, size - rank)
    assert np.abs(rows @ basis).max(initial=0.0) < 1e-9 * max(1.0, np.abs(basis).max(initial=0.0))
    assert np.linalg.matrix_rank(basis) == size - rank


@settings(deadline=None)
@given(rows=constraints(), scale=st.sampled_from([1e-6, 1.0, 1e6]), seed=st.integers(0, 99))
def test_the_same_constraints_told_otherwise_leave_the_same(rows, scale, seed):
    # Scaled, in another order, one told twice: the same space, its projector the same.
    size = rows.shape[1]
    generator = np.random.default_rng(seed)
    told = scale * np.concatenate((rows, rows[: min(1, len(rows))]))[generator.permutation(len(rows) + min(1, len(rows)))]

    spans = [np.linalg.qr(eliminate(csr_matrix(some), size).toarray())[0] for some in (rows, told)]

    assert_allclose(spans[0] @ spans[0].T, spans[1] @ spans[1].T, atol=1e-7)


@given(size=st.integers(1, 40), kept=st.data())
def test_untouched_freedoms_stay_as_they_are(size, kept):
    fixed = sorted(kept.draw(st.sets(st.integers(0, size - 1))))
    rows = csr_matrix((np.ones(len(fixed)), (np.arange(len(fixed)), fixed)), shape=(len(fixed), size))

    basis = eliminate(rows, size).toarray()

    assert_allclose(basis, np.delete(np.eye(size), fixed, axis=1), rtol=0.0, atol=0.0)


# Places.

FLATS = ["rectangle plate", "circle plate", "ring plate", "triangle plate", "kite plate", "angle plate", "pennant plate", "hexagon plate"]


@pytest.mark.parametrize("name", FLATS)
@settings(max_examples=40, deadline=None)
@given(u=st.floats(0.0, 1.0), v=st.floats(0.0, 1.0))
def test_places_are_found_or_are_as_far_as_they_look(name, u, v):
    grid = build(PLATES[name]).grid
    low, high = grid.nodes_m.min(axis=0), grid.nodes_m.max(axis=0)
    point = low + (1.4 * np.array([u, v]) - 0.2) * (high - low)

    element, local, miss = grid.locate(point[None])

    far = max(exact.signed(name.removesuffix(" plate"), point[None])[0], 0.0)
    # Round rims are drawn 2e-10 m off the circle.
    assert abs(miss[0] - far) < 1e-9
    assert np.all(np.abs(local) <= 1.0)
    assert_allclose(np.linalg.norm(place(grid, element[0], local[0]) - point), miss[0], atol=1e-12)


def place(grid, element, local):
    """Where local coordinates of an element are."""
    first, second = (lagrange(grid.order, np.array([coordinate]))[0][0] for coordinate in local)
    return np.outer(first, second).ravel() @ grid.nodes_m[grid.elements[element]]


@pytest.mark.parametrize("name", ["bar", "undercut bar", "string"])
@given(share=st.floats(-0.2, 1.2))
def test_places_on_a_line(name, share):
    grid = build(EVERY[name]).grid
    length = grid.nodes_m.max()
    x = share * length

    element, local, miss = grid.locate(np.array([[x]]))

    assert_allclose(miss[0], max(-x, x - length, 0.0), atol=1e-12)
    ends = grid.nodes_m[grid.elements[element[0]], 0]
    inside = np.clip(x, 0.0, length)
    assert ends[0] - 1e-12 <= inside <= ends[-1] + 1e-12
    assert_allclose(0.5 * (ends[0] + ends[-1]) + 0.5 * local[0, 0] * (ends[-1] - ends[0]), inside, atol=1e-12)


# Polygons.


def test_openings_of_corners():
    # Interior angles: 90 degrees five times and 270 once; 120 six times; and they add up to (n - 2) half turns.
    assert_allclose(np.degrees(openings(np.array(exact.CORNERS["angle"], dtype=float))), [90, 90, 90, 270, 90, 90])
    for name, corners in exact.CORNERS.items():
        for some in (corners, corners[::-1]):
            angles = openings(np.array(some, dtype=float))
            assert_allclose(angles.sum(), (len(corners) - 2) * np.pi, rtol=1e-12, err_msg=name)


@st.composite
def star(draw):
    """A polygon round the origin, seen whole from there."""
    count = draw(st.integers(3, 9))
    radius = np.array(draw(st.lists(st.floats(0.3, 1.0), min_size=count, max_size=count)))
    angle = 2.0 * np.pi * (np.arange(count) + np.array(draw(st.lists(st.floats(-0.3, 0.3), min_size=count, max_size=count)))) / count
    return np.stack((radius * np.cos(angle), radius * np.sin(angle)), axis=1)


@settings(max_examples=40, deadline=None)
@given(corners=star(), size=st.sampled_from([0.3, 0.8]), data=st.data())
def test_polygons_are_filled_and_hemmed(corners, size, data):
    graded = tuple(sorted(data.draw(st.sets(st.integers(0, len(corners) - 1)))))
    outline = PolygonOutline(corners=tuple((float(x), float(z)) for x, z in corners))

    grid = cut(outline, size_m=(size, size), order=4, graded=graded)

    area, centre, _ = exact.polygon(corners)
    at = grid.quadrature()
    assert np.all(at.weight > 0.0)
    assert_allclose(at.weight.sum(), area, rtol=1e-9)
    assert_allclose(np.einsum("eq,eqd->d", at.weight, at.place_m) / area, centre, atol=1e-9)
    # Every edge is hemmed by nodes from corner to corner.
    lengths = np.linalg.norm(np.roll(corners, -1, axis=0) - corners, axis=1)
    hems = edges(outline, grid)
    for number, length in enumerate(lengths, 1):
        hem = hems[f"edge{number}"]
        assert_allclose(hem.length_m.sum(), length, rtol=1e-9)
        # Outward: away from the origin, which sees every edge from within.
        assert np.all(np.sum(hem.outward * grid.nodes_m[hem.nodes], axis=1) > 0.0)
    # No node hangs: the elements meet node by node, so that the sides met once are the hem and no longer.
    n = grid.order + 1
    number = np.arange(n * n).reshape(n, n)
    sides = np.concatenate([grid.elements[:, side] for side in (number[0], number[-1], number[:, 0], number[:, -1])])
    _, first, count = np.unique(np.sort(sides, axis=1), axis=0, return_index=True, return_counts=True)
    assert count.max() <= 2
    once = grid.nodes_m[sides[first[count == 1]]]
    assert_allclose(np.linalg.norm(once[:, -1] - once[:, 0], axis=1).sum(), lengths.sum(), rtol=1e-9)
